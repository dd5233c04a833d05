"""Options that several commands share, so that they read and behave the same everywhere."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

__all__ = [
    "Debug",
    "FlowUnit",
    "HeadUnit",
    "NotesFile",
    "NpshUnit",
    "Out",
    "Points",
    "PowerUnit",
    "Quiet",
    "Strict",
    "unit_options",
]

Quiet = Annotated[bool, typer.Option("--quiet", help="Print nothing but errors.")]
Debug = Annotated[bool, typer.Option("--debug", help="Print the traceback of an error.")]
Strict = Annotated[bool, typer.Option("--strict", help="Exit with 4 if there is any warning.")]
Out = Annotated[
    Path | None,
    typer.Option("--out", metavar="DIR", help="Folder for all files.", show_default=False),
]
NotesFile = Annotated[
    Path | None,
    typer.Option(
        "--notes", metavar="FILE", help="Notes with what you know of the chart.", show_default=False
    ),
]
Points = Annotated[
    int | None,
    typer.Option(
        "--points", min=2, metavar="N", help="At most N points a curve.", show_default=False
    ),
]
FlowUnit = Annotated[
    str | None,
    typer.Option("--flow-unit", metavar="UNIT", help="m3/h, l/s, US gpm …", show_default=False),
]
HeadUnit = Annotated[
    str | None,
    typer.Option("--head-unit", metavar="UNIT", help="m, ft, kPa, bar …", show_default=False),
]
PowerUnit = Annotated[
    str | None,
    typer.Option("--power-unit", metavar="UNIT", help="kW, hp …", show_default=False),
]
NpshUnit = Annotated[
    str | None, typer.Option("--npsh-unit", metavar="UNIT", help="m, ft …", show_default=False)
]


def unit_options(
    flow: str | None = None,
    head: str | None = None,
    power: str | None = None,
    npsh: str | None = None,
) -> dict[str, str]:
    """The unit options that were given, by "flow", "head", "power", "npsh".

    Raises
    ------
    InputError
        If a unit is unknown or of a wrong dimension; the message lists the known ones.
    """
    from curvefit.errors import InputError
    from curvefit.write.out_units import choose_units

    given = {"flow": flow, "head": head, "power": power, "npsh": npsh}
    for name, text in given.items():
        try:
            choose_units({name: text})
        except InputError as error:
            raise error.at(key=f"--{name}-unit") from error
    return {name: text for name, text in given.items() if text is not None}
