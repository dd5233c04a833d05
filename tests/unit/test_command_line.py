"""The command line: exit codes, what goes where, and messages a user can act on."""

import json
from dataclasses import replace

import pytest
from curvefit_cli.main import main

from curvefit import __version__, pipeline
from curvefit.errors import InputError, LimitError, Location, NoChart, OpenError
from curvefit.records import Reading


@pytest.fixture
def curvefit(monkeypatch, capsys):
    """A function that runs the command line; (exit code, standard output, standard error)."""

    def run(*arguments):
        with pytest.raises(SystemExit) as end:
            main([str(a) for a in arguments])
        said = capsys.readouterr()
        return end.value.code, said.out, said.err

    return run


@pytest.fixture
def reads(monkeypatch):
    """Makes `read` give these readings, or raise this error."""

    def give(*readings):
        def read_document(path, notes=None, *, page=None, progress=None):
            for reading in readings:
                if isinstance(reading, BaseException):
                    raise reading
                for stage in pipeline.STAGES:
                    progress(stage)
                yield replace(reading, notes=notes(reading.page))

        monkeypatch.setattr(pipeline, "read_document", read_document)

    return give


@pytest.fixture
def chart(tmp_path):
    path = tmp_path / "my chart.png"
    path.write_bytes(b"never opened here")
    return path


def test_no_argument_prints_help(curvefit):
    code, out, err = curvefit()
    assert code == 0
    assert "read" in out
    assert err == ""
    assert curvefit("--help")[1] == out


def test_version(curvefit):
    assert curvefit("--version")[1] == f"curvefit {__version__}\n"


@pytest.mark.parametrize(
    "arguments", [["reed"], ["read"], ["read", "a.png", "--page", "0"], ["read", "a", "--colour"]]
)
def test_a_wrong_command_line_ends_with_2(curvefit, arguments):
    code, out, err = curvefit(*arguments)
    assert (code, out) == (2, "")
    assert "Error" in err
    assert "Traceback" not in err


def test_a_wrong_unit_ends_with_2_before_anything_is_read(curvefit, chart):
    code, _, err = curvefit("read", chart, "--head-unit", "kW")
    assert code == 2
    assert "--head-unit" in err
    assert "ft" in err
    assert {p.name for p in chart.parent.iterdir()} == {chart.name}


def test_read_writes_beside_the_chart_and_says_what_it_found(curvefit, reads, chart, made_reading):
    reads(made_reading())
    code, out, err = curvefit("read", chart)
    folder = chart.parent / "my chart.png.curvefit"
    assert (code, err) == (0, "")
    assert {p.name for p in chart.parent.iterdir()} == {chart.name, folder.name}
    assert (folder / "my chart.curves.json").is_file()
    line = next(row for row in out.splitlines() if "head Ø210" in row)
    for part in ("A", "Total head", "Ø210", "2 to 95 m³/h", "0.02 m"):
        assert part in line
    assert "Pump efficiency (guess)" in out
    assert "Warning axis.few-marks (panel A, axis A.left)" in out
    assert "Give marks under [[axis]] in the notes." in out
    assert " ".join(str(folder).split()) in " ".join(out.split())  # a long path is wrapped


def test_units_and_points_reach_the_files_and_the_table(curvefit, reads, chart, made_reading):
    reads(made_reading())
    out_dir = chart.parent / "o"
    code, out, _ = curvefit("read", chart, "--out", out_dir, "--points", 12,
                            "--flow-unit", "l/s", "--head-unit", "ft")  # fmt: skip
    doc = json.loads((out_dir / "my chart.curves.json").read_text(encoding="utf-8"))
    assert code == 0
    assert doc["curves"][0]["flow_unit"] == "L/s"
    assert len(doc["curves"][0]["flow"]) == 12
    assert "l/s" in out
    assert {p.name for p in chart.parent.iterdir()} == {chart.name, "o"}


def test_quiet_says_nothing(curvefit, reads, chart, made_reading):
    reads(made_reading())
    assert curvefit("read", chart, "--quiet") == (0, "", "")


