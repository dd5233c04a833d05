"""Fits of one pump and a system → where they work together, how sure that is, and the doubts."""

from __future__ import annotations

from curvefit.duty.machine import Arrangement, Line, line_of_fit
from curvefit.duty.point import Duty, duty, minimum_speed_ratio, speed_for
from curvefit.duty.system_file import read_system, system_from

__all__ = [
    "Arrangement",
    "Duty",
    "Line",
    "duty",
    "line_of_fit",
    "minimum_speed_ratio",
    "read_system",
    "speed_for",
    "system_from",
]
