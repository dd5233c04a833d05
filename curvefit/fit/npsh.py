"""NPSHr between the drawn diameters: interpolated, with no diameter law.

Trimming turns the outer diameter down and leaves the impeller eye as it is, so that NPSHr at a
given flow depends little on the diameter and follows no affinity law for it. With the speed it
grows with its square near the charted speed only.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import ChartError
from curvefit.fit.bands import spread
from curvefit.fit.choice import Choice
from curvefit.fit.quantiles import normal_two_sided
from curvefit.fit.said import finding, where
from curvefit.records import Band, Fit

__all__ = ["npsh_between"]

Array = NDArray[np.float64]

NEAR = 0.2  #: how far from the charted speed the square law of NPSHr is given


def npsh_between(
    fits: Sequence[Fit],
    diameter_si: float | None = None,
    speed_si: float | None = None,
    choice: Choice | None = None,
) -> Fit:
    """NPSHr at a diameter between those drawn and at a speed near the charted one.

    Parameters
    ----------
    fits : of the NPSHr curves of one pump
    diameter_si : [m]; None: of the largest impeller
    speed_si : [1/s]; None: the charted speed

    Notes
    -----
    At the same flow, linear in the diameter between the two neighbours. The band holds, beside
    theirs, w(1−w) times their difference for the way of interpolating. A chart with one NPSHr
    curve gives that curve at any diameter, and says so. Speed: Q ∝ n, NPSHr ∝ n².

    Raises
    ------
    ChartError
        If no fit is of NPSHr, or the speed is more than 20 % from the charted one.
    """
    own = [f for f in fits if f.curve.quantity == "npsh_required"]
    if not own:
        raise ChartError("there is no NPSHr curve to interpolate")
    choice = choice or Choice()
    said = []
    known = sorted((f for f in own if f.curve.diameter_si), key=lambda f: f.curve.diameter_si or 0)
    if len(known) < 2 or diameter_si is None:
        fit = known[-1] if known else own[0]
        pair, share = (fit, fit), 0.0
        if diameter_si is not None and fit.curve.diameter_si != diameter_si:
            said.append(
                finding(
                    "info",
                    "family.npsh-one-curve",
                    fit.curve,
                    "The chart has one NPSHr curve; it is given for every diameter.",
                )
            )
    else:
        diameters = np.array([f.curve.diameter_si for f in known], float)
        inside = float(np.clip(diameter_si, diameters[0], diameters[-1]))
        right = int(np.clip(np.searchsorted(diameters, inside), 1, len(known) - 1))
        pair = (known[right - 1], known[right])
        share = float((inside - diameters[right - 1]) / (diameters[right] - diameters[right - 1]))
        if abs(inside - diameter_si) > 1e-3 * inside:
            said.append(
                finding(
                    "warning",
                    "family.beyond-drawn",
                    pair[0].curve,
                    f"The diameter {diameter_si * 1e3:.4g} mm lies beyond those drawn, "
                    f"{diameters[0] * 1e3:.4g} to {diameters[-1] * 1e3:.4g} mm: NPSHr is that of "
                    "the nearest one.",
                    "Choose a diameter inside the drawn range.",
                )
            )
    low = max(f.flow_range_si[0] for f in pair)
    high = min(f.flow_range_si[1] for f in pair)
    if high <= low:
        raise ChartError(
            "the two NPSHr curves next to that diameter share no flow", where(pair[0].curve)
        )
    grid = np.linspace(low, high, len(pair[0].band.flow_si))

    first, second = (np.interp(grid, f.band.flow_si, f.band.value_si) for f in pair)
    value = (1 - share) * first + share * second
    weights = (1 - share, share)
    own_rows = [w * _rows(f, f.factors, grid) for w, f in zip(weights, pair, strict=True) if w > 0]
    between = share * (1 - share) * (second - first)[None]
    factors = np.concatenate([*own_rows, between])
    common = [
        w * _rows(f, f.calibration, grid) for w, f in zip(weights, pair, strict=True) if w > 0
    ]
    same = all(
        (f.curve.flow_axis, f.curve.value_axis)
        == (pair[0].curve.flow_axis, pair[0].curve.value_axis)
        for f in pair
    )
    calibration = None
    if all(len(c) == 4 for c in common):
        if same:
            calibration = np.sum(common, axis=0)
        else:
            factors = np.concatenate([factors, *common])
    unknown = any(f.factors is None for f in pair)

    ratio = _ratio(pair[0], speed_si)
    if ratio != 1.0:
        said.append(
            finding(
                "info",
                "family.npsh-speed",
                pair[0].curve,
                f"NPSHr at {ratio:.3g} times the charted speed follows the square law, which holds "
                "near that speed only; the band does not hold the law's own error.",
            )
        )
    grid, value, factors = grid * ratio, value * ratio**2, factors * ratio**2
    calibration = None if calibration is None else calibration * ratio**2
    half = normal_two_sided(choice.confidence) * spread(factors, calibration)
    band = Band(
        grid,
        value,
        None if unknown else value - half,
        None if unknown else value + half,
        "pointwise",
        choice.confidence,
    )
    curves = tuple(dict.fromkeys(f.curve for f in pair))
    parameters = {"share_of_larger": share, "speed_ratio": ratio}
    parameters |= {} if diameter_si is None else {"diameter": diameter_si}
    parameters |= {} if speed_si is None else {"speed": speed_si}
    place = [f"{diameter_si * 1e3:.4g} mm"] if diameter_si is not None else []
    place += [f"{speed_si * 60:.4g} 1/min"] if speed_si is not None else []
    return Fit(
        "npsh_required family at " + ", ".join(place or ["the largest diameter"]),
        curves,
        "piecewise",
        None,
        (float(grid[0]), float(grid[-1])),
        band,
        parameters=parameters,
        factors=None if unknown else factors,
        calibration=None if unknown else calibration,
        reason="interpolated between drawn curves; NPSHr has no diameter law",
        knots_si=np.stack([grid, value], axis=1),
        findings=tuple(said),
    )


def _ratio(fit: Fit, speed_si: float | None) -> float:
    if speed_si is None or fit.curve.speed_si is None:
        if speed_si is not None:
            raise ChartError(
                "the chart's speed is not known, so another speed cannot be reached from it",
                where(fit.curve),
                "Give the pump's speed in the notes.",
            )
        return 1.0
    ratio = speed_si / fit.curve.speed_si
    if abs(ratio - 1.0) > NEAR:
        raise ChartError(
            f"NPSHr follows the square of the speed near the charted one only; {ratio:.3g} times "
            f"it is too far (at most {NEAR:.0%} either way)",
            where(fit.curve),
            "Ask for a speed nearer to the charted one.",
        )
    return float(ratio)


def _rows(fit: Fit, causes: Array | None, grid: Array) -> Array:
    """Causes of a fit brought to other flows, (m, n); none where they are not known."""
    if causes is None:
        return np.zeros((0, len(grid)))
    return np.stack([np.interp(grid, fit.band.flow_si, row) for row in causes])