def test_strict_ends_with_4_at_a_warning_and_still_writes(curvefit, reads, chart, made_reading):
    reads(made_reading())
    code, _, err = curvefit("read", chart, "--strict")
    assert code == 4
    assert "1 warning" in err
    assert (chart.parent / "my chart.png.curvefit" / "my chart.report.html").is_file()
    reads(made_reading(findings=False))
    assert curvefit("read", chart, "--strict")[0] == 0


def test_several_chart_pages_get_names_of_their_own(curvefit, reads, chart, made_reading):
    one = made_reading()
    pages = [replace(one, page=replace(one.page, number=n, pages=5)) for n in (2, 4, 5)]
    reads(*pages)
    assert curvefit("read", chart)[0] == 0
    names = {p.name for p in (chart.parent / "my chart.png.curvefit").glob("*.json")}
    assert {n for n in names if n.endswith("curves.json")} == {
        f"my chart.p{n}.curves.json" for n in (2, 4, 5)
    }


def test_pages_read_before_an_error_are_not_lost(curvefit, reads, chart, made_reading):
    one = made_reading()
    first, second = (replace(one, page=replace(one.page, number=n, pages=5)) for n in (2, 3))
    error = NoChart("no numbers", Location(page=4))
    error.partial = Reading(replace(one.page, number=4, pages=5))
    reads(first, second, error)
    assert curvefit("read", chart)[0] == 4
    names = {p.name for p in (chart.parent / "my chart.png.curvefit").glob("*.curves.json")}
    assert names == {f"my chart.p{n}.curves.json" for n in (2, 3, 4)}


def test_progress_names_the_stage_on_a_terminal_and_nothing_in_a_pipe(monkeypatch, capsys):
    import sys

    from curvefit_cli.show import Stages

    with Stages(2, False, "a.png") as piped:
        piped("load")
    assert capsys.readouterr().err == ""
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    with Stages(2, False, "a.png") as shown:
        shown("load")
        shown("calibrate")
        shown.clear()
    said = capsys.readouterr().err
    assert "a.png load" in said
    assert "a.png calibrate" in said
    with Stages(2, True) as quiet:
        quiet("load")
    assert capsys.readouterr().err == ""


def test_one_chart_page_of_several_keeps_the_plain_name(curvefit, reads, chart, made_reading):
    one = made_reading()
    reads(replace(one, page=replace(one.page, number=3, pages=5)))
    assert curvefit("read", chart)[0] == 0
    assert (chart.parent / "my chart.png.curvefit" / "my chart.curves.json").is_file()
    assert curvefit("read", chart, "--page", 3)[0] == 0
    assert (chart.parent / "my chart.png.curvefit" / "my chart.p3.curves.json").is_file()


def test_nothing_read_ends_with_4_and_a_partial_file(curvefit, reads, chart, made_reading):
    error = NoChart("no plot box was found", Location(file="my chart.png", page=1), "Give a box.")
    error.partial = Reading(made_reading().page)
    reads(error)
    code, out, err = curvefit("read", chart)
    assert (code, out) == (4, "")
    assert err == "Error: my chart.png, page 1: no plot box was found.\n  Give a box.\n"
    (path,) = (chart.parent / "my chart.png.curvefit").iterdir()
    doc = json.loads(path.read_text(encoding="utf-8"))
    assert [(f["code"], f["severity"]) for f in doc["findings"]] == [("chart.none", "error")]
    assert doc["findings"][0]["remedy"] == "Give a box."


def test_the_place_of_an_error_is_in_pixels_of_the_stored_picture(
    curvefit, reads, chart, made_reading
):
    box = (100.0, 80.0, 120.0, 560.0)
    error = NoChart("no numbers", Location(page=1, panel="A", box_px=box), "Give two marks.")
    error.partial = Reading(made_reading(quarter_turn=True).page)
    reads(error)
    assert "pixels 80,779 to 560,799" in curvefit("read", chart)[2]
    (path,) = (chart.parent / "my chart.png.curvefit").iterdir()
    doc = json.loads(path.read_text(encoding="utf-8"))
    assert doc["findings"][0]["where"]["box_px"] == [80.0, 779.0, 560.0, 799.0]


def test_a_chart_without_curves_ends_with_4(curvefit, reads, chart, made_reading):
    reads(replace(made_reading(), curves=(), fits=()))
    code, _, err = curvefit("read", chart)
    assert code == 4
    assert "[[axis]]" in err
    folder = chart.parent / "my chart.png.curvefit"
    doc = json.loads((folder / "my chart.curves.json").read_text(encoding="utf-8"))
    assert doc["findings"][0]["code"] == "curve.none"


