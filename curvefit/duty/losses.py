"""Head losses of pipes and fittings: each part's loss at each flow, with the method named.

Flow [m³/s] and head [m] throughout. A negative flow never occurs here.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.duty.liquid import Liquid
from curvefit.units import G_N

__all__ = ["FITTINGS", "Fitting", "Pipe", "k_of_type"]

Array = NDArray[np.float64]

LAMINAR = 2000.0  #: Reynolds number up to which the flow is taken as laminar
TURBULENT = 4000.0  #: Reynolds number from which Colebrook's equation holds


def velocity_head(flow: Array, diameter: float) -> Array:
    """V²/2g [m] of a flow in a bore of the given diameter [m]."""
    return np.asarray((4.0 * flow / (np.pi * diameter**2)) ** 2 / (2.0 * G_N))


@dataclass(frozen=True, slots=True)
class Pipe:
    """A length of pipe, with one of roughness [m], friction_factor or hazen_williams_c."""

    name: str
    length: float
    inside_diameter: float
    roughness: float | None = None
    friction_factor: float | None = None
    hazen_williams_c: float | None = None

    def loss(self, flow: Array, liquid: Liquid) -> Array:
        """Head loss [m] at each flow [m³/s], shape (n,).

        Notes
        -----
        Darcy–Weisbach, h = f·L/D·V²/2g, with f = 64/Re up to Re = 2000, Colebrook's from 4000 on
        and a straight line in log Re between (there the flow itself is undecided). Hazen–Williams:
        h = 10.67·L·Q^1.852/(C^1.852·D^4.8704), for water near 15 °C in turbulent flow only.
        """
        flow = np.asarray(flow, float)
        if self.hazen_williams_c is not None:
            c, d = self.hazen_williams_c, self.inside_diameter
            return np.asarray(10.67 * self.length * flow**1.852 / (c**1.852 * d**4.8704))
        ratio = self.length / self.inside_diameter
        return np.asarray(
            self.factor(flow, liquid) * ratio * velocity_head(flow, self.inside_diameter)
        )

    def factor(self, flow: Array, liquid: Liquid) -> Array:
        """Darcy friction factor at each flow, shape (n,); 0 at no flow."""
        if self.friction_factor is not None:
            return np.full(len(flow), self.friction_factor)
        assert self.roughness is not None
        assert liquid.viscosity is not None
        reynolds = 4.0 * flow / (np.pi * self.inside_diameter * liquid.viscosity)
        return np.array(
            [_darcy(float(re), self.roughness / self.inside_diameter) for re in reynolds]
        )

    @property
    def method(self) -> str:
        """The method's name, for the table of losses."""
        if self.hazen_williams_c is not None:
            return f"Hazen–Williams, C = {self.hazen_williams_c:g}"
        if self.friction_factor is not None:
            return f"Darcy–Weisbach, f = {self.friction_factor:g} as stated"
        assert self.roughness is not None
        return f"Darcy–Weisbach, Colebrook, roughness {self.roughness * 1e3:g} mm"


def _darcy(reynolds: float, relative_roughness: float) -> float:
    from fluids.friction import Colebrook

    if reynolds <= 0:
        return 0.0
    if reynolds <= LAMINAR:
        return 64.0 / reynolds
    if reynolds >= TURBULENT:
        return float(Colebrook(reynolds, relative_roughness))
    share = np.log(reynolds / LAMINAR) / np.log(TURBULENT / LAMINAR)
    turbulent = float(Colebrook(TURBULENT, relative_roughness))
    return float((1 - share) * 64.0 / LAMINAR + share * turbulent)


@dataclass(frozen=True, slots=True)
class Fitting:
    """Minor losses: count × k·V²/2g with V in the bore `inside_diameter` that k refers to."""

    name: str
    k: float
    inside_diameter: float
    count: float = 1.0
    source: str = "k as stated"

    def loss(self, flow: Array, liquid: Liquid) -> Array:
        """Head loss [m] at each flow [m³/s], shape (n,)."""
        return np.asarray(
            self.count * self.k * velocity_head(np.asarray(flow, float), self.inside_diameter)
        )

    @property
    def method(self) -> str:
        """The method's name, for the table of losses."""
        return f"k = {self.k:.4g} × {self.count:g}, {self.source}"


