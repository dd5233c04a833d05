"""The recogniser on numbers and titles set in several faces and sizes."""

from pathlib import Path

import numpy as np
import pytest

from curvefit.ocr import NUMERIC, readings, recognise

NUMBERS = ["0", "5", "7", "1", "4", "17.5", "2,5", "1000", "120", "0.05", "2900", "36"]
TITLES = ["Total head H, m", "Q [m³/h]", "Flow (US gpm)", "NPSHr [m]", "Efficiency (%)"]
FACES = ["DejaVuSans.ttf", "DejaVuSerif.ttf", "STIXGeneral.ttf", "cmr10.ttf"]


def line(text: str, face: str, size: int) -> np.ndarray:
    """Black text on white with a small margin, (height, width, 3) uint8."""
    from matplotlib import get_data_path
    from PIL import Image, ImageDraw, ImageFont

    font = ImageFont.truetype(str(Path(get_data_path()) / "fonts" / "ttf" / face), size)
    x0, y0, x1, y1 = (int(v) for v in font.getbbox(text))
    margin = max(3, size // 4)
    image = Image.new("RGB", (x1 - x0 + 2 * margin, y1 - y0 + 2 * margin), "white")
    ImageDraw.Draw(image).text((margin - x0, margin - y0), text, fill="black", font=font)
    return np.asarray(image)


@pytest.mark.parametrize("face", FACES)
@pytest.mark.parametrize("size", [14, 30])
def test_numbers_are_read_as_printed(face, size):
    read = recognise([line(t, face, size) for t in NUMBERS], NUMERIC)
    assert [t for t, _ in read] == NUMBERS
    assert min(s for _, s in read) > 0.5


def test_titles_are_read_as_printed():
    read = recognise([line(t, "DejaVuSans.ttf", 26) for t in TITLES])
    assert [t for t, _ in read] == TITLES


def test_stairs_of_a_black_and_white_copy_are_read():
    crops = [
        np.where(line(t, "DejaVuSans.ttf", 13) > 127, 255, 0).astype(np.uint8) for t in NUMBERS
    ]
    right = sum(t == r for t, (r, _) in zip(NUMBERS, recognise(crops, NUMERIC), strict=True))
    assert right >= len(NUMBERS) - 1


def test_the_alphabet_is_kept_and_a_forced_letter_scores_low():
    [(free, sure), (forced, unsure)] = readings([line("H", "DejaVuSans.ttf", 30)], (None, NUMERIC))[
        0
    ]
    assert (free, set(forced) <= set(NUMERIC)) == ("H", True)
    assert unsure < 0.5 < sure


def test_order_and_number_of_crops_are_kept():
    texts = ["2900", "5", "Total head H, m", "0", "17.5"]
    read = recognise([line(t, "DejaVuSans.ttf", 24) for t in texts])
    assert [t for t, _ in read] == texts
    assert recognise([]) == []


def test_grey_crops_and_blank_paper():
    grey = line("120", "DejaVuSans.ttf", 24)[:, :, 1]
    assert recognise([grey])[0][0] == "120"
    assert recognise([np.full((30, 60), 255, np.uint8)])[0][0] == ""
