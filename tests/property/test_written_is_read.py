"""What is written is what is read: curves, fits, notes."""

import tomllib
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from curvefit.notes import given_entries, notes_from
from curvefit.records import Reading
from curvefit.units import UNITS
from curvefit.write.curves_csv import curves_csv
from curvefit.write.curves_json import curves_document, json_text
from curvefit.write.notes_toml import notes_toml
from curvefit.write.outgoing import outgoing
from curvefit.write.reopen import reopen_text
from curvefit.write.reopen_csv import is_own_table, reopen_csv
from curvefit.write.svg import nice_ticks

slow = settings(deadline=None, max_examples=40, suppress_health_check=list(HealthCheck))
FLOWS = [u.code for u in UNITS if u.dimension == "flow"]
LENGTHS = ["m", "[ft_i]"]
POWERS = ["kW", "W", "[HP]"]


def again(reading, **options):
    return reopen_text(json_text(curves_document(outgoing(reading, **options))))


def close(a, b, rtol):
    assert (a is None) == (b is None)
    if a is not None:
        assert np.allclose(a, b, rtol=rtol, atol=0, equal_nan=True)


@slow
@given(flow=st.sampled_from(FLOWS), head=st.sampled_from(LENGTHS))
def test_curves_and_fits_come_back_from_any_units(made_reading, flow, head):
    reading = made_reading(quarter_turn=True)
    back = again(reading, units={"flow": flow, "head": head, "npsh": head})
    for a, b in zip(reading.curves, back.curves, strict=True):
        same = ("name", "quantity", "flow_axis", "value_axis", "pump", "label", "guessed", "by",
                "diameter_unit", "stages", "npsh_basis")  # fmt: skip
        assert [getattr(a, n) for n in same] == [getattr(b, n) for n in same]
        close(a.flow_si, b.flow_si, 1e-7)
        close(a.value_si, b.value_si, 1e-7)
        close(a.sigma_si, b.sigma_si, 1e-4)
        close(a.trace_sigma_si, b.trace_sigma_si, 1e-4)
        assert np.allclose(a.calibration_si, b.calibration_si, rtol=1e-4, atol=1e-12)
        close(a.diameter_si, b.diameter_si, 1e-8)
        assert np.array_equal(a.flags, b.flags)
    for a, b in zip(reading.fits, back.fits, strict=True):
        assert (a.name, a.family, a.degree) == (b.name, b.family, b.degree)
        assert [c.name for c in a.curves] == [c.name for c in b.curves]
        close(a.coefficients, b.coefficients, 1e-12)
        close(a.covariance, b.covariance, 1e-9)
        close(a.band.low_si, b.band.low_si, 1e-7)
        close(a.factors, b.factors, 1e-6)
        for kind, numbers in a.derived.items():
            for name, value in numbers.items():
                assert (value is None) == (b.derived[kind][name] is None)
                assert value is None or b.derived[kind][name] == pytest.approx(value, rel=1e-4)
    assert back.pumps == reading.pumps
    assert [(f.code, f.message, f.remedy) for f in back.findings] == [
        (f.code, f.message, f.remedy) for f in reading.findings
    ]


@slow
@given(flow=st.sampled_from(FLOWS), name=st.sampled_from(["a", "=b", " -c", 'd, "e"']))
def test_the_table_comes_back(made_reading, tmp_path_factory, flow, name):
    reading = made_reading()
    curve = replace(reading.curves[0], name=name)
    reading = replace(reading, curves=(curve, *reading.curves[1:]), fits=())
    path = tmp_path_factory.mktemp("table") / "c.csv"
    path.write_text(curves_csv(outgoing(reading, {"flow": flow})), encoding="utf-8", newline="")
    assert is_own_table(path)
    for a, b in zip(reading.curves, reopen_csv(path).curves, strict=True):
        assert (a.name, a.quantity, a.pump) == (b.name, b.quantity, b.pump)
        close(a.flow_si, b.flow_si, 1e-7)
        close(a.value_si, b.value_si, 1e-7)
        close(a.sigma_si, b.sigma_si, 1e-4)
        close(a.diameter_si, b.diameter_si, 1e-7)
        assert b.speed_si == pytest.approx(2900 / 60)
        assert np.array_equal(a.flags, b.flags)


def test_a_curve_that_only_its_fit_gives_comes_back(made_reading):
    reading = made_reading()
    lone = replace(reading.curves[2], name="efficiency at 210 mm", diameter_si=0.21)
    fits = (*reading.fits, replace(reading.fits[2], curves=(lone,), name="derived"))
    back = again(replace(reading, fits=fits))
    assert [c.name for c in back.curves] == [c.name for c in reading.curves]
    curve = back.fits[-1].curve
    assert (curve.name, curve.quantity, curve.unit) == (lone.name, "efficiency", "%")
    assert curve.diameter_si == pytest.approx(0.21)
    close(curve.value_si, lone.value_si, 1e-7)
    table = curves_csv(outgoing(replace(reading, fits=fits)))
    assert table.count(",efficiency at 210 mm,") == len(fits[-1].band.flow_si)


