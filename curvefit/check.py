"""Cross-checks of what was read: does the set of curves obey the physics of one pump?"""

from __future__ import annotations

from collections.abc import Sequence

from curvefit.records import Curve, Finding, Fit

__all__ = ["check"]


def check(curves: Sequence[Curve], fits: Sequence[Fit]) -> tuple[Finding, ...]:
    """The findings of the physics checks on the curves of one page."""
    return ()
