"""curvefit write: points for solvers, tables, workbooks, and templates that are fenced in."""

import csv
import io
import json
from dataclasses import replace

import jsonschema
import numpy as np
import openpyxl
import pytest
from curvefit_cli.main import main
from hypothesis import given, settings
from hypothesis import strategies as st

from curvefit.errors import InputError, LimitError
from curvefit.records import Fit
from curvefit.write import write
from curvefit.write.export import Sampling, clean_curves, document, table_text, tidy, wide
from curvefit.write.reopen import reopen
from curvefit.write.resample import best_points, falling, fewest_points, largest_gap
from curvefit.write.template import Limits, fill, variables
from curvefit.write.workbook import workbook


@pytest.fixture
def folder(made_reading, tmp_path):
    write(made_reading(), tmp_path / "pump.png.curvefit", "pump")
    return tmp_path / "pump.png.curvefit"


@pytest.fixture
def opened(folder):
    return reopen(folder / "pump.curves.json")


def parabola(q):
    return 50 - 0.002 * q**2


@pytest.mark.parametrize("tolerance", [0.5, 0.1, 0.01, 1e-3])
def test_a_parabola_needs_as_many_points_as_theory_says(tolerance):
    """A chord over h of a curve with second derivative f'' misses it by |f''|·h²/8."""
    needed = int(np.ceil(100 / np.sqrt(8 * tolerance / 0.004) - 1e-6)) + 1
    flow = fewest_points([parabola], 0.0, 100.0, [tolerance])
    assert needed <= len(flow) <= needed + 1 + 0.02 * needed
    assert largest_gap(parabola, flow) <= tolerance * (1 + 1e-9)


def test_the_best_points_of_a_parabola_are_even():
    assert np.allclose(best_points([parabola], 0, 100, 9), np.linspace(0, 100, 9), atol=0.1)


@settings(deadline=None, max_examples=30)
@given(
    st.lists(st.floats(-1, 1), min_size=4, max_size=6),
    st.floats(0.5, 500), st.integers(3, 40), st.floats(1e-4, 0.05),
)  # fmt: skip
def test_points_keep_their_promise(coefficients, span, count, tolerance):
    def curve(q):
        return np.polynomial.polynomial.polyval(np.asarray(q) / span, coefficients)

    few = fewest_points([curve], 0.0, span, [tolerance])
    assert np.all(np.diff(few) > 0)
    assert (few[0], few[-1]) == (0.0, span)
    assert largest_gap(curve, few) <= tolerance * (1 + 1e-9)
    best = best_points([curve], 0.0, span, count)
    assert len(best) == count
    assert np.all(np.diff(best) > 0)
    even = np.linspace(0, span, count)
    reach = float(np.ptp(curve(np.linspace(0, span, 500))))
    assert largest_gap(curve, best) <= largest_gap(curve, even) * 1.05 + 2e-3 * reach


@settings(deadline=None)
@given(st.lists(st.floats(-100, 100), min_size=2, max_size=30), st.floats(1e-6, 1e-2))
def test_made_falling_falls_and_changes_no_more_than_it_must(values, step):
    given_values = np.array(values)
    made = falling(given_values, step)
    assert np.all(np.diff(made) <= -step * (1 - 1e-6))
    if np.all(np.diff(given_values) <= -step):
        assert np.allclose(made, given_values)
    rise = np.max(given_values - np.minimum.accumulate(given_values))
    assert np.abs(made - given_values).max() <= rise + step * len(values) + 1e-9


def test_clean_points_lie_on_the_equation(opened):
    curves, said = clean_curves(opened, {"flow": "l/s"}, Sampling(points=12))
    assert said == ()
    for clean, fit in zip(curves, opened.fits, strict=True):
        assert len(clean.flow) == 12
        si = clean.flow * 1e-3
        value = np.polynomial.polynomial.polyval(si, fit.coefficients)
        assert np.allclose(clean.value * clean.out.units.value_si, value, rtol=1e-5)
        assert np.all(clean.low < clean.value)
        assert np.all(clean.value < clean.high)


