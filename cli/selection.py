"""Which curves a command works on: --pump, --curve, --diameter, --speed."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Annotated

import typer

if TYPE_CHECKING:
    from curvefit.records import Curve

__all__ = ["CurveName", "Diameter", "PumpName", "Speed", "listing", "select"]

PumpName = Annotated[
    str | None, typer.Option("--pump", metavar="NAME", help="This pump.", show_default=False)
]
CurveName = Annotated[
    str | None, typer.Option("--curve", metavar="NAME", help="This curve.", show_default=False)
]
Diameter = Annotated[
    str | None,
    typer.Option("--diameter", metavar="D", help="Impeller, e.g. 210 mm.", show_default=False),
]
Speed = Annotated[
    str | None,
    typer.Option("--speed", metavar="N", help="Speed, e.g. 2900 rpm.", show_default=False),
]

SAME = 1e-3  #: relative difference up to which two diameters or speeds are one


def select(
    curves: Sequence[Curve],
    pump: str | None = None,
    curve: str | None = None,
    diameter_si: float | None = None,
    speed_si: float | None = None,
) -> tuple[Curve, ...]:
    """The curves that fit all that is asked.

    A curve without a diameter (or speed) of its own counts as being of any, unless others of its
    quantity name theirs.

    Raises
    ------
    InputError
        If none is left; the message lists what there is.
    """
    from curvefit.errors import InputError

    kept = [c for c in curves if pump in (None, c.pump) and curve in (None, c.name)]
    kept = _of(kept, "diameter_si", diameter_si)
    kept = _of(kept, "speed_si", speed_si)
    if not kept:
        raise InputError("no curve fits the selection", remedy=listing(curves))
    return tuple(kept)


def _of(curves: Sequence[Curve], name: str, wanted: float | None) -> list[Curve]:
    if wanted is None:
        return list(curves)
    exact = [c for c in curves if same(getattr(c, name), wanted)]
    named = {c.quantity for c in curves if getattr(c, name) is not None}
    return exact + [c for c in curves if getattr(c, name) is None and c.quantity not in named]


def same(a: float | None, b: float | None) -> bool:
    """Whether two diameters or speeds are the same to within print."""
    return a is not None and b is not None and abs(a - b) <= SAME * abs(b)


def listing(curves: Sequence[Curve]) -> str:
    """What there is to choose from, in one line each."""
    from curvefit.units import from_si

    rows = []
    for c in curves:
        parts = [f"--curve {c.name!r}", f"--pump {c.pump!r}"]
        if c.diameter_si is not None:
            shown = from_si(c.diameter_si, c.diameter_unit)
            parts.append(f"--diameter '{shown:g} {c.diameter_unit}'")
        if c.speed_si is not None:
            parts.append(f"--speed '{from_si(c.speed_si, c.speed_unit):g} {c.speed_unit}'")
        rows.append("  " + " ".join(parts))
    return "\n".join(["Choose from:", *rows])
