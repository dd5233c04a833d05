"""Leaders: short straight lines that lead from a label to the line that it names."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.identify.placing import Label, spot
from curvefit.records import Panel, Trace

__all__ = ["Settings", "follow_leaders"]

Array = NDArray[np.float64]

_NAMING = ("diameter", "speed", "stages", "letter", "quantity")


@dataclass(frozen=True, slots=True)
class Settings:
    """longest : of a leader, as a share of the box; bent : off its chord, share of its length.

    at_label, at_line : its ends lie this close to them, in heights of the text.
    """

    longest: float = 0.25
    bent: float = 0.01
    at_label: float = 0.9
    at_line: float = 0.7


def follow_leaders(
    panel: Panel,
    traces: Sequence[Trace],
    labels: Sequence[Label],
    settings: Settings | None = None,
) -> tuple[list[Trace], tuple[Label, ...]]:
    """The traces without leaders, and the labels moved to where their leaders point.

    Notes
    -----
    A leader is straight (with one corner at most) and short, starts at a label that could name a
    line (a level in % could not: its own line ends at it) and ends on another line.
    """
    settings = settings or Settings()
    straight = [t for t in traces if _straight(t, panel, settings)]
    kept, moved = list(traces), list(labels)
    for leader in straight:
        others = [t for t in kept if not any(t is s for s in straight)]
        found = _label_of(leader, moved, settings)
        if found is None or not others:
            continue
        k, foot = found
        gap = min(float(np.hypot(*(t.flat - foot).T).min()) for t in others)
        plain = any(m.plain for m in moved[k].meanings)
        if gap > settings.at_line * moved[k].height + 2.0:
            continue
        if not plain and _crosses(leader, others):  # rather a level with its % unread
            continue
        kept = [t for t in kept if t is not leader]
        moved[k] = replace(moved[k], centre=foot, half=np.full(2, 1.0))
    return kept, tuple(moved)


def _straight(trace: Trace, panel: Panel, settings: Settings) -> bool:
    """Whether a trace is short and straight, or of two straight parts with a corner between."""
    length = float(np.hypot(*(trace.flat[-1] - trace.flat[0])))
    if not 3.0 < length < settings.longest * panel.warp.size[0]:
        return False
    allowed = settings.bent * length + 0.7
    off = _off_chord(trace.flat)
    if off.max() < allowed:
        return True
    k = int(np.argmax(off))
    return bool(
        max(_off_chord(trace.flat[: k + 1]).max(), _off_chord(trace.flat[k:]).max()) < allowed
    )


def _crosses(leader: Trace, others: Sequence[Trace]) -> bool:
    """Whether a line runs across others on its way, as levels do and leaders seldom do."""
    n = len(leader.flat)
    middle = leader.flat[n // 5 : n - n // 5 : max(n // 40, 1)]
    return any(
        float(np.hypot(*(t.flat[None] - middle[:, None]).transpose(2, 0, 1)).min()) < 3.0
        for t in others
    )


def _off_chord(xy: Array) -> Array:
    """Distances of points from the straight line between the first and the last."""
    chord = xy[-1] - xy[0]
    along = chord / max(float(np.hypot(*chord)), 1e-9)
    return np.asarray(np.abs((xy - xy[0]) @ np.array([-along[1], along[0]])))


def _label_of(
    leader: Trace, labels: Sequence[Label], settings: Settings
) -> tuple[int, Array] | None:
    """The label at one end of a leader, and its other end."""
    best: tuple[float, int, Array] | None = None
    if any(spot(w, leader).gap < 1.5 for w in labels if w.means("percent")):
        return None
    for k, label in enumerate(labels):
        if label.means("percent") or not any(label.means(kind) for kind in _NAMING):
            continue
        seen = spot(label, leader)
        for gap, foot in ((seen.start, leader.flat[-1]), (seen.end, leader.flat[0])):
            if gap < settings.at_label and (best is None or gap < best[0]):
                best = gap, k, np.asarray(foot)
    return None if best is None else (best[1], best[2])
