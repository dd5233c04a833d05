"""How close a Reading comes to the truth of a sample chart.

Every truth curve is paired with at most one read curve (the assignment with the least total
distance). Distances are shares of the span of the printed axes, so that 0.001 means 0.1 %.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.records import BUNDLED, Curve, Reading
from sample_charts.scenes import SI

Array = NDArray[np.float64]
FAR = 0.03  # a read curve farther off than this share of the span is another curve
LENGTH = {"mm": 1e-3, "[in_i]": 0.0254}
SPEED = {"/min": 1 / 60, "Hz": 1.0}


@dataclass(frozen=True)
class Truth:
    """One true curve in SI; spans and scales of its axes, a log axis measured in decades."""

    spec: dict[str, Any]
    flow: Array
    value: Array
    flow_span: float
    value_span: float
    scales: tuple[str, str]

    def places(self, flow: Array, value: Array) -> tuple[Array, Array]:
        """Flows and values on their scales, in spans."""
        x, y = (
            np.log10(v) if scale == "log" else np.asarray(v, float)
            for v, scale in zip((flow, value), self.scales, strict=True)
        )
        return x / self.flow_span, y / self.value_span

    @property
    def name(self) -> str:
        """A name for messages."""
        label = self.spec["label"]
        return f"{self.spec['quantity']} {label}".strip()


@dataclass(frozen=True)
class Match:
    """A true curve and what was read of it; shares of the span. `curve` None: not found."""

    truth: Truth
    curve: Curve | None
    rms: float = np.inf
    covered: float = 0.0
    ends: float = np.inf
    held: float = np.nan

    @property
    def quantity(self) -> bool:
        """Whether the quantity is right."""
        return self.curve is not None and self.curve.quantity == self.truth.spec["quantity"]

    @property
    def units(self) -> bool:
        """Whether both units are right."""
        spec, curve = self.truth.spec, self.curve
        return curve is not None and (curve.flow_unit, curve.unit) == (
            spec["flow_unit"],
            spec["unit"],
        )

    @property
    def label(self) -> bool | None:
        """Whether diameter, speed or level is right; None where the chart states none."""
        spec, curve = self.truth.spec, self.curve
        asked = []
        if spec["diameter"] is not None:
            true = spec["diameter"] * LENGTH[spec["diameter_unit"]]
            asked.append((true, curve and curve.diameter_si, 0.5e-3))
        if spec["speed"] is not None:
            true = spec["speed"] * SPEED[spec["speed_unit"]]
            asked.append((true, curve and curve.speed_si, 1e-3 * true))
        if spec["level"] is not None:
            asked.append((spec["level"] * SI[spec["unit_of_level"]],
                          curve and curve.level_si, 1e-4))  # fmt: skip
        if not asked:
            return None
        return all(got is not None and abs(got - true) <= tol for true, got, tol in asked)


@dataclass(frozen=True)
class Score:
    """All of a chart: one Match a true curve, the read curves that are none, the warnings."""

    matches: tuple[Match, ...]
    false: tuple[Curve, ...]
    warnings: tuple[str, ...]

    def failures(self, rms: float, ends: float) -> list[str]:
        """What is not as asked, in words: nothing for a chart that was read as it should be."""
        said = []
        for m in self.matches:
            if m.curve is None:
                said.append(f"{m.truth.name}: not found")
                continue
            if not m.quantity:
                said.append(f"{m.truth.name}: read as {m.curve.quantity}")
            if not m.units:
                said.append(f"{m.truth.name}: in {m.curve.flow_unit}, {m.curve.unit}")
            if m.label is False:
                said.append(f"{m.truth.name}: label {m.curve.label!r}")
            if not m.rms <= rms:
                said.append(f"{m.truth.name}: rms {100 * m.rms:.3f} % > {100 * rms:g} %")
            if not m.ends <= ends:
                said.append(f"{m.truth.name}: ends {100 * m.ends:.2f} % off > {100 * ends:g} %")
        said += [f"{c.name}: no such curve" for c in self.false]
        return said


def truths(document: dict[str, Any]) -> list[Truth]:
    """The true curves of a truth document, SI."""
    found = []
    for panel in document["panels"]:
        axes = {a["side"]: a for a in panel["axes"]}
        for spec in panel["curves"]:
            along, up = axes[spec["flow_axis"]], axes[spec["axis"]]
            f, v = SI[along["unit"]], SI[up["unit"]]
            flow, value = np.array(spec["flow"]) * f, np.array(spec["value"]) * v
            inside = (value >= up["lo"] * v) & (value <= up["hi"] * v)
            inside &= (flow >= along["lo"] * f) & (flow <= along["hi"] * f)
            found.append(
                Truth(
                    {**spec, "unit_of_level": "%"},
                    flow[inside],
                    value[inside],
                    _span(along, f),
                    _span(up, v),
                    (along["scale"], up["scale"]),
                )
            )
    return found


def _span(axis: dict[str, Any], si: float) -> float:
    if axis["scale"] == "log":
        return float(np.log10(axis["hi"] / axis["lo"]))
    return float((axis["hi"] - axis["lo"]) * si)


def score(document: dict[str, Any], reading: Reading) -> Score:
    """The Score of a reading against a truth document."""
    from scipy.optimize import linear_sum_assignment

    true, read = truths(document), list(reading.curves)
    pairs = [[_compare(t, c) for c in read] for t in true]
    cost = np.array([[_cost(m) for m in row] for row in pairs]).reshape(len(true), len(read))
    taken: dict[int, int] = {}
    if cost.size:
        rows, columns = linear_sum_assignment(cost)
        taken = {i: j for i, j in zip(rows, columns, strict=True) if cost[i, j] < 1.0}
    matches = [pairs[i][taken[i]] if i in taken else Match(t, None) for i, t in enumerate(true)]
    false = [c for j, c in enumerate(read) if j not in taken.values()]
    warnings = [f"{f.code}: {f.message}" for f in reading.findings if f.severity != "info"]
    return Score(tuple(matches), tuple(false), tuple(warnings))


def _cost(m: Match) -> float:
    if m.rms > FAR or m.covered < 0.5:
        return 1.0
    return m.rms / FAR * 0.5 + (1 - m.covered) * 0.2 + 0.2 * (not m.quantity)


def _compare(truth: Truth, curve: Curve) -> Match:
    if curve.iso or truth.spec["path"]:
        return _compare_paths(truth, curve)
    x, y = truth.places(curve.flow_si, curve.value_si)
    flow, value = truth.places(truth.flow, truth.value)
    inside = (flow >= x[0] - 0.003) & (flow <= x[-1] + 0.003)
    if inside.sum() < 5:
        return Match(truth, curve)
    error = np.interp(flow[inside], x, y) - value[inside]
    alone = np.ones(len(error), bool)
    if curve.flags is not None:
        alone = np.interp(flow[inside], x, ((curve.flags & BUNDLED) > 0).astype(float)) < 0.5
    if alone.mean() < 0.3:
        alone[:] = True
    ends = max(abs(x[0] - flow[0]), abs(x[-1] - flow[-1]))
    rms = float(np.sqrt((error[alone] ** 2).mean()))
    covered = float(inside.mean())
    return Match(truth, curve, rms, covered, float(ends), _held(truth, curve, inside))


def _held(truth: Truth, curve: Curve, inside: NDArray[np.bool_]) -> float:
    """Share of the true points within value ± 1.96 standard uncertainties."""
    if curve.sigma_si is None:
        return np.nan
    flow = truth.flow[inside]
    error = np.interp(flow, curve.flow_si, curve.value_si) - truth.value[inside]
    u = np.interp(flow, curve.flow_si, curve.sigma_si)
    return float((np.abs(error) <= 1.96 * u).mean())


def _compare_paths(truth: Truth, curve: Curve) -> Match:
    """Lines that are not functions of flow: distance between polylines in span units."""
    t = _dense(np.c_[truth.places(truth.flow, truth.value)])
    c = _dense(np.c_[truth.places(curve.flow_si, curve.value_si)])
    distance = np.hypot(*(t[:, None] - c[None]).transpose(2, 0, 1))
    near, back = distance.min(1), distance.min(0)
    covered = min(float((near < 0.01).mean()), float((back < 0.01).mean()))
    if not (near < 0.01).any():
        return Match(truth, curve)
    straight = max(np.hypot(*(t[0] - c[0])), np.hypot(*(t[-1] - c[-1])))
    crossed = max(np.hypot(*(t[0] - c[-1])), np.hypot(*(t[-1] - c[0])))
    rms = float(np.sqrt((near[near < 0.01] ** 2).mean()))
    return Match(truth, curve, rms, covered, float(min(straight, crossed)))


def _dense(xy: Array, n: int = 500) -> Array:
    s = np.r_[0.0, np.cumsum(np.hypot(*np.diff(xy, axis=0).T))]
    at = np.linspace(0, s[-1], n)
    return np.c_[np.interp(at, s, xy[:, 0]), np.interp(at, s, xy[:, 1])]


def table(scores: dict[str, Score]) -> str:
    """A line a chart, for people."""
    lines = [f"{'chart':24} found  rms %   ends %  held  false  warnings"]
    for name, one in scores.items():
        got = [m for m in one.matches if m.curve is not None]
        lines.append(
            f"{name:24} {len(got):2}/{len(one.matches):<2}  "
            f"{_worst([100 * m.rms for m in got]):6.3f}  {_worst([100 * m.ends for m in got]):6.2f}"
            f"  {_mean([m.held for m in got]):5.2f}  {len(one.false):3}    {len(one.warnings)}"
        )
    return "\n".join(lines)


def _worst(values: Sequence[float]) -> float:
    return max(values, default=np.nan)


def _mean(values: Sequence[float]) -> float:
    finite = [v for v in values if np.isfinite(v)]
    return float(np.mean(finite)) if finite else np.nan
