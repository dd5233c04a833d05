"""curvefit duty: where a pump that was read runs in a system, how sure that is, and the doubts."""

from __future__ import annotations

from collections.abc import Sequence
from contextlib import suppress
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer
from curvefit_cli.options import (
    Debug,
    FlowUnit,
    HeadUnit,
    NpshUnit,
    Out,
    PowerUnit,
    Quiet,
    Strict,
    unit_options,
)
from curvefit_cli.selection import CurveName, PumpName, listing, same, select
from curvefit_cli.show import UNTRUSTED, findings_text, say, table, written

if TYPE_CHECKING:
    from curvefit.duty import Arrangement, Duty
    from curvefit.duty.system import System
    from curvefit.records import Curve, Fit
    from curvefit.write.reopen import CurveSet

__all__ = ["duty"]

_ONE_OF_EACH = ("head", "differential_pressure", "efficiency", "shaft_power", "npsh_required")


def duty(
    curves: Annotated[Path, typer.Argument(metavar="CURVES", help="A .curves.json.")],
    system: Annotated[Path, typer.Argument(metavar="SYSTEM.toml", help="The system.")],
    pump: PumpName = None,
    curve: CurveName = None,
    diameter: Annotated[
        str | None,
        typer.Option("--diameter", metavar="D", help="Impeller, e.g. 210 mm.", show_default=False),
    ] = None,
    speed: Annotated[
        str | None,
        typer.Option("--speed", metavar="N", help="Run at, e.g. 2600 rpm.", show_default=False),
    ] = None,
    parallel: Annotated[
        int, typer.Option("--parallel", min=1, metavar="N", help="Pumps side by side.")
    ] = 1,
    series: Annotated[
        int, typer.Option("--series", min=1, metavar="N", help="Pumps one after another.")
    ] = 1,
    want_flow: Annotated[
        str | None,
        typer.Option("--want-flow", metavar="Q", help="Reach this flow.", show_default=False),
    ] = None,
    want_head: Annotated[
        str | None,
        typer.Option("--want-head", metavar="H", help="Reach this head.", show_default=False),
    ] = None,
    by: Annotated[
        str, typer.Option("--by", metavar="WAY", help="Reach it by speed or by diameter.")
    ] = "speed",
    on: Annotated[
        str, typer.Option("--on", metavar="LINE", help="Reckon on the equation or on the points.")
    ] = "equation",
    draws: Annotated[
        int, typer.Option("--draws", min=0, metavar="N", help="Monte Carlo draws; 0: none.")
    ] = 100_000,
    out: Out = None,
    flow_unit: FlowUnit = None,
    head_unit: HeadUnit = None,
    power_unit: PowerUnit = None,
    npsh_unit: NpshUnit = None,
    strict: Strict = False,
    quiet: Quiet = False,
    debug: Debug = False,
) -> None:
    """Find the duty point of a pump in a system, with its 95 % intervals.

    Prints the duty, the losses part by part and the findings; writes STEM.duty.json and a plot.

    Example: curvefit duty pump.curves.json system.toml --diameter "210 mm" --parallel 2
    """
    from curvefit.duty import Arrangement, line_of_points, read_system
    from curvefit.duty import duty as duty_of
    from curvefit.errors import InputError
    from curvefit.units import parse_quantity
    from curvefit.write.duty_files import write_duty
    from curvefit.write.duty_rows import CAUTIONS
    from curvefit.write.reopen import reopen

    asked = unit_options(flow_unit, head_unit, power_unit, npsh_unit)
    opened, plant = reopen(curves), read_system(system)
    if by not in ("speed", "diameter") or on not in ("equation", "points"):
        raise InputError(
            f"--by {by} or --on {on} is not known",
            remedy="--by takes speed or diameter, --on takes equation or points.",
        )
    if want_flow is not None and want_head is not None:
        raise InputError("--want-flow and --want-head exclude each other", remedy="Keep one.")
    wanted = want_flow is not None or want_head is not None
    flow = None if want_flow is None else parse_quantity(want_flow, "flow")
    head = None if want_head is None else parse_quantity(want_head, "length")
    if wanted and by == "diameter":
        diameter = _wanted_diameter(opened, plant, pump, flow, head, Arrangement(parallel, series))
    fits, ratio = _chosen(opened, pump, curve, diameter, speed)
    if wanted and by == "speed":
        ratio = _wanted_speed(fits, plant, flow, head, Arrangement(parallel, series))
    units = _units(fits, asked)
    how = Arrangement(parallel, series, ratio)
    lines = [line_of_points(f.curve) for f in fits] if on == "points" else None
    result = duty_of(
        fits,
        plant,
        how,
        draws=draws,
        lines=lines,
        flow_unit=units["flow"],
        head_unit=units["head"],
    )
    said = tuple(f for one in fits for f in one.findings)
    result = replace(result, findings=result.findings + said)
    asked_si = None if diameter is None else parse_quantity(diameter, "length", "mm")
    about = _about(opened, fits, how, asked_si)
    folder = out or curves.parent
    stem = curves.name.removesuffix(".json").removesuffix(".curves")
    paths = write_duty(result, folder, stem, units, about, inputs=[curves, system])
    say(_text(result, units), quiet)
    if result.findings:
        say(quiet=quiet)
        say(findings_text(result.findings), quiet)
    say(quiet=quiet)
    say("\n".join(CAUTIONS), quiet)
    say(written(paths), quiet)
    alarmed = any(f.severity != "info" for f in result.findings)
    raise typer.Exit(UNTRUSTED if not result.points or (strict and alarmed) else 0)


