"""Affinity-law families: one quantity at any diameter and speed between those drawn."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import ChartError
from curvefit.fit.average import average
from curvefit.fit.bands import spread, sup_t
from curvefit.fit.choice import Choice, Settings
from curvefit.fit.joint import Joint, Line, centre, coefficients_at, fit_joint, predict
from curvefit.fit.quantiles import normal_two_sided
from curvefit.fit.said import finding, where
from curvefit.fit.traced import line_uncertainty, thinned
from curvefit.records import QUANTITIES, Band, Curve, Finding, Fit

__all__ = ["NOMINAL", "Family", "LeftOut", "beyond", "fit_family", "member_key"]

Array = NDArray[np.float64]

#: nominal exponents (of flow, of value): similar machines at another speed; trimmed impellers
#: by the same rule; and trimmed radially, where flow falls with the square (common practice, no
#: source beyond it). Efficiency: the loss of efficiency per share of diameter, 0 nominally.
NOMINAL = {
    "head": {"speed": (1, 2), "trim": (1, 2), "radial trim": (2, 2)},
    "differential_pressure": {"speed": (1, 2), "trim": (1, 2), "radial trim": (2, 2)},
    "shaft_power": {"speed": (1, 3), "trim": (1, 3), "radial trim": (2, 4)},
    "input_power": {"speed": (1, 3), "trim": (1, 3), "radial trim": (2, 4)},
    "efficiency": {"speed": (1, 0), "trim": (1, 0), "radial trim": (2, 0)},
    "overall_efficiency": {"speed": (1, 0), "trim": (1, 0), "radial trim": (2, 0)},
}
LINEAR = ("efficiency", "overall_efficiency")
WANTED = 4  #: curves from which on the family's own scatter can be told
SAME = 1e-3  #: a diameter or speed that differs by less is the charted one


@dataclass(frozen=True, slots=True)
class LeftOut:
    """One curve predicted from the others: root mean square error and largest error as shares of
    its value range, and the share of it inside the predicted band."""

    curve: str
    rms: float
    largest: float
    inside: float
    end: bool


@dataclass(frozen=True, slots=True, eq=False)
class Family:
    """The joint model of the curves of one quantity; `at` gives the curve at any ratio.

    reference : the largest diameter [m] and/or speed [1/s], by name; ratios are to it.
    """

    quantity: str
    curves: tuple[Curve, ...]
    joint: Joint
    lines: tuple[Line, ...]
    reference: dict[str, float]
    causes: tuple[str, ...]
    settings: Settings

    @property
    def exponents(self) -> dict[str, tuple[float, float, float]]:
        """Name → (exponent, its standard uncertainty, nominal): "flow by diameter" …"""
        values, u = self.joint.exponents
        names = list(self.reference)
        nominal = NOMINAL[self.quantity]
        out = {}
        for part, offset in (("flow", 0), ("value", len(names))):
            for i, name in enumerate(names):
                rule = nominal["speed" if name == "speed" else "trim"]
                expected = float(rule[0 if part == "flow" else 1])
                key = f"{part} by {name}"
                out[key] = (float(values[offset + i]), float(u[offset + i]), expected)
        return out

    def at(
        self,
        diameter_si: float | None = None,
        speed_si: float | None = None,
        choice: Choice | None = None,
        rng: np.random.Generator | None = None,
    ) -> Fit:
        """The curve at a diameter and speed; where they are not given, those of the largest.

        A charted diameter gets the model's value for that curve, its own deviation included.
        Beyond the drawn range the fit carries a warning. A speed other than the charted one,
        where the chart has only one, follows the affinity laws exactly.
        """
        choice = choice or Choice()
        asked = {"diameter": diameter_si, "speed": speed_si}
        logs = np.array([np.log((asked[n] or r) / r) for n, r in self.reference.items()])
        index = self._charted(logs)
        grid, said = self._range(logs, asked)
        value, factors, common = predict(self.joint, logs, grid, index)
        coefficients = coefficients_at(self.joint, logs, index)
        scale, said_speed = self._other_speed(speed_si)
        said += said_speed
        grid, value = grid * scale[0], value * scale[1]
        factors, common = factors * scale[1], common * scale[1]
        powers = np.arange(len(coefficients), dtype=float)
        coefficients = coefficients * scale[1] * scale[0] ** -powers
        calibration = common if len(self.causes) == 4 else None
        if calibration is None and len(common):
            factors = np.concatenate([factors, common])
        causes = factors if calibration is None else np.concatenate([factors, calibration])
        wide = normal_two_sided(choice.confidence)
        if choice.kind == "simultaneous":
            wide = sup_t(
                causes, choice.confidence, rng or np.random.default_rng(0), self.settings.draws
            )
        half = wide * spread(causes)
        if len(self.curves) < WANTED:
            said.append(
                finding(
                    "info",
                    "family.few-curves",
                    self.curves[0],
                    f"The family has {len(self.curves)} curves; how far one departs from the law "
                    f"can be told from {WANTED} on. The band between them is wide.",
                )
            )
        parameters = self._parameters()
        parameters |= {
            name: float(r * np.exp(x))
            for (name, r), x in zip(self.reference.items(), logs, strict=True)
        }
        if speed_si is not None and "speed" not in self.reference:
            parameters["speed"] = speed_si
        return Fit(
            self._name(asked),
            self.curves,
            "affinity",
            self.joint.degree,
            (float(grid[0]), float(grid[-1])),
            Band(grid, value, value - half, value + half, choice.kind, choice.confidence),
            coefficients,
            parameters,
            None,
            factors,
            calibration,
            self._residual(),
            float(sum(len(line.flow) for line in self.lines)),
            reason="one model of all curves, exponents fitted, own deviation of each curve",
            findings=tuple(said),
        )

    def leave_one_out(self) -> tuple[LeftOut, ...]:
        """Each curve predicted from the others; empty where fewer than three would be left."""
        if len(self.lines) < 4:
            return ()
        out = []
        logs = np.stack([line.logs for line in self.lines])
        for i, line in enumerate(self.lines):
            rest = tuple(x for j, x in enumerate(self.lines) if j != i)
            if any(np.ptp([x.logs[c] for x in rest]) < SAME for c in range(logs.shape[1])):
                continue
            joint = fit_joint(rest, self.joint.degree, _start(self.joint), self.joint.linear)
            # the axes' errors are common to all curves: the left-out one shares them
            value, factors, _ = predict(joint, line.logs, line.flow)
            error = value - line.value
            own = spread(factors)
            span = float(np.ptp(line.value)) or 1.0
            end = bool(
                np.any(line.logs <= logs.min(0) + 1e-9) or np.any(line.logs >= logs.max(0) - 1e-9)
            )
            rms = float(np.sqrt(np.mean(error**2))) / span
            inside = float(np.mean(np.abs(error) <= 1.96 * own))
            largest = float(np.abs(error).max()) / span
            out.append(LeftOut(self.curves[i].name, rms, largest, inside, end))
        return tuple(out)

    # --- parts ------------------------------------------------------------------------------

    def _charted(self, logs: Array) -> int | None:
        for i, line in enumerate(self.lines):
            if np.all(np.abs(line.logs - logs) < SAME):
                return i
        return None

    def _range(self, logs: Array, asked: dict[str, float | None]) -> tuple[Array, list[Finding]]:
        """The flows over which the curve is given, and a warning beyond the drawn range."""
        drawn = np.stack([line.logs for line in self.lines])
        said: list[Finding] = []
        for c, name in enumerate(self.reference):
            low, high = drawn[:, c].min(), drawn[:, c].max()
            if logs[c] < low - SAME or logs[c] > high + SAME:
                values = (self.reference[name] * np.exp(x) for x in (logs[c], low, high))
                said.append(beyond(self.curves[0], name, *map(float, values)))
        a = self.joint.exponents[0][: len(self.reference)]
        starts = np.array([line.flow[0] * np.exp(-line.logs @ a) for line in self.lines])
        ends = np.array([line.flow[-1] * np.exp(-line.logs @ a) for line in self.lines])
        if drawn.shape[1] == 1:
            order = np.argsort(drawn[:, 0])
            low = float(np.interp(logs[0], drawn[order, 0], starts[order]))
            high = float(np.interp(logs[0], drawn[order, 0], ends[order]))
        else:
            low, high = float(starts.max()), float(ends.min())
        scale = float(np.exp(logs @ a))
        return np.linspace(low * scale, high * scale, self.settings.grid), said

    def _other_speed(self, speed_si: float | None) -> tuple[tuple[float, float], list[Finding]]:
        """Scales of flow and value at a speed that the chart does not draw."""
        if speed_si is None or "speed" in self.reference:
            return (1.0, 1.0), []
        charted = {c.speed_si for c in self.curves if c.speed_si}
        if len(charted) != 1:
            raise ChartError(
                "the chart's speed is not known, so another speed cannot be reached from it",
                where=where(self.curves[0]),
                remedy="Give the pump's speed in the notes.",
            )
        ratio = speed_si / charted.pop()
        if abs(ratio - 1) < 1e-6:
            return (1.0, 1.0), []
        exponent = NOMINAL[self.quantity]["speed"][1]
        said = finding(
            "info" if 0.5 <= ratio <= 1.5 else "warning",
            "family.speed-law",
            self.curves[0],
            f"The chart has one speed; the curve at {ratio:.3g} times it follows the affinity laws "
            "exactly, and the band does not hold their own error.",
        )
        return (ratio, ratio**exponent), [said]

    def _parameters(self) -> dict[str, float]:
        out: dict[str, float] = {}
        for name, (value, u, nominal) in self.exponents.items():
            key = name.replace(" ", "_")
            out |= {f"{key}": value, f"u_{key}": u, f"nominal_{key}": nominal}
        out |= {f"reference_{name}": value for name, value in self.reference.items()}
        out["own_deviation"] = self.joint.tau
        return out

    def _residual(self) -> float:
        squares, count = 0.0, 0
        for i, line in enumerate(self.lines):
            value = centre(self.joint, line.logs, line.flow, i)
            squares += float(np.sum((value - line.value) ** 2))
            count += len(line.flow)
        return float(np.sqrt(squares / count))

    def _name(self, asked: dict[str, float | None]) -> str:
        words = [
            _shown(n, v or self.reference.get(n, 0.0))
            for n, v in asked.items()
            if v or n in self.reference
        ]
        return f"{self.quantity} family at " + ", ".join(words)


def fit_family(curves: Sequence[Curve], settings: Settings | None = None) -> Family:
    """The joint model of one quantity's curves of different diameters and/or speeds.

    Parameters
    ----------
    curves : traced curves of one quantity and one pump, each with a diameter or a speed that
        tells it from the others
    settings : Settings, optional

    Raises
    ------
    ChartError
        If fewer than two curves differ in diameter or speed, or quantities are mixed, or the
        quantity has no affinity law.

    Notes
    -----
    v(q) = S(λ)·f(q/λᵃ), with S = λᵇ (efficiency: 1 − c(1 − λ)), every curve with a small deviation
    of its own; see :mod:`curvefit.fit.joint`. NPSHr has no diameter law: use
    :func:`curvefit.fit.npsh.npsh_between`.
    """
    settings = settings or Settings()
    quantities = {c.quantity for c in curves}
    if len(quantities) != 1:
        raise ChartError(f"a family is of one quantity, these curves have {len(quantities)}")
    quantity = quantities.pop()
    if quantity not in NOMINAL:
        word = QUANTITIES[quantity].title if quantity in QUANTITIES else quantity
        raise ChartError(f"{word} has no affinity law for the diameter")
    members, reference = _members(curves)
    causes = _causes(members)
    noises = [_line(c, settings) for c in members]
    degree = min(6, max(4, *(n[3] for n in noises)))
    lines = tuple(
        Line(_logs(c, reference), flow, value, whitener, _calibration(c, kept, causes))
        for c, (kept, whitener, (flow, value), _) in zip(members, noises, strict=True)
    )
    names = list(reference)
    rules = NOMINAL[quantity]
    nominal = [rules["speed" if n == "speed" else "trim"] for n in names]
    start = (np.array([float(r[0]) for r in nominal]), np.array([float(r[1]) for r in nominal]))
    joint = fit_joint(lines, degree, start, quantity in LINEAR)
    return Family(quantity, tuple(members), joint, lines, reference, causes, settings)


def beyond(curve: Curve, name: str, asked: float, low: float, high: float) -> Finding:
    """Says that a diameter or speed lies beyond those drawn."""
    return finding(
        "warning",
        "family.beyond-drawn",
        curve,
        f"The {name} {_shown(name, asked)} lies beyond those drawn, {_shown(name, low)} to "
        f"{_shown(name, high)}: the law is carried on, and nothing on the chart confirms it.",
        f"Choose a {name} inside the drawn range.",
    )


def member_key(curve: Curve) -> tuple[float | None, float | None]:
    """Diameter and speed (or speed ratio) of a curve."""
    return curve.diameter_si, curve.speed_si if curve.speed_si else curve.speed_ratio


def _members(curves: Sequence[Curve]) -> tuple[list[Curve], dict[str, float]]:
    """The curves that can be told apart, and the largest of each thing that varies."""
    varying: dict[str, float] = {}
    for i, name in enumerate(("diameter", "speed")):
        values = [member_key(c)[i] for c in curves]
        known = [v for v in values if v is not None]
        if len(known) == len(values) and np.ptp(known) > SAME * max(known):
            varying[name] = float(max(known))
    members = [c for c in curves if c.sigma_si is not None and len(c.flow_si) >= 12]
    if not varying or len(members) < 2:
        raise ChartError(
            f"a family needs at least two traced curves of known and different diameters or "
            f"speeds; of these {len(curves)}, {len(members)} are traced, and "
            f"{'they differ in ' + ' and '.join(varying) if varying else 'none differs'}",
            where=where(curves[0]),
            remedy="Give the diameters or speeds in the notes.",
        )
    return members, varying


def _logs(curve: Curve, reference: dict[str, float]) -> Array:
    values = dict(zip(("diameter", "speed"), member_key(curve), strict=True))
    return np.array([np.log(float(values[n] or r) / r) for n, r in reference.items()])


def _line(
    curve: Curve, settings: Settings
) -> tuple[NDArray[np.intp], Array, tuple[Array, Array], int]:
    """Thinned points, what makes their errors independent, the degree that the curve asks for."""
    kept = thinned(curve.flow_si, min(48, settings.thin))
    flow, value = curve.flow_si[kept], curve.value_si[kept]
    u = line_uncertainty(curve)[kept]
    top = min(6, len(flow) - 5)
    fitted = average(flow, value, u, tuple(range(min(3, top), top + 1)), settings)
    whitener = np.asarray(np.linalg.inv(fitted.noise.scale * fitted.noise.whitener), float)
    return kept, whitener, (flow, value), fitted.best.degree


def _causes(curves: Sequence[Curve]) -> tuple[str, ...]:
    """Names of the axis errors that the curves share; those of one set of axes: four."""
    names: dict[str, None] = {}
    for c in curves:
        if c.calibration_si is not None:
            names |= dict.fromkeys(_cause_names(c))
    return tuple(names)


def _cause_names(curve: Curve) -> list[str]:
    axes = (curve.flow_axis or "flow", curve.value_axis or "value")
    return [f"axis {axis} {i}" for axis in axes for i in (0, 1)]


def _calibration(curve: Curve, kept: NDArray[np.intp], causes: tuple[str, ...]) -> Array:
    out = np.zeros((len(kept), len(causes)))
    if curve.calibration_si is not None:
        for column, name in zip(curve.calibration_si[kept].T, _cause_names(curve), strict=True):
            out[:, causes.index(name)] = column
    return out


def _start(joint: Joint) -> tuple[Array, Array]:
    values, _ = joint.exponents
    return values[: joint.ratios], values[joint.ratios :]


def _shown(name: str, value: float) -> str:
    return f"{value * 1e3:.4g} mm" if name == "diameter" else f"{value * 60:.4g} 1/min"
