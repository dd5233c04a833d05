"""curvefit fit: other equations, bands and families for curves that were read or measured."""

from __future__ import annotations

import math
from collections.abc import Sequence
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
from curvefit_cli.selection import CurveName, Diameter, PumpName, Speed, listing, select
from curvefit_cli.show import UNTRUSTED, findings_text, say, table, written

if TYPE_CHECKING:
    from curvefit.fit import Choice
    from curvefit.fit.family import Family
    from curvefit.records import Curve, Finding, Fit, Pump

__all__ = ["fit"]


def fit(
    curves: Annotated[
        Path,
        typer.Argument(metavar="CURVES", help="A .curves.json, or a CSV of measured points."),
    ],
    family: Annotated[
        str,
        typer.Option(
            "--family", metavar="NAME", help="auto, polynomial, power, piecewise or affinity."
        ),
    ] = "auto",
    degree: Annotated[
        int | None,
        typer.Option("--degree", metavar="N", help="Polynomial degree, 1–6.", show_default=False),
    ] = None,
    without: Annotated[
        list[int] | None,
        typer.Option(
            "--without",
            metavar="K",
            help="Hold the coefficient of Q^K at zero; may be repeated. 0: through zero.",
            show_default=False,
        ),
    ] = None,
    confidence: Annotated[
        float, typer.Option("--confidence", metavar="P", help="Of the band, 0.5–0.999.")
    ] = 0.95,
    simultaneous: Annotated[
        bool, typer.Option("--simultaneous", help="A band for the whole curve at once.")
    ] = False,
    prediction: Annotated[
        bool, typer.Option("--prediction", help="A band for a new point (measured points).")
    ] = False,
    extrapolate: Annotated[
        list[str] | None,
        typer.Option(
            "--extrapolate",
            metavar="Q",
            help="Carry on to this flow, e.g. '0 m3/h'; may be repeated.",
            show_default=False,
        ),
    ] = None,
    pump: PumpName = None,
    curve: CurveName = None,
    diameter: Diameter = None,
    speed: Speed = None,
    out: Out = None,
    flow_unit: FlowUnit = None,
    head_unit: HeadUnit = None,
    power_unit: PowerUnit = None,
    npsh_unit: NpshUnit = None,
    strict: Strict = False,
    quiet: Quiet = False,
    debug: Debug = False,
) -> None:
    """Fit curves again with another model, band or flow range.

    CURVES is what `curvefit read` wrote, or a CSV of measured points: a row of names (flow, head,
    efficiency, shaft power, NPSHr), a row of units, then numbers. With --family affinity all
    diameters and speeds of a chart become one model, and --diameter and --speed name the curve
    that it gives. Files go to CURVES.curvefit beside the input, or to --out.

    Example: curvefit fit pump.curves.json --family affinity --diameter "203 mm"
    """
    from curvefit.errors import InputError
    from curvefit.fit import Choice

    if simultaneous and prediction:
        raise InputError("--simultaneous and --prediction exclude each other", remedy="Keep one.")
    affine = family == "affinity"
    if affine and (degree is not None or without or prediction or extrapolate):
        raise InputError(
            "--degree, --without, --prediction and --extrapolate do not go with --family affinity",
            remedy="Leave them out.",
        )
    kind = "simultaneous" if simultaneous else "prediction" if prediction else "pointwise"
    choice = Choice(
        family="auto" if affine else family,  # type: ignore[arg-type]
        degree=degree,
        without=tuple(without or ()),
        confidence=confidence,
        kind=kind,  # type: ignore[arg-type]
        extrapolate=_flows(extrapolate),
    )
    units = unit_options(flow_unit, head_unit, power_unit, npsh_unit)
    opened = _Opened(curves, units)
    d, n = _length(diameter), _speed(speed)
    if affine:
        fits, families = _family_fits(opened, select(opened.curves, pump, curve), choice, d, n)
    else:
        chosen = select(opened.curves, pump, curve, d, n)
        fits, families = _curve_fits(opened, chosen, choice), ()
    raise typer.Exit(_finish(opened, fits, families, curves, out, units, strict, quiet))


