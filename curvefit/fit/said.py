"""Findings of the fit stage about one curve."""

from __future__ import annotations

from typing import Literal

from curvefit.errors import Location
from curvefit.records import Curve, Finding

__all__ = ["finding", "where"]


def where(curve: Curve) -> Location:
    """Panel, axis and name of a curve."""
    panel = curve.panel.name if curve.panel is not None else None
    return Location(panel=panel, axis=curve.value_axis, curve=curve.name)


def finding(
    severity: Literal["info", "warning", "error"],
    code: str,
    curve: Curve,
    message: str,
    remedy: str = "",
) -> Finding:
    """A finding placed at a curve."""
    return Finding(severity, code, message, where(curve), remedy)
