"""A chart goes in, a Reading comes out: the stages in order and nothing else. Read this first.

load → calibrate → trace → identify → fit → check
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path

import numpy as np

from curvefit.errors import ChartError, NoChart
from curvefit.notes import CurveNotes, Notes
from curvefit.records import Curve, Finding, Fit, Page, Panel, Pump, Reading, Trace

__all__ = ["STAGES", "read_chart", "read_document", "with_stems"]

STAGES = ("load", "calibrate", "trace", "identify", "fit", "check")
Progress = Callable[[str], None]
NotesFor = Callable[[Page], Notes]


def read_chart(
    path: str | Path,
    notes: Notes | NotesFor | None = None,
    *,
    page: int | None = None,
    previous: Reading | None = None,
    progress: Progress | None = None,
) -> Reading:
    """The Reading of one chart page.

    Parameters
    ----------
    path : path of an image or a PDF
    notes : Notes, or a function of the loaded page that gives them (a notes file holds pixels of
        the stored image, which only the loaded page can turn into pixels of the page as shown).
    page : number of the page, from 1; None takes the first page that holds a chart.
    previous : a Reading of the same page: stages whose inputs did not change are not run again.
    progress : called with the name of each stage as it starts.

    Raises
    ------
    OpenError, LimitError
        If the file cannot be opened or is too large.
    NoChart
        If no page holds a plot box with readable axes; `partial` holds the findings.
    InputError
        If the page number or a note does not fit the chart.
    """
    if previous is not None:
        return read_page(previous.page, notes, previous=previous, progress=progress)
    return next(read_document(path, notes, page=page, progress=progress))


def read_document(
    path: str | Path,
    notes: Notes | NotesFor | None = None,
    *,
    page: int | None = None,
    progress: Progress | None = None,
) -> Iterator[Reading]:
    """The Readings of all pages of a document that hold a chart, one after the other.

    Where no page is named, pages without a chart are passed over; a document without any chart
    raises the NoChart of its last page.
    """
    from curvefit.load import load

    found, missing = False, None
    pages = load(path, page)
    while True:
        start = _begin("load", progress)
        loaded = next(pages, None)
        if loaded is None:
            break
        seconds = {"load": time.perf_counter() - start}
        try:
            reading = read_page(loaded, notes, progress=progress)
        except NoChart as error:
            if page is not None or loaded.pages == 1:
                raise
            missing = error
            continue
        found = True
        yield replace(reading, seconds=seconds | reading.seconds)
    if missing is not None and not found:
        raise missing


def with_stems(
    readings: Iterator[Reading], stem: str, page: int | None
) -> Iterator[tuple[Reading, str]]:
    """Readings with the stem of their files: STEM.pN where a document has several chart pages.

    What was read before an error is given before the error is raised.
    """
    held: Reading | None = None
    several, failed = False, None
    try:
        for reading in readings:
            if held is not None:
                several = True
                yield held, f"{stem}.p{held.page.number}"
            held = reading
    except ChartError as error:  # what was read before is not lost
        failed = error
    if held is not None:
        several = several or (page is not None and held.page.pages > 1)
        yield held, f"{stem}.p{held.page.number}" if several else stem
    if failed is not None:
        raise failed


def read_page(
    page: Page,
    notes: Notes | NotesFor | None = None,
    *,
    previous: Reading | None = None,
    progress: Progress | None = None,
) -> Reading:
    """The Reading of one loaded page; see :func:`read_chart`."""
    from curvefit.calibrate import calibrate
    from curvefit.check import check
    from curvefit.identify import identify

    given = notes(page) if callable(notes) else notes or Notes()
    before = previous if previous is not None and previous.page is page else None
    seconds: dict[str, float] = {}
    done = Reading(page, findings=page.findings, notes=given)
    try:
        with _stage("calibrate", seconds, progress):
            panels = _same_panels(before, given) or calibrate(page, given.page, given.panels)
        done = replace(done, panels=panels, findings=_gathered(page, panels))
        with _stage("trace", seconds, progress):
            given = _placed(page, panels, given, before)
            traces = tuple(t for p in panels for t in _traces(p, given, before))
        done = replace(done, traces=traces, findings=_gathered(page, panels, traces))
        with _stage("identify", seconds, progress):
            curves, pumps, said = identify(page, panels, traces, given)
        done = replace(done, curves=curves, pumps=pumps)
        done = replace(done, findings=_gathered(page, panels, traces, curves) + said)
        with _stage("fit", seconds, progress):
            fits = _fits(curves, pumps, before)
        with _stage("check", seconds, progress):
            checked = check(curves, fits, pumps)
    except ChartError as error:
        error.at(file=page.file, page=page.number)
        error.partial = done
        raise
    findings = done.findings + tuple(f for one in fits for f in one.findings) + checked
    return replace(done, fits=fits, findings=_once(findings, page), seconds=seconds)


def _begin(name: str, progress: Progress | None) -> float:
    if progress is not None:
        progress(name)
    return time.perf_counter()


@contextmanager
def _stage(name: str, seconds: dict[str, float], progress: Progress | None) -> Iterator[None]:
    start = _begin(name, progress)
    try:
        yield
    finally:
        seconds[name] = time.perf_counter() - start


def _same_panels(before: Reading | None, notes: Notes) -> tuple[Panel, ...] | None:
    if before is None or before.notes is None:
        return None
    unchanged = (before.notes.page, before.notes.panels) == (notes.page, notes.panels)
    return before.panels if unchanged else None


def _placed(page: Page, panels: tuple[Panel, ...], notes: Notes, before: Reading | None) -> Notes:
    """Notes that redraw a line by its name, with a point on that line.

    A line's name says what it means, which is known only once it was followed and identified:
    where such notes stand, the lines are read once without them.
    """
    from curvefit.identify import identify

    def by_name_alone(c: CurveNotes) -> bool:
        return c.name is not None and c.at is None and bool(c.path or c.leave_out)

    if not any(by_name_alone(c) for c in notes.curves):
        return notes
    curves = before.curves if before is not None else ()
    if not curves:
        bare = replace(notes, curves=tuple(c for c in notes.curves if not by_name_alone(c)))
        traces = tuple(t for p in panels for t in _traces(p, bare, None))
        curves, _, _ = identify(page, panels, traces, bare)
    on = {c.name: c.trace.xy[len(c.trace.flat) // 2] for c in curves if c.trace is not None}
    placed = tuple(
        replace(c, at=(float(on[c.name][0]), float(on[c.name][1])))
        if by_name_alone(c) and c.name in on
        else c
        for c in notes.curves
    )
    return replace(notes, curves=placed)


def _traces(panel: Panel, notes: Notes, before: Reading | None) -> tuple[Trace, ...]:
    """The panel's lines; those of a previous reading where nothing that shapes them changed."""
    from curvefit.trace import trace

    if (
        before is not None
        and any(p is panel for p in before.panels)
        and _shaping(notes.curves) == _shaping(before.notes.curves)
    ):
        return tuple(t for t in before.traces if t.panel is panel)
    return trace(panel, notes.curves)