@pytest.mark.parametrize(
    ("error", "code"),
    [
        (InputError("wrong"), 2),
        (OpenError("empty", Location(file="x")), 3),
        (LimitError("too large", Location(file="x")), 3),
        (ValueError("a slip"), 1),
        (KeyboardInterrupt(), 130),
    ],
)
def test_every_error_has_its_exit_code_and_no_traceback(curvefit, reads, chart, error, code):
    reads(error)
    got, out, err = curvefit("read", chart)
    assert (got, out) == (code, "")
    assert err
    assert "Traceback" not in err


def test_debug_lets_the_traceback_through(reads, chart):
    reads(ValueError("a slip"))
    with pytest.raises(ValueError, match="a slip"):
        main(["read", str(chart), "--debug"])


def test_a_folder_that_cannot_be_written_ends_with_6(curvefit, reads, chart, made_reading):
    reads(made_reading())
    code, _, err = curvefit("read", chart, "--out", chart / "below")
    assert code == 6
    assert "--out" in err


def test_notes_in_the_folder_are_used_and_kept(curvefit, reads, chart, made_reading):
    reads(made_reading())
    folder = chart.parent / "o"
    curvefit("read", chart, "--out", folder)
    path = folder / "my chart.notes.toml"
    path.write_text('[[curve]]\nname = "NPSHr"\nlabel = "mine"\n', encoding="utf-8")
    code, _, err = curvefit("read", chart, "--out", folder)
    assert code == 0
    assert str(path) in err
    assert 'label = "mine"' in path.read_text(encoding="utf-8").partition("# Read:")[0]
    more = chart.parent / "more.toml"
    more.write_text("[page]\nturn = 0\n", encoding="utf-8")
    assert curvefit("read", chart, "--out", folder, "--notes", more)[0] == 0
    kept = path.read_text(encoding="utf-8").partition("# Read:")[0]
    assert 'label = "mine"' in kept
    assert "turn = 0" in kept


def test_wrong_notes_end_with_2_and_their_line(curvefit, reads, chart, made_reading):
    reads(made_reading())
    notes = chart.parent / "n.toml"
    notes.write_text('[[curve]]\nname = "x"\ndiametre = "2 mm"\n', encoding="utf-8")
    code, _, err = curvefit("read", chart, "--notes", notes)
    assert code == 2
    assert f"{notes}, line 3, key curve.diametre" in err
    assert "diameter" in err
    assert {p.name for p in chart.parent.iterdir()} == {chart.name, "n.toml"}


def test_text_of_a_chart_cannot_steer_the_terminal(curvefit, reads, chart, made_reading):
    reads(made_reading(label="\x1b[2Jgone"))
    out = curvefit("read", chart)[1]
    assert "\x1b" not in out
    assert "gone" in out


def test_the_demo_chart_is_the_one_that_its_comment_says():
    from importlib.resources import files

    from curvefit_cli.demo import CHART

    from sample_charts.draw import chart

    drawn = chart("stacked", 7, "inked", "scan", dpi=150, units="m3/h", language="en")
    shipped = files("curvefit_cli").joinpath(CHART).read_bytes()
    from io import BytesIO

    import numpy as np
    from PIL import Image

    with Image.open(BytesIO(shipped)) as a, Image.open(BytesIO(drawn.data)) as b:
        gap = np.abs(np.asarray(a, float) - np.asarray(b, float)).mean()
    assert gap < 1.0


@pytest.mark.parametrize(
    ("low", "high", "text"),
    [
        (-5.5e-6, 532.18, "0 to 532.2 m³/h"),
        (2, 95.04, "2 to 95.04 m³/h"),
        (-2.331, 901.3, "-2.3 to 901.3 m³/h"),
        (10000, 123456, "10000 to 123500 m³/h"),
        (0, 0.01234567, "0 to 0.01235 m³/h"),
        (0, 0, "0 to 0 m³/h"),
    ],
)
def test_a_range_shows_what_its_larger_end_can_carry(low, high, text):
    from curvefit.write.wording import range_text

    assert range_text(low, high, "m3/h") == text
