"""The fit command: its files, its choices, its messages and exit codes."""

import json
from importlib.resources import files

import jsonschema
import numpy as np
import pytest
from curvefit_cli.main import app
from curvefit_cli.show import ended

from curvefit.fit import fit as fit_all
from curvefit.records import Pump
from curvefit.write.fit_files import write_fits
from curvefit.write.reopen import reopen
from tests.bands.invented import Bank
from tests.bands.test_families import N, chart

POINTS = """flow,head,efficiency
m3/h,m,%
0,41.2,0
10,41.0,31
20,40.1,52
30,38.6,65
40,36.4,72.5
50,33.5,74.5
60,29.8,71
70,25.2,63
"""


def run(*arguments):
    return ended(lambda: app(args=[str(a) for a in arguments], standalone_mode=False), debug=False)


def document(folder, stem):
    written = json.loads((folder / f"{stem}.curves.json").read_text(encoding="utf-8"))
    schema = json.loads(files("curvefit.write").joinpath("curves.schema.json").read_text())
    jsonschema.validate(written, schema)
    return written


@pytest.fixture
def points(tmp_path):
    path = tmp_path / "test.csv"
    path.write_text(POINTS, encoding="utf-8")
    return path


@pytest.fixture(scope="module")
def family(tmp_path_factory):
    """A curve set of five heads of one pump, as `read` would have written it."""
    folder = tmp_path_factory.mktemp("family")
    curves = [c for c, _ in chart(np.random.default_rng(3), Bank(N))[0]]
    source = folder / "page.png"
    source.write_bytes(b"a picture")
    pumps = [Pump("1", speed_si=2900 / 60)]
    write_fits(fit_all(curves), curves, folder, "page", source=source, pumps=pumps, plots=False)
    return folder / "page.curves.json"


def test_measured_points_give_a_curve_set_a_table_and_plots(points, tmp_path, capsys):
    assert run("fit", points) == 0
    folder = tmp_path / "test.csv.curvefit"
    written = document(folder, "test")
    head, eta = written["fits"]
    assert head["family"] == "polynomial"
    flow, value = np.array([0, 30, 70]), np.array([41.2, 38.6, 25.2])
    assert np.polyval(head["coefficients"][::-1], flow) == pytest.approx(value, abs=0.1)
    assert head["band"]["kind"] == "pointwise"
    assert eta["derived"]["bep"]["flow"]["value"] == pytest.approx(48, abs=3)
    assert (folder / "test.fit.1.png").read_bytes().startswith(b"\x89PNG")
    assert (folder / "test.fit.2.png").stat().st_size > 5000
    said = capsys.readouterr().out
    assert "predicts best (smallest AICc)" in said
    assert "polynomial of degree 2" in said
    assert points.read_text(encoding="utf-8") == POINTS


def test_the_same_input_gives_the_same_bytes(points, tmp_path):
    for name in ("a", "b"):
        assert run("fit", points, "--simultaneous", "--out", tmp_path / name, "--quiet") == 0
    for one in sorted((tmp_path / "a").iterdir()):
        assert one.read_bytes() == (tmp_path / "b" / one.name).read_bytes()


@pytest.mark.parametrize(
    ("options", "kind", "family", "degree"),
    [
        (["--degree", "2", "--simultaneous"], "simultaneous", "polynomial", 2),
        (["--prediction"], "prediction", "polynomial", 3),
        (["--family", "power"], "pointwise", "power", None),
        (["--family", "piecewise"], "pointwise", "piecewise", None),
    ],
)
def test_choices(points, tmp_path, options, kind, family, degree):
    code = run("fit", points, "--curve", "head", "--out", tmp_path, *options, "--quiet")
    assert code == 0
    (one,) = document(tmp_path, "test")["fits"]
    assert (one["band"]["kind"], one["family"], one["degree"]) == (kind, family, degree)


def test_units_confidence_and_extrapolation(points, tmp_path, capsys):
    code = run(
        "fit", points, "--curve", "head", "--out", tmp_path, "--flow-unit", "l/s", "--head-unit",
        "ft", "--confidence", "0.9", "--extrapolate", "90 m3/h",
    )  # fmt: skip
    assert code == 0
    written = document(tmp_path, "test")
    (one,) = written["fits"]
    assert (one["flow_unit"], one["unit"], one["confidence"]) == ("L/s", "[ft_i]", 0.9)
    assert one["flow_range"] == pytest.approx([0, 70 / 3.6])
    assert one["band"]["flow"][-1] == pytest.approx(25)
    assert "fit.extrapolated" in {f["code"] for f in written["findings"]}
    assert "m³/s only" in capsys.readouterr().out
    assert run("fit", points, "--extrapolate", "90", "--strict", "--quiet") == 4


