"""Images of every kind against the picture they were made of, and files that are none."""

import struct
import zlib

import numpy as np
import pytest
from PIL import Image

from curvefit.errors import InputError, LimitError, NoChart, OpenError
from curvefit.load import load
from curvefit.load.limits import Limits

W, H = 96, 70


@pytest.fixture
def picture():
    """A picture without any symmetry, (70, 96, 3) uint8."""
    y, x = np.mgrid[:H, :W]
    return np.stack([x * 2, y * 3, (x + y)], -1).astype(np.uint8)


def one(path, **more):
    (page,) = load(path, **more)
    return page


@pytest.mark.parametrize("suffix", ["png", "bmp", "tif", "webp"])
def test_lossless_pixels_come_back(picture, tmp_path, suffix):
    path = tmp_path / f"a.{suffix}"
    Image.fromarray(picture).save(path, **({"lossless": True} if suffix == "webp" else {}))
    page = one(path)
    assert np.array_equal(page.pixels, picture)
    assert page.size == page.stored_size == (W, H)
    assert (page.number, page.pages) == (1, 1)
    assert np.array_equal(page.stored_from_page, np.eye(3))


def test_the_name_does_not_decide_the_format(picture, tmp_path):
    path = tmp_path / "a.jpg"
    Image.fromarray(picture).save(path, "PNG", dpi=(200, 200))
    page = one(path)
    assert np.array_equal(page.pixels, picture)
    assert page.dpi == pytest.approx(200, abs=0.1)


def test_jpeg_is_close(picture, tmp_path):
    path = tmp_path / "a.jpg"
    Image.fromarray(picture).save(path, quality=98, subsampling=0)
    assert np.abs(one(path).pixels.astype(int) - picture).max() < 12


@pytest.mark.parametrize("orientation", range(1, 9))
@pytest.mark.parametrize("suffix", ["png", "tif", "jpg"])
def test_exif_turns_and_mirrors(picture, tmp_path, orientation, suffix):
    path = tmp_path / f"a.{suffix}"
    exif = Image.Exif()
    exif[0x0112] = orientation
    Image.fromarray(picture).save(path, exif=exif, **({"quality": 100} if suffix == "jpg" else {}))
    page = one(path)
    assert page.stored_size == (W, H)
    assert page.size == ((W, H) if orientation < 5 else (H, W))
    # each shown pixel is the stored pixel that the map names
    w, h = page.size
    shown = np.array([[0, 0], [w - 1, 0], [w - 1, h - 1], [5, 9]])
    stored = page.to_stored(shown).round().astype(int)
    assert np.allclose(page.from_stored(stored), shown)
    got = page.pixels[shown[:, 1], shown[:, 0]].astype(int)
    assert np.abs(got - picture[stored[:, 1], stored[:, 0]]).max() < 12
    # and it is the turn that the standard names (independent: Pillow's own)
    from PIL import ImageOps

    with Image.open(path) as image:
        expected = np.asarray(ImageOps.exif_transpose(image).convert("RGB")).astype(int)
    assert np.abs(page.pixels - expected).max() < 12


@pytest.mark.parametrize("mode", ["RGBA", "LA", "P"])
def test_transparency_lies_on_white(tmp_path, mode):
    image = Image.new("RGBA", (W, H), (0, 0, 0, 0))
    image.paste((0, 0, 0, 255), (10, 10, 20, 20))
    image.paste((0, 0, 0, 128), (30, 10, 40, 20))
    path = tmp_path / "a.png"
    if mode == "P":
        image.putpixel((35, 15), (0, 0, 0, 0))
        image = image.quantize(8)
        image.save(path)
    else:
        image.convert(mode).save(path)
    pixels = one(path).pixels
    assert (pixels[0, 0] == 255).all()
    assert (pixels[15, 15] == 0).all()
    if mode != "P":
        assert abs(int(pixels[15, 35, 0]) - 127) <= 1


