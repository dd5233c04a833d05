"""Lines of equal efficiency → efficiency against flow on every head curve of a hill chart."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.fit.bands import spread
from curvefit.fit.choice import Choice, Settings
from curvefit.fit.family import SAME, beyond, member_key
from curvefit.fit.joint import TAUS, Joint, Line, centre, coefficients_at, fit_joint, predict
from curvefit.fit.quantiles import normal_two_sided
from curvefit.fit.said import finding
from curvefit.records import BUNDLED, Band, Curve, Finding, Fit

__all__ = ["Crossing", "crossings", "efficiency_between", "efficiency_on_heads"]

Array = NDArray[np.float64]

OWN = 0.0007  #: what an efficiency line is uncertain by itself, as a fraction of one
FEWEST = 3  #: crossings that a head curve needs for an efficiency of its own


#: deviations from the law tried while weights and degree are still sought
ROUGH = TAUS[3:6:2]


@dataclass(frozen=True, slots=True, eq=False)
class _Model:
    """The law of efficiency, the lines it was fitted to, and the runner-up degree's law."""

    joint: Joint
    lines: tuple[Line, ...]
    rival: Joint | None


def efficiency_on_heads(
    curves: Sequence[Curve], choice: Choice | None = None, settings: Settings | None = None
) -> tuple[Fit, ...]:
    """Efficiency curves, one for each head curve that lines of equal efficiency cross.

    Parameters
    ----------
    curves : of one pump; heads and `iso_efficiency` lines are used
    choice, settings : of the band

    Returns
    -------
    tuple of Fit
        Each on a curve record of quantity "efficiency" with the head curve's diameter and speed,
        whose points are the crossings. Empty where no two head curves are crossed by three lines,
        or where the heads' diameters or speeds are not known.

    Notes
    -----
    η(q) at each diameter follows one joint law with efficiency zero at zero flow, exponents fitted
    and an own deviation for each diameter (see :mod:`curvefit.fit.joint`). An error σ of a
    crossing's flow counts as η′·σ. The axes' errors shift flows and heads of all crossings
    alike; along the head curve they move the flow of a crossing, and the band holds that.
    """
    choice, settings = choice or Choice(), settings or Settings()
    used, model = _modelled(curves)
    if model is None:
        return ()
    fits = [_efficiency(h, x, model, i, choice, settings) for i, (h, x) in enumerate(used)]
    count = sum(len(x) for _, x in used)
    said = finding(
        "info",
        "fit.efficiency-from-lines",
        fits[0].curve,
        f"The efficiencies of {len(fits)} head curves come from their {count} crossings with lines "
        "of equal efficiency and one law for all; between and beyond the crossings they are as "
        "good as that law.",
    )
    fits[0] = replace(fits[0], findings=(said,))
    return tuple(fits)


def efficiency_between(
    curves: Sequence[Curve],
    diameter_si: float,
    choice: Choice | None = None,
    settings: Settings | None = None,
) -> Fit | None:
    """The efficiency at a diameter that is not drawn, from lines of equal efficiency.

    None where the lines give no efficiency, or the heads are told apart by speed. The fit's curves
    are those of :func:`efficiency_on_heads`; at a drawn diameter it is that curve's own fit.
    Beyond the drawn diameters it carries a warning.
    """
    choice, settings = choice or Choice(), settings or Settings()
    used, model = _modelled(curves)
    drawn = np.array([h.diameter_si or np.nan for h, _ in used])
    if model is None or np.isnan(drawn).any() or np.ptp(drawn) <= SAME * drawn.max():
        return None
    fits = [_efficiency(h, x, model, i, choice, settings) for i, (h, x) in enumerate(used)]
    nearest = int(np.argmin(np.abs(drawn - diameter_si)))
    if abs(drawn[nearest] - diameter_si) <= SAME * diameter_si:
        return fits[nearest]
    said: tuple[Finding, ...] = ()
    if not drawn.min() < diameter_si < drawn.max():
        said = (beyond(used[0][0], "diameter", diameter_si, drawn.min(), drawn.max()),)
    order = np.argsort(drawn)
    ends = np.array([f.flow_range_si for f in fits])[order]
    low, high = (float(np.interp(diameter_si, drawn[order], e)) for e in ends.T)
    grid = np.linspace(low, high, settings.grid)
    logs = np.array([np.log(diameter_si / drawn.max())])
    value, factors = _predicted(model, logs, grid, None)
    calibration = _calibration(used[nearest][0], grid, value)
    half = normal_two_sided(choice.confidence) * spread(factors, calibration)
    return replace(
        fits[nearest],
        name=f"efficiency family at {diameter_si * 1e3:.4g} mm",
        curves=tuple(f.curve for f in fits),
        flow_range_si=(low, high),
        band=Band(grid, value, value - half, value + half, "pointwise", choice.confidence),
        coefficients=coefficients_at(model.joint, logs),
        parameters={"own_deviation": model.joint.tau, "diameter": diameter_si},
        factors=factors,
        calibration=calibration,
        findings=said,
    )


Used = list[tuple[Curve, "list[Crossing]"]]


