"""Lines of equal efficiency, power or NPSH: which traces they are, and the level of each."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.identify.ink import same_ink
from curvefit.identify.look import at_ends
from curvefit.identify.placing import Label, spot, text_height
from curvefit.identify.series import settle
from curvefit.identify.wording import Meaning
from curvefit.records import Panel, Trace

__all__ = ["Level", "Settings", "iso_lines", "levels"]

Array = NDArray[np.float64]

_UNIT = {"percent": "%", "power": "kW", "length": "m"}
_QUANTITY = {"percent": "iso_efficiency", "power": "iso_shaft_power", "length": "iso_npsh_required"}


@dataclass(frozen=True, slots=True)
class Settings:
    """reach : a label further from a line (heights of its text) is not its label."""

    reach: float = 2.5
    missing: float = 3.0


@dataclass(frozen=True, slots=True, eq=False)
class Level:
    """What an iso line is: its quantity, level (SI) and label; level None where unreadable.

    bent : the level is not what the text says, but what fits between its neighbours.
    """

    quantity: str
    value: float | None
    unit: str
    label: Label | None
    bent: bool = False


def iso_lines(panel: Panel, traces: Sequence[Trace], labels: Sequence[Label]) -> list[Trace]:
    """The traces of a panel that are lines of an equal quantity, not functions of flow.

    Notes
    -----
    A trace that is not single-valued in flow is one. Lines of a family do not cross each other,
    and neither do lines of equal efficiency: where lines cross, they part into two sets, and the
    set that falls like heads over more of the box is the family. The other is taken as iso lines
    if a level ("70 %", "15 kW") is printed at one of them, or if they are several and look or
    run otherwise. None of it holds where the panel has no axis for the head, and lines of a panel
    with two quantities cross for other reasons.
    """
    quantities = {a.quantity for a in panel.axes if not a.along_flow}
    if quantities and not quantities & {"head", "differential_pressure", None}:
        return []
    marked = [w for w in labels if any(m.plain and m.kind in _QUANTITY for m in w.meanings)]
    found = [t for t in traces if t.path]
    if len(quantities) > 1 and not _levelled(found, marked):
        return []
    if len(quantities) == 1:
        for one, other in _parted([t for t in traces if not t.path]):
            iso, heads = (one, other) if _head_like(one) < _head_like(other) else (other, one)
            levelled = _levelled(iso, marked)
            unlike = all(_other_style(t, h) for t in iso for h in heads)
            if levelled or (len(iso) > 1 and (unlike or _head_like(iso) < 0.6 * _head_like(heads))):
                found += iso
        found += _lone_levels(traces, found, labels)
    return [t for t in traces if any(t is f for f in found)]


def _levelled(traces: Sequence[Trace], marked: Sequence[Label]) -> bool:
    return any(_near(w, t) < Settings().reach for w in marked for t in traces)


def _lone_levels(
    traces: Sequence[Trace], isos: Sequence[Trace], labels: Sequence[Label]
) -> list[Trace]:
    """Lines that cross no other, yet have a level at an end and another look than most lines."""
    rest = [t for t in traces if not any(t is i for i in isos)]
    wide = float(np.median([np.ptp(t.flat[:, 0]) for t in rest])) if rest else 0.0
    found = []
    for trace in rest:
        others = [t for t in rest if t is not trace]
        if not others:
            continue
        kin = bool(isos) and not any(_other_style(trace, i) for i in isos)
        unlike = sum(_other_style(trace, t) for t in others) > 0.6 * len(others)
        short = float(np.ptp(trace.flat[:, 0])) < 0.6 * wide
        marked = any(
            _near(w, trace) < 1.2
            for w in labels
            if any(m.plain and m.kind in _QUANTITY for m in w.meanings)
        )
        falls = trace.flat[-1, 1] > trace.flat[0, 1]
        arc = short and any(_between(trace, t) for t in others)
        if falls and not short:  # as heads do
            continue
        if (arc and (marked or isos)) or (kin and unlike) or (marked and (unlike or short)):
            found.append(trace)
    return found


def _between(trace: Trace, other: Trace) -> bool:
    """Whether a line starts and ends on another one, as an arc of equal efficiency does."""
    x, y = trace.flat[[0, -1]].T
    if x[0] < other.flat[0, 0] or x[1] > other.flat[-1, 0]:
        return False
    return bool((np.abs(y - np.interp(x, *other.flat.T)) < 8.0).all())


def _parted(traces: Sequence[Trace]) -> list[tuple[list[Trace], list[Trace]]]:
    """Lines that cross, parted so that (as far as can be) only lines of different sets cross."""
    crossing = [[a is not b and _cross(a, b) for b in traces] for a in traces]
    side: dict[int, int] = {}
    parts = []
    for start in range(len(traces)):
        if start in side or not any(crossing[start]):
            continue
        side[start] = 0
        queue, group = [start], [start]
        while queue:
            i = queue.pop(0)
            for j, meets in enumerate(crossing[i]):
                if meets and j not in side:
                    side[j] = 1 - side[i]
                    queue.append(j)
                    group.append(j)
        parts.append(tuple([traces[i] for i in group if side[i] == s] for s in (0, 1)))
    return [(a, b) for a, b in parts]


def _head_like(traces: Sequence[Trace]) -> float:
    """How much of the width the lines of a set cover, less where they rise."""
    across = [float(np.ptp(t.flat[:, 0])) / t.panel.warp.size[0] for t in traces]
    falls = [float(t.flat[-1, 1] > t.flat[0, 1]) for t in traces]
    level = [1.0 - min(float(np.ptp(t.flat[:, 1]) / t.panel.warp.size[1]), 1.0) for t in traces]
    return float(np.mean(across) + 0.5 * np.mean(falls) + 0.2 * np.mean(level))


def _cross(a: Trace, b: Trace) -> bool:
    """Whether two lines pass through each other, by more than a touch at an end."""
    low, high = max(a.flat[0, 0], b.flat[0, 0]), min(a.flat[-1, 0], b.flat[-1, 0])
    if high <= low:
        return False
    x = np.linspace(low, high, 80)
    apart = np.interp(x, *a.flat.T) - np.interp(x, *b.flat.T)
    return bool(apart.max() > 2.0 and apart.min() < -2.0)


def _other_style(a: Trace, b: Trace) -> bool:
    wide = max(a.width, b.width) > 1.35 * max(min(a.width, b.width), 1e-6)
    return a.dash != b.dash or wide or not same_ink(a.colour, b.colour)


def levels(
    lines: Sequence[Trace],
    labels: Sequence[Label],
    heads: Sequence[Trace],
    settings: Settings | None = None,
) -> list[Level]:
    """The level of every iso line of a panel.

    Parameters
    ----------
    lines : the iso lines; labels : free labels of the panel; heads : the lines that they cross.

    Notes
    -----
    Labels are dealt to lines by the least sum of distances; a line may have one at each end. A
    label that breaks the order of the levels along a head line (rising to the best efficiency,
    falling behind it) is mended where one level of the printed series fits its text and place,
    and else taken back.
    """
    settings = settings or Settings()
    kind = _kind(lines, labels, settings)
    dealt = _dealt(lines, labels, kind, settings)
    values = _settled(lines, dealt, heads, kind)
    looked: set[int] = set()
    for _ in range(2):
        doubtful = _doubtful(dealt, values) - looked
        if kind != "percent" or not doubtful:
            break
        looked |= doubtful
        labels = _looked_again(lines, dealt, labels, sorted(doubtful))
        second = _dealt(lines, labels, kind, settings)
        after = _settled(lines, second, heads, kind)
        if sum(v is None for v in after) <= sum(v is None for v in values):
            dealt, values = second, after
    usual = next((d[1].unit for d in dealt if d is not None), _UNIT[kind])
    found = []
    for d, value in zip(dealt, values, strict=True):
        unit = d[1].unit if d is not None else usual
        read = None if d is None else d[1].value
        found.append(Level(_QUANTITY[kind], value, unit, d[0] if d else None, read != value))
    return found


_Dealt = list[tuple[Label, Meaning] | None]


def _doubtful(dealt: _Dealt, values: Sequence[float | None]) -> set[int]:
    """Lines without a label, with one that was bent, or with one that their neighbours deny."""
    return {
        i
        for i, (d, v) in enumerate(zip(dealt, values, strict=True))
        if d is None or d[1].cost >= 0.5 or d[1].value != v
    }


def _settled(
    lines: Sequence[Trace], dealt: _Dealt, heads: Sequence[Trace], kind: str
) -> list[float | None]:
    values = [None if d is None else d[1].value for d in dealt]
    if kind != "percent":
        return values
    return settle(values, [d[0].text if d else "" for d in dealt], _sequences(lines, heads))


def _looked_again(
    lines: Sequence[Trace], dealt: _Dealt, labels: Sequence[Label], doubtful: Sequence[int]
) -> list[Label]:
    """Labels with those of doubtful lines read afresh; a new reading takes the old one's place."""
    panel = lines[0].panel
    height = text_height(panel)
    found = at_ends(panel, [lines[i] for i in doubtful], height)
    doubted = {id(d[0]) for i in doubtful if (d := dealt[i]) is not None}

    def replaced(old: Label) -> bool:
        return any(np.hypot(*(old.centre - new.centre)) < 2.5 * height for new in found)

    def known(new: Label) -> bool:
        says = {m.value for m in new.means("percent")}
        return any(
            np.hypot(*(old.centre - new.centre)) < 2.0 * height
            and any(m.value in says for m in old.means("percent"))
            for old in labels
            if id(old) not in doubted
        )

    kept = [w for w in labels if not (id(w) in doubted and replaced(w))]
    return [*kept, *(w for w in found if not known(w))]


