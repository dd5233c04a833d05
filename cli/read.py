"""curvefit read: the main job, from a chart to its files."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer
from curvefit_cli.options import (
    Debug,
    FlowUnit,
    HeadUnit,
    NotesFile,
    NpshUnit,
    Out,
    Points,
    PowerUnit,
    Quiet,
    Strict,
    unit_options,
)
from curvefit_cli.show import (
    UNTRUSTED,
    Stages,
    curve_table,
    findings_text,
    say,
    say_error,
    written,
)

if TYPE_CHECKING:
    from curvefit.errors import ChartError
    from curvefit.notes import Notes
    from curvefit.records import Page, Reading

__all__ = ["read", "read_to"]


def read(
    chart: Annotated[Path, typer.Argument(metavar="CHART", help="An image or a PDF.")],
    page: Annotated[
        int | None,
        typer.Option("--page", min=1, metavar="N", help="Read this page.", show_default=False),
    ] = None,
    out: Out = None,
    notes: NotesFile = None,
    points: Points = None,
    flow_unit: FlowUnit = None,
    head_unit: HeadUnit = None,
    power_unit: PowerUnit = None,
    npsh_unit: NpshUnit = None,
    strict: Strict = False,
    quiet: Quiet = False,
    debug: Debug = False,
) -> None:
    """Read a chart into curves, fits, findings and a report.

    Axes, curves and fits are written as JSON and CSV, with the notes, an overlay and a report.
    The files go to CHART.curvefit beside the chart, or to --out. Notes that stand there are used,
    and what they give is kept. Without --page every page that holds a chart is read.

    Example: curvefit read pump.pdf --page 2 --head-unit ft --out curves
    """
    units = unit_options(flow_unit, head_unit, power_unit, npsh_unit)
    code = read_to(chart, out, page=page, notes=notes, points=points, units=units,
                   strict=strict, quiet=quiet)  # fmt: skip
    raise typer.Exit(code)


def read_to(
    chart: Path,
    out: Path | None = None,
    *,
    page: int | None = None,
    notes: Path | None = None,
    points: int | None = None,
    units: dict[str, str] | None = None,
    strict: bool = False,
    quiet: bool = False,
) -> int:
    """The exit code of reading a chart into a folder; tables and findings are printed.

    Raises
    ------
    ChartError
        If nothing could be read; what there is was written before.
    """
    from curvefit.errors import ChartError
    from curvefit.pipeline import STAGES, read_document, with_stems
    from curvefit.write import write

    folder = out if out is not None else chart.with_name(f"{chart.name}.curvefit")

    def notes_of(loaded: Page) -> Notes:
        return _notes(loaded, chart, folder, notes, page is not None, quiet)

    worst, done = 0, 0
    try:
        with Stages(len(STAGES) + 1, quiet, chart.name) as progress:
            readings = read_document(chart, notes_of, page=page, progress=progress)
            for reading, stem in with_stems(readings, chart.stem, page):
                reading, code = _judged(reading, strict)
                progress("write")
                paths = write(reading, folder, stem, units=units, points=points, inputs=[chart])
                progress.clear()
                _report(reading, paths, units, strict, quiet)
                worst, done = max(worst, code), done + 1
    except ChartError as error:
        if error.exit_code == UNTRUSTED and error.partial is not None:
            _write_partial(error, chart, folder, page is not None or done > 0)
        _place_as_stored(error)
        raise
    return worst


def _notes(
    page: Page, chart: Path, folder: Path, named: Path | None, chosen: bool, quiet: bool
) -> Notes:
    """The notes for a page: those of --notes, and those given in the output folder before."""
    import sys

    from curvefit.notes import standing_notes

    notes, used = standing_notes(page, folder, chart.stem, named, chosen=chosen)
    for path in used:
        say(f"What {path} gives is used.", quiet, sys.stderr)
    return notes


def _judged(reading: Reading, strict: bool) -> tuple[Reading, int]:
    """The reading, with an error among its findings where it holds no curve, and its exit code."""
    from curvefit.errors import Location
    from curvefit.records import Finding

    if not reading.curves:
        finding = Finding(
            "error",
            "curve.none",
            f"No curve could be read: {len(reading.panels)} plot boxes and "
            f"{len(reading.traces)} lines were found, but none on two axes of known quantity.",
            Location(file=reading.page.file, page=reading.page.number),
            "Give the axes under [[axis]] in the notes: quantity, unit and two marks each.",
        )
        return replace(reading, findings=(finding, *reading.findings)), UNTRUSTED
    alarmed = any(f.severity != "info" for f in reading.findings)
    return reading, UNTRUSTED if strict and alarmed else 0


def _report(
    reading: Reading,
    paths: Sequence[Path],
    units: dict[str, str] | None,
    strict: bool,
    quiet: bool,
) -> None:
    import sys

    pages = reading.page.pages
    say(f"{reading.page.file}{f', page {reading.page.number}' if pages > 1 else ''}", quiet)
    if reading.curves:
        say(curve_table(reading, units), quiet)
    if reading.findings:
        say(quiet=quiet)
        say(findings_text(reading.findings), quiet)
    say(quiet=quiet)
    say(written(paths), quiet)
    if not reading.curves:
        first = reading.findings[0]
        say(f"Error: {first.where}: {first.message}\n  {first.remedy}", file=sys.stderr)
    elif strict and (count := sum(f.severity != "info" for f in reading.findings)):
        warnings = f"{count} warning{'s' * (count > 1)}"
        say(
            f"Error: {first_place(reading)}: {warnings}, and --strict allows none.\n"
            "  Look at the findings above, or in the report.",
            file=sys.stderr,
        )


def first_place(reading: Reading) -> str:
    """File and page of a reading."""
    from curvefit.errors import Location

    return str(Location(file=reading.page.file, page=reading.page.number))


def _place_as_stored(error: ChartError) -> None:
    """Turns the place of an error into pixels of the stored picture, as notes and files have it."""
    from curvefit.records import Reading

    box = error.where.box_px
    if box is None or not isinstance(error.partial, Reading):
        return
    ends = error.partial.page.to_stored(_corners(box))
    (x0, y0), (x1, y1) = ends.min(0), ends.max(0)
    error.where = replace(error.where, box_px=(float(x0), float(y0), float(x1), float(y1)))


def _corners(box: tuple[float, float, float, float]) -> Any:
    import numpy as np

    left, top, right, bottom = box
    return np.array([[left, top], [right, top], [right, bottom], [left, bottom]])


def _write_partial(error: ChartError, chart: Path, folder: Path, named: bool) -> None:
    """Writes what was read before an error, with the error among its findings."""
    from curvefit.errors import ChartError, NoChart
    from curvefit.records import Finding, Reading
    from curvefit.write import write

    partial = error.partial
    if not isinstance(partial, Reading):
        return
    none = isinstance(error, NoChart)
    finding = Finding(
        "error", "chart.none" if none else "chart.unreadable", error.what, error.where, error.remedy
    )
    partial = replace(partial, findings=(finding, *partial.findings))
    several = named and partial.page.pages > 1
    stem = f"{chart.stem}.p{partial.page.number}" if several else chart.stem
    try:
        write(partial, folder, stem, inputs=[chart])
    except ChartError as failed:
        say_error(failed)