def test_a_common_grid_is_common(opened):
    for how in (Sampling(common=True), Sampling(common=True, points=10)):
        curves, _ = clean_curves(opened, None, how)
        for clean in curves:
            assert np.array_equal(clean.flow, curves[0].flow)
        assert (curves[0].flow[0], curves[0].flow[-1]) == (10.0, 90.0)


def test_a_drooping_head_is_made_to_fall_and_that_is_said(opened):
    curve = opened.curves[0]
    q = curve.flow_si
    value = 50 - 4e5 * (q - q[25]) ** 2
    c = np.polynomial.Polynomial.fit(q, value, 2).convert().coef
    fit = replace(opened.fits[0], coefficients=c, covariance=None, degree=2)
    drooping = replace(opened, curves=(curve,), fits=(replace(fit, curves=(curve,)),))
    (clean,), said = clean_curves(drooping, None, Sampling(strict=True, points=20))
    assert np.all(np.diff(clean.value) < 0)
    assert [f.code for f in said] == ["write.made-falling"]
    (free,), quiet = clean_curves(drooping, None, Sampling(points=20))
    assert np.any(np.diff(free.value) > 0)
    assert quiet == ()
    assert isinstance(clean.fit.fit, Fit)


def test_digits_that_do_not_tell_flows_apart_are_refused(opened):
    with pytest.raises(InputError, match="digits"):
        clean_curves(opened, None, Sampling(points=300, digits=2))


def test_tables_hold_the_same_numbers(opened):
    curves, _ = clean_curves(opened, None, Sampling(points=5))
    rows = list(csv.DictReader(io.StringIO(tidy(curves, 1), newline="")))
    assert [float(r["flow"]) for r in rows[:5]] == list(curves[0].flow)
    assert [float(r["value"]) for r in rows[:5]] == list(curves[0].value)
    columns = list(zip(*csv.reader(io.StringIO(wide(curves), newline="")), strict=True))
    assert columns[0][0] == "head Ø210: flow [m3/h]"
    assert [float(v) for v in columns[1][1:]] == list(curves[0].value)
    text = table_text(curves)
    numbers = [line.split() for line in text.splitlines() if line and line[0] != "#"]
    assert [float(v) for _, v in numbers[:5]] == list(curves[0].value)
    assert "impeller 210 mm; speed 2900 1/min" in text


def test_the_json_is_a_curve_set_again(opened, tmp_path):
    from importlib.resources import files

    curves, _ = clean_curves(opened, {"head": "ft"}, Sampling(points=30))
    made = document(opened, curves, {"head": "ft"})
    schema = files("curvefit.write").joinpath("curves.schema.json").read_text(encoding="utf-8")
    jsonschema.Draft202012Validator(json.loads(schema)).validate(made)
    path = tmp_path / "again.json"
    path.write_text(json.dumps(made), encoding="utf-8")
    again = reopen(path)
    assert again.curves[0].unit == "[ft_i]"
    assert np.allclose(again.curves[0].value_si, curves[0].value * 0.3048)
    assert again.curves[0].sigma_si is not None


def test_the_workbook_reads_back(opened, folder):
    curves, _ = clean_curves(opened, None, Sampling(points=6))
    picture = (folder / "pump.overlay.png").read_bytes()
    data = workbook(curves, opened.findings, opened.source, picture)
    assert data == workbook(curves, opened.findings, opened.source, picture)
    book = openpyxl.load_workbook(io.BytesIO(data))
    assert book.sheetnames == ["Total head", "Pump efficiency", "NPSH required", "Equations",
                               "Findings", "Source"]  # fmt: skip
    sheet = book["Total head"]
    assert sheet["A1"].value == "head Ø210"
    assert [sheet.cell(3 + i, 2).value for i in range(6)] == list(curves[0].value)
    assert book["Findings"]["B2"].value == "axis.few-marks"
    assert len(book["Source"]._images) == 1
    term = [[c.value for c in row] for row in book["Equations"].iter_rows(min_row=2)]
    assert term[0][3] == pytest.approx(opened.fits[0].coefficients[0], rel=1e-9)


