"""The notes that count for a page: those named, and those given in the output folder before."""

from __future__ import annotations

from pathlib import Path

from curvefit.notes.given import Notes
from curvefit.notes.merge import merge
from curvefit.notes.reader import read_notes
from curvefit.records import Page

__all__ = ["standing_notes"]


def standing_notes(
    page: Page, folder: Path, stem: str, named: Path | None = None, *, chosen: bool = False
) -> tuple[Notes, tuple[Path, ...]]:
    """The notes for a page, and the files of the output folder that gave some of them.

    Parameters
    ----------
    page : the loaded page
    folder, stem : of the output files
    named : a notes file that the user named; it wins over what stands in the folder
    chosen : the user chose this page, so that notes which name no page are meant for it

    Raises
    ------
    NotesError
        If a notes file cannot be used.
    """
    notes = read_notes(named, page, named=chosen)
    used = []
    for name in (f"{stem}.p{page.number}.notes.toml", f"{stem}.notes.toml"):
        standing = folder / name
        if not standing.is_file() or (named is not None and standing.samefile(named)):
            continue
        earlier = read_notes(standing, page, named=chosen)
        if earlier.given:
            used.append(standing)
            notes = merge(notes, earlier)
    return notes, tuple(used)