# Every k below is on the velocity in the bore D, the pipe's inside diameter, as its source has it;
# Crane's valves and bends scale with the friction factor of clean commercial pipe of that bore.
_CRANE = "Crane TP-410, on the pipe bore"
FITTINGS: dict[str, tuple[str, str]] = {
    "entrance_sharp": (_CRANE, "sharp-edged pipe entrance, flush with the wall"),
    "entrance_rounded": (_CRANE, "rounded entrance, radius at least 0.15 D"),
    "entrance_projecting": (_CRANE, "pipe projecting inward"),
    "exit": ("all velocity head lost", "pipe into a tank"),
    "bend_90": (_CRANE, "90° bend, radius 1.5 D"),
    "bend_90_long": (_CRANE, "90° bend, radius 3 D"),
    "bend_45": (_CRANE, "45° bend, radius 1.5 D"),
    "mitre_90": (_CRANE, "90° mitre bend"),
    "gate_valve": (_CRANE, "gate valve, full bore, open"),
    "globe_valve": (_CRANE, "globe valve, full bore, open"),
    "angle_valve": (_CRANE, "angle valve, full bore, open"),
    "ball_valve": (_CRANE, "ball valve, full bore, open"),
    "butterfly_valve": (_CRANE, "butterfly valve, centric, open"),
    "plug_valve": (_CRANE, "plug valve, straight-way, open"),
    "swing_check_valve": (_CRANE, "swing check valve, inclined seat"),
    "lift_check_valve": (_CRANE, "lift check valve, globe pattern"),
    "foot_valve": (_CRANE, "foot valve with strainer, poppet disc"),
    "sudden_contraction": ("Rennels (2012), on the smaller bore", "to a smaller bore D"),
    "sudden_expansion": ("Borda–Carnot, on the smaller bore", "from a smaller bore D"),
}


def k_of_type(kind: str, bore: float, other_bore: float | None = None) -> float:
    """Loss coefficient of a fitting type, on the velocity in `bore`, by the library `fluids`.

    Parameters
    ----------
    kind : a key of FITTINGS
    bore : inside diameter that k refers to [m]
    other_bore : the larger inside diameter [m]; contractions and expansions only

    Raises
    ------
    KeyError
        If the type is unknown.
    """
    import fluids.fittings as f

    at: dict[str, Callable[[], float]] = {
        "entrance_sharp": lambda: f.entrance_sharp(method="Crane"),
        "entrance_rounded": lambda: f.entrance_rounded(Di=bore, rc=0.15 * bore, method="Crane"),
        "entrance_projecting": lambda: f.entrance_distance(Di=bore, t=0.0, method="Crane"),
        "exit": lambda: f.exit_normal(),
        "bend_90": lambda: f.bend_rounded_Crane(Di=bore, angle=90.0, bend_diameters=1.5),
        "bend_90_long": lambda: f.bend_rounded_Crane(Di=bore, angle=90.0, bend_diameters=3.0),
        "bend_45": lambda: f.bend_rounded_Crane(Di=bore, angle=45.0, bend_diameters=1.5),
        "mitre_90": lambda: f.bend_miter(angle=90.0, Di=bore, method="Crane"),
        "gate_valve": lambda: f.K_gate_valve_Crane(D1=bore, D2=bore, angle=0.0),
        "globe_valve": lambda: f.K_globe_valve_Crane(D1=bore, D2=bore),
        "angle_valve": lambda: f.K_angle_valve_Crane(D1=bore, D2=bore),
        "ball_valve": lambda: f.K_ball_valve_Crane(D1=bore, D2=bore, angle=0.0),
        "butterfly_valve": lambda: f.K_butterfly_valve_Crane(D=bore),
        "plug_valve": lambda: f.K_plug_valve_Crane(D1=bore, D2=bore, angle=0.0),
        "swing_check_valve": lambda: f.K_swing_check_valve_Crane(D=bore),
        "lift_check_valve": lambda: f.K_lift_check_valve_Crane(D1=bore, D2=bore, angled=False),
        "foot_valve": lambda: f.K_foot_valve_Crane(D=bore),
        "sudden_contraction": lambda: f.contraction_sharp(
            Di1=_other(other_bore), Di2=bore, method="Rennels"
        ),
        "sudden_expansion": lambda: f.diffuser_sharp(
            Di1=bore, Di2=_other(other_bore), method="Rennels"
        ),
    }
    return float(at[kind]())


def _other(bore: float | None) -> float:
    if bore is None:
        raise KeyError("other_bore")
    return bore