def test_no_cell_is_a_formula(opened):
    curve = replace(opened.curves[0], name="=1+1", label="@x")
    evil = replace(opened, curves=(curve,), fits=())
    curves, _ = clean_curves(evil)
    book = openpyxl.load_workbook(io.BytesIO(workbook(curves, (), {"file": "=HYPERLINK(1)"})))
    cells = [c for sheet in book for row in sheet.iter_rows() for c in row if c.value is not None]
    assert not [c.value for c in cells if c.data_type == "f"]
    assert "'=1+1" in tidy(curves, 1)


TEMPLATE = """\
! {{ source.file }}
{% for c in curves if c.quantity == "head" %}
PUMP "{{ c.name }}" {{ "%.1f" % c.diameter_mm }} {{ c.points | length }}
{% for p in c.points %}
{{ p.flow | fixed(10, 3) }}{{ p.value | fixed(10, 3) }}
{% endfor %}
{% endfor %}
"""


def test_a_template_is_filled(opened):
    curves, _ = clean_curves(opened, None, Sampling(points=3))
    lines = fill(TEMPLATE, variables(opened, curves)).splitlines()
    assert lines[0] == "! made <page>.png"
    assert lines[1] == 'PUMP "head Ø210" 210.0 3'
    assert [float(v) for v in lines[2].split()] == pytest.approx([2.0, 49.992], abs=1e-3)
    assert len(lines) == 1 + 2 * 4


WRONG = [
    ("{{ nothing }}", InputError, "nothing"),
    ("one\n{% for %}", InputError, "fails"),
    ("{{ ''.__class__.__mro__ }}", InputError, "fails"),
    ("{{ curves.append(1) }}", InputError, "fails"),
    ("{% include '/etc/passwd' %}", InputError, "fails"),
    ("{% import 'os' as os %}", InputError, "fails"),
    ("{{ 1 / 0 }}", InputError, "fails"),
    ("{{ 'x' * 10**10 }}", LimitError, "memory"),
    ("{{ self.__init__.__globals__ }}", InputError, "fails"),
    ("{% for i in range(99999) %}{% for j in range(99999) %}{% endfor %}{% endfor %}", LimitError,
     "took more than"),
    ("{% for i in range(99999) %}{{ 'x' * 1000 }}{% endfor %}", LimitError, "wrote more"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "error", "word"), WRONG)
def test_a_template_that_reaches_too_far_is_stopped(text, error, word):
    with pytest.raises(error) as caught:
        fill(text, {"curves": [{"name": "a"}]}, "mine.j2", Limits(seconds=1, output=1_000_000))
    assert word in str(caught.value)
    assert "mine.j2" in str(caught.value)


def test_an_error_names_the_line_of_the_template():
    with pytest.raises(InputError) as caught:
        fill("one\ntwo {{ three }}\n", {"curves": []}, "mine.j2")
    assert caught.value.where.line == 2


def run(capsys, *arguments):
    with pytest.raises(SystemExit) as end:
        main([str(a) for a in arguments])
    said = capsys.readouterr()
    return end.value.code, said.out, said.err


@pytest.mark.parametrize(
    ("kind", "names"),
    [
        ("csv", {"pump.points.csv", "pump.points-wide.csv"}),
        ("json", {"pump.points.json"}),
        ("table", {"pump.points.txt"}),
        ("xlsx", {"pump.points.xlsx"}),
    ],
)
def test_the_command_writes_each_kind(kind, names, folder, tmp_path, capsys):
    out = tmp_path / "out"
    path = folder / "pump.curves.json"
    code, said, err = run(capsys, "write", path, "--to", kind, "--out", out, "--points", 8)
    assert (code, err) == (0, "")
    assert {p.name for p in out.iterdir()} == names
    assert "head Ø195" in said


def test_a_folder_and_a_selection(folder, tmp_path, capsys):
    out = tmp_path / "out"
    code, said, _ = run(capsys, "write", folder, "--to", "table", "--out", out,
                        "--curve", "head Ø195", "--flow-unit", "US gpm")  # fmt: skip
    assert code == 0
    assert "head Ø210" not in said
    text = (out / "pump.points.txt").read_text(encoding="utf-8")
    assert text.count("#") == 2
    assert "[gal_us]/min" in text


