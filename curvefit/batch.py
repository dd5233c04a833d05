"""Many charts, one summary: each in a folder of its own, none stopping the rest.

OUT holds `summary.csv`, `index.html`, `journal.jsonl`, and one folder per input by its relative
path. The journal has a line for each chart done, written before the next is begun, so that a run
that was killed goes on where it stopped.
"""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Callable, Iterable, Iterator, Sequence
from concurrent.futures import Executor, Future, wait
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

from curvefit import __version__
from curvefit.errors import ChartError, InputError, Location, WriteError

__all__ = ["Job", "Outcome", "find_charts", "quiet_worker", "read_many"]

SUFFIXES = (".png", ".jpg", ".jpeg", ".tif", ".tiff", ".bmp", ".webp", ".pdf")
JOURNAL = "journal.jsonl"


@dataclass(frozen=True, slots=True)
class Job:
    """One input file and the folder its files go to; options go to the writer as they are."""

    path: str
    folder: str
    relative: str
    options: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of one input: a row of the summary per page that held a chart.

    state : "done", "failed" or "kept" (done before, nothing changed). key : what it depends on.
    """

    relative: str
    state: str
    key: str
    pages: tuple[dict[str, Any], ...] = ()
    error: str = ""
    seconds: float = 0.0


def find_charts(
    inputs: Iterable[str | Path], out: Path, options: dict[str, Any] | None = None
) -> list[Job]:
    """The jobs for files and folders (searched with all their subfolders), sorted.

    Parameters
    ----------
    inputs : files and folders
    out : the folder for all results; inputs inside it are passed over
    options : of the writer: "units", "points"

    Raises
    ------
    InputError
        If an input does not exist, or no chart is found at all.

    Notes
    -----
    A file's folder in `out` is its path relative to the named folder, its suffix kept, so that
    charts of the same stem never meet; what would still meet is numbered.
    """
    found: dict[Path, Path] = {}
    for given in map(Path, inputs):
        if given.is_dir():
            for path in sorted(given.rglob("*")):
                if path.is_file() and path.suffix.lower() in SUFFIXES and not _inside(path, out):
                    found.setdefault(path.resolve(), path.relative_to(given))
        elif given.is_file():
            found.setdefault(given.resolve(), Path(given.name))
        else:
            raise InputError(
                f"{given} does not exist",
                Location(file=str(given)),
                "Give files or folders that hold charts.",
            )
    if not found:
        raise InputError(
            "no chart was found",
            remedy=f"Charts are files that end in {', '.join(SUFFIXES)}.",
        )
    jobs, taken = [], set[str]()
    for path, relative in sorted(found.items(), key=lambda item: str(item[1])):
        name, number = relative.as_posix(), 2
        while name.casefold() in taken:
            name, number = f"{relative.as_posix()}.{number}", number + 1
        taken.add(name.casefold())
        jobs.append(Job(str(path), str(out / name), name, dict(options or {})))
    return jobs


def _inside(path: Path, folder: Path) -> bool:
    return folder.resolve() in path.resolve().parents


def quiet_worker() -> None:
    """Prepares a worker process: one thread a library, so that workers do not fight for cores."""
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ[name] = "1"
    import cv2

    cv2.setNumThreads(1)


def read_many(
    jobs: Sequence[Job],
    out: Path,
    executor: Executor,
    *,
    ahead: int = 4,
    progress: Callable[[Outcome], None] | None = None,
) -> list[Outcome]:
    """The outcome of each job, in the order of the jobs.

    Parameters
    ----------
    jobs : what to read
    out : folder of the journal
    executor : anything with `submit` that gives futures, local processes or machines elsewhere
    ahead : how many jobs are handed out at a time, so that memory stays flat over thousands
    progress : called with each outcome as it comes

    Raises
    ------
    WriteError
        If the journal cannot be written.
    """
    before = _journal(out / JOURNAL)
    outcomes: dict[str, Outcome] = {}
    waiting: dict[Future[Outcome], Job] = {}
    try:
        out.mkdir(parents=True, exist_ok=True)
        journal = open(out / JOURNAL, "a", encoding="utf-8")  # noqa: SIM115  closed below
    except OSError as error:
        raise WriteError(
            f"the journal cannot be written: {error}",
            Location(file=str(out / JOURNAL)),
            "Choose another --out folder.",
        ) from error

    def finish(job: Job, outcome: Outcome) -> None:
        outcomes[job.relative] = outcome
        if outcome.state != "kept":
            journal.write(json.dumps(asdict(outcome), ensure_ascii=False) + "\n")
            journal.flush()
            os.fsync(journal.fileno())
        if progress is not None:
            progress(outcome)

    with journal:
        for job in _each(jobs, waiting, executor, ahead, before, finish):
            waiting[executor.submit(_read_one, job)] = job
        while waiting:
            _collect(waiting, finish)
    return [outcomes[job.relative] for job in jobs]


def _each(
    jobs: Sequence[Job],
    waiting: dict[Future[Outcome], Job],
    executor: Executor,
    ahead: int,
    before: dict[str, Outcome],
    finish: Callable[[Job, Outcome], None],
) -> Iterator[Job]:
    """Jobs that have to be done, never more than `ahead` of them under way."""
    for job in jobs:
        old = before.get(job.relative)
        if old is not None and old.key == job_key(job) and _files_stand(job, old):
            finish(job, Outcome(job.relative, "kept", old.key, old.pages, old.error, old.seconds))
            continue
        while len(waiting) >= ahead:
            _collect(waiting, finish)
        yield job


def _collect(waiting: dict[Future[Outcome], Job], finish: Callable[[Job, Outcome], None]) -> None:
    done, _ = wait(list(waiting), return_when="FIRST_COMPLETED")
    for future in done:
        job = waiting.pop(future)
        error = future.exception()
        if error is not None:  # the worker itself died: the chart failed, the rest goes on
            finish(job, Outcome(job.relative, "failed", "", error=f"the worker ended: {error!r}"))
        else:
            finish(job, future.result())


def job_key(job: Job) -> str:
    """What a job's result depends on: the file, its given notes, the options, the version."""
    state = hashlib.sha256()
    state.update(Path(job.path).read_bytes())
    for notes in sorted(Path(job.folder).glob("*.notes.toml")):
        state.update(notes.read_bytes())
    state.update(json.dumps([job.options, __version__], sort_keys=True).encode())
    return state.hexdigest()


