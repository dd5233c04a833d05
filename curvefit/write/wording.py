"""Ranges and sentences as people write them, the same on the terminal and in the report."""

from __future__ import annotations

from math import floor, log10

from curvefit.units import unit as known

__all__ = ["range_text", "sentence"]


def range_text(low: float, high: float, unit: str, joint: str = " to ") -> str:
    """A range with its unit, both ends to a ten-thousandth of the larger one.

    Examples
    --------
    >>> range_text(-5.5e-6, 532.18, "m3/h")
    '0 to 532.2 m³/h'
    """
    largest = max(abs(low), abs(high), 1e-300)
    places = 3 - floor(log10(largest))
    ends = (f"{round(v, places) + 0.0:.{max(places, 0)}f}" for v in (low, high))
    short = (e.rstrip("0").rstrip(".") if "." in e else e for e in ends)
    return f"{joint.join(short)} {known(unit).print}".rstrip()


def sentence(text: str) -> str:
    """The text with a capital at its start (but for words like gpm) and a mark at its end.

    Examples
    --------
    >>> sentence("two marks are needed")
    'Two marks are needed.'
    """
    text = text.strip()
    if text and text[-1] not in ".!?…:":
        text += "."
    first = text.partition(" ")[0]
    return text[:1].upper() + text[1:] if set(first) & set("aeiou") else text
