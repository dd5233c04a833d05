"""Which label belongs to which line of a family: impeller diameters, speeds, stages, letters.

The lines of a family are ordered (a larger impeller gives more head and reaches a larger flow),
and so are their labels. All labels are dealt out at once: nearness, what the text had to be bent
to, the order and the affinity laws (H ~ D², H ~ n²) are costs, and the cheapest dealing wins.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.identify.placing import Label, Spot, spot
from curvefit.identify.wording import Meaning
from curvefit.records import Trace

__all__ = ["Deal", "Member", "Settings", "deal", "movable", "order"]

Array = NDArray[np.float64]

# Exponents that the law and real trims leave between the ratio of heads and of what is printed
_HEAD_EXPONENTS = {"diameter": (1.3, 4.0), "speed": (1.6, 2.4), "percent": (1.6, 2.4),
                   "stages": (0.8, 1.2)}  # fmt: skip
# a label dealt to a line; without a meaning where its text stands there but could not be read
_Got = tuple[int, Meaning | None]
_KINDS = ("diameter", "speed", "percent", "stages", "letter")


@dataclass(frozen=True, slots=True)
class Settings:
    """Costs of dealing labels to lines; distances in heights of the text.

    missing : a line gets no label; reach : a label further from its line is not its label;
    far : per height of distance; law : per factor e by which an exponent is out of its range;
    side : the label stands on the other side of its line than most.
    unread : a text that cannot be read as a label takes its line all the same.
    tied : two lines are equally near to a label within this many heights of its text.
    """

    missing: float = 2.2
    reach: float = 6.0
    far: float = 0.35
    law: float = 2.0
    side: float = 0.5
    unread: float = 0.6
    tied: float = 0.5


@dataclass(frozen=True, slots=True, eq=False)
class Member:
    """One line of a family: where it ends and how high it lies (SI, both only compared)."""

    trace: Trace
    flow: Array
    value: Array


@dataclass(frozen=True, slots=True, eq=False)
class Deal:
    """What each line got: (label, meaning) or None, in the order of the members; total cost.

    unread : in the same order, a text that stands as the line's label but could not be read.
    """

    kind: str
    given: tuple[tuple[Label, Meaning] | None, ...]
    cost: float
    unread: tuple[Label | None, ...] = ()


def order(members: Sequence[Member], quantity: str) -> list[int]:
    """Members from the largest impeller (or speed) to the smallest.

    Notes
    -----
    Heads and powers at the flow that all share, in the lower half of it, where the lines of a
    family do not cross. Efficiency and NPSH lines cross or run together there: by the flow at
    which they end and, where they all end alike, by what lies right there (a larger impeller has
    the higher efficiency and the lower NPSH at high flow).
    """
    if len(members) < 2:
        return list(range(len(members)))
    low = max(float(m.flow[0]) for m in members)
    high = min(float(m.flow[-1]) for m in members)
    ends = np.array([m.flow[-1] for m in members])
    apart = float(np.ptp(ends)) > 0.03 * float(ends.max())
    if quantity in ("efficiency", "overall_efficiency", "npsh_required"):
        if apart or high <= low:
            return list(np.argsort(-ends, kind="stable"))
        sign = -1.0 if quantity == "npsh_required" else 1.0
        last = np.array([np.interp(high, m.flow, m.value) for m in members])
        return list(np.argsort(-sign * last, kind="stable"))
    if high <= low:
        return list(np.argsort([-float(m.value.max()) for m in members], kind="stable"))
    q = np.linspace(low, low + 0.6 * (high - low), 9)
    level = [float(np.mean(np.interp(q, m.flow, m.value))) for m in members]
    return list(np.argsort(-np.array(level), kind="stable"))


def deal(
    members: Sequence[Member],
    quantity: str,
    labels: Sequence[Label],
    others: Sequence[Trace] = (),
    settings: Settings | None = None,
) -> Deal | None:
    """The best dealing of labels to the lines of one family; None where no label fits any.

    Parameters
    ----------
    members : the lines; quantity : of all of them.
    labels : free labels of the panel.
    others : lines of the panel outside the family: a label much nearer to one of them is not
        dealt here.
    """
    settings = settings or Settings()
    ranks = order(members, quantity)
    ranked = [members[i] for i in ranks]
    spots = {
        (i, j): spot(label, m.trace) for i, m in enumerate(ranked) for j, label in enumerate(labels)
    }
    elsewhere = [min((spot(label, t).gap for t in others), default=np.inf) for label in labels]
    best: Deal | None = None
    for kind in _KINDS:
        holding = [
            j
            for j, label in enumerate(labels)
            if any(m.plain or kind != "percent" for m in label.means(kind))
        ]
        if not holding:
            continue
        for stand in ("any", "above", "below"):
            found = _chain(
                ranked, quantity, labels, holding, spots, elsewhere, kind, stand, settings
            )
            if found is not None and (best is None or found.cost < best.cost - 1e-9):
                best = found
    if best is None:
        return None
    back = np.argsort(ranks)
    given, unread = (tuple(row[k] for k in back) for row in (best.given, best.unread))
    return Deal(best.kind, given, best.cost, unread)


def movable(
    members: Sequence[Member], quantity: str, found: Deal, settings: Settings | None = None
) -> list[int]:
    """Members whose label could as well be that of the next line, so that all move on by one.

    Notes
    -----
    Where a line has no label, those that follow it can move towards it as long as each stands
    nearly as near to the next line as to its own: nothing but the missing label then tells which
    dealing is right.
    """
    settings = settings or Settings()
    ranks = order(members, quantity)
    loose = set()
    for k, empty in enumerate(ranks):
        if found.given[empty] is not None or found.unread[empty] is not None:
            continue
        for way in (ranks[k + 1 :], ranks[:k][::-1]):
            free = empty
            for own in way:
                got = found.given[own]
                if got is None:
                    break
                at = [spot(got[0], members[i].trace) for i in (own, free)]
                if not _tied(at[0], at[1], settings.tied):
                    break
                loose.add(own)
                free = own
    return sorted(loose)


def _tied(own: Spot, other: Spot, within: float) -> bool:
    """Whether a label stands to another line as well as to its own."""
    if min(own.start, own.end) < 1.2 and abs(own.above) < 0.35 and abs(other.above) > 0.7:
        return False  # in line with the end of its own
    ends = [(own.start, other.start), (own.end, other.end)]
    at_ends = all(b <= a + within for a, b in ends if a < 1.2)
    return at_ends and other.near <= own.near + within


def _torn(labels: Sequence[Label], holding: Sequence[int]) -> list[int]:
    """Texts that say nothing, but look like those that label lines: a digit, their size."""
    height = float(np.median([labels[j].height for j in holding]))
    long = float(np.median([len(labels[j].text) for j in holding]))
    known = [labels[j].centre for j in holding]
    return [
        j
        for j, w in enumerate(labels)
        if j not in holding
        and not w.masked
        and not any(m.plain for m in w.meanings)
        and any(c.isdigit() for c in w.text)
        and max(2.0, 0.5 * long) <= len(w.text) <= 1.7 * long + 1
        and 0.6 < w.height / height < 1.6
        and all(np.hypot(*(w.centre - c)) > height for c in known)
    ]


def _chain(
    ranked: Sequence[Member],
    quantity: str,
    labels: Sequence[Label],
    holding: Sequence[int],
    spots: dict[tuple[int, int], Spot],
    elsewhere: Sequence[float],
    kind: str,
    stand: str,
    settings: Settings,
) -> Deal | None:
    """Cheapest chain of labels down the ordered lines: each value smaller than the one before."""
    signed = any(m.plain for j in holding for m in labels[j].means(kind))
    torn = _torn(labels, holding) if kind != "letter" else []
    steps: list[list[tuple[int, Meaning | None, float]]] = []
    for i in range(len(ranked)):
        row: list[tuple[int, Meaning | None, float]] = []
        for j in (*holding, *torn):
            plain = kind == "letter" or any(m.plain for m in labels[j].means(kind))
            near = _placing(spots[i, j], stand, elsewhere[j], plain, settings)
            if near is None:
                continue
            for m in labels[j].means(kind):
                bent = m.cost * (0.5 if signed and kind == "diameter" and m.cost >= 0.5 else 1.0)
                row.append((j, m, near + bent))
            if j in torn:
                row.append((j, None, near + settings.unread))
        steps.append(row)
    cost, dealt = _cheapest(ranked, quantity, steps, kind, settings)
    if all(d is None or d[1] is None for d in dealt):
        return None
    if kind == "letter" and sum(d is not None for d in dealt) < 0.6 * len(dealt):
        return None  # scraps of grid and line are read as letters too
    cost += 0.3 * (kind == "letter") + 0.4 * (kind == "percent")
    cost += 0.15 * (stand != "any")
    got = tuple(None if d is None or d[1] is None else (labels[d[0]], d[1]) for d in dealt)
    unread = tuple(labels[d[0]] if d is not None and d[1] is None else None for d in dealt)
    return Deal(kind, got, cost, unread)


def _cheapest(
    ranked: Sequence[Member],
    quantity: str,
    steps: Sequence[Sequence[tuple[int, Meaning | None, float]]],
    kind: str,
    settings: Settings,
) -> tuple[float, tuple[_Got | None, ...]]:
    """The cheapest of all dealings, line by line from the largest; its cost."""
    # state: the last label that was read (None at first); cost and the whole dealing so far
    states: dict[tuple[int, float] | None, tuple[float, tuple[_Got | None, ...]]]
    states = {None: (0.0, ())}
    for i, row in enumerate(steps):
        following: dict[tuple[int, float] | None, tuple[float, tuple[_Got | None, ...]]] = {}
        for key, (cost, dealt) in states.items():
            options: list[tuple[tuple[int, float] | None, float, _Got | None]]
            options = [(key, settings.missing, None)]
            used = {d[0] for d in dealt if d is not None}
            before = next(((k, d[1]) for k, d in reversed([*enumerate(dealt)]) if d and d[1]), None)
            for j, m, near in row:
                if j in used:
                    continue
                if m is None:
                    options.append((key, near, (j, None)))
                    continue
                law: float | None = 0.0
                if before is not None:
                    law = _law(ranked[before[0]], before[1], ranked[i], m, kind, quantity, settings)
                if law is not None:
                    options.append(((j, m.value or 0.0), near + law, (j, m)))
            for now, step, got in options:
                if now not in following or cost + step < following[now][0] - 1e-12:
                    following[now] = cost + step, (*dealt, got)
        states = following
    return min(states.values(), key=lambda s: s[0])


def _placing(
    seen: Spot, stand: str, elsewhere: float, plain: bool, settings: Settings
) -> float | None:
    """Cost of a label for a line by where it stands; None where it is out of reach."""
    near = min(seen.gap, seen.start, seen.end)
    far = settings.far if plain else 1.6 * settings.far  # a bare number may be anything
    if near > settings.reach or elsewhere < near - 1.0 or (elsewhere < 0.3 and near > 1.0):
        return None
    cost = far * max(near - 0.3, 0.0)
    at_end = min(seen.start, seen.end) < 1.5
    if not at_end and stand == "above" and seen.above < 0:
        cost += settings.side
    if not at_end and stand == "below" and seen.above > 0:
        cost += settings.side
    if stand == "any":
        cost += 0.1 * (not at_end)
    return cost


def _law(
    upper: Member,
    more: Meaning,
    lower: Member,
    less: Meaning,
    kind: str,
    quantity: str,
    settings: Settings,
) -> float | None:
    """Cost of two neighbours' labels by order and affinity; None where the order is wrong."""
    if kind == "letter":  # trims are named in order
        return 0.0 if more.text < less.text else None
    if more.value is None or less.value is None:
        return 0.0
    if more.value <= less.value * 1.001:
        return None
    printed = float(np.log(more.value / less.value))
    if quantity == "head":
        low = max(float(upper.flow[0]), float(lower.flow[0]))
        high = min(float(upper.flow[-1]), float(lower.flow[-1]))
        if high <= low:
            return 0.0
        q = np.linspace(low, low + 0.2 * (high - low), 5)
        a, b = (np.interp(q, m.flow, m.value).mean() for m in (upper, lower))
        if a <= 0 or b <= 0:
            return 0.0
        exponent = float(np.log(a / b)) / printed
        least, most = _HEAD_EXPONENTS[kind]
    else:
        ratio = float(upper.flow[-1] / max(float(lower.flow[-1]), 1e-12))
        if kind == "stages" or ratio <= 1.02:
            return 0.0
        exponent, least, most = float(np.log(ratio)) / printed, 0.4, 3.0
    exponent = max(exponent, 1e-3)
    return settings.law * max(float(np.log(least / exponent)), float(np.log(exponent / most)), 0.0)
