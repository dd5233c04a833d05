"""Page → panels: plot boxes with their axes."""

from __future__ import annotations

from curvefit.calibrate.panels import calibrate

__all__ = ["calibrate"]
