"""PDF pages written by hand: every line, word and pixel where the file puts it."""

import io
import zlib

import numpy as np
import pytest
from pdf_bytes import document, page, stream

from curvefit.errors import InputError, LimitError, OpenError
from curvefit.load import load
from curvefit.load.limits import Limits

K = 300 / 72  # px to the point


def read(tmp_path, data, **more):
    path = tmp_path / "a.pdf"
    path.write_bytes(data)
    (got,) = load(path, **more)
    return got


def lines(got):
    return [s for s in got.strokes if not s.fill]


def at(x, y, height=200.0):
    """Page px of a page point: the centre of the first pixel is half a pixel in."""
    return [K * x - 0.5, K * (height - y) - 0.5]


def test_a_line_is_exact_and_lies_on_its_pixels(tmp_path):
    got = read(tmp_path, page("2 w 1 0 0 RG 20.25 30.5 m 250.75 30.5 l S"))
    (line,) = got.strokes
    assert np.allclose(line.xy, [at(20.25, 30.5), at(250.75, 30.5)], atol=1e-3)
    assert line.width == pytest.approx(2 * K)
    assert line.colour == (1, 0, 0)
    assert not line.fill
    assert got.vector
    assert got.dpi == 300
    assert got.size == (1250, 833)
    red = 255.0 - got.pixels[:, 600, 1]
    centre = (red * np.arange(len(red))).sum() / red.sum()
    assert centre == pytest.approx(line.xy[0, 1], abs=0.02)


def test_dashes_and_alpha(tmp_path):
    got = read(
        tmp_path,
        page(
            "q /G gs [6 2] 0 d 1 w 0 0 1 RG 10 10 m 100 90 l S Q [] 0 d 10 20 m 100 20 l S",
            resources="/ExtGState<</G<</CA 0.5>>>>",
        ),
    )
    dashed, solid = got.strokes
    assert np.allclose(dashed.dash, [6 * K, 2 * K])
    assert np.allclose(dashed.colour, (0.5, 0.5, 1), atol=0.01)
    assert solid.dash == ()


def _away(points, polyline):
    """Distance of each point from a polyline."""
    a, d = polyline[:-1], np.diff(polyline, axis=0)
    r = points[:, None] - a
    t = np.clip((r * d).sum(-1) / (d**2).sum(-1), 0, 1)
    return np.hypot(*np.moveaxis(r - t[..., None] * d, -1, 0)).min(1)


def test_a_bezier_curve_is_flattened_to_a_hundredth_of_a_pixel(tmp_path):
    got = read(tmp_path, page("20 20 m 80 190 180 190 280 40 c S"))
    (line,) = got.strokes
    t = np.linspace(0, 1, 5001)[:, None]
    control = np.array([at(20, 20), at(80, 190), at(180, 190), at(280, 40)])
    exact = sum(c * (1 - t) ** (3 - i) * t**i * control[i] for i, c in enumerate((1, 3, 3, 1)))
    assert _away(exact, line.xy).max() < 0.0101
    assert np.allclose(line.xy[[0, -1]], control[[0, -1]], atol=1e-3)
    assert len(line.xy) < 400


def test_nested_forms_and_turned_matrices(tmp_path):
    """cos 30°, scales and shifts in the page, in a form and in a form of that form."""
    inner = stream(
        b"1 w 0 0 m 10 0 l S",
        "/Type/XObject/Subtype/Form/BBox[-99 -99 99 99]/Matrix[1 0 0 2 3 4]",
    )
    outer = stream(
        b"q 2 0 0 2 5 5 cm /B Do Q",
        "/Type/XObject/Subtype/Form/BBox[-99 -99 99 99]/Matrix[0 1 -1 0 0 0]"
        "/Resources<</XObject<</B 7 0 R>>>>",
    )
    got = read(
        tmp_path,
        page(
            "q 1 0 0 1 100 50 cm /A Do Q",
            resources="/XObject<</A 6 0 R>>",
            extra=(outer, inner),
        ),
    )

    def place(x, y):
        x, y = x + 3, 2 * y + 4  # the inner form
        x, y = 2 * x + 5, 2 * y + 5  # where it is placed
        x, y = -y, x  # the outer form
        return at(x + 100, y + 50)

    (line,) = got.strokes
    assert np.allclose(line.xy, [place(0, 0), place(10, 0)], atol=1e-3)