def _modelled(curves: Sequence[Curve]) -> tuple[Used, _Model | None]:
    """Heads with enough crossings, and the law of efficiency through them; None without one."""
    isos = [c for c in curves if c.quantity == "iso_efficiency" and c.level_si is not None]
    heads = [c for c in curves if c.quantity == "head" and c.sigma_si is not None]
    met = [(h, crossings(h, isos)) for h in heads]
    used = [(h, x) for h, x in met if len(x) >= FEWEST]
    ratios = _ratios([h for h, _ in used])
    if not isos or len(used) < 2 or ratios is None:
        return used, None
    lines = [_line(x, log) for (_, x), log in zip(used, ratios, strict=True)]
    return used, _best(lines, [x for _, x in used])


def _predicted(model: _Model, logs: Array, grid: Array, index: int | None) -> tuple[Array, Array]:
    """Efficiency and its independent causes, the runner-up degree's difference among them."""
    value, factors, _ = predict(model.joint, logs, grid, index)
    if model.rival is not None:
        other = centre(model.rival, logs, grid, index)
        factors = np.concatenate([factors, (other - value)[None]])
    return value, factors


class Crossing(tuple[float, float, float]):
    """(flow [m³/s], level, standard uncertainty of the flow [m³/s])."""

    __slots__ = ()


def crossings(head: Curve, isos: Sequence[Curve]) -> list[Crossing]:
    """Where lines of equal efficiency cross one head curve, by flow.

    Notes
    -----
    Along the line the distance to the head curve changes its sign; the place is interpolated.
    With the angle between them, the errors of both move the flow by σ / |slope of the distance|.
    """
    found = []
    for iso in isos:
        q, h = iso.flow_si, iso.value_si
        if len(q) < 2:
            continue
        inside = (q >= head.flow_si[0]) & (q <= head.flow_si[-1])
        gap = h - np.interp(q, head.flow_si, head.value_si)
        for k in np.flatnonzero((gap[:-1] * gap[1:] <= 0) & inside[:-1] & inside[1:]):
            # a line that runs along the curve crosses it over a stretch: take its slope there
            around = slice(max(0, k - 4), k + 6)
            step = gap[around][-1] - gap[around][0]
            if gap[k] == gap[k + 1] or step == 0:
                continue
            share = gap[k] / (gap[k] - gap[k + 1])
            flow = float(q[k] + share * (q[k + 1] - q[k]))
            run = float(q[around][-1] - q[around][0])
            error = float(np.hypot(_u(head, flow, False), _u(iso, k, True)))
            across = abs(run / step) * error  # how far along the flow the errors carry it
            found.append(Crossing((flow, float(iso.level_si or 0.0), across)))
    found.sort()
    return _merged(found)


def _merged(found: list[Crossing]) -> list[Crossing]:
    """The same level met twice at almost one flow (a line that touches) becomes one crossing."""
    out: list[Crossing] = []
    for x in found:
        if out and x[1] == out[-1][1] and abs(x[0] - out[-1][0]) < 3 * (x[2] + out[-1][2]):
            mean = (x[0] + out[-1][0]) / 2
            spread_ = max(abs(x[0] - out[-1][0]) / 2, x[2], out[-1][2])
            out[-1] = Crossing((mean, x[1], spread_))
        else:
            out.append(x)
    return out


def _u(curve: Curve, at: float | np.intp, by_index: bool) -> float:
    """Trace uncertainty of the head of a curve at a flow, or at a point of an iso line."""
    u = curve.trace_sigma_si if curve.trace_sigma_si is not None else curve.sigma_si
    if u is None:
        return 0.0
    if by_index:
        return float(u[int(at)])
    return float(np.interp(at, curve.flow_si, u))


def _ratios(heads: Sequence[Curve]) -> list[Array] | None:
    """Log ratio of each head's diameter (or speed) to the largest; None where not known."""
    for i in (0, 1):
        values = [member_key(h)[i] for h in heads]
        known = [v for v in values if v]
        if known and len(known) == len(values) and np.ptp(known) > SAME * max(known):
            return [np.array([np.log(v / max(known))]) for v in known]
    return None


def _line(met: Sequence[Crossing], log: Array) -> Line:
    """Crossings and the origin; all equally weighted at first."""
    flow = np.array([0.0, *(x[0] for x in met)])
    level = np.array([0.0, *(x[1] for x in met)])
    return Line(log, flow, level, np.eye(len(flow)) / 0.003, np.zeros((len(flow), 0)))


def _weighted(joint: Joint, line: Line, index: int, met: Sequence[Crossing]) -> Line:
    step = 1e-4 * float(line.flow.max())
    up = centre(joint, line.logs, line.flow + step, index)
    down = centre(joint, line.logs, line.flow - step, index)
    slope = (up - down) / (2 * step)
    u = np.hypot(slope * np.array([0.0, *(x[2] for x in met)]), OWN)
    return replace(line, whitener=np.diag(1 / u))


