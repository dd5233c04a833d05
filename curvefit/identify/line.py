"""A line on its way to becoming a curve."""

from __future__ import annotations

from dataclasses import dataclass, field

from curvefit.identify.values import Values
from curvefit.records import Axis, Finding, Panel, Trace

__all__ = ["Line", "Mark"]

Mark = tuple[float | None, float | None, float | None, int | None]


@dataclass(slots=True, eq=False)
class Line:
    """One trace and what has been found out about it so far; None where nothing is known.

    values : against `value_axis` and `flow_axis`, set with them.
    label_cost : how far the text of the label was bent, as in :class:`wording.Meaning`.
    doubts : names of fields that are a guess; given : names of fields that the notes set.
    """

    trace: Trace
    panel: Panel
    flow_axis: Axis
    value_axis: Axis
    quantity: str
    values: Values
    iso: bool = False
    diameter: float | None = None
    diameter_unit: str = "mm"
    speed: float | None = None
    speed_unit: str = "/min"
    speed_ratio: float | None = None
    stages: int | None = None
    level: float | None = None
    level_unit: str = "%"
    label: str = ""
    label_cost: float = 0.0
    pump: str = "1"
    npsh_basis: str = "not stated"
    doubts: set[str] = field(default_factory=set)
    given: set[str] = field(default_factory=set)
    findings: list[Finding] = field(default_factory=list)

    @property
    def mark(self) -> Mark:
        """What tells the line from its family: diameter, speed, share of speed, stages."""
        return self.diameter, self.speed, self.speed_ratio, self.stages

    @property
    def marked(self) -> bool:
        """Whether any of it is known."""
        return any(m is not None for m in self.mark)
