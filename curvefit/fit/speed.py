"""A fit carried to another speed by the affinity laws, exactly."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from curvefit.errors import ChartError
from curvefit.fit.said import finding, where
from curvefit.models import SPEED_EXPONENTS, at_speed
from curvefit.records import Band, Fit

__all__ = ["fit_at_speed"]


def fit_at_speed(fit: Fit, speed_si: float) -> Fit:
    """The same fit at another speed [1/s].

    Notes
    -----
    Q ∝ n; head, pressure and NPSHr ∝ n², power ∝ n³, efficiency unchanged. Coefficients, band and
    causes are carried along exactly; the band does not hold the error of the laws themselves.

    Raises
    ------
    ChartError
        If the speed of the curve is not known, or NPSHr is asked for far from it.
    """
    curve = fit.curve
    if curve.speed_si is None:
        raise ChartError(
            "the curve's speed is not known, so another speed cannot be reached from it",
            where=where(curve),
            remedy="Give the pump's speed in the notes.",
        )
    ratio = speed_si / curve.speed_si
    if abs(ratio - 1.0) < 1e-9:
        return fit
    exponent = SPEED_EXPONENTS.get(curve.quantity, 0)
    near = 0.8 <= ratio <= 1.2 if curve.quantity == "npsh_required" else 0.5 <= ratio <= 1.5
    scale = ratio**exponent
    band = fit.band

    def moved(row: np.ndarray | None) -> np.ndarray | None:
        return None if row is None else row * scale

    low, high = fit.flow_range_si
    coefficients = fit.coefficients
    if coefficients is not None:
        coefficients = at_speed(coefficients, ratio, curve.quantity)
    said = finding(
        "info" if near else "warning",
        "family.speed-law",
        curve,
        f"The curve at {ratio:.3g} times its speed follows the affinity laws exactly; the band "
        f"does not hold their own error{'.' if near else ', and this is far from its speed.'}",
    )
    knots = fit.knots_si
    return replace(
        fit,
        name=f"{fit.name} at {speed_si * 60:.4g} 1/min",
        flow_range_si=(low * ratio, high * ratio),
        band=Band(
            band.flow_si * ratio,
            band.value_si * scale,
            moved(band.low_si),
            moved(band.high_si),
            band.kind,
            band.confidence,
        ),
        coefficients=coefficients,
        parameters=_parameters(fit, ratio, exponent),
        covariance=None,
        factors=moved(fit.factors),
        calibration=moved(fit.calibration),
        residual_rms_si=fit.residual_rms_si * scale,
        derived={},
        knots_si=None if knots is None else knots * [ratio, scale],
        reason=fit.reason + f"; carried to {ratio:.4g} times the speed by the affinity laws",
        findings=(*fit.findings, said),
    )


def _parameters(fit: Fit, ratio: float, exponent: int) -> dict[str, float]:
    """Those of a power form at the other speed: c0·rᵖ, c1·rᵖ⁻ⁿ, n."""
    if fit.family != "power":
        return dict(fit.parameters)
    (first, constant), (second, factor), (third, n) = fit.parameters.items()
    return {
        first: constant * ratio**exponent,
        second: factor * ratio ** (exponent - n),
        third: n,
    }
