"""Bad input: one clear message with place and remedy, the right exit code, bounded memory."""

from pathlib import Path

import bad_files
import pytest
from command import curvefit

FOLDER = Path(__file__).resolve().parents[2] / "sample_charts"
MEMORY = 2200  # MiB: the guarded process that opens files is stopped at 2 GiB

CASES = {
    # name: (maker, file name, exit codes that are right, a word that the message must hold)
    "not an image": (bad_files.text_as_png, "a.png", {3}, "a.png"),
    "empty": (bad_files.empty, "a.png", {3}, "empty"),
    "empty PDF": (bad_files.empty, "a.pdf", {3}, "empty"),
    "truncated PNG": (bad_files.truncated_png, "a.png", {3}, "a.png"),
    "truncated JPEG": (bad_files.truncated_jpeg, "a.jpg", {3}, "a.jpg"),
    "truncated TIFF": (bad_files.truncated_tiff, "a.tif", {3}, "a.tif"),
    "truncated PDF": (bad_files.truncated_pdf, "a.pdf", {3}, "a.pdf"),
    "zero pages": (bad_files.no_pages, "a.pdf", {3}, "page"),
    "encrypted PDF": (bad_files.locked_pdf, "a.pdf", {3}, "password"),
    "page of text": (bad_files.text_page, "a.pdf", {4}, "a.pdf"),
    "scanned page of text": (bad_files.text_page_scanned, "a.png", {4}, "a.png"),
    "cat": (bad_files.cat, "cat.jpg", {4}, "cat.jpg"),
    "one pixel": (bad_files.one_pixel, "a.png", {3, 4}, "a.png"),
    "30000 x 30000": (bad_files.huge_picture, "a.png", {3}, "30000"),
    "bomb": (bad_files.picture_bomb, "a.png", {3}, "200000"),
    "PDF bomb": (bad_files.pdf_bomb, "a.pdf", {3, 4}, "a.pdf"),
    "huge PDF page": (bad_files.huge_pdf_page, "a.pdf", {3, 4}, "a.pdf"),
}


def said_well(ran, word):
    """Whether the message is one a user can act on, and not the program's own trouble."""
    assert "Traceback" not in ran.err + ran.out, ran.err
    assert word in ran.err, ran.err
    assert len(ran.err.strip().splitlines()) <= 8, ran.err
    assert ran.peak < MEMORY, f"{ran.peak:.0f} MiB"


@pytest.mark.parametrize("case", CASES)
def test_a_bad_file_gets_one_clear_message(case, tmp_path):
    make, name, codes, word = CASES[case]
    path = tmp_path / name
    make(path)
    before = path.read_bytes()
    ran = curvefit("read", path, "--out", tmp_path / "out")
    assert ran.code in codes, (ran.code, ran.err)
    said_well(ran, word)
    assert path.read_bytes() == before
    assert {p.name for p in tmp_path.iterdir()} <= {name, "out"}


def test_a_missing_file_is_not_opened(tmp_path):
    ran = curvefit("read", tmp_path / "nowhere.png")
    assert ran.code in (2, 3)
    said_well(ran, "nowhere.png")


def test_unreadable_numbers_end_in_a_partial_file_that_says_so(tmp_path):
    path = tmp_path / "blank.jpg"
    bad_files.without_numbers(path)
    ran = curvefit("read", path, "--out", tmp_path / "out")
    assert ran.code == 4, ran.err
    said_well(ran, "blank.jpg")
    assert "marks" in ran.err, "the remedy names the notes key"
    assert list((tmp_path / "out").glob("*.curves.json")), "what was read is written"


def test_a_page_that_does_not_exist_is_a_wrong_command(tmp_path):
    ran = curvefit("read", FOLDER / "two-page-report.pdf", "--page", 9, "--out", tmp_path / "out")
    assert ran.code == 2, ran.err
    said_well(ran, "9")


@pytest.mark.parametrize(
    ("notes", "word"),
    [
        ("[[panel]\nname = ", "line 1"),
        ("no_such_key = 3\n", "no_such_key"),
        ('[[axis]]\npanel = "Z"\nside = "left"\nunit = "m"\n', "Z"),
        ('[[axis]]\npanel = "A"\nside = "left"\nunit = "parsec"\n', "parsec"),
        ('[[axis]]\npanel = "A"\nside = "left"\n\ncolour = "red"\n', "colour"),
    ],
)
def test_notes_with_an_error_name_the_place(notes, word, tmp_path):
    given = tmp_path / "given.toml"
    given.write_text(notes, encoding="utf-8")
    ran = curvefit("read", FOLDER / "plotted-vector.pdf", "--notes", given, "--out", tmp_path / "o")
    assert ran.code == 2, (ran.code, ran.err)
    said_well(ran, word)
    assert given.read_text(encoding="utf-8") == notes


@pytest.mark.parametrize("where", ["a file in its place", "below a file", "a kernel folder"])
def test_an_output_folder_that_cannot_be_written(where, tmp_path):
    taken = tmp_path / "taken"
    taken.write_text("keep me")
    out = {"a file in its place": taken, "below a file": taken / "deep" / "er",
           "a kernel folder": Path("/proc/curvefit-out")}[where]  # fmt: skip
    ran = curvefit("read", FOLDER / "plotted-vector.pdf", "--out", out)
    assert ran.code == 6, (ran.code, ran.err)
    said_well(ran, str(out))
    assert taken.read_text() == "keep me"


def test_nothing_is_written_beside_an_input_but_its_own_folder(tmp_path):
    path = tmp_path / "sheet.pdf"
    path.write_bytes((FOLDER / "plotted-vector.pdf").read_bytes())
    before = path.read_bytes()
    ran = curvefit("read", path)
    assert ran.code == 0, ran.err
    assert {p.name for p in tmp_path.iterdir()} == {"sheet.pdf", "sheet.pdf.curvefit"}
    assert path.read_bytes() == before
