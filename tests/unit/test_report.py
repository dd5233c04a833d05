"""The report and the overlay: self-contained, escaped, and true to the pixel."""

import re
from dataclasses import replace
from html.parser import HTMLParser

import numpy as np
import pytest

from curvefit.errors import Location
from curvefit.records import BRIDGED, Finding
from curvefit.write.outgoing import outgoing
from curvefit.write.overlay import overlay, png
from curvefit.write.report import report

VOID = {"meta", "img", "input", "br", "hr", "link"}


class Page(HTMLParser):
    """Collects the tags; complains about what is not closed."""

    def __init__(self, text):
        super().__init__()
        self.open, self.tags, self.texts = [], [], []
        self.feed(text)
        assert self.open == []

    def handle_starttag(self, tag, attributes):
        self.tags.append((tag, dict(attributes)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attributes):
        self.tags.append((tag, dict(attributes)))

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        self.texts.append(data)


def made(reading, **options):
    return report(outgoing(reading, **options), overlay(reading))


def test_the_report_is_self_contained(made_reading):
    text = made(made_reading())
    page = Page(text)
    policy = next(a["content"] for t, a in page.tags if a.get("http-equiv"))
    assert policy.startswith("default-src 'none'")
    assert not {t for t, _ in page.tags} & {"script", "link", "iframe", "object", "form", "base"}
    for _, attributes in page.tags:
        assert not [n for n in attributes if n.startswith("on") or n == "style"]
        for name in ("src", "href"):
            value = attributes.get(name, "")
            assert not value or value.startswith(("data:image/jpeg", "#")), value
    style = re.search(r"<style>(.*?)</style>", text, re.S)[1]
    assert "url(" not in style
    assert "@import" not in style
    assert len(text) < 3_000_000


def test_findings_come_first_and_the_worst_of_them(made_reading):
    text = made(made_reading())
    order = [
        text.index(s) for s in ("3 are needed", "is a guess", "data:image", "<svg", "Cautions</h2>")
    ]
    assert order == sorted(order)


def test_every_curve_has_its_row_equation_and_plots(made_reading):
    reading = made_reading()
    text = made(reading)
    page = Page(text)
    assert sum(t == "svg" for t, _ in page.tags) == 2 * len(reading.curves)
    for curve in reading.curves:
        assert curve.name in page.texts
    whole = " ".join(page.texts)
    for part in ("2 … 95 m³/h", "0.02 m", "210 mm", "2900 1/min", "31 (u 0.4)", "sha256"):
        assert part in whole, part


def test_links_inside_the_page_have_their_targets(made_reading):
    page = Page(made(made_reading()))
    ids = {a["id"] for _, a in page.tags if "id" in a}
    assert {a["href"][1:] for t, a in page.tags if t == "a"} <= ids
    assert all(a.get("alt") for t, a in page.tags if t == "img")
    assert {a["for"] for t, a in page.tags if t == "label"} <= ids


HOSTILE = "<script>alert(1)</script>\"'&<img src=x onerror=y>"


def test_text_from_the_chart_is_escaped(made_reading):
    reading = made_reading(label=HOSTILE)
    curves = (replace(reading.curves[0], name=HOSTILE), *reading.curves[1:])
    fits = (replace(reading.fits[0], curves=(curves[0],), reason=HOSTILE), *reading.fits[1:])
    said = Finding("warning", "a.b", HOSTILE, Location(panel=HOSTILE), HOSTILE)
    page = replace(reading.page, file=f"/x/{HOSTILE}")
    text = made(replace(reading, page=page, curves=curves, fits=fits, findings=(said,)))
    tags = Page(text).tags
    assert not [t for t, _ in tags if t == "script"]
    assert sum(t == "img" for t, _ in tags) == 1


def test_a_reading_without_findings_or_curves_still_reports(made_reading):
    reading = replace(made_reading(findings=False), curves=(), fits=())
    text = made(reading)
    assert "nothing to doubt" in text
    assert "No curve was read" in text


def test_units_leave_as_chosen(made_reading):
    text = made(made_reading(), units={"head": "ft", "flow": "US gpm"})
    assert "US gpm" in text
    assert "chosen by the user" in text


def test_the_bright_line_runs_over_the_centre_of_the_line(made_reading):
    reading = made_reading()
    ink = np.array(reading.page.pixels)
    xy = reading.curves[3].trace.xy
    for x, y in xy:
        ink[int(y) - 3 : int(y) + 5, int(x) - 3 : int(x) + 5] = 0
    picture = overlay(replace(reading, page=replace(reading.page, pixels=ink))).astype(float)
    scale = picture.shape[1] / ink.shape[1]
    clear = np.flatnonzero((reading.curves[3].flags & BRIDGED) == 0)[8:-4]
    for k in clear[::6]:
        x, y = (xy[k] + 0.5) * scale - 0.5
        column = picture[int(y) - 4 : int(y) + 5, round(x)].sum(1)
        assert abs(int(y) - 4 + int(np.argmax(column)) - y) < 1.5
        assert np.median(column) < 0.75 * column.max(), "the ink stays visible beside it"


def test_gaps_and_doubts_are_marked(made_reading):
    reading = made_reading()
    picture = overlay(reading).astype(int)
    scale = picture.shape[1] / reading.page.size[0]
    red = (picture[..., 0] > 150) & (picture[..., 1] < 80) & (picture[..., 2] < 120)
    for curve in reading.curves:
        gap = np.flatnonzero(curve.flags & BRIDGED)
        x, y = (curve.trace.xy[gap[len(gap) // 2]] * scale).astype(int)
        assert red[y - 12 : y + 13, x - 12 : x + 13].any(), curve.name
    left, top = int(100 * scale), int(300 * scale)
    assert red[top, left - 4 : left + 6].any(), "the frame of the doubtful axis"


@pytest.mark.parametrize(("width", "height"), [(200, 150), (3300, 4700), (7000, 9900)])
def test_the_picture_is_of_bounded_size(made_reading, width, height):
    reading = made_reading()
    page = replace(reading.page, pixels=np.full((height, width, 3), 250, np.uint8))
    picture = overlay(replace(reading, page=page, panels=(), traces=(), curves=(), fits=()))
    assert picture.shape[0] * picture.shape[1] < 16e6
    assert png(picture).startswith(b"\x89PNG")