def test_a_colour_marked_as_transparent_lies_on_white(tmp_path):
    path = tmp_path / "a.png"
    grey = Image.new("L", (W, H), 0)
    grey.paste(90, (10, 10, 30, 30))
    grey.save(path, transparency=0)
    pixels = one(path).pixels
    assert (pixels[0, 0] == 255).all()
    assert (pixels[15, 15] == 90).all()


@pytest.mark.parametrize("suffix", ["png", "tif"])
def test_sixteen_bits_are_scaled(tmp_path, suffix):
    deep = np.linspace(0, 65535, W * H).reshape(H, W).astype(np.uint16)
    path = tmp_path / f"a.{suffix}"
    Image.fromarray(deep).save(path)
    pixels = one(path).pixels
    assert np.abs(pixels[:, :, 1].astype(float) - deep / 257).max() <= 0.5 + 1e-9
    assert pixels.min() == 0
    assert pixels.max() == 255


def test_thirty_two_bits_and_real_numbers(tmp_path):
    ramp = np.linspace(0, 1, W * H).reshape(H, W)
    for name, array in (("i.tif", (ramp * 65535).astype(np.int32)), ("f.tif", ramp)):
        path = tmp_path / name
        Image.fromarray(array.astype(np.float32) if name == "f.tif" else array).save(path)
        assert np.abs(one(path).pixels[:, :, 0] - ramp * 255).max() < 1


def test_cmyk(tmp_path):
    path = tmp_path / "a.tif"
    Image.new("CMYK", (W, H), (0, 255, 255, 0)).save(path)
    assert one(path).pixels[3, 3].tolist() == [255, 0, 0]
    path = tmp_path / "a.jpg"
    Image.new("CMYK", (W, H), (255, 0, 0, 0)).save(path, quality=95)
    assert np.abs(one(path).pixels[3, 3].astype(int) - [0, 255, 255]).max() < 8


def test_fax_pages_one_by_one(tmp_path):
    pages = [Image.new("1", (200, 150), 1) for _ in range(3)]
    for i, image in enumerate(pages):
        image.paste(0, (10 + 20 * i, 10, 20 + 20 * i, 20))
    path = tmp_path / "a.tif"
    pages[0].save(
        path, save_all=True, append_images=pages[1:], compression="group4", dpi=(200, 200)
    )
    got = list(load(path))
    assert [(p.number, p.pages) for p in got] == [(1, 3), (2, 3), (3, 3)]
    for i, page in enumerate(got):
        assert (page.pixels[15, 15 + 20 * i] == 0).all()
        assert (page.pixels == 0).all(2).sum() == 100
        assert page.dpi == pytest.approx(200)
    second = one(path, page=2)
    assert np.array_equal(second.pixels, got[1].pixels)


def test_a_fax_with_oblong_pixels_is_shown_square(tmp_path):
    image = Image.new("1", (204 * 2, 98 * 2), 1)  # 2 inches either way
    image.paste(0, (204, 98, 212, 102))
    path = tmp_path / "a.tif"
    image.save(path, compression="group4", dpi=(204, 98))
    page = one(path)
    assert page.size == (408, 408)
    assert page.stored_size == (408, 196)
    dark = np.argwhere(page.pixels[:, :, 0] < 128)[:, ::-1]
    stored = page.to_stored(dark.mean(0)[None])[0]
    assert np.allclose(stored, [207.5, 99.5], atol=0.3)


def test_a_page_that_is_not_there_names_those_that_are(picture, tmp_path):
    path = tmp_path / "a.png"
    Image.fromarray(picture).save(path)
    with pytest.raises(InputError, match="page 2: the file has one page") as caught:
        one(path, page=2)
    assert caught.value.exit_code == 2
    assert "--page" in caught.value.remedy


def _png(width, height, data=b""):
    def chunk(kind, body):
        check = struct.pack(">I", zlib.crc32(kind + body))
        return struct.pack(">I", len(body)) + kind + body + check

    head = struct.pack(">IIBBBBB", width, height, 8, 0, 0, 0, 0)
    return b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", head) + chunk(b"IDAT", data) + chunk(b"IEND", b"")


