"""curvefit batch: many charts, one summary; one bad chart never stops the rest."""

from __future__ import annotations

import json
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer
from curvefit_cli.options import (
    Debug,
    FlowUnit,
    HeadUnit,
    NpshUnit,
    Points,
    PowerUnit,
    Quiet,
    Strict,
    unit_options,
)
from curvefit_cli.show import UNTRUSTED, say

if TYPE_CHECKING:
    from concurrent.futures import Executor

    from curvefit.batch import Job, Outcome

__all__ = ["batch"]

SOME_FAILED = 5
_ASKED = "batch.json"


def batch(
    charts: Annotated[
        list[Path] | None,
        typer.Argument(metavar="FILES_OR_FOLDERS…", help="Charts, or folders of them."),
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option("--out", metavar="DIR", help="Folder for all results.", show_default=False),
    ] = None,
    workers: Annotated[
        int | None,
        typer.Option("--workers", min=1, metavar="N", help="Processes.", show_default=False),
    ] = None,
    resume: Annotated[
        bool, typer.Option("--resume", help="Go on with what DIR was begun with.")
    ] = False,
    points: Points = None,
    flow_unit: FlowUnit = None,
    head_unit: HeadUnit = None,
    power_unit: PowerUnit = None,
    npsh_unit: NpshUnit = None,
    strict: Strict = False,
    quiet: Quiet = False,
    debug: Debug = False,
) -> None:
    """Read many charts and write one summary.

    Each chart gets a folder of its own below DIR, by its relative path; DIR gets summary.csv,
    index.html and a journal. A chart is read again only when it, its notes, the options or
    curvefit changed; corrected notes in its folder are used.

    Example: curvefit batch catalogue/ --out curves --workers 2
    """
    import os

    from curvefit.batch import find_charts, read_many
    from curvefit.errors import InputError

    if out is None:
        raise InputError("a folder for the results is needed", remedy="Add --out DIR.")
    options: dict[str, Any] = {
        "units": unit_options(flow_unit, head_unit, power_unit, npsh_unit) or None,
        "points": points,
    }
    if resume:
        charts, options = _begun(out)
    if not charts:
        raise InputError("no charts are named", remedy="Name files or folders, or add --resume.")
    jobs = find_charts(charts, out, options)
    _remember(out, charts, options)
    count = workers or max(1, min(os.cpu_count() or 1, len(jobs)))
    with _executor(count) as executor, _bar(len(jobs), quiet) as tick:
        outcomes = read_many(jobs, out, executor, ahead=2 * count, progress=tick)
    _summarise(out, outcomes)
    raise typer.Exit(_told(jobs, outcomes, out, strict, quiet))


def _begun(out: Path) -> tuple[list[Path], dict[str, Any]]:
    """The charts and options that a folder's batch was begun with."""
    from curvefit.errors import InputError, Location

    try:
        row = json.loads((out / _ASKED).read_text(encoding="utf-8"))
        return [Path(p) for p in row["charts"]], dict(row["options"])
    except (OSError, ValueError, KeyError, TypeError) as error:
        raise InputError(
            f"there is no batch to go on with: {error}",
            Location(file=str(out / _ASKED)),
            "Name the charts, without --resume.",
        ) from error


def _remember(out: Path, charts: Sequence[Path], options: dict[str, Any]) -> None:
    from curvefit.write.atomic import put_files

    row = {"charts": [str(p.resolve()) for p in charts], "options": options}
    put_files(out, {_ASKED: (json.dumps(row, ensure_ascii=False, indent=1) + "\n").encode()})


@contextmanager
def _executor(workers: int) -> Iterator[Executor]:
    """Processes on this machine, each with its models loaded once and one thread a library."""
    import multiprocessing
    from concurrent.futures import ProcessPoolExecutor

    from curvefit.batch import quiet_worker

    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(workers, mp_context=context, initializer=quiet_worker) as pool:
        yield pool


@contextmanager
def _bar(total: int, quiet: bool) -> Iterator[Any]:
    """A function that counts outcomes on a terminal, with the time left; silent in a pipe."""
    import sys

    if quiet or not sys.stderr.isatty():
        yield None
        return
    from tqdm import tqdm

    with tqdm(total=total, unit="chart", file=sys.stderr) as bar:

        def tick(outcome: Outcome) -> None:
            bar.set_postfix_str(outcome.relative[-40:], refresh=False)
            bar.update()

        yield tick


def _summarise(out: Path, outcomes: Sequence[Outcome]) -> None:
    from dataclasses import asdict

    from curvefit.write.atomic import put_files
    from curvefit.write.summary import summary_csv, summary_html

    rows = [asdict(o) for o in outcomes]
    files = {"summary.csv": summary_csv(rows), "index.html": summary_html(rows)}
    put_files(out, {name: text.encode() for name, text in files.items()})


def _told(
    jobs: Sequence[Job], outcomes: Sequence[Outcome], out: Path, strict: bool, quiet: bool
) -> int:
    """Prints how it went; the exit code."""
    import sys

    failed = [o for o in outcomes if not o.pages]
    kept = sum(o.state == "kept" for o in outcomes)
    curves = sum(p["curves"] for o in outcomes for p in o.pages)
    say(
        f"{len(jobs)} charts, {curves} curves; {kept} were done before; {len(failed)} failed. "
        f"See {out / 'index.html'}",
        quiet,
    )
    for o in failed:
        say(f"Error: {o.relative}: {o.error}", file=sys.stderr)
    if failed:
        return SOME_FAILED
    doubted = any(
        p["findings"]["warning"] + p["findings"]["error"] for o in outcomes for p in o.pages
    )
    return UNTRUSTED if strict and doubted else 0
