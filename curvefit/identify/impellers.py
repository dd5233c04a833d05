"""One impeller's lines in several panels: found by where they end, made to agree on its name."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from curvefit.identify import doubts
from curvefit.identify.families import Member, order
from curvefit.identify.ink import same_ink
from curvefit.identify.line import Line, Mark

__all__ = ["Settings", "agree", "member", "odd_ones"]


@dataclass(frozen=True, slots=True)
class Settings:
    """flow : ends of one impeller's lines agree this well between panels (share of the span).

    law : a diameter may lie this far (relative) from where its head puts it among its family.
    """

    flow: float = 0.015
    law: float = 0.02


def member(line: Line) -> Member:
    """The line as a member of its family."""
    return Member(line.trace, line.values.flow, line.values.value)


def agree(groups: Sequence[Sequence[Line]], settings: Settings | None = None) -> None:
    """Name the lines of all families of a page after their impellers, by a vote of their labels.

    Notes
    -----
    The heads' family is the base. Lines of another family belong to the impeller whose head line
    starts and ends at the same flow, or looks the same, or has the same rank. A line whose own
    label says otherwise than most of its impeller's is renamed, one without a label is named;
    both are said in a finding.
    """
    settings = settings or Settings()
    families = [g for g in groups if len(g) > 1]
    if not families:
        return
    families.sort(key=lambda g: (-len(g), g[0].quantity not in ("head", "differential_pressure")))
    base = families[0]
    columns: list[list[tuple[Line, bool]]] = [[(line, True)] for line in base]
    for group in families[1:]:
        pairs, sure = _pairs(base, group, settings)
        for line, k in pairs:
            columns[k].append((line, sure))
    winners = [_winner(column, groups) for column in columns]
    ranks = order([member(x) for x in base], base[0].quantity)
    ordered = [winners[k] for k in ranks]
    if not _falling([w.mark for w in ordered if w is not None]):
        return
    for column, twin in zip(columns, winners, strict=True):
        for line, sure in column:
            if twin is None or line.mark == twin.mark:
                continue
            if sure or not (line.marked and all(x.marked for x in _family(line, families))):
                _rename(line, twin, sure)
    for line in odd_ones(base, settings):
        doubts.of_odd(line)


def _pairs(
    base: Sequence[Line], group: Sequence[Line], settings: Settings
) -> tuple[list[tuple[Line, int]], bool]:
    """Each line of a family with the place of its impeller in the base; whether that is sure."""
    from scipy.optimize import linear_sum_assignment

    span = max(float(x.values.flow[-1]) for x in (*base, *group))
    gaps = np.array([[_end_gap(a, b, span) for a in base] for b in group])
    cost = gaps.copy()
    looks = {(x.trace.dash, tuple(np.round(x.trace.colour, 1))) for x in base}
    by_look = len(looks) == len(base)
    if by_look:
        cost += [[0.05 * (not _same_look(a, b)) for a in base] for b in group]
    rows, columns = linear_sum_assignment(cost)
    seen = np.array([[_end_gap(a, b, span, 0.0) for a in base] for b in group])
    if bool((seen[rows, columns] < settings.flow).all()) and (
        by_look or _telling(base, span, settings)
    ):
        return [(group[i], int(k)) for i, k in zip(rows, columns, strict=True)], True
    if by_look and (cost[rows, columns] - gaps[rows, columns] == 0).all():
        return [(group[i], int(k)) for i, k in zip(rows, columns, strict=True)], False
    if len(base) != len(group):
        return [], False
    own = order([member(x) for x in group], group[0].quantity)
    first = order([member(x) for x in base], base[0].quantity)
    return [(group[i], k) for i, k in zip(own, first, strict=True)], False


def _end_gap(a: Line, b: Line, span: float, cut: float = 0.2) -> float:
    """How far the ends of two lines are apart; weight `cut` where the box cut one of them."""
    first = abs(float(a.values.flow[0] - b.values.flow[0]))
    last = float(a.values.flow[-1] - b.values.flow[-1])
    if (last < 0 and _cut_off(a)) or (last > 0 and _cut_off(b)):
        last *= cut  # its true end is not known
    return (0.5 * first + abs(last)) / span


def _cut_off(line: Line) -> bool:
    """Whether a line leaves the box at its right end."""
    width, height = line.panel.warp.size
    x, y = line.trace.flat[-1]
    return bool(min(y, height - y) < 0.01 * height + 2 or x > 0.99 * width - 2)


def _telling(base: Sequence[Line], span: float, settings: Settings) -> bool:
    """Whether the flow ends of a family are far enough apart to tell its members."""
    ends = sorted(float(x.values.flow[-1]) for x in base)
    return bool(min(np.diff(ends)) > 1.5 * settings.flow * span)


def _same_look(a: Line, b: Line) -> bool:
    return a.trace.dash == b.trace.dash and same_ink(a.trace.colour, b.trace.colour)


def _winner(column: Sequence[tuple[Line, bool]], groups: Sequence[Sequence[Line]]) -> Line | None:
    """The line whose label most of its impeller's lines bear out; None where none has one."""
    votes: dict[Mark, float] = {}
    for line, sure in column:
        if line.marked:
            family = _family(line, groups)
            weight = sum(x.marked for x in family) / len(family)
            weight *= 1.0 if sure else 0.5
            weight *= 1.4 if line.quantity in ("head", "differential_pressure") else 1.0
            weight *= 0.6 if line.label_cost >= 0.5 else 1.0
            votes[line.mark] = votes.get(line.mark, 0.0) + weight
    if not votes:
        return None
    best = max(votes, key=lambda m: votes[m])
    return next(line for line, _ in column if line.mark == best)