def _files_stand(job: Job, old: Outcome) -> bool:
    names = [p["files"] for p in old.pages]
    return old.state == "failed" or all(
        (Path(job.folder) / name).is_file() for files in names for name in files
    )


def _journal(path: Path) -> dict[str, Outcome]:
    """The last outcome of each chart in a journal; a line cut short by a crash is passed over."""
    found: dict[str, Outcome] = {}
    if not path.is_file():
        return found
    for line in path.read_text(encoding="utf-8").splitlines():
        try:
            row = json.loads(line)
            row["pages"] = tuple(row["pages"])
            found[row["relative"]] = Outcome(**row)
        except (ValueError, TypeError, KeyError):
            continue
    return found


def _read_one(job: Job) -> Outcome:
    """Reads one input and writes its files; the function that workers run."""
    import time

    from curvefit.notes import standing_notes
    from curvefit.pipeline import read_document, with_stems
    from curvefit.write import write

    start = time.perf_counter()
    folder, stem = Path(job.folder), Path(job.path).stem
    pages: list[dict[str, Any]] = []
    try:
        readings = read_document(job.path, lambda p: standing_notes(p, folder, stem)[0])
        for reading, name in with_stems(readings, stem, None):
            files = write(reading, folder, name, inputs=[job.path], **job.options)
            thumbnail = _thumbnail(files, name)
            pages.append(_row(reading, [f.name for f in files], thumbnail))
        state, error = "done", ""
    except ChartError as caught:
        state, error = "failed", str(caught)
    except Exception as caught:
        state, error = "failed", f"a defect in curvefit: {caught!r}"
    seconds = time.perf_counter() - start
    return Outcome(job.relative, state, job_key(job), tuple(pages), error, round(seconds, 2))


def _thumbnail(files: Sequence[Path], name: str) -> str:
    """The overlay as a small JPEG in a data address, for the index; "" where there is none."""
    import base64
    import io

    from PIL import Image

    overlay = next((f for f in files if f.name == f"{name}.overlay.png"), None)
    if overlay is None:
        return ""
    with Image.open(overlay) as picture:
        small = picture.convert("RGB")
        small.thumbnail((320, 240))
    out = io.BytesIO()
    small.save(out, "JPEG", quality=70)
    return "data:image/jpeg;base64," + base64.b64encode(out.getvalue()).decode()


def _row(reading: Any, files: list[str], thumbnail: str) -> dict[str, Any]:
    counts = {
        level: sum(f.severity == level for f in reading.findings)
        for level in ("error", "warning", "info")
    }
    return {
        "page": reading.page.number,
        "panels": len(reading.panels),
        "curves": len(reading.curves),
        "quantities": sorted({c.quantity for c in reading.curves}),
        "findings": counts,
        "worst": next((f"{f.code}: {f.message}" for f in reading.findings), ""),
        "files": files,
        "thumbnail": thumbnail,
    }