def test_a_family_at_a_diameter_between_those_drawn(family, tmp_path, capsys):
    before = family.read_bytes()
    code = run("fit", family, "--family", "affinity", "--diameter", "195 mm", "--out", tmp_path)
    assert code == 0
    written = document(tmp_path, "page")
    (one,) = written["fits"]
    assert one["family"] == "affinity"
    assert one["parameters"]["diameter"] == pytest.approx(0.195)
    assert len(one["curves"]) == 5
    assert one["parameters"]["nominal_value_by_diameter"] == 2.0
    said = capsys.readouterr().out
    assert "flow by diameter" in said
    assert "radial trim" in said
    assert "left out, predicted from the others" in said
    table = (tmp_path / "page.curves.csv").read_text(encoding="utf-8").splitlines()
    rows = [r.split(",") for r in table if "head family at 195 mm" in r]
    assert len(rows) == 201
    assert {r[5] for r in rows} == {"195"}
    assert {r[15] for r in rows} == {"fitted"}
    # the curves of the set are kept as they were
    old = json.loads(before)
    assert written["curves"] == old["curves"]
    assert written["panels"] == old["panels"]
    assert family.read_bytes() == before
    again = reopen(tmp_path / "page.curves.json").fits[0]
    reopened = {f.curve.name: f for f in reopen(family).fits}
    low, high = reopened["head 190"], reopened["head 202"]
    at = 0.5 * (low.band.flow_si[0] + low.band.flow_si[-1])
    values = [np.interp(at, f.band.flow_si, f.band.value_si) for f in (low, again, high)]
    assert values[0] < values[1] < values[2]


def test_a_family_beyond_the_drawn_range_is_a_warning(family, tmp_path, capsys):
    asked = ("fit", family, "--family", "affinity", "--diameter", "150 mm", "--out", tmp_path)
    assert run(*asked) == 0
    assert "family.beyond-drawn" in capsys.readouterr().out
    assert run(*asked, "--strict") == 4


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (["--degree", "9"], "degree 9"),
        (["--curve", "nothing"], "Choose from"),
        (["--family", "splines"], "splines"),
        (["--simultaneous", "--prediction"], "exclude each other"),
        (["--family", "affinity", "--degree", "2"], "do not go with"),
        (["--confidence", "95"], "0.95"),
        (["--flow-unit", "furlong"], "furlong"),
    ],
)
def test_wrong_choices_end_with_two(points, tmp_path, options, said, capsys):
    assert run("fit", points, "--out", tmp_path / "out", *options) == 2
    assert said in capsys.readouterr().err
    assert not (tmp_path / "out").exists()


@pytest.mark.parametrize(
    ("text", "code", "said"),
    [
        ("flow,head\nm3/h,m\n1,2\n2,NaN\n", 2, "line 4"),
        ("flow,head\nm3/h,m\n5,2\n5,3\n", 4, "1 different flow"),
        ("flow,head\nm3/h,m\n1,2\n2,3 kW\n", 2, "column 2"),
    ],
)
def test_bad_points_are_told_with_their_place(tmp_path, text, code, said, capsys):
    path = tmp_path / "bad.csv"
    path.write_text(text, encoding="utf-8")
    assert run("fit", path) == code
    error = capsys.readouterr().err
    assert said in error
    assert "Traceback" not in error


def test_what_cannot_be_opened_ends_with_three(tmp_path, capsys):
    assert run("fit", tmp_path / "missing.csv") == 3
    assert run("fit", tmp_path / "missing.curves.json") == 3
    broken = tmp_path / "x.curves.json"
    broken.write_text("{", encoding="utf-8")
    assert run("fit", broken) == 3
    capsys.readouterr()


def test_a_folder_that_cannot_be_written_ends_with_six(points, tmp_path, capsys):
    blocked = tmp_path / "blocked"
    blocked.write_text("a file", encoding="utf-8")
    assert run("fit", points, "--out", blocked) == 6
    capsys.readouterr()
