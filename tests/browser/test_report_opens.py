"""The report in a real browser: nothing complained of, nothing fetched, printed whole."""

import json
import re
import shutil
import subprocess

import pypdfium2 as pdfium
import pytest

from curvefit.write import write

BROWSER = shutil.which("chromium") or shutil.which("chromium-browser")
pytestmark = pytest.mark.skipif(BROWSER is None, reason="no Chromium on this machine")


def browse(folder, *arguments):
    """Runs the browser in a profile of its own; what it wrote on both outputs."""
    command = [
        BROWSER, "--headless", "--no-sandbox", "--disable-gpu", "--no-first-run",
        "--disable-background-networking", "--disable-component-update", "--disable-sync",
        f"--user-data-dir={folder / 'profile'}", *arguments,
    ]  # fmt: skip
    done = subprocess.run(command, capture_output=True, text=True, timeout=120, check=True)
    return done.stdout, done.stderr


@pytest.fixture(scope="module")
def page(made_reading, tmp_path_factory):
    folder = tmp_path_factory.mktemp("report")
    write(made_reading(label="<b>bold</b>"), folder, "c")
    return folder, (folder / "c.report.html").as_uri()


def asked_by_the_page(folder, address):
    """Addresses that a page asked for; the browser's own requests name no page as their origin."""
    log = folder / "net.json"
    out, err = browse(folder, "--enable-logging=stderr", f"--log-net-log={log}", "--dump-dom",
                      address)  # fmt: skip
    text = log.read_text(encoding="utf-8", errors="replace").rstrip().rstrip(",")
    try:
        events = json.loads(text)["events"]
    except ValueError:  # the browser may leave the log open
        events = json.loads(text + "]}")["events"]
    known = [e.get("params", {}) for e in events]
    urls = {p["url"] for p in known if p.get("initiator") not in (None, "not an origin")}
    return urls, out, err


def test_no_complaint_and_no_request(page):
    folder, address = page
    urls, out, err = asked_by_the_page(folder, address)
    assert urls == set()
    assert out.count("<svg") == 8
    assert "&lt;b&gt;bold&lt;/b&gt;" in out
    assert not re.findall(r"CONSOLE.*", err)


def test_a_request_would_be_seen(tmp_path):
    path = tmp_path / "asks.html"
    path.write_text('<img src="http://127.0.0.1:9/x.png">')
    assert asked_by_the_page(tmp_path, path.as_uri())[0] == {"http://127.0.0.1:9/x.png"}


def test_it_prints_whole(page):
    folder, address = page
    pdf = folder / "c.pdf"
    browse(folder, f"--print-to-pdf={pdf}", "--no-pdf-header-footer", address)
    document = pdfium.PdfDocument(pdf)
    try:
        sheets = [document[i] for i in range(len(document))]
        assert 3 <= len(sheets) <= 12
        for sheet in sheets:
            width, height = sheet.get_size()
            assert (round(width), round(height)) == (595, 842), "A4"
        text = "".join(s.get_textpage().get_text_range() for s in sheets)
        for part in ("Findings", "head Ø195", "NPSH required", "Standard uncertainty at the",
                     "Farthest", "it predicts best", "licensed engineer"):  # fmt: skip
            assert part in re.sub(r"\s+", " ", text), part
    finally:
        document.close()


@pytest.mark.parametrize("width", [360, 1100, 2560])
def test_it_fits_any_width(page, width):
    folder, address = page
    picture = folder / f"{width}.png"
    browse(folder, f"--window-size={width},1600", "--hide-scrollbars", f"--screenshot={picture}",
           address)  # fmt: skip
    from PIL import Image

    with Image.open(picture) as image:
        assert image.width == width
        grey = image.convert("L")
        edge = grey.crop((width - 4, 0, width, grey.height))
        assert edge.getextrema()[0] > 200, "nothing runs over the right edge"
