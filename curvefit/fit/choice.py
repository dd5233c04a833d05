"""What the user asks of a fit, and the tolerances of the stage."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from curvefit.errors import InputError

__all__ = ["Choice", "Settings"]

Family = Literal["auto", "polynomial", "power", "piecewise"]
Kind = Literal["pointwise", "simultaneous", "prediction"]


@dataclass(frozen=True, slots=True)
class Choice:
    """What to fit; the default leaves the model to the data.

    family : "auto", "polynomial", "power" (H = H0 − a·Qⁿ, NPSHr = c0 + c1·Qⁿ) or "piecewise".
    degree : of the polynomial, 1–6; None: by what predicts best.
    without : powers of Q whose coefficient is held at zero: (0,) runs through zero at zero flow,
        (1,) has no linear term.
    confidence, kind : of the band. "prediction" is for measured points only.
    extrapolate : flows [m³/s] to which the curve is carried on, or None.
    """

    family: Family = "auto"
    degree: int | None = None
    without: tuple[int, ...] = ()
    confidence: float = 0.95
    kind: Kind = "pointwise"
    extrapolate: tuple[float, float] | None = None

    def __post_init__(self) -> None:
        if self.degree is not None and not 1 <= self.degree <= 6:
            raise InputError(f"degree {self.degree} is not possible", remedy="Use 1 to 6.")
        if not 0.5 <= self.confidence < 1.0:
            raise InputError(
                f"confidence {self.confidence} is not possible",
                remedy="Use a share between 0.5 and 1, such as 0.95.",
            )
        if self.family not in ("auto", "polynomial", "power", "piecewise"):
            raise InputError(
                f"family {self.family!r} is not known",
                remedy="Use auto, polynomial, power or piecewise.",
            )
        if self.degree is not None and self.family in ("power", "piecewise"):
            raise InputError(
                f"a degree does not go with the family {self.family}",
                remedy="Leave the degree out, or choose the family polynomial.",
            )


@dataclass(frozen=True, slots=True)
class Settings:
    """Tolerances of the stage.

    thin : points kept of a traced line. lengths : correlation lengths tried, as shares of the
    flow range. nuggets : shares of the noise without correlation tried. scale_prior : how far the
    stated uncertainty is trusted (standard deviation of its log). lowest, highest : degrees over
    which a traced line is averaged. grid : points of a band. poor, poor_sigmas : an equation
    serves no more where its residuals exceed this share of the value range and so many
    uncertainties. draws : for simultaneous bands.
    """

    thin: int = 64
    lengths: tuple[float, ...] = (0.0015, 0.004, 0.0085, 0.014, 0.023, 0.036, 0.057, 0.093, 0.143)
    nuggets: tuple[float, ...] = (0.0, 0.3)
    scale_prior: float = 0.3
    lowest: int = 3
    highest: int = 6
    grid: int = 201
    poor: float = 0.003
    poor_sigmas: float = 4.0
    draws: int = 4000
