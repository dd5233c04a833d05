"""Files put in place whole or not at all."""

from __future__ import annotations

import contextlib
import errno
import os
import tempfile
from collections.abc import Iterable, Mapping
from pathlib import Path

from curvefit.errors import Location, WriteError

__all__ = ["put_files"]


def put_files(
    folder: str | Path, files: Mapping[str, bytes], inputs: Iterable[str | Path] = ()
) -> tuple[Path, ...]:
    """The paths of files written into a folder, which is made where it is missing.

    Parameters
    ----------
    folder : where to
    files : name → content
    inputs : files that must not be overwritten

    Raises
    ------
    WriteError
        If the folder or a file cannot be written, or a file would overwrite an input. Then no
        file is half written: each is what it was, and no temporary file is left.

    Notes
    -----
    Every file is first written beside its place under another name and flushed to the disk; only
    when all are there do they take their names, each in one step.
    """
    place = Path(folder)
    _spare_inputs(place, files, inputs)
    waiting: list[tuple[str, Path]] = []
    name = ""
    try:
        place.mkdir(parents=True, exist_ok=True)
        for name, content in files.items():
            waiting.append((_beside(place, name, content), place / name))
        for temporary, final in waiting:
            name = final.name
            os.replace(temporary, final)
    except OSError as error:
        raise WriteError(
            f"{name or 'the folder'} cannot be written: {error.strerror or error}",
            Location(file=str(place / name if name else place)),
            _REMEDIES.get(error.errno or 0, "Name a folder you may write to with --out."),
        ) from error
    finally:
        for temporary, _ in waiting:
            with contextlib.suppress(OSError):
                os.unlink(temporary)
    return tuple(final for _, final in waiting)


_REMEDIES = {
    errno.ENOSPC: "The disk is full: make room, or name another folder with --out.",
    errno.EDQUOT: "The disk quota is used up: make room, or name another folder with --out.",
    errno.ENOTDIR: "A file stands where the folder should be: name another folder with --out.",
    errno.EEXIST: "A file stands where the folder should be: name another folder with --out.",
    errno.ENAMETOOLONG: "The name is too long: rename the chart, or name another folder.",
}


def _beside(folder: Path, name: str, content: bytes) -> str:
    """The path of a flushed temporary file in the folder, with ordinary permissions."""
    handle, path = tempfile.mkstemp(prefix=".curvefit-", suffix=".part", dir=folder)
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        mask = os.umask(0)
        os.umask(mask)
        os.chmod(path, 0o666 & ~mask)
    except BaseException:
        with contextlib.suppress(OSError):
            os.unlink(path)
        raise
    return path


def _spare_inputs(folder: Path, files: Mapping[str, bytes], inputs: Iterable[str | Path]) -> None:
    spared = [os.path.realpath(p) for p in inputs]
    for name in files:
        if os.path.realpath(folder / name) in spared:
            raise WriteError(
                f"{name} would overwrite an input",
                Location(file=str(folder / name)),
                "Name another folder with --out.",
            )