def _chosen(
    opened: CurveSet, pump: str | None, curve: str | None, diameter: str | None, speed: str | None
) -> tuple[list[Fit], float]:
    """One fit of each quantity, of one impeller, and the speed ratio to run it at."""
    from curvefit.errors import InputError
    from curvefit.units import parse_quantity

    curves = [f.curve for f in opened.fits if len(f.curves) == 1 and not f.curve.iso]
    d = None if diameter is None else parse_quantity(diameter, "length", "mm")
    n = None if speed is None else parse_quantity(speed, "speed", "/min")
    charted = n is not None and any(same(c.speed_si, n) for c in curves)
    if d is not None and not any(same(c.diameter_si, d) for c in curves):
        fits = _between(opened, select(curves, pump), d)
        return fits, _ratio(opened, fits[0].curve, n)
    kept = select(curves, pump, None, d, n if charted else None)
    if curve is not None:
        (one,) = select(kept, curve=curve)[:1]
        kept = tuple(c for c in kept if c.quantity != one.quantity or c is one)
    by_quantity = {q: [c for c in kept if c.quantity == q] for q in _ONE_OF_EACH}
    for quantity in ("head", "differential_pressure"):
        if len(by_quantity[quantity]) > 1:
            raise InputError(
                f"{len(by_quantity[quantity])} {quantity} curves fit the selection; one is needed",
                remedy=listing(by_quantity[quantity]),
            )
    head = next((c for q in ("head", "differential_pressure") for c in by_quantity[q]), None)
    names = {
        c.name
        for same_quantity in by_quantity.values()
        for c in same_quantity
        if len(same_quantity) == 1 or (head is not None and same(c.diameter_si, head.diameter_si))
    }
    fits = [f for f in opened.fits if len(f.curves) == 1 and f.curve.name in names]
    return fits, 1.0 if charted or head is None else _ratio(opened, head, n)


def _between(opened: CurveSet, curves: Sequence[Curve], diameter_si: float) -> list[Fit]:
    """Fits at a diameter that is not drawn, by the joint model of each quantity's curves."""
    from curvefit.errors import ChartError, InputError
    from curvefit.fit.family import fit_family
    from curvefit.fit.npsh import npsh_between

    fits = []
    for quantity in ("head", "efficiency", "shaft_power"):
        members = [c for c in curves if c.quantity == quantity and c.diameter_si is not None]
        if len(members) > 1:
            fits.append(fit_family(members).at(diameter_si))
    if not any(f.curve.quantity == "head" for f in fits):
        raise InputError(
            f"no head curve has the diameter {diameter_si * 1e3:g} mm, and fewer than two heads "
            "have a diameter to reckon it from",
            remedy=listing(curves),
        )
    names = {c.name for c in curves}
    own = [f for f in opened.fits if f.curve.name in names]
    with suppress(ChartError):  # a chart without NPSHr
        fits.append(npsh_between(own, diameter_si))
    return fits