class _Opened:
    """The curves of either kind of input, and what belongs to them."""

    def __init__(self, path: Path, units: dict[str, str]) -> None:
        self.document: dict[str, Any] | None = None
        self.pumps: tuple[Pump, ...] = ()
        self.findings: tuple[Finding, ...] = ()
        self.curves: tuple[Curve, ...]
        if path.suffix.lower() == ".json":
            import json

            from curvefit.write.reopen import reopen

            opened = reopen(path)
            self.document = json.loads(path.read_text(encoding="utf-8"))
            self.pumps, self.findings = opened.pumps, opened.findings
            self.curves = tuple(_sped(c, self.pumps) for c in opened.curves)
        else:
            from curvefit.fit.points import read_points

            self.curves = read_points(path, units)


def _sped(curve: Curve, pumps: Sequence[Pump]) -> Curve:
    """The curve with its pump's speed where it has none of its own."""
    if curve.speed_si is not None:
        return curve
    rated = next((p.speed_si for p in pumps if p.name == curve.pump), None)
    if rated is None:
        return curve
    return replace(curve, speed_si=rated * (curve.speed_ratio or 1.0))


def _flows(texts: Sequence[str] | None) -> tuple[float, float] | None:
    from curvefit.units import parse_quantity

    if not texts:
        return None
    flows = [parse_quantity(t, "flow", "m3/h") for t in texts]
    return min(flows), max(flows)


def _length(text: str | None) -> float | None:
    from curvefit.units import parse_quantity

    return None if text is None else parse_quantity(text, "length", "mm")


def _speed(text: str | None) -> float | None:
    from curvefit.units import parse_quantity

    return None if text is None else parse_quantity(text, "speed", "/min")


# --- what is fitted ---------------------------------------------------------------------------


def _curve_fits(opened: _Opened, curves: Sequence[Curve], choice: Choice) -> tuple[Fit, ...]:
    from curvefit.errors import InputError
    from curvefit.fit import fit as fit_all

    fits = fit_all(curves, choice, pumps=opened.pumps)
    if not fits:
        raise InputError(
            "only lines of equal value were chosen; they are not functions of the flow",
            remedy=listing(opened.curves),
        )
    return fits


def _family_fits(
    opened: _Opened,
    curves: Sequence[Curve],
    choice: Choice,
    diameter: float | None,
    speed: float | None,
) -> tuple[tuple[Fit, ...], tuple[Family, ...]]:
    """One fit of each quantity of one pump, at the diameter and speed asked for."""
    from curvefit.errors import ChartError, InputError
    from curvefit.fit import fit as fit_all
    from curvefit.fit import fit_curve
    from curvefit.fit.family import NOMINAL, fit_family
    from curvefit.fit.hill import efficiency_between
    from curvefit.fit.npsh import npsh_between
    from curvefit.fit.speed import fit_at_speed

    if len({c.pump for c in curves}) > 1:
        raise InputError(
            f"the curves are of {len({c.pump for c in curves})} pumps; a family is of one",
            remedy=listing(curves),
        )
    fits: list[Fit] = []
    families = []
    missed: ChartError | None = None
    for quantity in NOMINAL:
        members = [c for c in curves if c.quantity == quantity]
        if len(members) == 1 and speed is not None and diameter in (None, members[0].diameter_si):
            fits.append(fit_at_speed(fit_curve(members[0], choice), speed))
        if len(members) < 2:
            continue
        try:
            family = fit_family(members)
        except ChartError as error:
            missed = error
            continue
        families.append(family)
        fits.append(family.at(diameter, speed, choice))
    if not any(c.quantity == "efficiency" for c in curves) and fits:
        asked = diameter or (families[0].reference.get("diameter") if families else None)
        hill = efficiency_between(curves, asked, choice) if asked and speed is None else None
        fits += [hill] if hill is not None else []
    npsh = [c for c in curves if c.quantity == "npsh_required" and c.sigma_si is not None]
    if npsh and fits:
        fits.append(npsh_between(fit_all(npsh, choice), diameter, speed, choice))
    if not fits:
        raise missed or InputError(
            "no quantity has two curves of different diameter or speed",
            remedy=listing(curves),
        )
    return tuple(fits), tuple(families)


# --- what is told -----------------------------------------------------------------------------


