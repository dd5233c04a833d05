"""What the notes say of where lines run: drawn paths, stretches left out."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length, resample
from curvefit.notes import CurveNotes
from curvefit.records import GIVEN, Panel, Trace

__all__ = ["REACH", "with_notes"]

Array = NDArray[np.float64]
Follow = Callable[[Array], "Trace | None"]
REACH = 6.0  #: px from a line within which a point names it
DRAWN = 1.0  #: px, standard uncertainty of a path drawn by hand on the page
STEP = 2.0  #: px between the points of a drawn path


def with_notes(
    panel: Panel,
    traces: Sequence[Trace],
    notes: Sequence[CurveNotes],
    follow: Follow | None = None,
) -> tuple[Trace, ...]:
    """The traces with drawn paths in place of the lines that they replace, or as new lines.

    Parameters
    ----------
    follow : gives the line that runs along a path (n, 2) panel px, or None: then the path itself
        is the line.

    Notes
    -----
    A path that starts and ends on a line, or whose note names one, replaces it: all of it, or
    what lies between the path's ends where the note says `whole = false`. Points in a box to
    leave out are taken away.
    """
    lines = list(traces)
    for note in notes:
        if note.drop or note.panel not in (None, panel.name):
            continue
        if len(note.path) >= 2:
            path = panel.warp.to_panel(np.array(note.path, float))
            if _inside(panel, path):
                _put(panel, lines, note, path, follow)
    for note in notes:
        for box in note.leave_out:
            if note.panel in (None, panel.name):
                _leave_out(panel, lines, note, box)
    return tuple(lines)


def _inside(panel: Panel, path: Array) -> bool:
    """Whether most of a path lies in this plot box."""
    size = np.array(panel.warp.size)
    return bool(((path > -REACH) & (path < size + REACH)).all(1).mean() > 0.5)


def _put(
    panel: Panel, lines: list[Trace], note: CurveNotes, path: Array, follow: Follow | None
) -> None:
    drawn = follow(path) if follow is not None else None
    if drawn is None:
        drawn = _drawn(panel, path)
    drawn = replace(drawn, by="given")
    k = _line_of(panel, lines, note, path)
    if k is None:
        lines.append(replace(drawn, name=f"line {len(lines) + 1}"))
    else:
        old = lines[k]
        new = drawn if note.whole else _spliced(old, drawn)
        lines[k] = replace(
            new, name=old.name, width=old.width, colour=old.colour, dash=old.dash, by="given"
        )


def _drawn(panel: Panel, path: Array) -> Trace:
    flat = resample(path, STEP)
    if flat[0, 0] > flat[-1, 0]:
        flat = flat[::-1]
    single = bool((np.diff(flat[:, 0]) > 0).all())
    n = len(flat)
    flags = np.full(n, GIVEN, np.uint8)
    sigma = np.full(n, DRAWN)
    return Trace("", panel, flat, sigma, flags, 20.0, 2.0, path=not single, by="given")


def _line_of(panel: Panel, lines: list[Trace], note: CurveNotes, path: Array) -> int | None:
    """The line that a note's path replaces; None where it starts a new one."""
    if note.at is not None:
        at = panel.warp.to_panel(np.array([note.at], float))
        away = [float(_away(t, at).max()) for t in lines]
        if away and min(away) <= REACH:
            return int(np.argmin(away))
    if note.name is None:
        return None
    for k, t in enumerate(lines):
        if t.name == note.name:
            return k
    # the name was given by what the line means, which is not known here: the line that is meant
    # is the one that the path leaves and comes back to; any other guess could replace a wrong one
    ends = [float(_away(t, path[[0, -1]]).max()) for t in lines]
    return int(np.argmin(ends)) if ends and min(ends) <= REACH else None


def _away(line: Trace, points: Array) -> Array:
    """Distance of each point from a line [px]."""
    a, d = line.flat[:-1], np.diff(line.flat, axis=0)
    size = np.maximum((d**2).sum(1), 1e-12)
    r = points[:, None] - a
    t = np.clip((r * d).sum(-1) / size, 0.0, 1.0)
    return np.asarray(np.hypot(*np.moveaxis(r - t[..., None] * d, -1, 0)).min(1))


def _spliced(old: Trace, drawn: Trace) -> Trace:
    """The old line with what lies between the ends of the drawn one replaced by it."""
    if old.path or drawn.path:
        s = arc_length(old.flat)
        at = [int(np.hypot(*(old.flat - e).T).argmin()) for e in drawn.flat[[0, -1]]]
        new = drawn if at[0] <= at[1] else _reversed(drawn)
        low, high = sorted(at)
        before, after = s < s[low], s > s[high]
    else:
        new = drawn
        before = old.flat[:, 0] < drawn.flat[0, 0]
        after = old.flat[:, 0] > drawn.flat[-1, 0]
    parts = [
        np.concatenate([getattr(old, n)[before], getattr(new, n), getattr(old, n)[after]])
        for n in ("flat", "sigma", "flags")
    ]
    return replace(old, flat=parts[0], sigma=parts[1], flags=parts[2])


def _reversed(line: Trace) -> Trace:
    return replace(line, flat=line.flat[::-1], sigma=line.sigma[::-1], flags=line.flags[::-1])


def _leave_out(
    panel: Panel, lines: list[Trace], note: CurveNotes, box: tuple[float, float, float, float]
) -> None:
    """Take the points in a box (page px) away from the line that the note names, or from all."""
    chosen = _line_of(panel, lines, note, _middle(panel, box)) if note.at or note.name else None
    for k, line in enumerate(lines):
        if chosen is not None and k != chosen:
            continue
        x, y = line.xy.T
        inside = (x >= box[0]) & (x <= box[2]) & (y >= box[1]) & (y <= box[3])
        if inside.any() and (~inside).sum() >= 2:
            keep = ~inside
            lines[k] = replace(
                line, flat=line.flat[keep], sigma=line.sigma[keep], flags=line.flags[keep]
            )


def _middle(panel: Panel, box: tuple[float, float, float, float]) -> Array:
    x, y = (box[0] + box[2]) / 2, (box[1] + box[3]) / 2
    return panel.warp.to_panel(np.array([[x, y], [x, y]]))