@pytest.mark.parametrize("turn", [0, 90, 180, 270])
@pytest.mark.parametrize("crop", ["", "/CropBox[50.3 20.2 250.1 180.9]"])
def test_rotate_and_cropbox(tmp_path, turn, crop):
    got = read(
        tmp_path,
        page(
            "1 w 100 60 m 100 150 l S BT /F1 12 Tf 120 80 Td (12.5) Tj ET",
            entries=f"/Rotate {turn}{crop}",
        ),
    )
    left, top = (50.3, 180.9) if crop else (0.0, 200.0)
    stored = np.array([[K * (100 - left) - 0.5, K * (top - y) - 0.5] for y in (60, 150)])
    (line,) = got.strokes
    assert np.allclose(got.to_stored(line.xy), stored, atol=0.01)
    w, h = got.stored_size
    assert got.size == ((w, h) if turn % 180 == 0 else (h, w))
    x, y = stored.mean(0)
    shown = {
        0: (x, y),
        90: (h - 1 - y, x),
        180: (w - 1 - x, h - 1 - y),
        270: (y, w - 1 - x),
    }[turn]
    assert np.allclose(line.xy.mean(0), shown, atol=0.01)
    column, row = np.round(line.xy.mean(0)).astype(int)
    assert got.pixels[row, column].max() < 120  # ink where the stroke is
    (word,) = got.words
    assert word.text == "12.5"
    assert (round(word.angle) - 360 + turn) % 360 == 0
    assert word.width == pytest.approx(2 * word.height, rel=0.5)


def test_hidden_and_outside_things_are_left_out(tmp_path):
    got = read(
        tmp_path,
        page(
            "10 10 m 90 90 l n  400 10 m 500 90 l S  10 10 100 50 re W n "
            "BT /F1 12 Tf 3 Tr 20 20 Td (hidden) Tj ET BT /F1 12 Tf 900 20 Td (away) Tj ET "
            "5 5 m 50 5 l S"
        ),
    )
    assert len(got.strokes) == 1
    assert got.words == ()


def test_fills_are_marked_and_closed_paths_are_closed(tmp_path):
    got = read(tmp_path, page("0 1 0 rg 1 0 0 RG 10 10 50 20 re B"))
    fill, outline = got.strokes
    assert fill.fill
    assert fill.colour == (0, 1, 0)
    assert outline.colour == (1, 0, 0)
    assert np.array_equal(outline.xy[0], outline.xy[-1])
    assert fill.path == outline.path


def test_words_as_printed(tmp_path):
    text = (
        "BT /F1 12 Tf 20 150 Td (Q [m) Tj ET BT /F1 8 Tf 47.2 155 Td (3) Tj ET "
        "BT /F1 12 Tf 51.8 150 Td (/h]) Tj ET "  # a superscript apart
        "BT /F1 10 Tf 20 100 Td (0) Tj ET BT /F1 10 Tf 60 100 Td (20) Tj ET "
        "BT /F1 10 Tf 84 100 Td (40) Tj ET "  # numbers of a scale
        "BT /F1 10 Tf 20 60 Td (Total) Tj ET BT /F1 10 Tf 45.3 60 Td (head) Tj ET "  # one line
        "BT /F1 10 Tf 0 1 -1 0 250 40 Tm (H in m) Tj ET "
        "BT /F1 10 Tf 0.866 0.5 -0.5 0.866 150 120 Tm (75 %) Tj ET"
    )
    got = read(tmp_path, page(text))
    words = {w.text: w for w in got.words}
    assert set(words) == {"Q [m³/h]", "0", "20", "40", "Total head", "H in m", "75 %"}
    assert words["H in m"].angle == pytest.approx(90)
    assert words["75 %"].angle == pytest.approx(30, abs=0.1)
    assert all(w.score == 1 for w in got.words)
    box = words["20"].box / K
    assert box[3, 0] == pytest.approx(60.3, abs=0.4)  # lower left on the page
    assert box[3, 1] == pytest.approx(100, abs=0.4)
    assert words["20"].height / K == pytest.approx(7.1, abs=0.4)  # digits of 10 pt Helvetica
    title = words["H in m"].box / K
    assert title[0, 0] < title[3, 0]  # its top looks to the left of the page
    assert title[0, 1] > title[1, 1]  # and it reads upwards