def _shaping(curves: tuple[CurveNotes, ...]) -> list[tuple[object, ...]]:
    """What notes say of where lines run, without what they say of their meaning."""
    return [
        (c.panel, c.at, c.name, c.path, c.whole, c.leave_out, c.drop)
        for c in curves
        if c.path or c.leave_out or c.drop
    ]


def _fits(
    curves: tuple[Curve, ...], pumps: tuple[Pump, ...], before: Reading | None
) -> tuple[Fit, ...]:
    """Fits of all curves; those of a previous reading where no curve and no pump changed."""
    from curvefit.fit import fit

    if before is not None and before.pumps == pumps and len(before.curves) == len(curves):
        same = dict(zip(before.curves, curves, strict=True))
        if all(_same_points(old, new) for old, new in same.items()):
            return tuple(
                replace(f, curves=tuple(same.get(c, c) for c in f.curves)) for f in before.fits
            )
    return fit(curves, pumps=pumps)


def _same_points(a: Curve, b: Curve) -> bool:
    return (a.name, a.quantity) == (b.name, b.quantity) and all(
        np.array_equal(x, y)
        for x, y in (
            (a.flow_si, b.flow_si),
            (a.value_si, b.value_si),
            (np.asarray(a.calibration_si), np.asarray(b.calibration_si)),
        )
    )


def _gathered(
    page: Page,
    panels: tuple[Panel, ...] = (),
    traces: tuple[Trace, ...] = (),
    curves: tuple[Curve, ...] = (),
) -> tuple[Finding, ...]:
    """The findings that the records of the stages so far carry, in the order of the stages."""
    carried = [p.findings for p in panels]
    carried += [t.findings for t in traces] + [c.findings for c in curves]
    return page.findings + tuple(f for findings in carried for f in findings)


def _once(findings: tuple[Finding, ...], page: Page) -> tuple[Finding, ...]:
    """Findings without repeats, each naming file and page, worst first within a stage's order."""
    rank = {"error": 0, "warning": 1, "info": 2}
    unique = dict.fromkeys(
        replace(f, where=replace(f.where, file=page.file, page=page.number)) for f in findings
    )
    return tuple(sorted(unique, key=lambda f: rank[f.severity]))
