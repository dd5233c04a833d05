"""The duty points of a pump in a system, with everything an engineer asks of them."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.duty.crossing import Crossing, crossings
from curvefit.duty.draws import draw_duty, first_order_flow
from curvefit.duty.machine import Arrangement, Line, line_of_fit
from curvefit.duty.system import LossRow, System
from curvefit.errors import InputError, Location
from curvefit.records import DutyPoint, Finding, Fit, Interval
from curvefit.units import G_N, from_si, unit

__all__ = ["Duty", "duty", "minimum_speed_ratio"]

Array = NDArray[np.float64]

SEED = 20260101  #: of the Monte Carlo draws: the same input gives the same intervals
SAME = 0.1  #: first-order and Monte Carlo standard uncertainties agree within this share


@dataclass(frozen=True, slots=True)
class Duty:
    """What a duty-point check found.

    points : by rising flow; lines : by quantity, for the whole arrangement; table : losses part
    by part at the main duty; k_si : equivalent k of the losses there [m/(m³/s)²];
    shut_off_si : head at the smallest read flow [m], with that flow [m³/s].
    minimum_speed_ratio : of this speed, below which nothing is lifted.
    """

    points: tuple[DutyPoint, ...]
    system: System
    how: Arrangement
    lines: Mapping[str, Line]
    table: tuple[LossRow, ...] = ()
    k_si: float | None = None
    shut_off_si: tuple[float, float] | None = None
    minimum_speed_ratio: float | None = None
    method: str = ""
    findings: tuple[Finding, ...] = ()


def duty(
    fits: Sequence[Fit],
    system: System,
    how: Arrangement | None = None,
    *,
    draws: int = 100_000,
    lines: Sequence[Line] | None = None,
    flow_unit: str = "m3/h",
    head_unit: str = "m",
) -> Duty:
    """The duty points of the pump whose curves were fitted.

    Parameters
    ----------
    fits : one each of head, and where charted efficiency, shaft power, NPSHr, of one impeller
    system : the system curve, suction side and its uncertainties
    how : pumps in parallel and series, speed ratio
    draws : Monte Carlo draws for the 95 % intervals; 0 leaves them out
    lines : ready-made lines (another diameter of a family) instead of `fits`
    flow_unit, head_unit : UCUM codes that the findings speak in

    Raises
    ------
    InputError
        If there is no head curve.
    """
    how = how or Arrangement()
    single = {line.quantity: line for line in lines or [line_of_fit(f) for f in fits]}
    if "head" not in single and "differential_pressure" in single:
        single["head"] = _head_of_pressure(single["differential_pressure"], system)
    if "head" not in single:
        raise InputError(
            "no head curve is among the chosen curves",
            remedy="Choose a pump and diameter whose head was read (--pump, --diameter, --curve).",
        )
    _npsh_answerable(single, system)
    moved = {name: line.arranged(how) for name, line in single.items()}
    head = moved["head"]
    found = crossings(head.value, system.head, *head.range)
    say = _Words(flow_unit, head_unit)
    findings = [*_doubts(found, head, system, how, say)]
    bep = _bep_flow(moved)
    points, method = [], ""
    for crossing in found:
        point, said, method = _point(crossing, moved, system, bep, draws)
        points.append(point)
        findings += said
    main = next((c for c in found if c.stable), found[0] if found else None)
    low = head.range[0]
    shut_off = (float(head.value(np.array([low]))[0]), low)
    if main is None:
        return Duty(
            (),
            system,
            how,
            moved,
            shut_off_si=shut_off,
            minimum_speed_ratio=minimum_speed_ratio(head, system),
            findings=tuple(findings),
        )
    findings += _range_findings(points[found.index(main)], system, say)
    return Duty(
        tuple(points),
        system,
        how,
        moved,
        system.table(main.flow),
        (main.head - system.static_head) / main.flow**2 if main.flow > 0 else None,
        shut_off,
        minimum_speed_ratio(head, system),
        method,
        tuple(findings),
    )


def _npsh_answerable(lines: Mapping[str, Line], system: System) -> None:
    """Raises where the system asks for an NPSH margin that the chart cannot answer."""
    if system.operation.npsh_key is None or "npsh_required" in lines:
        return
    key, line = system.operation.npsh_key
    raise InputError(
        "the system asks for an NPSH margin, and the chosen curves hold no NPSHr",
        Location(file=system.file or None, line=line, key=key),
        "Take the key out, or choose a pump whose NPSHr was read.",
    )


def _head_of_pressure(pressure: Line, system: System) -> Line:
    weight = system.liquid.density * G_N

    def lifted(effect: Callable[[Array], Array]) -> Callable[[Array], Array]:
        return lambda flow: effect(flow) / weight

    causes = {name: lifted(effect) for name, effect in pressure.causes.items()}
    return Line("head", lifted(pressure.value), causes, pressure.range)


def _bep_flow(lines: Mapping[str, Line]) -> float | None:
    """Flow of the efficiency peak [m³/s] where the peak lies inside the read range."""
    line = lines.get("efficiency")
    if line is None:
        return None
    flow = np.linspace(*line.range, 2001)
    best = int(np.argmax(line.value(flow)))
    return float(flow[best]) if 0 < best < len(flow) - 1 else None


def _point(
    crossing: Crossing, lines: Mapping[str, Line], system: System, bep: float | None, draws: int
) -> tuple[DutyPoint, list[Finding], str]:
    at = np.array([crossing.flow])
    value = {
        name: float(line.value(at)[0])
        for name, line in lines.items()
        if line.range[0] <= crossing.flow <= line.range[1]
    }
    known = {name: lines[name] for name in value}
    value["flow"] = crossing.flow
    if system.suction is not None and system.liquid.vapour_pressure is not None:
        value["npsh_available"] = float(system.npsh_available(at)[0])
    hydraulic = system.liquid.density * G_N * crossing.flow * crossing.head
    said: list[Finding] = []
    interval = {name: Interval(v) for name, v in value.items()}
    computed = Interval(hydraulic / value["efficiency"]) if value.get("efficiency", 0) > 0 else None
    method = "no intervals asked for"
    if draws:
        drawn = draw_duty(crossing, known, system, np.random.default_rng(SEED), draws)
        interval = {name: drawn.interval(name, v) for name, v in value.items()}
        if computed is not None:
            v = drawn.values
            power = system.liquid.density * G_N * v["flow"] * v["head"] / v["efficiency"]
            low, high = np.percentile(power, [2.5, 97.5])
            computed = Interval(computed.value, float(low), float(high))
        first, spread = (
            first_order_flow(crossing, lines["head"], system),
            drawn.values["flow"].std(),
        )
        agree = abs(first - spread) <= SAME * max(spread, 1e-300)
        method = (
            f"Monte Carlo after JCGM 101, {draws:,} draws, seed {SEED}; first-order propagation "
            + ("agrees" if agree else "does not suffice here")
        )
        if drawn.outside > 0.01:
            said.append(
                Finding(
                    "warning",
                    "duty.interval-leaves-range",
                    f"In {drawn.outside:.0%} of the draws the crossing lies outside the flows "
                    "that were read; the interval rests on the equation beyond them.",
                    Location(),
                    "Read more of the curve, or state the losses more closely.",
                )
            )
    power_si = interval.get("shaft_power") or computed
    hours = system.operation.hours
    energy = power_si.value / crossing.flow if power_si and crossing.flow > 0 else None
    return (
        DutyPoint(
            interval["flow"],
            interval["head"],
            crossing.stable,
            interval.get("efficiency"),
            interval.get("shaft_power"),
            computed,
            hydraulic,
            interval.get("npsh_required"),
            interval.get("npsh_available"),
            crossing.flow / bep if bep else None,
            energy,
            power_si.value * hours * 3600.0 if power_si and hours else None,
        ),
        said,
        method,
    )


@dataclass(frozen=True, slots=True)
class _Words:
    """Flows and heads in the units that the findings speak in."""

    flow_unit: str
    head_unit: str

    def flow(self, value: float) -> str:
        return f"{from_si(value, self.flow_unit):.4g} {unit(self.flow_unit).print}"

    def head(self, value: float) -> str:
        return f"{from_si(value, self.head_unit):.4g} {unit(self.head_unit).print}"


def _doubts(
    found: Sequence[Crossing], head: Line, system: System, how: Arrangement, say: _Words
) -> list[Finding]:
    """What the crossings themselves give cause to say."""
    said = []
    if not found:
        said.append(_no_crossing(head, system, say))
    for c in found:
        if not c.stable:
            said.append(
                Finding(
                    "warning",
                    "duty.unstable",
                    f"The crossing at {say.flow(c.flow)} is unstable: there the system's "
                    "head falls below the pump's when the flow grows.",
                    remedy="The pump will not stay there; choose another pump or system.",
                )
            )
    if how.speed_ratio < 0.8 or how.speed_ratio > 1.2:
        said.append(
            Finding(
                "warning",
                "duty.far-speed",
                f"The speed ratio is {how.speed_ratio:.2f}: affinity laws hold the efficiency, "
                "which changes with speed, and NPSHr follows them near the charted speed only.",
                remedy="Ask for the curve at that speed.",
            )
        )
    return said


def _no_crossing(head: Line, system: System, say: _Words) -> Finding:
    flow = np.linspace(*head.range, 1001)
    gap = head.value(flow) - system.head(flow)
    nearest = int(np.argmin(np.abs(gap)))
    q, short = flow[nearest], gap[nearest]
    side = "above" if short > 0 else "below"
    return Finding(
        "error",
        "duty.no-crossing",
        f"Pump and system do not meet between {say.flow(flow[0])} and {say.flow(flow[-1])}, "
        f"the flows that were read. They come nearest at {say.flow(q)}, where the pump is "
        f"{say.head(abs(short))} {side} the system.",
        remedy="The pump runs out beyond its charted flow: choose a smaller one or throttle it."
        if short > 0
        else "Choose a larger diameter, a higher speed or another pump.",
    )


def _range_findings(point: DutyPoint, system: System, say: _Words) -> list[Finding]:
    """Whether the pump should run there: operating range, NPSH, power that disagrees."""
    said = []
    share, (low, high) = point.share_of_bep, system.operation.preferred
    if share is not None and not low <= share <= high:
        said.append(
            Finding(
                "warning",
                "duty.outside-preferred-range",
                f"The duty lies at {share:.0%} of the best-efficiency flow; the preferred range is "
                f"{low:.0%} to {high:.0%}.",
                remedy="Choose another diameter, speed or pump, or set operation.preferred_range.",
            )
        )
    allowed = system.operation.allowable
    if share is not None and allowed is not None and not allowed[0] <= share <= allowed[1]:
        said.append(
            Finding(
                "error",
                "duty.outside-allowable-range",
                f"The duty lies at {share:.0%} of the best-efficiency flow; the allowable range is "
                f"{allowed[0]:.0%} to {allowed[1]:.0%}.",
                remedy="The pump must not run there: choose another diameter, speed or pump.",
            )
        )
    need, have = point.npsh_required_si, point.npsh_available_si
    if need is None and have is not None:
        said.append(
            Finding(
                "info",
                "duty.npsh-not-charted",
                f"NPSH available is {say.head(have.value)}, but the chosen curves hold no NPSHr "
                "at the duty: the margin is not known.",
                remedy="Ask the maker for NPSHr at the duty.",
            )
        )
    if need is not None and have is not None:
        rule = max(
            need.value * system.operation.npsh_ratio, need.value + system.operation.npsh_margin
        )
        if have.value < rule:
            short = have.value < need.value
            said.append(
                Finding(
                    "error" if short else "warning",
                    "duty.npsh",
                    f"NPSH available is {say.head(have.value)}, NPSHr {say.head(need.value)}: "
                    + (
                        "the pump will cavitate."
                        if short
                        else f"less than the {say.head(rule)} asked."
                    ),
                    remedy="Raise the suction level, cut suction losses, or choose a lower NPSHr.",
                )
            )
    elif need is not None:
        said.append(
            Finding(
                "info",
                "duty.npsh-not-checked",
                "NPSH was not checked: the system states no suction level or vapour pressure.",
                remedy="Add [suction] level and, for other liquids, [liquid] vapour_pressure.",
            )
        )
    read, worked = point.shaft_power_si, point.computed_power_si
    if read is not None and worked is not None and _apart(read, worked):
        said.append(
            Finding(
                "warning",
                "duty.power-disagrees",
                f"Shaft power is {read.value / 1e3:.4g} kW on the power curve and "
                f"{worked.value / 1e3:.4g} kW from ρgQH/η: their intervals do not meet.",
                remedy="Check the power and efficiency axes in the overlay, and the density.",
            )
        )
    return said


def _apart(a: Interval, b: Interval) -> bool:
    if a.low is None or a.high is None or b.low is None or b.high is None:
        return abs(a.value - b.value) > 0.03 * abs(a.value)
    tolerance = 0.01 * abs(a.value)  # density and drawing: common practice, no source
    return a.low > b.high + tolerance or b.low > a.high + tolerance


def minimum_speed_ratio(head: Line, system: System) -> float | None:
    """Speed ratio below which the pump lifts nothing: √(static head / largest head of the line).

    The line is that of the arrangement at ratio 1; None where the static head is not positive.
    """
    if system.static_head <= 0:
        return None
    largest = float(head.value(np.linspace(*head.range, 501)).max())
    return float(np.sqrt(system.static_head / largest))
