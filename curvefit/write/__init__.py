"""Reading → files, each written whole or not at all; nothing else touches the disk."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from curvefit.records import Reading

__all__ = ["write"]


def write(
    reading: Reading,
    folder: str | Path,
    stem: str,
    *,
    units: Mapping[str, str | None] | None = None,
    points: int | None = None,
    inputs: Iterable[str | Path] = (),
) -> tuple[Path, ...]:
    """The paths of the files of a reading, written into a folder.

    STEM.curves.json, STEM.curves.csv with its CSVW metadata, STEM.notes.toml, STEM.overlay.png and
    STEM.report.html. A reading without panels gives the JSON alone, which holds its findings.

    Parameters
    ----------
    reading : what was read
    folder : where to; made where it is missing
    stem : what the file names begin with
    units : by "flow", "head", "power", "npsh": spellings or UCUM codes; others leave as printed
    points : at most so many traced points a curve (picked, not interpolated), and so many fitted
        ones in the CSV; None keeps all
    inputs : files that must not be overwritten

    Raises
    ------
    InputError
        If a unit is unknown or of a wrong dimension.
    WriteError
        If a file cannot be written; then every file is what it was.
    NotesError
        If the notes file that stands there cannot be understood: it is not overwritten.
    """
    from curvefit.write.atomic import put_files
    from curvefit.write.curves_csv import csv_metadata, curves_csv
    from curvefit.write.curves_json import curves_document, json_text
    from curvefit.write.notes_toml import notes_toml
    from curvefit.write.outgoing import outgoing
    from curvefit.write.overlay import overlay, png
    from curvefit.write.report import report

    out = outgoing(reading, units, points)
    files = {f"{stem}.curves.json": json_text(curves_document(out)).encode()}
    if reading.panels:
        table, notes = f"{stem}.curves.csv", f"{stem}.notes.toml"
        standing = _text_of(Path(folder) / notes)
        files[table] = curves_csv(out).encode()
        files[f"{table}-metadata.json"] = csv_metadata(table, out).encode()
        picture = overlay(reading)
        files[f"{stem}.overlay.png"] = png(picture)
        files[f"{stem}.report.html"] = report(out, picture).encode()
        files[notes] = notes_toml(reading, standing, str(Path(folder) / notes)).encode()
    return put_files(folder, files, inputs)


def _text_of(path: Path) -> str | None:
    """The text of a file that may not be there."""
    from curvefit.errors import Location, WriteError

    try:
        return path.read_text(encoding="utf-8")
    except FileNotFoundError:
        return None
    except (OSError, UnicodeDecodeError) as error:
        raise WriteError(
            f"the notes that stand here cannot be read, so they are not replaced: {error}",
            Location(file=str(path)),
            "Move the file away, or name another folder with --out.",
        ) from error
