"""Plot boxes: groups of long lines that meet, and the four sides of each."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.lines import Line

__all__ = ["Box", "find_boxes"]

_SPAN = 0.6  # a side of the box covers at least this share of it
_OVERHANG = 0.065  # ticks let lines stick out beyond a side by less than this share


@dataclass(frozen=True, slots=True)
class Box:
    """A plot box on the straightened page [px]; `seen` tells which sides are drawn.

    sides are in the order top, right, bottom, left. across, upright : the lines inside it.
    """

    left: float
    top: float
    right: float
    bottom: float
    seen: tuple[bool, bool, bool, bool]
    across: tuple[Line, ...] = ()
    upright: tuple[Line, ...] = ()

    @property
    def area(self) -> float:
        return (self.right - self.left) * (self.bottom - self.top)

    @property
    def corners(self) -> NDArray[np.float64]:
        """(4, 2), clockwise from the top left."""
        x0, y0, x1, y1 = self.left, self.top, self.right, self.bottom
        return np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]], float)

    def distance(self, x: float, y: float) -> float:
        """How far a point lies outside the box [px], 0 inside."""
        dx = max(self.left - x, x - self.right, 0.0)
        dy = max(self.top - y, y - self.bottom, 0.0)
        return float(np.hypot(dx, dy))


def find_boxes(across: list[Line], upright: list[Line], reach: float) -> list[Box]:
    """The plot boxes made by lines along x (`across`) and along y (`upright`), largest first.

    reach : how far apart [px] two lines may end and still meet.
    """
    groups = _groups(across, upright, reach)
    boxes = [_box(h, v, reach) for h, v in groups if h and v]
    alone = [h[0] for h, v in groups if len(h) == 1 and not v]
    whole = [b for b in boxes if b is not None]
    for lines in _alike(alone, reach):
        ruled = _ruled(lines)
        # pieces of a grid broken by curves lie inside its own box
        if all(b.distance(*ruled.corners.mean(0)) > 0 for b in whole):
            whole.append(ruled)
    return sorted(whole, key=lambda b: -b.area)


def _groups(
    across: list[Line], upright: list[Line], reach: float
) -> list[tuple[list[Line], list[Line]]]:
    parent = list(range(len(across) + len(upright)))

    def root(i: int) -> int:
        while parent[i] != i:
            parent[i] = parent[parent[i]]
            i = parent[i]
        return i

    for i, h in enumerate(across):
        for j, v in enumerate(upright):
            meets_x = h.lo - reach <= v.at <= h.hi + reach
            meets_y = v.lo - reach <= h.at <= v.hi + reach
            if meets_x and meets_y:
                parent[root(i)] = root(len(across) + j)
    groups: dict[int, tuple[list[Line], list[Line]]] = {}
    for i, line in enumerate(across + upright):
        groups.setdefault(root(i), ([], []))[int(i >= len(across))].append(line)
    return list(groups.values())


def _alike(lines: list[Line], reach: float) -> list[list[Line]]:
    """Lines that meet no other but begin and end together, four or more: a grid one way only."""
    left = sorted(lines, key=lambda h: h.at)
    out = []
    while left:
        first = left[0]
        same = [h for h in left if max(abs(h.lo - first.lo), abs(h.hi - first.hi)) < reach]
        left = [h for h in left if h not in same]
        if len(same) >= 4:
            out.append(same)
    return out


def _ruled(lines: list[Line]) -> Box:
    """The box of a grid that runs across only, without a side upright."""
    left = float(np.median([h.lo for h in lines]))
    right = float(np.median([h.hi for h in lines]))
    seen = (True, False, True, False)
    return Box(left, lines[0].at, right, lines[-1].at, seen, tuple(lines))


def _box(across: list[Line], upright: list[Line], reach: float) -> Box | None:
    left, right = min(h.lo for h in across), max(h.hi for h in across)
    top, bottom = min(v.lo for v in upright), max(v.hi for v in upright)
    seen = [False] * 4
    for _ in range(2):  # the extent tells which lines are sides, the sides tell the extent
        xs = [v.at for v in upright if _cover(v, top, bottom) > _SPAN]
        ys = [h.at for h in across if _cover(h, left, right) > _SPAN]
        if not xs or not ys:
            return None
        slack_x, slack_y = (max(_OVERHANG * d, reach) for d in (right - left, bottom - top))
        ends_x = [(h.lo, h.hi) for h in across if _cover(h, left, right) > _SPAN]
        ends_y = [(v.lo, v.hi) for v in upright if _cover(v, top, bottom) > _SPAN]
        x0, x1 = (float(np.median(e)) for e in zip(*ends_x, strict=True))
        y0, y1 = (float(np.median(e)) for e in zip(*ends_y, strict=True))
        seen = [
            min(ys) < y0 + slack_y,
            max(xs) > x1 - slack_x,
            max(ys) > y1 - slack_y,
            min(xs) < x0 + slack_x,
        ]
        top = min(ys) if seen[0] else y0
        right = max(xs) if seen[1] else x1
        bottom = max(ys) if seen[2] else y1
        left = min(xs) if seen[3] else x0
    if right - left < 40 or bottom - top < 40:
        return None
    inside_h = tuple(h for h in across if top - 2 <= h.at <= bottom + 2)
    inside_v = tuple(v for v in upright if left - 2 <= v.at <= right + 2)
    return Box(left, top, right, bottom, (seen[0], seen[1], seen[2], seen[3]), inside_h, inside_v)


def _cover(line: Line, lo: float, hi: float) -> float:
    return (min(line.hi, hi) - max(line.lo, lo)) / max(hi - lo, 1.0)