@slow
@given(st.data())
def test_labels_of_any_text_survive(made_reading, data):
    text = st.text(st.characters(codec="utf-8"), max_size=30)
    reading = made_reading(label=data.draw(text))
    reading = replace(reading, findings=())
    assert again(reading).curves[0].label == reading.curves[0].label
    notes = notes_toml(reading)
    rows = tomllib.loads(notes)["curve"]
    assert rows[0].get("label", "") == reading.curves[0].label


def power_reading(made_reading, flow, factor, n, quantity):
    base = made_reading()
    curve = base.curves[0] if quantity == "head" else base.curves[3]
    names = ("H0", "a", "n") if quantity == "head" else ("c0", "c1", "n")
    old = base.fits[0] if quantity == "head" else base.fits[3]
    fit = replace(
        old, family="power", degree=None, coefficients=None,
        parameters=dict(zip(names, (30.0, factor, n), strict=True)),
        covariance=np.array([[1e-4, 1e-5, 0], [1e-5, factor**2 * 1e-4, 1e-6], [0, 1e-6, 1e-3]]),
    )  # fmt: skip
    return replace(base, curves=(curve,), fits=(fit,))


@slow
@given(
    st.sampled_from(FLOWS), st.floats(1.2, 3.0), st.floats(1.0, 1e4),
    st.sampled_from(["head", "npsh_required"]),
)  # fmt: skip
def test_power_forms_keep_their_curve_and_covariance(made_reading, flow, n, factor, quantity):
    reading = power_reading(made_reading, flow, factor, n, quantity)
    fit, back = reading.fits[0], again(reading, units={"flow": flow}).fits[0]
    assert back.parameters == pytest.approx(fit.parameters, rel=1e-9)
    scale = np.sqrt(np.diag(fit.covariance))
    assert np.allclose(back.covariance / np.outer(scale, scale),
                       fit.covariance / np.outer(scale, scale), atol=1e-6)  # fmt: skip
    out = outgoing(reading, {"flow": flow}).fits[0]
    q = np.linspace(*fit.flow_range_si, 5)
    sign = -1.0 if quantity == "head" else 1.0
    assert np.allclose(out.at(q / out.units.flow_si), 30.0 + sign * factor * q**n)


names = st.sampled_from(["A", "B", "Ø 1", "=x", 'a"b\\'])
number = st.floats(-1e4, 1e4, allow_nan=False).map(lambda v: float(f"{v:.8g}"))
mark = st.tuples(number, number)
axis = st.fixed_dictionaries(
    {"panel": names, "side": st.sampled_from(["left", "right", "bottom", "top", "right.2"])},
    optional={
        "unit": st.sampled_from(["m", "l/s", "US gpm"]),
        "marks": st.lists(mark, min_size=2, max_size=7).map(
            lambda m: [[x, y, k] for k, (x, y) in enumerate(m)]
        ),
    },
)
curve = st.fixed_dictionaries(
    {"name": names},
    optional={
        "label": st.text(st.characters(codec="utf-8"), min_size=1).filter(str.strip),
        "drop": st.booleans(),
        "stages": st.integers(1, 9),
        "diameter": st.sampled_from(["210 mm", "8 1/4 in"]),
        "path": st.lists(mark.map(list), min_size=2, max_size=20),
    },
)


@slow
@given(
    st.lists(axis, max_size=3, unique_by=lambda a: (a["panel"], a["side"])),
    st.lists(curve, max_size=3, unique_by=lambda c: c["name"]),
)
def test_given_notes_come_back_as_they_were(made_reading, axes, curves):
    page = made_reading().page
    wanted = {t: rows for t, rows in (("axis", axes), ("curve", curves)) if rows}
    reading = Reading(page, notes=replace(notes_from(""), given=wanted))
    text = notes_toml(reading)
    assert given_entries(text) == wanted
    first = notes_from(text)
    second = notes_from(notes_toml(Reading(page, notes=first)))
    assert (first.panels, first.curves) == (
        tuple(replace(p, line=q.line, axes=tuple(
            replace(a, line=b.line) for a, b in zip(p.axes, q.axes, strict=True)))
            for p, q in zip(second.panels, first.panels, strict=True)),
        tuple(replace(c, line=d.line) for c, d in zip(second.curves, first.curves, strict=True)),
    )  # fmt: skip


@given(st.floats(-1e6, 1e6), st.floats(1e-3, 1e3), st.integers(3, 10))
def test_ticks_are_round_even_and_inside(low, share, about):
    span = share * (1 + abs(low))
    ticks = nice_ticks(low, low + span, about)
    steps = np.diff(ticks)
    assert low - 1e-6 * span <= min(ticks) <= max(ticks) <= low + span * (1 + 1e-6)
    if len(steps) > 1:
        assert np.allclose(steps, steps[0], rtol=1e-3)
    assert len(ticks) <= about + 1
