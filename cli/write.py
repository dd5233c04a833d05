"""curvefit write: clean curve files for any solver, from curves that were read."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer
from curvefit_cli.options import (
    Debug,
    FlowUnit,
    HeadUnit,
    NpshUnit,
    Out,
    Points,
    PowerUnit,
    Quiet,
    Strict,
    unit_options,
)
from curvefit_cli.selection import CurveName, Diameter, PumpName, Speed, select
from curvefit_cli.show import UNTRUSTED, findings_text, say, table, written

if TYPE_CHECKING:
    from curvefit.write.export import CleanCurve, Sampling
    from curvefit.write.reopen import CurveSet

__all__ = ["write"]

KINDS = ("csv", "json", "xlsx", "table", "template")


def write(
    curves: Annotated[
        list[Path],
        typer.Argument(metavar="CURVES_OR_FOLDERS...", help=".curves.json, .csv or folders."),
    ],
    to: Annotated[
        str, typer.Option("--to", metavar="KIND", help="csv, json, xlsx, table or template.")
    ] = "csv",
    template: Annotated[
        Path | None,
        typer.Option("--template", metavar="FILE", help="A text in Jinja2.", show_default=False),
    ] = None,
    points: Points = None,
    tolerance: Annotated[
        float,
        typer.Option("--tolerance", metavar="T", help="Largest error, as a share of the range."),
    ] = 1e-3,
    common_grid: Annotated[
        bool, typer.Option("--common-grid", help="The same flows for all curves of a pump.")
    ] = False,
    strictly_falling: Annotated[
        bool, typer.Option("--strictly-falling", help="Make every head fall.")
    ] = False,
    digits: Annotated[int, typer.Option("--digits", metavar="N", help="Digits written.")] = 7,
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
    """Write clean curves for a solver: few points, your units, your format.

    Points are placed so that straight lines between them keep to the curve: the fewest for
    --tolerance, or the best --points N. A template gets curves, pumps, source and findings.

    Example: curvefit write pump.curves.json --to csv --points 12 --flow-unit l/s --out solver
    """
    from curvefit.write.export import Sampling

    units = unit_options(flow_unit, head_unit, power_unit, npsh_unit)
    kind = _kind(to, template)
    how = Sampling(points, tolerance, strictly_falling, common_grid, digits)
    alarmed, taken = False, dict[Path, set[str]]()
    for path in _found(curves):
        opened = _selected(path, pump, curve, diameter, speed)
        folder = out if out is not None else _beside(path)
        stem = _free(_stem(path), taken.setdefault(folder, set()))
        alarmed |= _write_one(path, opened, kind, template, units, how, folder, stem, quiet)
    raise typer.Exit(UNTRUSTED if strict and alarmed else 0)


def _kind(to: str, template: Path | None) -> str:
    from curvefit.errors import InputError, Location

    if to not in KINDS:
        raise InputError(
            f"{to!r} is no kind of file", Location(key="--to"), f"Known: {', '.join(KINDS)}."
        )
    if (to == "template") != (template is not None):
        if template is not None and to == "csv":
            return "template"
        raise InputError(
            "--to template and --template FILE belong together",
            Location(key="--template"),
            "Give both, or --template alone.",
        )
    return to


def _found(given: Sequence[Path]) -> list[Path]:
    """The files of curves named, and those in the folders named and their subfolders."""
    from curvefit.errors import InputError, Location

    found: dict[Path, None] = {}
    for path in given:
        inside = sorted(path.rglob("*.curves.json")) if path.is_dir() else [path]
        if not inside:
            raise InputError(
                "the folder holds no .curves.json",
                Location(file=str(path)),
                "Read a chart into it first: curvefit read CHART --out FOLDER.",
            )
        found |= dict.fromkeys(inside)
    return list(found)


def _selected(
    path: Path, pump: str | None, curve: str | None, diameter: str | None, speed: str | None
) -> CurveSet:
    from dataclasses import replace

    from curvefit.units import parse_quantity
    from curvefit.write.reopen import reopen
    from curvefit.write.reopen_csv import reopen_csv

    opened = reopen_csv(path) if path.suffix == ".csv" else reopen(path)
    if pump is curve is diameter is speed is None:
        return opened
    d = None if diameter is None else parse_quantity(diameter, "length", "mm")
    n = None if speed is None else parse_quantity(speed, "speed", "/min")
    drawn = {c.name for c in opened.curves}
    derived = [f.curve for f in opened.fits if f.curve.name not in drawn]
    names = {c.name for c in select((*opened.curves, *derived), pump, curve, d, n)}
    kept = tuple(c for c in opened.curves if c.name in names)
    fits = tuple(f for f in opened.fits if {c.name for c in f.curves} <= names)
    return replace(opened, curves=kept, fits=fits)


def _beside(path: Path) -> Path:
    """The folder of the chart that the curves came from, or one made beside a lone file."""
    folder = path.parent
    return folder if folder.name.endswith(".curvefit") else folder / f"{path.name}.curvefit"


def _stem(path: Path) -> str:
    return path.name.removesuffix(path.suffix).removesuffix(".curves")


def _free(stem: str, taken: set[str]) -> str:
    name, number = stem, 2
    while name.casefold() in taken:
        name, number = f"{stem}.{number}", number + 1
    taken.add(name.casefold())
    return name


def _write_one(
    path: Path,
    opened: CurveSet,
    kind: str,
    template: Path | None,
    units: dict[str, str],
    how: Sampling,
    folder: Path,
    stem: str,
    quiet: bool,
) -> bool:
    """Writes the files for one file of curves; whether there was a warning."""
    from curvefit.write.atomic import put_files
    from curvefit.write.export import clean_curves

    curves, said = clean_curves(opened, units, how)
    files = _files(path, opened, curves, said, kind, template, units, how, stem)
    inputs = [path, *([template] if template is not None else [])]
    paths = put_files(folder, files, inputs)
    say(_points_table(curves), quiet)
    if said:
        say(findings_text(said), quiet)
    say(written(paths), quiet)
    return any(f.severity != "info" for f in (*said, *opened.findings))


def _files(
    path: Path,
    opened: CurveSet,
    curves: Sequence[CleanCurve],
    said: Sequence[Any],
    kind: str,
    template: Path | None,
    units: dict[str, str],
    how: Sampling,
    stem: str,
) -> dict[str, bytes]:
    from curvefit.write.curves_json import json_text
    from curvefit.write.export import document, table_text, tidy, wide

    if kind == "csv":
        page = int(opened.source.get("page") or 1)
        return {
            f"{stem}.points.csv": tidy(curves, page, how.digits).encode(),
            f"{stem}.points-wide.csv": wide(curves, how.digits).encode(),
        }
    if kind == "json":
        return {f"{stem}.points.json": json_text(document(opened, curves, units)).encode()}
    if kind == "table":
        return {f"{stem}.points.txt": table_text(curves, how.digits).encode()}
    if kind == "xlsx":
        from curvefit.write.workbook import workbook

        overlay = path.with_name(f"{_stem(path)}.overlay.png")
        picture = overlay.read_bytes() if overlay.is_file() else None
        findings = [*said, *opened.findings]
        return {f"{stem}.points.xlsx": workbook(curves, findings, opened.source, picture)}
    assert template is not None
    return {f"{stem}.{_plain_name(template)}": _filled(template, opened, curves)}


def _plain_name(template: Path) -> str:
    """What a template makes: "net.inp.j2" makes net.inp."""
    for ending in (".j2", ".jinja", ".jinja2", ".tmpl", ".template"):
        if template.name.endswith(ending) and template.name != ending:
            return template.name.removesuffix(ending)
    return f"{template.name}.txt"


def _filled(template: Path, opened: CurveSet, curves: Sequence[CleanCurve]) -> bytes:
    from curvefit.errors import InputError, Location
    from curvefit.write.template import fill, variables

    try:
        text = template.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(
            f"the template cannot be read: {error}",
            Location(file=str(template)),
            "Give the path of a UTF-8 text file.",
        ) from error
    return fill(text, variables(opened, curves), str(template)).encode()


def _points_table(curves: Sequence[CleanCurve]) -> str:
    from curvefit.units import unit

    rows = []
    for c in curves:
        kind = "equation" if c.fit is not None else "traced points"
        gap = f"{c.gap:.2g} {unit(c.out.units.value).print}" if c.fit is not None else "–"
        rows.append([c.name, str(len(c.flow)), kind, gap])
    return table(("curve", "points", "from", "largest error of straight lines"), rows)