def test_charts_of_the_same_name_do_not_meet(made_reading, tmp_path, capsys):
    for name in "ab":
        write(made_reading(), tmp_path / name, "pump")
    out = tmp_path / "out"
    assert (
        run(capsys, "write", tmp_path / "a", tmp_path / "b", "--to", "json", "--out", out)[0] == 0
    )
    assert {p.name for p in out.iterdir()} == {"pump.points.json", "pump.2.points.json"}


@pytest.mark.parametrize(
    ("more", "code", "word"),
    [
        (["--to", "pdf"], 2, "xlsx"),
        (["--to", "template"], 2, "--template"),
        (["--template", "none.j2"], 2, "none.j2"),
        (["--head-unit", "parsec"], 2, "ft"),
        (["--curve", "other"], 2, "head Ø210"),
        (["--points", "1"], 2, "--points"),
        (["--tolerance", "3"], 2, "olerance"),
    ],
)
def test_wrong_use_says_what_is_right(more, code, word, folder, tmp_path, capsys):
    got, _, err = run(capsys, "write", folder, "--out", tmp_path / "o", *more)
    assert got == code
    assert word in err
    assert not (tmp_path / "o").exists()


@pytest.mark.parametrize(
    ("content", "code"),
    [(None, 3), ("", 3), ("[]", 2), ('{"format": "x"}', 2),
     ('{"format": "pump-curve-set", "version": 9}', 2),
     ('{"format": "pump-curve-set", "version": 1, "curves": [{"name": "a"}]}', 2)],
)  # fmt: skip
def test_a_file_that_is_no_curve_set(content, code, tmp_path, capsys):
    path = tmp_path / "x.curves.json"
    if content is not None:
        path.write_text(content)
    got, _, err = run(capsys, "write", path)
    assert got == code
    assert "x.curves.json" in err
    assert "Traceback" not in err


@pytest.mark.parametrize(
    ("spoil", "word"),
    [
        (lambda t: t.replace("pump,page", "pumpe,page"), "Needed: pump"),
        (lambda t: t.replace(",49.99192,", ",much,", 1), "line 2, key value"),
        (lambda t: t.replace(",m3/h,", ",buckets,", 1), "line 2"),
        (lambda t: t.replace(",head,", ",height,", 1), "line 2, key quantity"),
        (lambda t: t + "1,2,3\r\n", "3 cells"),
    ],
)
def test_a_spoilt_table_names_its_line(spoil, word, folder, tmp_path, capsys):
    text = (folder / "pump.curves.csv").read_text(encoding="utf-8")
    path = tmp_path / "mine.csv"
    path.write_text(spoil(text), encoding="utf-8", newline="")
    code, _, err = run(capsys, "write", path, "--out", tmp_path / "o")
    assert code == 2
    assert word in err


def test_a_table_can_be_written_again(folder, tmp_path, capsys):
    out = tmp_path / "out"
    code, said, _ = run(capsys, "write", folder / "pump.curves.csv", "--to", "table", "--out", out)
    assert code == 0
    assert "traced points" in said
    assert (out / "pump.points.txt").is_file()


def test_the_templates_of_the_readme_work(opened):
    import re
    from pathlib import Path
    from xml.etree import ElementTree

    readme = (Path(__file__).resolve().parents[2] / "README.md").read_text(encoding="utf-8")
    heads, sets = re.findall(r"```jinja\n(.*?)```", readme, re.S)
    curves, _ = clean_curves(opened, None, Sampling(points=4))
    known = variables(opened, curves)
    lines = fill(heads, known).splitlines()
    assert lines[1] == 'PUMP 1 "head Ø210" 4'
    assert len(lines) == 1 + 2 * 5
    tree = ElementTree.fromstring(fill(sets, known))
    assert [len(c) for c in tree] == [4] * 4
    assert float(tree[0][0].text) == pytest.approx(opened.fits[0].coefficients[0])
    for name in (*known, *known["curves"][0], *known["pumps"][0]):
        assert f"`{name}`" in readme, name
