"""Width of the printed numbers against the characters read: what a progression cannot see.

If every number of an axis loses its last figure or its point, the numbers still agree with each
other. Only their print betrays them: too wide for so few characters.
"""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np

from curvefit.calibrate.consensus import Label
from curvefit.calibrate.doubts import marks_remedy
from curvefit.calibrate.labels import Reading
from curvefit.errors import Location
from curvefit.records import Finding

__all__ = ["Pitch", "pitch_of", "too_wide"]

#: width of a figure in heights, and whether it comes from single figures or figures with points
Pitch = tuple[float, bool]
#: figures of all faces in use are narrower, in heights of a figure
_WIDEST = 1.08
#: the axes of one box are set in one face; their pitches differ by a few per cent
_UNLIKE = 1.16
#: single figures, and points, differ in width by themselves; a lost figure adds half at least
_UNLIKE_SINGLE = 1.4


def pitch_of(labels: Sequence[Label], chosen: Sequence[Reading | None]) -> Pitch | None:
    """Width of a figure as read, in heights of the type; None where too few numbers tell."""
    found, figures = [], []
    for lb, reading in zip(labels, chosen, strict=True):
        if lb.word is None or not lb.firm or not re.fullmatch(r"\d+([.,]\d+)?", lb.text):
            continue
        digits = sum(c.isdigit() for c in lb.text)
        # a point takes half the room of a figure, a 1 has white at its sides
        figures.append(digits if lb.text.isdigit() else 1)
        put_in = 0.5 * (reading is not None and "put in" in reading.how)
        room = digits + put_in + 0.5 * (len(lb.text) - digits) - 0.1 * lb.text.count("1")
        found.append((lb.word.width / lb.word.height + 0.15) / room)
    if len(found) < 3:
        return None
    return float(np.median(found)), bool(np.median(figures) <= 1)


def too_wide(pitches: dict[str, Pitch | None]) -> list[Finding]:
    """A warning for each axis whose numbers are too wide for the characters read.

    pitches : name of the axis → pitch of its numbers.
    """
    out = []
    for name, of_axis in pitches.items():
        if of_axis is None:
            continue
        pitch, single = of_axis
        others = [p[0] for n, p in pitches.items() if n != name and p is not None and not p[1]]
        usual = float(np.median(others)) if others else None
        unlike = _UNLIKE_SINGLE if single else _UNLIKE
        if pitch < _WIDEST and (usual is None or pitch < unlike * usual):
            continue
        panel, _, axis = name.partition(".")
        expected = f"{usual:.2f}" if usual is not None else f"less than {_WIDEST:.2f}"
        message = (
            f"its figures as read are {pitch:.2f} of their height wide, {expected} was expected: "
            "a figure or a decimal point of every number may be lost."
        )
        where = Location(panel=panel, axis=name)
        out.append(Finding("warning", "axis.factor", message, where, marks_remedy(panel, axis)))
    return out
