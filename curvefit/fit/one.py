"""One curve: what kind of points it has, whether they can be fitted, and by which way."""

from __future__ import annotations

import numpy as np

from curvefit.errors import ChartError
from curvefit.fit.choice import Choice, Settings
from curvefit.fit.measured import fit_measured
from curvefit.fit.said import finding, where
from curvefit.fit.traced import fit_traced
from curvefit.records import Band, Curve, Fit

__all__ = ["fit_one"]

FEWEST = 5  #: points that a fit of a traced line needs


def fit_one(
    curve: Curve, choice: Choice, settings: Settings, rng: np.random.Generator | None
) -> Fit:
    """The fit of one curve; see :func:`curvefit.fit.fit_curve`."""
    _sound(curve)
    if curve.sigma_si is None:
        return fit_measured(curve, choice, settings)
    if len(curve.flow_si) < FEWEST:
        return _points_only(curve, choice)
    return fit_traced(curve, choice, settings, rng)


def _sound(curve: Curve) -> None:
    """Raises where the points cannot be a curve."""
    for name, array in (("flow", curve.flow_si), ("value", curve.value_si)):
        bad = np.flatnonzero(~np.isfinite(array))
        if len(bad):
            raise ChartError(
                f"point {bad[0] + 1} of curve {curve.name!r} has no {name} (it is {array[bad[0]]})",
                where=where(curve),
                remedy="Take the point out.",
            )
    for name, u in (("uncertainty", curve.sigma_si), ("trace uncertainty", curve.trace_sigma_si)):
        if u is not None and not (np.isfinite(u).all() and (u >= 0).all()):
            raise ChartError(
                f"curve {curve.name!r} has a {name} that is no number ≥ 0", where(curve)
            )
    back = np.flatnonzero(np.diff(curve.flow_si) <= 0)
    if len(back) and curve.sigma_si is not None:
        raise ChartError(
            f"the flow of curve {curve.name!r} does not increase at point {back[0] + 2}",
            where=where(curve),
            remedy="Sort the points by flow; each flow may stand once.",
        )


def _points_only(curve: Curve, choice: Choice) -> Fit:
    """The points themselves, where there are too few for an equation."""
    n = len(curve.flow_si)
    said = finding(
        "warning",
        "fit.few-points",
        curve,
        f"The curve has {n} points; a fit with a band needs at least {FEWEST}.",
        "Give its path in the notes.",
    )
    kind = "pointwise" if choice.kind == "prediction" else choice.kind
    band = Band(curve.flow_si, curve.value_si, None, None, kind, choice.confidence)
    low, high = (float(curve.flow_si[0]), float(curve.flow_si[-1])) if n else (0.0, 0.0)
    return Fit(
        curve.name,
        (curve,),
        "piecewise",
        None,
        (low, high),
        band,
        reason="too few points for an equation",
        knots_si=np.stack([curve.flow_si, curve.value_si], axis=1),
        findings=(said,),
    )
