"""Notes files through the command line: given entries are used, kept, and never lost."""

import json
from pathlib import Path

import numpy as np
import pytest
from chart_harness import chart, write_chart
from command import curvefit

from curvefit.notes import given_entries

FOLDER = Path(__file__).resolve().parents[2] / "sample_charts"


def read(path, out, *more):
    ran = curvefit("read", path, "--out", out, *more)
    assert ran.code in (0, 4), ran.err
    document = json.loads((out / f"{path.stem}.curves.json").read_text(encoding="utf-8"))
    return ran, document, out / f"{path.stem}.notes.toml"


def test_one_line_rescues_an_axis_whose_numbers_are_painted_over(tmp_path):
    """Only the value axis is left without numbers; one line of notes gives it two marks."""
    drawn = chart("single", 81, "vector", "scan", mono=True, dpi=150)
    panel = drawn.truth["panels"][0]
    corners, left = np.array(panel["corners_px"]), panel["axes"][1]
    import cv2
    from PIL import Image

    picture = drawn.picture.copy()
    x = round(corners[[0, 3], 0].min()) - 5
    y0, y1 = round(corners[0, 1]) - 12, round(corners[3, 1]) + 3
    paper = tuple(int(v) for v in np.median(picture, (0, 1)))
    cv2.rectangle(picture, (x - 60, y0), (x, y1), paper, -1)
    path = tmp_path / "worn.png"
    Image.fromarray(picture).save(path)
    lo, hi = corners[3].tolist(), corners[0].tolist()
    line = (
        f'axis = [{{panel = "A", side = "left", quantity = "head", unit = "{left["unit"]}", '
        f"marks = [{{pixel = {lo}, value = {left['lo']}}}, "
        f"{{pixel = {hi}, value = {left['hi']}}}]}}]\n"
    )
    notes = tmp_path / "one-line.toml"
    notes.write_text(line, encoding="utf-8")
    ran, document, _ = read(path, tmp_path / "out", "--notes", notes)
    assert ran.code == 0, ran.err
    (curve,) = document["curves"]
    true = panel["curves"][0]
    got = np.interp(true["flow"], curve["flow"], curve["value"])
    assert curve["quantity"] == "head"
    assert np.sqrt(np.mean((got - true["value"]) ** 2)) < 0.001 * (left["hi"] - left["lo"])


@pytest.fixture(scope="module")
def first(tmp_path_factory):
    folder = tmp_path_factory.mktemp("kept")
    path = write_chart(chart("twin", 82, "vector", as_pdf=True), folder)
    _, document, notes = read(path, folder / "out")
    return path, folder / "out", document, notes


def test_what_read_wrote_is_a_record_and_changes_nothing(first, tmp_path):
    path, _, document, notes = first
    assert given_entries(notes.read_text(encoding="utf-8")) == {}
    _, again, _ = read(path, tmp_path / "again", "--notes", notes)
    for a, b in zip(document["curves"], again["curves"], strict=True):
        assert a == b


def test_reading_again_never_loses_a_given_entry(first):
    path, out, document, notes = first
    name = document["curves"][0]["name"]
    text = notes.read_text(encoding="utf-8")
    mine = f'\n[[curve]]\nname = "{name}"\nlabel = "measured at the works"\n'
    notes.write_text(text + mine, encoding="utf-8")
    read(path, out)  # without --notes: not used, yet kept
    kept = given_entries(notes.read_text(encoding="utf-8"))
    assert "measured at the works" in [e.get("label") for e in kept["curve"]]
    _, used, notes = read(path, out, "--notes", notes)
    kept = given_entries(notes.read_text(encoding="utf-8"))
    assert "measured at the works" in [e.get("label") for e in kept["curve"]]
    assert "measured at the works" in [c["label"] for c in used["curves"]]


def test_the_same_input_and_notes_give_the_same_bytes(first, tmp_path):
    path, *_ = first
    for folder in ("a", "b"):
        read(path, tmp_path / folder)
    a, b = ({p.name: p.read_bytes() for p in (tmp_path / f).iterdir()} for f in "ab")
    assert a.keys() == b.keys()
    assert [n for n in a if a[n] != b[n]] == []
