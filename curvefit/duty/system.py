"""The system that a pump works in: static head, losses, suction side, and how sure they are."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from curvefit.duty.liquid import Liquid
from curvefit.duty.losses import Fitting, Pipe
from curvefit.errors import InputError
from curvefit.units import G_N

__all__ = ["LossRow", "Operation", "Suction", "System"]

Array = NDArray[np.float64]
Part = Pipe | Fitting


@dataclass(frozen=True, slots=True)
class Suction:
    """The suction side for NPSH available; all relative to the pump's NPSH datum.

    level : free surface above (+) or below (−) the datum [m]; pressure : on that surface
    [Pa absolute].
    """

    level: float
    pressure: float


@dataclass(frozen=True, slots=True)
class Operation:
    """How the pump is to be run and judged.

    preferred, allowable : (low, high) as fractions of the BEP flow; hours per year; grade of
    ISO 9906 to draw about the duty. npsh_key : the key, with its line, that asks for an NPSH
    margin; None where none was asked for and the defaults only serve to warn.
    """

    preferred: tuple[float, float] = (0.7, 1.2)
    allowable: tuple[float, float] | None = None
    hours: float | None = None
    grade: str | None = None
    npsh_ratio: float = 1.1
    npsh_margin: float = 0.6
    npsh_key: tuple[str, int | None] | None = None


@dataclass(frozen=True, slots=True)
class LossRow:
    """One line of the table of losses at one flow: section, part, method, head loss [m]."""

    section: str
    part: str
    method: str
    loss: float


@dataclass(frozen=True, slots=True)
class System:
    """H(Q) = static head + k·Q² + the losses of all parts.

    static_head [m]; k [m/(m³/s)²] or None; parts of suction and discharge.
    u_losses : relative standard uncertainty of all losses together; u_static : of the static
    head [m].
    """

    static_head: float
    liquid: Liquid
    k: float | None = None
    suction_parts: tuple[Part, ...] = ()
    discharge_parts: tuple[Part, ...] = ()
    suction: Suction | None = None
    operation: Operation = field(default_factory=Operation)
    u_losses: float = 0.0
    u_static: float = 0.0
    file: str = ""

    def losses(self, flow: Array) -> Array:
        """Head loss of the whole system at each flow [m³/s], shape (n,) [m]."""
        flow = np.asarray(flow, float)
        total = (self.k or 0.0) * flow**2
        for part in (*self.suction_parts, *self.discharge_parts):
            total = total + part.loss(flow, self.liquid)
        return np.asarray(total)

    def head(self, flow: Array) -> Array:
        """Head that the system asks for at each flow [m³/s], shape (n,) [m]."""
        return self.static_head + self.losses(flow)

    def suction_losses(self, flow: Array) -> Array:
        """Head loss ahead of the pump at each flow, shape (n,) [m]."""
        flow = np.asarray(flow, float)
        total = np.zeros(len(flow))
        for part in self.suction_parts:
            total = total + part.loss(flow, self.liquid)
        return total

    def npsh_available(self, flow: Array) -> Array:
        """NPSH available at each flow, shape (n,) [m].

        Raises
        ------
        InputError
            If the suction side or the vapour pressure is not stated.

        Notes
        -----
        (p − p_v)/(ρg) + level − suction losses, with p absolute on the free surface.
        """
        if self.suction is None or self.liquid.vapour_pressure is None:
            raise InputError("the system does not state what NPSH available needs")
        margin = self.suction.pressure - self.liquid.vapour_pressure
        static = margin / (self.liquid.density * G_N) + self.suction.level
        return np.asarray(static - self.suction_losses(flow))

    def table(self, flow: float) -> tuple[LossRow, ...]:
        """The losses part by part at one flow [m³/s]."""
        at = np.array([flow])
        rows = [
            LossRow(section, part.name, part.method, float(part.loss(at, self.liquid)[0]))
            for section, parts in (
                ("suction", self.suction_parts),
                ("discharge", self.discharge_parts),
            )
            for part in parts
        ]
        if self.k is not None:
            rows.append(LossRow("system", "k·Q²", "k as stated", float(self.k * flow**2)))
        return tuple(rows)
