"""Fits of one pump and a system → where they work together, how sure that is, and the doubts."""

from __future__ import annotations

from curvefit.duty.machine import Arrangement, Line, line_of_fit, line_of_points
from curvefit.duty.point import Duty, duty, minimum_speed_ratio
from curvefit.duty.system_file import read_system, system_from
from curvefit.duty.wanted import diameter_for, speed_for

__all__ = [
    "Arrangement",
    "Duty",
    "Line",
    "diameter_for",
    "duty",
    "line_of_fit",
    "line_of_points",
    "minimum_speed_ratio",
    "read_system",
    "speed_for",
    "system_from",
]
