"""Which value axis each line of a panel belongs to, and with it its quantity.

Every line is held against every axis: a label that names another quantity, a colour that is the
colour of another axis' title, a shape that no such pump has, a value out of all range - each has
a cost. The cheapest assignment of the whole page wins, in which no axis stands without a line
and power, head and efficiency obey η = ρ g Q H / P; its margin over the next says whether it is
a guess.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.identify.ink import same_ink, word_ink
from curvefit.identify.placing import Label, spot
from curvefit.identify.shapes import misfit, shape
from curvefit.identify.values import axis_factor
from curvefit.records import Axis, Panel, Trace
from curvefit.units import G_N, RHO_WATER, unit

__all__ = ["Choice", "Settings", "choose", "usable_axes"]

Array = NDArray[np.float64]
_Pick = tuple[int, ...]

_BY_DIMENSION = {
    "length": ("head", "npsh_required"),
    "ratio": ("efficiency",),
    "power": ("shaft_power",),
    "pressure": ("differential_pressure",),
}
_GROUPS = (
    ("head", "differential_pressure"),
    ("efficiency", "overall_efficiency"),
    ("shaft_power", "input_power"),
    ("npsh_required",),
)


@dataclass(frozen=True, slots=True)
class Settings:
    """Costs, in the unit of which a misfit of 3 is nearly impossible.

    label : a label at the line names another quantity; ink : the line has the colour of another
    axis' title; idle : an axis has no line; unread : the axis does not say its quantity;
    physics : power, head and efficiency disagree by a factor of 1.35 or more;
    margin : cost that the second-best must have more, else the choice is a guess.
    """

    label: float = 4.0
    ink: float = 2.0
    idle: float = 2.0
    unread: float = 0.5
    physics: float = 3.0
    margin: float = 0.8
    reach: float = 2.0


@dataclass(frozen=True, slots=True, eq=False)
class Choice:
    """One line's value axis and quantity, and how much dearer the next best was.

    named : the quantity that a label at the line names; denied : the same, where it is none that
    any line of the panel was given.
    """

    trace: Trace
    axis: Axis
    quantity: str
    margin: float
    named: str | None
    denied: str | None = None


def usable_axes(panel: Panel) -> tuple[tuple[Axis, ...], tuple[Axis, ...]]:
    """Flow axes (the bottom one first) and value axes of a panel."""
    flow = [a for a in panel.axes if a.along_flow]
    flow.sort(key=lambda a: (a.side != "bottom", a.unit is None))
    return tuple(flow), tuple(a for a in panel.axes if not a.along_flow)


def choose(
    panels: Sequence[Panel],
    lines: Sequence[Sequence[Trace]],
    labels: Sequence[Sequence[Label]],
    settings: Settings | None = None,
) -> list[Choice]:
    """The axis and quantity of every line that is a function of flow.

    Parameters
    ----------
    panels : the panels of a page; lines, labels : of each panel.
    """
    settings = settings or Settings()
    tables = [_Table(p, t, w, settings) for p, t, w in zip(panels, lines, labels, strict=True)]
    tables = [t for t in tables if t.lines and t.options]
    if not tables:
        return []
    best, cost = _consistent(tables, settings)
    margins = _margins(tables, best, cost, settings)
    return [
        Choice(trace, *table.options[j], float(margin), named, table.denied(named, pick))
        for table, pick, row in zip(tables, best, margins, strict=True)
        for trace, j, margin, named in zip(table.lines, pick, row, table.named, strict=True)
    ]


class _Table:
    """Cost of every line of one panel on every (axis, quantity) that its axes allow."""

    def __init__(
        self, panel: Panel, lines: Sequence[Trace], labels: Sequence[Label], settings: Settings
    ) -> None:
        self.lines, self.settings = list(lines), settings
        flows, axes = usable_axes(panel)
        self.axes = _distinct(axes)
        self.options = [(a, q) for a in self.axes for q in _quantities(a)] if flows else []
        self.claims = _claims(lines, labels, settings)
        self.named = [_named(i, self.claims) for i in range(len(self.lines))]
        self.points = [
            [_points(t, flows[0], a) for a, _ in self.options] for t in lines if self.options
        ]
        inks = [_title_ink(panel, a) for a, _ in self.options]
        self.cost = np.array(
            [
                [self._cost(i, j, inks) for j in range(len(self.options))]
                for i in range(len(self.lines))
            ]
        ).reshape(len(self.lines), len(self.options))
        self.ranked = self._ranked() if self.lines and self.options else []

    def _cost(self, i: int, j: int, inks: list[tuple[float, float, float] | None]) -> float:
        axis, quantity = self.options[j]
        flow, value = self.points[i][j]
        cost = misfit(shape(flow, value), quantity)
        cost += self.settings.unread * (axis.quantity is None)
        ink = inks[j]
        if ink is not None and any(k is not None and not same_ink(k, ink) for k in inks):
            own = same_ink(self.lines[i].colour, ink)
            other = any(
                k is not None and same_ink(self.lines[i].colour, k) and not same_ink(k, ink)
                for k in inks
            )
            cost += self.settings.ink * (other and not own)
        return cost

    def denied(self, named: str | None, pick: _Pick) -> str | None:
        """The quantity that a label names, if no line of the panel was given it."""
        held = any(named is not None and _alike(self.options[j][1], named) for j in pick)
        return None if held else named

    def differs(self, a: int, b: int) -> bool:
        return self.options[a][0] is not self.options[b][0] or not _alike(
            self.options[a][1], self.options[b][1]
        )

    def _ranked(self) -> list[tuple[float, tuple[int, ...]]]:
        """Assignments of all lines, cheapest first: all of them, or all near the cheapest."""
        n, m = self.cost.shape
        if m**n <= 5000:
            every: Iterable[tuple[int, ...]] = itertools.product(range(m), repeat=n)
        else:
            first = self.cost.argmin(1)
            every = {
                tuple(int(k) for k in np.where(np.isin(np.arange(n), which), j, first))
                for j in range(m)
                for size in range(3)
                for which in itertools.combinations(range(n), size)
            }
        scored = [(self._total(a), a) for a in every]
        return sorted(scored, key=lambda s: (round(s[0], 9), s[1]))

    def _total(self, assignment: tuple[int, ...]) -> float:
        cost = float(self.cost[np.arange(len(assignment)), assignment].sum())
        used = {self.options[j][0].name for j in assignment}
        cost += self.settings.idle * (len({a.name for a in self.axes}) - len(used))
        for claim in self.claims:
            cost += claim.cost(
                [_alike(self.options[j][1], claim.quantity) for j in assignment], self.settings
            )
        for axis in self.axes:  # one axis holds one quantity
            held = {self.options[j][1] for j in assignment if self.options[j][0] is axis}
            cost += 3.0 * max(len(held) - 1, 0)
        return cost


def _distinct(axes: Sequence[Axis]) -> list[Axis]:
    """Value axes without those that show the quantity of another one in a second unit."""
    kept: list[Axis] = []
    for axis in axes:
        if axis.quantity is None or all(axis.quantity != k.quantity for k in kept):
            kept.append(axis)
    return kept


def _quantities(axis: Axis) -> tuple[str, ...]:
    if axis.quantity is not None and axis.quantity != "flow":
        return (axis.quantity,)
    if axis.unit is not None:
        return _BY_DIMENSION.get(unit(axis.unit).dimension, ())
    return ("head", "efficiency", "shaft_power", "npsh_required")


def _alike(a: str, b: str) -> bool:
    return a == b or any(a in g and b in g for g in _GROUPS)


@dataclass(frozen=True, slots=True)
class _Claim:
    """A label that names a quantity, and how much further each line is than the nearest one."""

    quantity: str
    behind: tuple[float, ...]
    bent: float

    def cost(self, has: Sequence[bool], settings: Settings) -> float:
        """What it costs that lines have this quantity or not: one near the label must."""
        near = min((b for b, h in zip(self.behind, has, strict=True) if h), default=np.inf)
        return float(min(1.5 * near, settings.label) * (1.0 - self.bent))


def _claims(
    lines: Sequence[Trace], labels: Sequence[Label], settings: Settings
) -> tuple[_Claim, ...]:
    found = []
    for label in labels:
        if label.masked or not lines or _beside(label, lines[0].panel):
            continue
        gaps = np.array([spot(label, t).near for t in lines])
        if gaps.min() > settings.reach:
            continue
        behind = tuple(float(g) for g in gaps - gaps.min())
        for m in label.means("quantity"):
            if m.quantity is not None:
                found.append(_Claim(m.quantity, behind, m.cost))
    return tuple(found)


def _beside(label: Label, panel: Panel) -> bool:
    """Whether a text stands where a title of an axis does, not at a line."""
    width, height = panel.warp.size
    x, y = label.centre
    right = x > width and any(a.side == "right" for a in panel.axes)
    return bool(x < 0 or y < 0 or y > height or right)


def _named(i: int, claims: Sequence[_Claim]) -> str | None:
    """The quantity that a label nearest to this line names."""
    return next((c.quantity for c in claims if c.behind[i] < 0.05), None)


def _points(trace: Trace, flow_axis: Axis, value_axis: Axis) -> tuple[Array, Array]:
    width, height = trace.panel.warp.size
    flat = trace.flat[:: max(len(trace.flat) // 60, 1)]
    return (
        flow_axis.value(flat[:, 0] / width) * axis_factor(flow_axis),
        value_axis.value(1 - flat[:, 1] / height) * axis_factor(value_axis),
    )


def _title_ink(panel: Panel, axis: Axis) -> tuple[float, float, float] | None:
    word = next(
        (w for w in panel.words if axis.title and w.text.strip() == axis.title.strip()), None
    )
    return word_ink(panel.page, word) if word is not None else None


def _consistent(tables: Sequence[_Table], settings: Settings) -> tuple[list[_Pick], float]:
    """The cheapest assignment of each panel such that the page as a whole obeys the physics."""
    short = [t.ranked[:6] for t in tables]
    best_cost, best = np.inf, [r[0][1] for r in short]
    for combination in itertools.islice(itertools.product(*short), 3000):
        cost = sum(c for c, _ in combination)
        if cost >= best_cost:
            continue
        cost += settings.physics * _disagreement(tables, [a for _, a in combination])
        if cost < best_cost - 1e-9:
            best_cost, best = cost, [a for _, a in combination]
    return best, best_cost


def _margins(
    tables: Sequence[_Table], best: Sequence[_Pick], best_cost: float, settings: Settings
) -> list[list[float]]:
    """How much dearer the page becomes for each line if it is made to be something else."""
    own = [next(c for c, a in t.ranked if a == p) for t, p in zip(tables, best, strict=True)]
    found = []
    for k, table in enumerate(tables):
        row = []
        for i in range(len(table.lines)):
            other = [(c, a) for c, a in table.ranked if table.differs(a[i], best[k][i])][:4]
            costs = [
                sum(own) - own[k] + c
                + settings.physics * _disagreement(tables, [*best[:k], a, *best[k + 1 :]])
                for c, a in other
            ]  # fmt: skip
            row.append(min(costs, default=np.inf) - best_cost)
        found.append(row)
    return found


def _disagreement(tables: Sequence[_Table], picks: Sequence[_Pick]) -> float:
    """0 where η = ρ g Q H / P holds among the lines, 1 where it fails by a factor of 1.35."""
    found: dict[str, list[tuple[Array, Array]]] = {}
    for table, pick in zip(tables, picks, strict=True):
        for i, j in enumerate(pick):
            found.setdefault(table.options[j][1], []).append(table.points[i][j])
    heads, powers = found.get("head", []), found.get("shaft_power", [])
    effs = found.get("efficiency", [])
    if not (heads and powers and effs) or len({len(heads), len(powers), len(effs)}) > 1:
        return 0.0
    ordered = [sorted(s, key=lambda p: float(p[0][-1])) for s in (heads, powers, effs)]
    errors = [
        e for h, p, n in zip(*ordered, strict=True) if (e := _power_error(h, p, n)) is not None
    ]
    return min(float(np.median(errors)) / np.log(1.35), 1.0) if errors else 0.0


def _power_error(
    head: tuple[Array, Array], power: tuple[Array, Array], eff: tuple[Array, Array]
) -> float | None:
    low = max(c[0].min() for c in (head, power, eff))
    high = min(c[0].max() for c in (head, power, eff))
    if high <= low:
        return None
    q = np.linspace(low + 0.3 * (high - low), high, 15)
    h, p, n = (np.interp(q, c[0], c[1]) for c in (head, power, eff))
    ratio = n * p / np.maximum(RHO_WATER * G_N * q * h, 1e-12)
    if (ratio <= 0).any():
        return float(np.log(1.35))
    return float(np.median(np.abs(np.log(ratio))))


def with_quantity(axis: Axis, quantity: str) -> Axis:
    """The axis with the quantity that its lines turned out to have."""
    return axis if axis.quantity == quantity else replace(axis, quantity=quantity, guessed=True)