def _kind(lines: Sequence[Trace], labels: Sequence[Label], settings: Settings) -> str:
    """The kind of level that most labels at the lines print."""
    votes = dict.fromkeys(_QUANTITY, 0.0)
    votes["percent"] = 0.01
    for label in labels:
        for m in label.meanings:
            if m.kind in votes and any(_near(label, t) < settings.reach for t in lines):
                votes[m.kind] += 1.0 if m.plain else 0.1
    return max(votes, key=lambda k: votes[k])


def _near(label: Label, trace: Trace) -> float:
    """Distance of a label, its ends first: levels stand at the ends of their lines."""
    seen = spot(label, trace)
    return min(seen.start, seen.end, seen.gap + 0.5)


def _dealt(
    lines: Sequence[Trace], labels: Sequence[Label], kind: str, settings: Settings
) -> _Dealt:
    from scipy.optimize import linear_sum_assignment

    holding = [w for w in labels if any(m.plain for m in w.means(kind))]
    holding = holding or [w for w in labels if w.means(kind)]  # bare numbers only if all are bare
    dealt: _Dealt = [None] * len(lines)
    if not holding or not lines:
        return dealt
    n, k = len(lines), len(holding)
    cost = np.full((n, k + n), settings.missing)
    for i, trace in enumerate(lines):
        for j, label in enumerate(holding):
            near = _near(label, trace)
            bent = min(m.cost for m in label.means(kind))
            doubt = 0.5 * bent + 0.5 * (1 - label.word.score)
            cost[i, j] = near + doubt if near <= settings.reach else 1e3
    for i, j in zip(*linear_sum_assignment(cost), strict=True):
        if j < k and cost[i, j] < 1e2:
            dealt[i] = holding[j], holding[j].means(kind)[0]
    return dealt


def _sequences(lines: Sequence[Trace], heads: Sequence[Trace]) -> list[list[int]]:
    """Along each head line, from left to right: the iso lines that meet it."""
    rows = []
    for head in heads:
        x_head, y_head = head.flat.T
        met: list[tuple[float, int]] = []
        for i, line in enumerate(lines):
            x, y = line.flat.T
            inside = (x >= x_head[0] - 3) & (x <= x_head[-1] + 3)
            apart = np.where(inside, y - np.interp(x, x_head, y_head), np.nan)
            change = np.flatnonzero(apart[:-1] * apart[1:] <= 0)
            places = [float(x[k]) for k in change]
            for end in (0, -1):  # ends that stop at the line rather than cross it
                if not places and abs(apart[end]) < 4.0:
                    places.append(float(x[end]))
            met += [(p, i) for p in places[:2]]
        met.sort()
        row = [i for k, (_, i) in enumerate(met) if k == 0 or met[k - 1][1] != i]
        if len(row) > 1:
            rows.append(row)
    return rows