def _best(lines: Sequence[Line], met: Sequence[Sequence[Crossing]]) -> _Model:
    """The degree that predicts best, its errors widened where its own residuals are larger."""
    points = sum(len(x) for x in met)
    found: list[tuple[float, Joint, Sequence[Line], float]] = []
    for degree in (4, 5, 6):
        terms = degree + 2 + len(lines)  # the origin pins one; deviations count about half
        if points < terms + 3 and found:
            break
        joint, weighted = _fit(lines, degree, ROUGH), lines
        for _ in range(2):  # weights need the slope, which needs the fit
            weighted = [_weighted(joint, line, i, met[i]) for i, line in enumerate(lines)]
            joint = _fit(weighted, degree, ROUGH)
        squares = 0.0
        for i, line in enumerate(weighted):
            miss = (centre(joint, line.logs, line.flow, i) - line.value)[1:]
            squares += float(np.sum((miss * np.diag(line.whitener)[1:]) ** 2))
        criterion = points * np.log(squares / points + 0.1) + 2 * terms
        criterion += 2 * terms * (terms + 1) / max(points - terms - 1, 1)
        scale = float(np.sqrt(max(1.0, squares / max(points - terms, 1))))
        found.append((criterion, joint, weighted, scale))
    found.sort(key=lambda x: x[0])
    _, joint, weighted, scale = found[0]
    wider = [replace(x, whitener=x.whitener / scale) for x in weighted]
    return _Model(_fit(wider, joint.degree), tuple(wider), found[1][1] if found[1:] else None)


def _fit(lines: Sequence[Line], degree: int, taus: Array = TAUS) -> Joint:
    return fit_joint(lines, degree, (np.array([1.1]), np.array([0.1])), True, taus)


def _efficiency(
    head: Curve,
    met: Sequence[Crossing],
    model: _Model,
    index: int,
    choice: Choice,
    settings: Settings,
) -> Fit:
    joint, line = model.joint, model.lines[index]
    low, high = max(0.0, float(head.flow_si[0])), float(head.flow_si[-1])
    # beyond the crossings nothing on the chart tells the efficiency, but for the origin
    high = min(high, float(line.flow.max()) + 0.1 * float(np.ptp(line.flow)))
    grid = np.linspace(low, high, settings.grid)
    value, factors = _predicted(model, line.logs, grid, index)
    calibration = _calibration(head, grid, value)
    half = normal_two_sided(choice.confidence) * spread(factors, calibration)
    residual = centre(joint, line.logs, line.flow, index) - line.value
    flow = np.array([x[0] for x in met])
    keep = np.r_[True, np.diff(flow) > 0]
    label = head.label or head.name
    name = f"efficiency {label}" if label != head.name else f"efficiency on {head.name}"
    at_points = spread(np.array([np.interp(flow[keep], grid, r) for r in factors]))
    curve = Curve(
        name,
        "efficiency",
        flow[keep],
        np.array([x[1] for x in met])[keep],
        head.flow_unit,
        "%",
        panel=head.panel,
        flow_axis=head.flow_axis,
        value_axis=head.value_axis,
        pump=head.pump,
        sigma_si=at_points,
        flags=_flags(head, flow[keep]),
        diameter_si=head.diameter_si,
        diameter_unit=head.diameter_unit,
        speed_si=head.speed_si,
        speed_unit=head.speed_unit,
        speed_ratio=head.speed_ratio,
        stages=head.stages,
        label=head.label,
        guessed=head.guessed,
        by=head.by,
    )
    return Fit(
        name,
        (curve,),
        "affinity",
        joint.degree,
        (low, high),
        Band(grid, value, value - half, value + half, "pointwise", choice.confidence),
        coefficients_at(joint, line.logs, index),
        {"own_deviation": joint.tau},
        None,
        factors,
        calibration,
        float(np.sqrt(np.mean(residual**2))),
        float(len(met)),
        reason="one law of efficiency for all diameters, through the crossings",
    )


def _calibration(head: Curve, grid: Array, value: Array) -> Array | None:
    """What the axes' errors do to the efficiency at a given flow.

    A line of equal efficiency and a head curve move together with the axes, so that a crossing
    keeps its place on the page: its flow moves by the error of the flow axis. The head axis has
    no effect.
    """
    if head.calibration_si is None:
        return None
    slope_head = np.gradient(head.value_si, head.flow_si)
    steep = np.abs(slope_head) > 0.05 * float(np.ptp(head.value_si)) / float(np.ptp(head.flow_si))
    if steep.sum() < 2:
        return None
    slope = np.gradient(value, grid)
    rows = np.zeros((4, len(grid)))
    for i in (0, 1):
        moved = -head.calibration_si[steep, i] / slope_head[steep]
        line = np.polynomial.polynomial.polyfit(head.flow_si[steep], moved, 1)
        rows[i] = -slope * np.polynomial.polynomial.polyval(grid, line)
    return rows


def _flags(head: Curve, flow: Array) -> NDArray[np.uint8]:
    if head.flags is None:
        return np.zeros(len(flow), np.uint8)
    near = np.clip(np.searchsorted(head.flow_si, flow), 0, len(head.flags) - 1)
    return (head.flags[near] & BUNDLED).astype(np.uint8)
