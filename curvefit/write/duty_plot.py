"""The plot of a duty point: pump curve and system curve with their bands, and where they meet."""

from __future__ import annotations

from collections.abc import Mapping
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from curvefit.acceptance import GRADES
from curvefit.units import from_si, unit
from curvefit.write.svg import Frame

if TYPE_CHECKING:
    from curvefit.records import DutyPoint

__all__ = ["duty_plot"]

Array = NDArray[np.float64]
Z95 = 1.959963984540054

# black and white first: solid pump, dashed system, so that a printed copy can be read
_STYLE = (
    "text{font:12px sans-serif;fill:#222}path,rect{fill:none;stroke:#222}"
    ".grid{stroke:#ddd}.box{stroke:#555}.band{fill:#8886;stroke:none}"
    ".pump{stroke-width:2}.system{stroke-width:2;stroke-dasharray:7 4}"
    ".duty{stroke-width:1.5;fill:#fff8}.limit{stroke:#888;stroke-dasharray:2 3}"
    ".grade{stroke-width:1.2}svg{background:#fff}"
)


def duty_plot(result: Any, units: Mapping[str, str]) -> str:
    """The SVG of a Duty.

    Parameters
    ----------
    result : the Duty
    units : UCUM codes by "flow" and "head"

    Notes
    -----
    Bands are ±1.96 standard uncertainties: of the pump by all causes of its reading, of the
    system by the stated uncertainties. The rectangle about a duty spans its 95 % intervals; the
    thin cross is the acceptance tolerance of the grade, where one is asked for.
    """
    pump, system = result.lines["head"], result.system
    flow_si = np.linspace(0.0, pump.range[1] * 1.05, 160)
    own = flow_si[(flow_si >= pump.range[0]) & (flow_si <= pump.range[1])]

    def q(value: Array) -> Array:
        return np.asarray(from_si(value, units["flow"]))

    def h(value: Array) -> Array:
        return np.asarray(from_si(value, units["head"]))

    head, u = pump.value(own), Z95 * pump.standard_uncertainty(own)
    asked = system.head(flow_si)
    doubt = Z95 * np.hypot(system.u_losses * system.losses(flow_si), system.u_static)
    top = 1.08 * max(float(h(head).max()), float(h(np.array([system.static_head]))[0]), 1e-9)
    frame = Frame((0.0, float(q(flow_si)[-1])), (min(0.0, float(h(asked).min())), top), 720, 440)
    shown = h(asked) <= top
    parts = [
        frame.axes(f"Flow [{unit(units['flow']).print}]", f"Head [{unit(units['head']).print}]"),
        frame.band(q(own), h(head - u), h(head + u)),
        frame.band(
            q(flow_si)[shown], h(asked - doubt)[shown], np.minimum(h(asked + doubt)[shown], top)
        ),
        frame.line(q(own), h(head), "pump"),
        frame.line(q(flow_si)[shown], h(asked)[shown], "system"),
    ]
    for point in result.points:
        parts += [_limits(frame, point, system, q), _region(frame, point, q, h)]
        if system.operation.grade:
            parts.append(_cross(frame, point, system.operation.grade, q, h))
    parts.append(_legend(frame, bool(system.operation.grade)))
    words = ", ".join(f"{q(np.array([p.flow_si.value]))[0]:.4g}" for p in result.points) or "none"
    svg = frame.whole(parts, f"Pump curve and system curve; duty flow: {words}")
    return svg.replace(">", f"><style>{_STYLE}</style>", 1)


def _limits(frame: Frame, point: DutyPoint, system: Any, q: Any) -> str:
    """The ends of the preferred operating range, where the best-efficiency flow is known."""
    if not point.share_of_bep:
        return ""
    best = point.flow_si.value / point.share_of_bep
    lines = []
    for share in system.operation.preferred:
        at = float(q(np.array([best * share]))[0])
        if frame.x[0] <= at <= frame.x[1]:
            lines.append(frame.line(np.array([at, at]), np.array(frame.y), "limit"))
    return "".join(lines)


def _region(frame: Frame, point: DutyPoint, q: Any, h: Any) -> str:
    """A small circle at the duty and the rectangle of its 95 % intervals."""
    ((x, y),) = frame.at(q(np.array([point.flow_si.value])), h(np.array([point.head_si.value])))
    circle = f'<circle class="duty" cx="{x:.1f}" cy="{y:.1f}" r="5" stroke="#222"/>'
    ends = (point.flow_si.low, point.flow_si.high, point.head_si.low, point.head_si.high)
    if any(e is None for e in ends):
        return circle
    corners = frame.at(q(np.array(ends[:2], float)), h(np.array(ends[2:], float)))
    (x0, y0), (x1, y1) = corners
    return (
        f'<rect class="duty" x="{min(x0, x1):.1f}" y="{min(y0, y1):.1f}" '
        f'width="{max(abs(x1 - x0), 0.5):.1f}" height="{max(abs(y1 - y0), 0.5):.1f}"/>{circle}'
    )


def _cross(frame: Frame, point: DutyPoint, grade: str, q: Any, h: Any) -> str:
    """The tolerance cross of an acceptance grade about the duty."""
    tolerance, flow, head = GRADES[grade], point.flow_si.value, point.head_si.value
    across = q(np.array([flow * (1 + t) for t in tolerance.flow]))
    up = h(np.array([head * (1 + t) for t in tolerance.head]))
    return frame.line(across, h(np.array([head, head])), "grade") + frame.line(
        q(np.array([flow, flow])), up, "grade"
    )


def _legend(frame: Frame, graded: bool) -> str:
    rows = [("pump", "pump, with 95 % band"), ("system", "system, with its stated doubt")]
    rows += [("limit", "preferred range")] + ([("grade", "acceptance tolerance")] if graded else [])
    x, y = frame.left + 14, frame.height - frame.bottom - 14 * len(rows) - 4
    parts = []
    for i, (kind, text) in enumerate(rows):
        at = y + 14 * i
        parts.append(f'<path class="{kind}" d="M{x} {at:.0f}h26"/>')
        parts.append(f'<text x="{x + 33}" y="{at + 4:.0f}">{escape(text)}</text>')
    return "".join(parts)