def _finish(
    opened: _Opened,
    fits: Sequence[Fit],
    families: Sequence[Family],
    source: Path,
    out: Path | None,
    units: dict[str, str],
    strict: bool,
    quiet: bool,
) -> int:
    from curvefit.write.fit_files import write_fits

    stem = source.name.removesuffix(source.suffix).removesuffix(".curves")
    folder = out if out is not None else source.with_name(f"{source.name}.curvefit")
    paths = write_fits(
        fits,
        opened.curves,
        folder,
        stem,
        source=source,
        document=opened.document,
        pumps=opened.pumps,
        findings=opened.findings,
        units=units or None,
    )
    say(_summary(fits, units), quiet)
    for one in families:
        say(quiet=quiet)
        say(_exponents(one), quiet)
    said = tuple(dict.fromkeys(f for one in fits for f in one.findings))
    if said:
        say(quiet=quiet)
        say(findings_text(said), quiet)
    say(quiet=quiet)
    say(written(paths), quiet)
    alarmed = any(f.severity != "info" for f in said)
    return UNTRUSTED if strict and alarmed else 0


def _summary(fits: Sequence[Fit], units: dict[str, str]) -> str:
    """A line for each fit, then its equation, the candidates and the reason."""
    from curvefit.models import equation, rescale
    from curvefit.records import QUANTITIES
    from curvefit.units import unit
    from curvefit.write.out_units import choose_units, out_units

    chosen = choose_units(units)
    rows, below = [], []
    for one in fits:
        own = out_units(one.curve, chosen, None)
        word = unit(own.value).print
        low, high = (q / own.flow_si for q in one.flow_range_si)
        band = one.band
        half = "unknown"
        if band.low_si is not None and band.high_si is not None:
            mean = float((band.high_si - band.low_si).mean()) / 2 / own.value_si
            half = f"± {mean:.2g} {word}"
        model = one.family if one.degree is None else f"{one.family} {one.degree}"
        rows.append(
            [
                one.name,
                model,
                f"{low:.4g} to {high:.4g} {unit(own.flow).print}",
                f"{one.residual_rms_si / own.value_si:.2g} {word}",
                f"{half} ({band.kind}, {band.confidence:.4g})",
            ]
        )
        symbol = QUANTITIES[own.quantity].symbol
        if one.coefficients is not None:
            text = equation(rescale(one.coefficients, own.flow_si, own.value_si), symbol, 6)
            below.append(f"{one.name}: {text}")
        elif one.family == "power":
            below.append(f"{one.name}: {_power_text(one, own, symbol)}")
        others = "; ".join(
            f"{name} {value:.1f}" + (f" ({note})" if note else "")
            for name, value, note in one.candidates
            if math.isfinite(value)
        )
        below.append(f"    {one.reason}" + (f"; candidates: {others}" if others else ""))
    head = ("fit", "model", "flow range", "residual", "band, mean half width")
    return str(table(head, rows)) + "\n\n" + "\n".join(below)


def _power_text(fit: Fit, own: Any, symbol: str) -> str:
    from curvefit.write.rescaled import rescaled_parameters

    parameters, _ = rescaled_parameters(fit.parameters, None, own.flow_si, own.value_si)
    constant, factor, n = parameters.values()
    sign = "−" if ("H0" in parameters) == (factor >= 0) else "+"
    return f"{symbol} = {constant:.6g} {sign} {abs(factor):.6g}·Q^{n:.4g}"


def _exponents(family: Family) -> str:
    """Fitted exponents beside the nominal ones, and each curve predicted from the others."""
    from curvefit.fit.family import LINEAR, NOMINAL

    radial = NOMINAL[family.quantity]["radial trim"]
    rows = []
    for name, (value, u, nominal) in family.exponents.items():
        trim = "–" if "speed" in name else str(radial[0 if name.startswith("flow") else 1])
        said = name
        if family.quantity in LINEAR and name.startswith("value"):
            said, trim = "loss of efficiency per share of diameter", "–"
        rows.append([said, f"{value:.4f} ± {1.96 * u:.4f}", f"{nominal:g}", trim])
    head = (family.quantity, "fitted, 95 %", "nominal", "radial trim")
    text = str(table(head, rows))
    left = family.leave_one_out()
    if left:
        lines = [
            [x.curve + (" (end)" if x.end else ""), f"{x.rms:.3%}", f"{x.largest:.3%}",
             f"{x.inside:.0%}"]
            for x in left
        ]  # fmt: skip
        text += "\n\n" + table(
            ("left out, predicted from the others", "error, rms", "largest", "in its band"), lines
        )
    return text