def _family(line: Line, groups: Sequence[Sequence[Line]]) -> Sequence[Line]:
    return next(g for g in groups if any(x is line for x in g))


def _falling(marks: Sequence[Mark]) -> bool:
    """Whether what is known falls down the family."""
    for part in range(4):
        known = [m[part] for m in marks if m[part] is not None]
        if any(a <= b for a, b in pairwise(known) if a is not None and b is not None):
            return False
    return True


def _rename(line: Line, twin: Line, sure: bool) -> None:
    line.diameter, line.diameter_unit = twin.diameter, twin.diameter_unit
    line.speed, line.speed_unit = twin.speed, twin.speed_unit
    line.speed_ratio, line.stages = twin.speed_ratio, twin.stages
    doubts.of_twin(line, twin, sure)


def odd_ones(base: Sequence[Line], settings: Settings) -> list[Line]:
    """Lines of a family of heads whose diameter is not where their head puts it.

    Notes
    -----
    Among the heads at a common flow, ln D runs smoothly with ln H; the line through the others
    (Theil–Sen) foretells each diameter. Of three lines none can be told to be the odd one: the
    middle one stands for them where one step is more than twice as steep as the other.
    """
    known = [x for x in base if x.diameter is not None]
    if len(known) < 3 or base[0].quantity != "head":
        return []
    low = max(float(x.values.flow[0]) for x in known)
    high = min(float(x.values.flow[-1]) for x in known)
    if high <= low:
        return []
    q = np.linspace(low, low + 0.2 * (high - low), 5)
    head = [float(np.interp(q, x.values.flow, x.values.value).mean()) for x in known]
    if min(head) <= 0:
        return []
    x, y = np.log(head), np.log([float(k.diameter or 1.0) for k in known])
    if len(known) == 3:
        i, j, k = np.argsort(x)
        steps = [(y[j] - y[i]) / max(x[j] - x[i], 1e-9), (y[k] - y[j]) / max(x[k] - x[j], 1e-9)]
        off = abs(y[j] - np.interp(x[j], x[[i, k]], y[[i, k]])) > settings.law
        return [known[j]] if off and max(steps) > 2.0 * min(steps) else []
    odd = []
    for i, line in enumerate(known):
        rest = np.arange(len(known)) != i
        a, b = x[rest], y[rest]
        pairs = [(j, k) for j in range(len(a)) for k in range(j) if abs(a[j] - a[k]) > 1e-6]
        slope = (
            float(np.median([(b[j] - b[k]) / (a[j] - a[k]) for j, k in pairs])) if pairs else 0.5
        )
        foretold = float(np.median(b - slope * a)) + slope * x[i]
        spread = float(np.median(np.abs(b - slope * a - np.median(b - slope * a))))
        if abs(y[i] - foretold) > max(settings.law, 6 * spread):
            odd.append((abs(y[i] - foretold), line))
    return [max(odd, key=lambda o: o[0])[1]] if odd else []
