"""Curves → equations with bands that hold: models, choice, uncertainty, affinity families."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

from curvefit.fit.choice import Choice, Settings
from curvefit.records import Curve, Fit, Pump

if TYPE_CHECKING:
    import numpy as np

__all__ = ["Choice", "Settings", "fit", "fit_curve"]


def fit(
    curves: Iterable[Curve],
    choice: Choice | None = None,
    settings: Settings | None = None,
    rng: np.random.Generator | None = None,
    pumps: Iterable[Pump] = (),
) -> tuple[Fit, ...]:
    """The fits of all curves that are functions of flow, in their order; iso lines are skipped.

    After them come the efficiencies that lines of equal efficiency give on the head curves of a
    hill chart; their curve records are made here, of the crossings.

    `derived` holds best efficiency point, shut-off head and specific speeds where the curves and
    `pumps` (speed, stages, suction sides) tell them.

    A curve with too few points for an equation gets its points back as a piecewise fit without a
    band and with a finding that says so.
    """
    from curvefit.fit.derived import derive

    curves = tuple(curves)
    fits = tuple(fit_curve(c, choice, settings, rng) for c in curves if not c.iso)
    return derive(fits + _from_hills(curves, choice, settings), pumps)


def _from_hills(
    curves: tuple[Curve, ...], choice: Choice | None, settings: Settings | None
) -> tuple[Fit, ...]:
    """Efficiencies from lines of equal efficiency, for pumps that have no efficiency curve."""
    if not any(c.quantity == "iso_efficiency" for c in curves):
        return ()
    from curvefit.fit.hill import efficiency_on_heads

    has_own = {c.pump for c in curves if c.quantity == "efficiency"}
    names = dict.fromkeys(c.pump for c in curves if c.pump not in has_own)
    return tuple(
        f
        for name in names
        for f in efficiency_on_heads([c for c in curves if c.pump == name], choice, settings)
    )


def fit_curve(
    curve: Curve,
    choice: Choice | None = None,
    settings: Settings | None = None,
    rng: np.random.Generator | None = None,
) -> Fit:
    """The equation of one curve, its band, and why this equation.

    Parameters
    ----------
    curve : Curve
        Traced (`sigma_si` given) or measured points (`sigma_si` None).
    choice : Choice, optional
        What the user asks for; by default the model that predicts best, with a pointwise 95 % band.
    settings : Settings, optional
    rng : numpy.random.Generator, optional
        For simultaneous bands of traced curves; a seeded one by default.

    Returns
    -------
    Fit
        SI. `factors` holds trace and equation errors, `calibration` those of the axes.

    Raises
    ------
    InputError
        If a forced degree is higher than the points carry, or a prediction band is asked for a
        traced curve.
    ChartError
        If the curve holds NaN or its flows do not increase.

    Notes
    -----
    Traced curves: generalised least squares under a noise model found by restricted likelihood,
    degrees 3–6 averaged by AICc; the band holds the noise along the line, the doubt about the
    equation and the errors of the axes. Measured points: textbook least squares.
    """
    from curvefit.fit.one import fit_one

    return fit_one(curve, choice or Choice(), settings or Settings(), rng)
