"""Numbers beside an axis → the progression that they agree on: linear or logarithmic.

Two levels. All pairs of readings propose a line value(t); the best lines are then held to a
lattice: printed numbers are exact multiples of a round step, so 504 among 500 and 510 is
a misreading and has no say, however near it lies.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.labels import Reading
from curvefit.records import Word

__all__ = ["Label", "Progression", "Settings", "agree", "printed", "text_distance"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Label:
    """A number beside an axis: `at` and `size` (height of the type) as fractions of the side."""

    at: float
    size: float
    text: str
    readings: tuple[Reading, ...]
    word: Word | None = None
    firm: bool = True  #: False where its place is only estimated (a split or a second look)


@dataclass(frozen=True, slots=True)
class Settings:
    """Tolerances of the consensus; lengths in heights of the type."""

    reach: float = 0.5  #: a label farther than this from its place does not count
    scatter: float = 0.2  #: usual distance of a label's middle from its tick
    pairs: int = 6000  #: proposals looked at
    kept: int = 14  #: proposals held to a lattice
    missing: float = 0.12  #: price of a lattice point without a number
    stray: float = 0.35  #: price of a number that fits nowhere
    inverted: float = 0.4  #: price of an axis that runs backwards


@dataclass(frozen=True, slots=True, eq=False)
class Progression:
    """The scale that the numbers agree on: f(value) = a + b·t, f = log10 on a log axis.

    step, residue : the lattice of the numbers (step 0 on a log axis, or where it is not round).
    chosen : the reading of each label, None where it does not fit.
    score : agreement; rival : score of the best different scale.
    """

    log: bool
    a: float
    b: float
    step: float
    residue: float
    chosen: tuple[Reading | None, ...]
    score: float
    rival: float = 0.0
    labels: tuple[Label, ...] = field(default=())

    def value(self, t: float) -> float:
        """The value at a fraction of the side."""
        f = self.a + self.b * t
        return 10.0**f if self.log else f

    def place(self, value: Array) -> Array:
        """The fractions of the side at values."""
        v = np.asarray(value, float)
        return np.asarray(((np.log10(v) if self.log else v) - self.a) / self.b)

    def lattice(self, low: float, high: float) -> Array:
        """The printed values between two fractions of the side, ascending in value."""
        ends = sorted((self.value(low), self.value(high)))
        if self.log:
            decades = range(math.floor(math.log10(ends[0])), math.ceil(math.log10(ends[1])) + 1)
            all_ = np.array([m * 10.0**k for k in decades for m in range(1, 10)])
        elif self.step:
            first = math.ceil((ends[0] - self.residue) / self.step - 1e-9)
            last = math.floor((ends[1] - self.residue) / self.step + 1e-9)
            all_ = self.residue + self.step * np.arange(first, last + 1)
        else:
            all_ = np.array(sorted({r.value for r in self.chosen if r is not None}))
        inside = (all_ >= ends[0] * (1 - 1e-9) - 1e-12) & (all_ <= ends[1] * (1 + 1e-9) + 1e-12)
        return np.asarray(all_[inside], float)

    @property
    def exact(self) -> int:
        """How many labels agree."""
        return sum(r is not None for r in self.chosen)


_ROUND = {1.0: 0.0, 2.0: 0.0, 5.0: 0.0, 2.5: 0.1, 4.0: 0.5, 3.0: 0.6, 1.5: 0.7}
_ROUND |= {1.25: 0.8, 6.0: 0.8, 8.0: 0.8, 7.5: 0.8, 1.2: 0.9}


def agree(labels: Sequence[Label], settings: Settings | None = None) -> Progression | None:
    """The progression that the labels agree on; None where no two of them do.

    Parameters
    ----------
    labels : sequence of Label, any order
    settings : Settings

    Notes
    -----
    `rival` is the score of the best scale whose values at the ends of the side differ by more
    than 3 % of the span; near `score` it means that the numbers allow two scales.
    """
    settings = settings or Settings()
    ordered = tuple(sorted(labels, key=lambda lb: lb.at))
    if len(ordered) < 2:
        return None
    found: list[Progression] = []
    for log in (False, True):
        for a, b in _proposals(ordered, log, settings):
            found += _lattices(ordered, log, a, b, settings)
    if not found:
        return None
    found.sort(key=lambda p: -p.score)
    best = found[0]
    rival = max((p.score for p in found[1:] if _differs(best, p)), default=0.0)
    return replace(best, rival=rival, labels=ordered)


def _differs(p: Progression, q: Progression) -> bool:
    span = abs(p.value(1.0) - p.value(0.0))
    return any(abs(p.value(t) - q.value(t)) > 0.03 * span for t in (0.0, 1.0))


def _table(labels: Sequence[Label], log: bool) -> tuple[list[tuple[int, Reading]], Array]:
    """The readings that can count, with label number, and columns t, f, cost, size."""
    rows = [
        (i, r)
        for i, lb in enumerate(labels)
        for r in lb.readings[:7]
        if r.cost < 0.95 and (not log or r.value > 0)
    ]
    columns = [
        (labels[i].at, math.log10(r.value) if log else r.value, r.cost, labels[i].size)
        for i, r in rows
    ]
    return rows, np.array(columns, float).reshape(-1, 4)


def _proposals(labels: Sequence[Label], log: bool, settings: Settings) -> list[tuple[float, float]]:
    """Lines (a, b) that many labels support, best first."""
    rows, table = _table(labels, log)
    if len(rows) < 2:
        return []
    t, f, cost, size = table.T
    i, j = np.triu_indices(len(rows), 1)
    apart = (t[j] - t[i] > 0.8 * size[i]) & (np.abs(f[j] - f[i]) > 1e-12)
    i, j = i[apart], j[apart]
    first = np.argsort(cost[i] + cost[j], kind="stable")[: settings.pairs]
    i, j = i[first], j[first]
    if not len(i):
        return []
    b = (f[j] - f[i]) / (t[j] - t[i])
    a = f[i] - b * t[i]
    owner = np.array([k for k, _ in rows])
    starts = np.flatnonzero(np.r_[True, owner[1:] != owner[:-1]])
    score = np.empty(len(a))
    for part in np.array_split(np.arange(len(a)), max(1, len(a) * len(t) // 400_000)):
        off = np.abs((f - a[part, None]) / b[part, None] - t) / size
        gain = np.where(off < settings.reach, 1 - cost - 0.5 * (off / settings.reach) ** 2, 0.0)
        score[part] = np.maximum.reduceat(gain, starts, axis=1).sum(1)
    score -= settings.inverted * (b < 0)
    out: list[tuple[float, float]] = []
    for k in np.argsort(-score, kind="stable"):
        span = abs(b[k])
        if all(abs(a[k] - a0) + abs(b[k] - b0) > 0.02 * span for a0, b0 in out):
            out.append((float(a[k]), float(b[k])))
        if len(out) == settings.kept or score[k] < 0.3 * score.max():
            break
    return out


def _lattices(
    labels: Sequence[Label], log: bool, a: float, b: float, settings: Settings
) -> list[Progression]:
    """The line held to each lattice that suits it, refitted to the labels that lie on it."""
    near = _near(labels, log, a, b, 2 * settings.reach)
    if sum(bool(n) for n in near) < 2:
        return []
    if log:
        classes: list[tuple[float, float, float]] = [(0.0, 0.0, 0.0)]
    else:
        classes = _classes(labels, near, b)
    out = []
    for step, residue, price in classes:
        p = _held(labels, near, log, a, b, step, residue, price, settings)
        if p is not None:
            out.append(p)
    return out


def _near(
    labels: Sequence[Label], log: bool, a: float, b: float, reach: float
) -> list[list[Reading]]:
    """The readings of each label within `reach` heights of the line."""
    out = []
    for lb in labels:
        fits = []
        for r in lb.readings[:7]:
            if r.cost >= 0.95 or (log and r.value <= 0):
                continue
            f = math.log10(r.value) if log else r.value
            if abs((f - a) / b - lb.at) <= reach * lb.size:
                fits.append(r)
        out.append(fits)
    return out


def _classes(
    labels: Sequence[Label], near: list[list[Reading]], b: float
) -> list[tuple[float, float, float]]:
    """Lattices (step, residue, price) that the spacing of the labels suggests."""
    at = np.array([lb.at for lb, n in zip(labels, near, strict=True) if n])
    gaps = np.diff(at)
    gaps = gaps[gaps > 0.5 * min(lb.size for lb in labels)]
    if not len(gaps):
        return []
    steps: dict[float, float] = {}
    for gap in {float(gaps.min()), float(np.median(gaps))}:
        for divisor in (1, 2, 3, 4, 5):
            step, price = _round_step(gap * abs(b) / divisor)
            if step:
                steps[step] = min(price, steps.get(step, 9.0))
    out = []
    for step, price in steps.items():
        residues: dict[float, int] = {}
        for readings in near:
            for residue in {_residue(r.value, step) for r in readings}:
                residues[residue] = residues.get(residue, 0) + 1
        for residue, count in sorted(residues.items(), key=lambda kv: -kv[1])[:3]:
            if count >= 2:
                shifted = 0.0 if residue == 0 else 0.7
                out.append((step, residue, price + shifted))
    out.append((0.0, 0.0, 1.8))
    return out


def _residue(value: float, step: float) -> float:
    r = round(value - step * math.floor(value / step + 1e-6), 9)
    return 0.0 if abs(r - step) < 1e-6 * step or abs(r) < 1e-6 * step else r


def _round_step(x: float) -> tuple[float, float]:
    """The round number within 15 % of x, and its price; (0, 0) without one."""
    power = 10.0 ** math.floor(math.log10(x) + 1e-9)
    options = [
        (abs(math.log(m * s * power / x)) + 0.05 * price, round(m * s * power, 12), price)
        for m, price in _ROUND.items()
        for s in (1.0, 10.0)
        if abs(math.log(m * s * power / x)) < 0.15
    ]
    return min(options)[1:] if options else (0.0, 0.0)


def _held(
    labels: Sequence[Label],
    near: list[list[Reading]],
    log: bool,
    a: float,
    b: float,
    step: float,
    residue: float,
    price: float,
    settings: Settings,
) -> Progression | None:
    """The progression on one lattice, or None where fewer than two labels lie on it."""
    allowed = [[r for r in n if _on(r, log, step, residue)] for n in near]
    chosen: list[Reading | None] = []
    for _ in range(2):  # once about the proposed line, once about the refitted one
        chosen = [_best(lb, n, log, a, b, settings) for lb, n in zip(labels, allowed, strict=True)]
        chosen = _one_each(labels, chosen, log, a, b)
        if all(r is None or float(r.value).is_integer() for r in chosen):
            # numbers without decimals lost no points
            allowed = [[r for r in n if "put in" not in r.how] for n in allowed]
            chosen = [r if r is None or "put in" not in r.how else None for r in chosen]
        line = _line(labels, chosen, log)
        if line is None:
            return None
        a, b = line
    free = not log and not step
    if free and (sum(c is not None for c in chosen) < max(4, len(labels))):
        return None
    p = Progression(log, a, b, step, residue, tuple(chosen), 0.0)
    return replace(p, score=_score(labels, p, price, settings))


def _on(r: Reading, log: bool, step: float, residue: float) -> bool:
    """Whether a reading is a number of the lattice."""
    if log:
        mantissa = r.value / 10.0 ** math.floor(math.log10(r.value) + 1e-9)
        return abs(mantissa * 2 - round(mantissa * 2)) < 1e-6 and "point" not in r.how
    if not step:
        return "point" not in r.how
    if abs(_residue(r.value, step) - residue) > 1e-6 * step:
        return False
    if "put in" in r.how:  # a point was lost: every number carries the decimals that the step needs
        return r.decimals == max(_decimals(step), _decimals(residue))
    return True


def _decimals(x: float) -> int:
    return next((d for d in range(7) if abs(x * 10**d - round(x * 10**d)) < 1e-6), 7)


def _best(
    lb: Label, readings: list[Reading], log: bool, a: float, b: float, settings: Settings
) -> Reading | None:
    def off(r: Reading) -> float:
        f = math.log10(r.value) if log else r.value
        return abs((f - a) / b - lb.at) / lb.size

    fits = [(r.cost + 0.5 * off(r) ** 2, k, r) for k, r in enumerate(readings)]
    fits = [x for x in fits if off(x[2]) <= settings.reach * (1.0 if lb.firm else 2.0)]
    return min(fits)[2] if fits else None


def _one_each(
    labels: Sequence[Label], chosen: list[Reading | None], log: bool, a: float, b: float
) -> list[Reading | None]:
    """Of two labels with the same value only the nearer one keeps it."""
    best: dict[float, tuple[float, int]] = {}
    for k, (lb, r) in enumerate(zip(labels, chosen, strict=True)):
        if r is None:
            continue
        off = abs(((math.log10(r.value) if log else r.value) - a) / b - lb.at) + r.cost * lb.size
        key = round(r.value, 9)
        if key not in best or off < best[key][0]:
            best[key] = (off, k)
    keep = {k for _, k in best.values()}
    return [r if k in keep else None for k, r in enumerate(chosen)]


def _line(
    labels: Sequence[Label], chosen: Sequence[Reading | None], log: bool
) -> tuple[float, float] | None:
    """The line through the chosen labels, by the median of the pairwise slopes."""
    points = [
        (lb.at, math.log10(r.value) if log else r.value)
        for lb, r in zip(labels, chosen, strict=True)
        if r is not None
    ]
    if len(points) < 2:
        return None
    t, f = np.array(points).T
    i, j = np.triu_indices(len(t), 1)
    dt = t[j] - t[i]
    ok = dt > 0.25 * np.ptp(t)
    if not ok.any():
        return None
    b = float(np.median((f[j] - f[i])[ok] / dt[ok]))
    return (float(np.median(f - b * t)), b) if b else None


def _score(labels: Sequence[Label], p: Progression, price: float, settings: Settings) -> float:
    score = -price - settings.inverted * (p.b < 0) - 0.6 * p.log
    places = []
    for lb, r in zip(labels, p.chosen, strict=True):
        if r is None:
            score -= _misfit(lb, p, settings)
            continue
        off = abs(float(p.place(np.array(r.value))) - lb.at) / lb.size
        score += 1 - r.cost - 0.5 * (off / settings.reach) ** 2
        if p.log:
            score -= 0.0 if _one_digit(r.value) else 0.15
        places.append(lb.at)
    if not p.log and p.step:
        expected = len(p.lattice(min(places), max(places)))
        score -= settings.missing * max(expected - len(places), 0)
    return score


def _one_digit(value: float) -> bool:
    mantissa = value / 10.0 ** math.floor(math.log10(value) + 1e-9)
    return abs(mantissa - round(mantissa)) < 1e-6


def _misfit(lb: Label, p: Progression, settings: Settings) -> float:
    """Price of a label that does not agree: less where one slip of the reader explains it."""
    expected = near_value(lb, p)
    if expected is None:
        return settings.stray
    texts = printed(expected, p)
    # a reader loses characters and swaps them, it hardly ever puts digits in
    longer = sum(map(str.isdigit, lb.text)) > max(sum(map(str.isdigit, t)) for t in texts)
    distance = min(min(text_distance(lb.text, t) for t in texts), 2.0)
    return settings.stray * (distance / 2.0 + 1.5 * longer)


def near_value(lb: Label, p: Progression) -> float | None:
    """The lattice value that should stand where the label stands; None where none should."""
    reach = 0.8 * lb.size
    values = p.lattice(lb.at - reach, lb.at + reach)
    if not len(values):
        return None
    return float(values[np.argmin(np.abs(p.place(values) - lb.at))])


def printed(value: float, p: Progression) -> tuple[str, ...]:
    """How a value may stand on the page."""
    d = 0 if p.log else max(_decimals(p.step), _decimals(p.residue))
    short = f"{value:.6g}"
    return tuple(dict.fromkeys((f"{value:.{d}f}", short, short.replace(".", ""))))


def text_distance(a: str, b: str) -> float:
    """Edits (one character put in, left out or swapped) from one text to the other."""
    row = list(range(len(b) + 1))
    for i, x in enumerate(a, 1):
        before, row[0] = row[0], i
        for j, y in enumerate(b, 1):
            before, row[j] = row[j], min(row[j] + 1, row[j - 1] + 1, before + (x != y))
    return float(row[-1])