def _image(tmp_path, mode="RGB", size=(640, 480)):
    rng = np.random.default_rng(4)
    coarse = rng.integers(0, 255, (12, 16, 3)).astype(np.uint8)
    pixels = np.kron(coarse, np.ones((size[1] // 12, size[0] // 16, 1), np.uint8))
    pixels[100:110, 50:600] = 0
    return pixels


def _scan(pixels, matrix, entries="", more=""):
    height, width = pixels.shape[:2]
    image = stream(
        zlib.compress(pixels.tobytes()),
        f"/Type/XObject/Subtype/Image/Width {width}/Height {height}/BitsPerComponent 8"
        f"/ColorSpace/DeviceRGB/Filter/FlateDecode{more}",
    )
    a = " ".join(f"{v:g}" for v in matrix)
    return page(
        f"q {a} cm /I Do Q", entries=entries, resources="/XObject<</I 6 0 R>>", extra=(image,)
    )


@pytest.mark.parametrize("turn", [0, 90, 180, 270])
def test_a_scan_comes_back_sample_by_sample(tmp_path, turn):
    pixels = _image(tmp_path)
    got = read(tmp_path, _scan(pixels, (300, 0, 0, 200, 0, 0), f"/Rotate {turn}"))
    # 640 × 480 on 300 × 200 pt: its samples are a little oblong and are shown square
    assert not got.vector
    assert got.stored_size == (640, 480)
    x, y = np.meshgrid(np.arange(4, 630, 9), np.arange(3, 470, 7))
    stored = np.c_[x.ravel(), y.ravel()]
    near = np.round(got.from_stored(stored)).astype(int)
    difference = got.pixels[near[:, 1], near[:, 0]].astype(int) - pixels[stored[:, 1], stored[:, 0]]
    assert (np.abs(difference).max(1) <= 3).mean() > 0.95  # edges of blocks are mixed


def test_a_square_scan_is_untouched(tmp_path):
    pixels = _image(tmp_path, size=(640, 432))
    got = read(tmp_path, _scan(pixels, (300, 0, 0, 202.5, 0, -1)))
    assert np.array_equal(got.pixels, pixels[3:430])  # 1.5 pt lie above the page, 1 pt below
    assert got.dpi == pytest.approx(640 / 300 * 72, abs=0.1)


@pytest.mark.parametrize(
    "matrix",
    [(-300, 0, 0, 200, 300, 0), (300, 0, 0, -200, 0, 200), (0, 200, -300, 0, 300, 0)],
    ids=["mirrored", "upside down", "turned"],
)
def test_a_scan_that_is_placed_turned_or_mirrored_is_shown_so(tmp_path, matrix):
    pixels = _image(tmp_path)
    got = read(tmp_path, _scan(pixels, matrix))
    shown = {
        -300: pixels[:, ::-1],
        300: pixels[::-1],
        0: np.rot90(pixels),
    }[matrix[0]]
    import cv2

    rows, cols = got.pixels.shape[:2]
    expected = cv2.resize(np.ascontiguousarray(shown), (cols, rows), interpolation=cv2.INTER_AREA)
    assert np.median(np.abs(got.pixels.astype(int) - expected)) <= 3


def test_what_is_drawn_over_a_scan_is_not_lost(tmp_path):
    pixels = np.full((480, 640, 3), 255, np.uint8)
    pixels[100:104, 100:500] = 0
    data = _scan(pixels, (300, 0, 0, 200, 0, 0))
    data = data.replace(b"/I Do Q", b"/I Do Q 0 0 40 40 re f")
    got = read(tmp_path, _fixed(data))
    assert got.pixels[-20, 20].max() < 30
    assert not got.vector


def _fixed(data):
    """The file with the length of its first stream put right (readers rebuild the rest)."""
    start = data.index(b"/Length ") + 8
    stop = data.index(b">>", start)
    begin = data.index(b"stream\n", stop) + 7
    return data[:start] + b"%d" % (data.index(b"\nendstream", begin) - begin) + data[stop:]


def test_a_picture_in_a_page_of_text_keeps_its_resolution_and_the_words(tmp_path):
    pixels = np.full((600, 800, 3), 255, np.uint8)
    pixels[300, 100:700] = 0
    data = _scan(pixels, (160, 0, 0, 120, 20, 20))
    data = data.replace(b"/I Do Q", b"/I Do Q BT /F1 12 Tf 20 170 Td (Pump 7) Tj ET")
    got = read(tmp_path, _fixed(data))
    assert got.dpi == pytest.approx(360, abs=0.5)
    assert [w.text for w in got.words] == ["Pump 7"]
    assert not got.vector
    x, y = got.words[0].box[3]
    assert x / 5 == pytest.approx(20, abs=1)
    assert y / 5 == pytest.approx(32.5, abs=0.5)  # the p hangs below the line


def test_pages_are_counted_and_named(tmp_path):
    from reportlab.pdfgen.canvas import Canvas

    path = tmp_path / "a.pdf"
    canvas = Canvas(str(path), pagesize=(200, 100))
    for i in range(3):
        canvas.drawString(20, 20, f"page {i + 1}")
        canvas.showPage()
    canvas.save()
    assert [(p.number, p.pages, p.words[0].text) for p in load(path)] == [
        (i, 3, f"page {i}") for i in (1, 2, 3)
    ]
    with pytest.raises(InputError, match="page 4: the file has pages 1 to 3"):
        next(load(path, 4))
    with pytest.raises(InputError, match="page 0"):
        next(load(path, 0))


def test_broken_and_locked_files(tmp_path):
    from reportlab.lib.pdfencrypt import StandardEncryption
    from reportlab.pdfgen.canvas import Canvas

    path = tmp_path / "a.pdf"
    whole = page("0 0 m 9 9 l S")
    out = io.BytesIO()
    canvas = Canvas(out, encrypt=StandardEncryption("owl", "heron"))
    canvas.drawString(9, 9, "secret")
    canvas.save()
    empty = document("<</Type/Catalog/Pages 2 0 R>>", "<</Type/Pages/Kids[]/Count 0>>")
    for data, words in (
        (whole[:60], "damaged"),
        (b"%PDF-1.7\nnonsense", "damaged"),
        (empty, "no pages"),
        (out.getvalue(), "password"),
    ):
        path.write_bytes(data)
        with pytest.raises(OpenError, match=words) as caught:
            next(load(path))
        assert caught.value.remedy


def test_a_page_of_seven_metres_stays_bounded(tmp_path):
    got = read(tmp_path, page("100 w 0 0 m 20000 20000 l S", size=(20000, 20000)))
    assert got.pixels.size <= 3 * 40_100_000
    assert got.dpi < 30
    assert np.allclose(got.strokes[0].xy[1], [got.size[0] - 0.5, -0.5], atol=0.6)


def _nest(levels, fan):
    objects = [
        stream(
            b"/X Do " * fan,
            f"/Type/XObject/Subtype/Form/BBox[0 0 9 9]/Resources<</XObject<</X {7 + i} 0 R>>>>",
        )
        for i in range(levels)
    ]
    last = stream(b"0 0 m 9 9 l S", "/Type/XObject/Subtype/Form/BBox[0 0 9 9]")
    return page("/X Do", resources="/XObject<</X 6 0 R>>", extra=(*objects, last))


def test_nested_forms_that_multiply_are_stopped(tmp_path):
    with pytest.raises(LimitError) as caught:
        read(tmp_path, _nest(5, 8), limits=Limits(objects=5000))
    assert "objects" in caught.value.what
    with pytest.raises(LimitError):
        read(tmp_path, _nest(8, 10), limits=Limits(seconds=3, memory_bytes=300 << 20))


def test_a_page_of_millions_of_lines_or_letters_is_refused(tmp_path):
    with pytest.raises(LimitError, match="pieces of lines"):
        read(tmp_path, page("0 0 m " + "9 9 l " * 300 + "S"), limits=Limits(segments=100))
    text = page("BT /F1 9 Tf 9 9 Td (" + "x" * 500 + ") Tj ET")
    with pytest.raises(LimitError, match="characters"):
        read(tmp_path, text, limits=Limits(characters=100))


def test_lettering_drawn_as_shapes_is_filled_strokes_and_no_words(tmp_path):
    glyph = "20 20 m 26 44 l 32 20 l 29 20 l 27 28 l 25 28 l 23 20 l f "
    got = read(tmp_path, page(glyph + "1 w 50 50 m 90 70 l S"))
    assert [s.fill for s in got.strokes] == [True, False]
    assert got.words == ()


def test_labels_printed_over_each_other_keep_their_digits(tmp_path):
    """The PDF reader drops a letter that lies on its like in another text: it is put back."""
    text = " ".join(
        f"BT /F1 10 Tf {20 + 5.56 * 0.97 * k:.2f} {50 + 0.6 * k:.2f} Td ({label}) Tj ET"
        for k, label in enumerate(("227", "245", "264"))
    )
    got = read(tmp_path, page(text + " BT /F1 10 Tf 20 120 Td (n = 2 900) Tj ET"))
    texts = sorted(w.text for w in got.words)
    assert texts == ["227", "245", "264", "n = 2 900"]
    assert got.findings == ()