def _ratio(opened: CurveSet, head: Curve, speed_si: float | None) -> float:
    """The ratio of a speed to the chart's own."""
    from curvefit.errors import InputError

    if speed_si is None:
        return 1.0
    of_chart = head.speed_si or getattr(opened.pump(head), "speed_si", None)
    if of_chart is None:
        raise InputError(
            "the chart's own speed is not known, so no other speed can be reckoned",
            remedy='Give it in the notes of the chart: [[pump]] speed = "2900 rpm".',
        )
    return float(speed_si / of_chart)


def _wanted_speed(
    fits: Sequence[Fit], plant: System, flow: float | None, head: float | None, how: Arrangement
) -> float:
    """The speed ratio for a wanted flow or head, SI."""
    from curvefit.duty import line_of_fit, speed_for
    from curvefit.errors import InputError

    heads = [line_of_fit(f) for f in fits if f.curve.quantity == "head"]
    if not heads:
        raise InputError("no head curve is among the chosen curves", remedy="Choose another pump.")
    return speed_for(heads[0].arranged(how), plant, flow, head)


def _wanted_diameter(
    opened: CurveSet,
    plant: System,
    pump: str | None,
    flow: float | None,
    head: float | None,
    how: Arrangement,
) -> str:
    """The diameter between those drawn for a wanted flow or head, as --diameter takes it."""
    from curvefit.duty import diameter_for, line_of_fit
    from curvefit.errors import InputError
    from curvefit.fit.family import fit_family

    curves = [f.curve for f in opened.fits if len(f.curves) == 1]
    heads = [c for c in select(curves, pump) if c.quantity == "head" and c.diameter_si is not None]
    if len(heads) < 2:
        raise InputError(
            f"{len(heads)} heads have a diameter, two are needed", remedy=listing(curves)
        )
    family = fit_family(heads)
    drawn = sorted(c.diameter_si for c in heads if c.diameter_si is not None)
    found = diameter_for(
        lambda d: line_of_fit(family.at(d)).arranged(how), (drawn[0], drawn[-1]), plant, flow, head
    )
    return f"{found * 1e3:.4f} mm"


def _units(fits: Sequence[Fit], asked: dict[str, str]) -> dict[str, str]:
    """UCUM codes for the output: those asked for, else those of the chart."""
    from curvefit.units import parse, unit

    found = {"flow": "m3/h", "head": "m", "npsh": "m", "power": "kW"}
    for fit in fits:
        found["flow"] = fit.curve.flow_unit
        kind = {"head": "head", "npsh_required": "npsh", "shaft_power": "power"}
        if fit.curve.quantity in kind:
            found[kind[fit.curve.quantity]] = fit.curve.unit
    found |= {name: parse(text).code for name, text in asked.items()}
    for name in ("head", "npsh"):
        if unit(found[name]).dimension != "length":
            found[name] = "m"
    return found


def _about(
    opened: CurveSet, fits: Sequence[Fit], how: Arrangement, diameter_si: float | None
) -> dict[str, Any]:
    """What the duty is for, ready for JSON (a family's fit names its largest curve, not this)."""
    head = next((f.curve for f in fits if "head" in f.curve.quantity), fits[0].curve)
    pump = opened.pump(head)
    speed = head.speed_si or (pump.speed_si if pump else None)
    diameter = diameter_si if diameter_si is not None else head.diameter_si
    return {
        "name": head.pump,
        "curves": [f.curve.name for f in fits],
        "impeller_diameter": None
        if diameter is None
        else {"value": round(diameter * 1e3, 4), "unit": "mm"},
        "speed": None
        if speed is None
        else {"value": round(speed * 60 * how.speed_ratio, 3), "unit": "/min"},
        "speed_ratio": round(how.speed_ratio, 6),
        "parallel": how.parallel,
        "series": how.series,
    }


def _text(result: Duty, units: dict[str, str]) -> str:
    """The duty, the losses and how they were reckoned, as tables."""
    from curvefit.write.duty_rows import loss_rows, remarks, value_rows

    values, losses = value_rows(result.points, units), loss_rows(result, units)
    parts = [table(["", "value", "95 % interval"], values)] if values else []
    parts += [table(["losses", "part", "at the duty", "method"], losses)] if losses else []
    return "\n\n".join([*parts, *remarks(result, units)])
