"""Acceptance grades of ISO 9906:2012 (ANSI/HI 14.6): the tolerance about a guaranteed duty.

These are *acceptance* bands of a witnessed test. They say what a buyer must accept, not how well
a chart was read: keep them apart from confidence bands.

The figures are those of ISO 9906:2012, table 8, from memory, not confirmed against the standard;
what secondary sources print of them (class 2 flow 8 %, head 5 %, efficiency −5 %) agrees. The
1999 edition had other figures (grade 1: flow ±4.5 %). Check the contract's own edition.
"""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["GRADES", "Grade"]


@dataclass(frozen=True, slots=True)
class Grade:
    """Tolerances as fractions of the guaranteed value: (low, high) of flow and head; the largest
    excess of power; the largest shortfall of efficiency, relative (not points)."""

    name: str
    flow: tuple[float, float]
    head: tuple[float, float]
    power: float
    efficiency: float
    edition: str = "ISO 9906:2012, table 8 (from memory)"


GRADES = {
    g.name: g
    for g in (
        Grade("1U", (0.0, 0.10), (0.0, 0.06), 0.10, 0.0),
        Grade("1E", (-0.05, 0.05), (-0.03, 0.03), 0.04, 0.0),
        Grade("1B", (-0.05, 0.05), (-0.03, 0.03), 0.04, 0.03),
        Grade("2B", (-0.08, 0.08), (-0.05, 0.05), 0.08, 0.05),
        Grade("2U", (0.0, 0.16), (0.0, 0.10), 0.16, 0.05),
        Grade("3B", (-0.09, 0.09), (-0.07, 0.07), 0.09, 0.07),
    )
}