@pytest.mark.parametrize(
    ("content", "error", "words"),
    [
        (b"", OpenError, "empty"),
        (b"flow;head\n1;2\n", OpenError, "none of the formats"),
        (b"GIF89a" + bytes(50), OpenError, "PNG, JPEG, TIFF"),
        (b"\x89PNG\r\n\x1a\nnot really", OpenError, "cannot be decoded"),
        (b"\xff\xd8\xff\xe0" + bytes(40), OpenError, "cannot be decoded"),
        (b"II*\0\xff\xff\xff\xff", OpenError, "cannot be decoded"),
        (_png(30000, 30000), LimitError, "30000 × 30000"),
        (_png(5, 2_000_000_000), LimitError, "at most"),
        (_png(1, 1, zlib.compress(b"\0\0")), NoChart, "1 × 1 px"),
        (_png(300, 300, zlib.compress(bytes(1000))), OpenError, "cannot be decoded"),
    ],
)
def test_what_is_no_chart_gets_one_clear_message(tmp_path, content, error, words):
    path = tmp_path / "chart.png"
    path.write_bytes(content)
    with pytest.raises(error, match=words) as caught:
        one(path)
    assert type(caught.value) is error
    assert caught.value.where.file == str(path)
    assert caught.value.remedy


@pytest.mark.parametrize("share", [0.05, 0.5, 0.9])
@pytest.mark.parametrize("suffix", ["png", "jpg", "tif", "webp", "bmp"])
def test_a_cut_file_is_refused(picture, tmp_path, suffix, share):
    whole = tmp_path / f"whole.{suffix}"
    Image.fromarray(np.random.default_rng(1).integers(0, 255, (300, 200, 3), np.uint8)).save(whole)
    data = whole.read_bytes()
    path = tmp_path / f"cut.{suffix}"
    path.write_bytes(data[: int(share * len(data))])
    with pytest.raises(OpenError) as caught:
        one(path)
    assert not isinstance(caught.value, LimitError)


def test_a_missing_file_and_a_folder(tmp_path):
    with pytest.raises(OpenError, match="no such file"):
        one(tmp_path / "none.png")
    with pytest.raises(OpenError, match="not a file"):
        one(tmp_path)


def test_small_pictures_of_a_document_are_passed_over(picture, tmp_path):
    path = tmp_path / "a.tif"
    thumbnail = Image.new("RGB", (32, 24), "white")
    thumbnail.save(path, save_all=True, append_images=[Image.fromarray(picture)])
    (page,) = load(path)
    assert (page.number, page.pages) == (2, 2)
    with pytest.raises(NoChart, match="32 × 24"):
        one(path, page=1)


def test_limits_hold(picture, tmp_path):
    path = tmp_path / "a.png"
    Image.fromarray(picture).save(path)
    with pytest.raises(LimitError, match="at most"):
        one(path, limits=Limits(pixels=1000))
    with pytest.raises(LimitError, match="MiB"):
        one(path, limits=Limits(file_bytes=10))
    with pytest.raises(LimitError, match="longer than the"):
        one(path, limits=Limits(seconds=1e-6))


def test_memory_is_limited(tmp_path):
    pytest.importorskip("resource", reason="this system sets no limits")
    path = tmp_path / "a.png"
    path.write_bytes(_png(9000, 9000, zlib.compress(bytes(9001 * 9000))))
    with pytest.raises(LimitError, match="memory"):
        one(path, limits=Limits(memory_bytes=120 << 20))


def test_a_generator_that_is_left_ends_its_child(tmp_path):
    pages = [Image.new("L", (100, 100), 255)] * 3
    path = tmp_path / "a.tif"
    pages[0].save(path, save_all=True, append_images=pages[1:])
    reader = load(path)
    next(reader)
    reader.close()
    with pytest.raises(StopIteration):
        next(reader)
