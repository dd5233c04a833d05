"""The files of `curvefit fit`: the curve set with its new fits, the CSV, a plot for each fit."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from curvefit.records import Curve, Finding, Fit, Page, Pump, Reading
from curvefit.write.atomic import put_files
from curvefit.write.curves_csv import csv_metadata, curves_csv
from curvefit.write.curves_json import curves_document, json_text
from curvefit.write.fit_plots import fit_plot
from curvefit.write.outgoing import outgoing

__all__ = ["write_fits"]

#: findings of these rooms are made anew with the fits
_ANEW = ("fit.", "family.", "derived.")


def write_fits(
    fits: Sequence[Fit],
    curves: Sequence[Curve],
    folder: str | Path,
    stem: str,
    *,
    source: Path,
    document: Mapping[str, Any] | None = None,
    pumps: Sequence[Pump] = (),
    findings: Sequence[Finding] = (),
    units: Mapping[str, str | None] | None = None,
    plots: bool = True,
) -> tuple[Path, ...]:
    """The paths of the files of new fits, written into a folder.

    STEM.curves.json (format "pump-curve-set"), STEM.curves.csv with its metadata, and
    STEM.fit.N.png for each fit.

    Parameters
    ----------
    fits, curves : the new fits and the curves of the set
    folder, stem : where to, and what the names begin with
    source : the file that was given; never overwritten
    document : the curve set as it was read, for its source, panels and pixels; None for points
    pumps, findings : of the set
    units : by "flow", "head", "power", "npsh"
    plots : whether to draw

    Raises
    ------
    WriteError
        If a file cannot be written.
    """
    kept = [f for f in findings if not f.code.startswith(_ANEW)]
    said = [*kept, *(f for fit in fits for f in fit.findings)]
    reading = Reading(
        _page(source, document),
        curves=tuple(curves),
        pumps=tuple(pumps),
        fits=tuple(fits),
        findings=tuple(dict.fromkeys(said)),
    )
    out = outgoing(reading, units)
    written = curves_document(out)
    if document is not None:
        _keep(written, document, bool(units))
    table = f"{stem}.curves.csv"
    files = {
        f"{stem}.curves.json": json_text(written).encode(),
        table: curves_csv(out).encode(),
        f"{table}-metadata.json": csv_metadata(table, out).encode(),
    }
    if plots:
        for number, fit in enumerate(out.fits, 1):
            files[f"{stem}.fit.{number}.png"] = fit_plot(fit)
    return put_files(folder, files, [source])


def _page(source: Path, document: Mapping[str, Any] | None) -> Page:
    """A page that stands for the picture, which is not at hand."""
    told = (document or {}).get("source") or {}
    digest = told.get("sha256") or hashlib.sha256(source.read_bytes()).hexdigest()
    size = (int(told.get("width_px") or 1), int(told.get("height_px") or 1))
    return Page(
        str(told.get("file") or source.name),
        digest,
        int(told.get("page") or 1),
        np.zeros((1, 1, 3), np.uint8),
        size,
        dpi=told.get("dpi"),
    )


def _keep(written: dict[str, Any], document: Mapping[str, Any], changed: bool) -> None:
    """Puts back what only the picture tells: panels, pixels; whole curves where units stayed."""
    written["panels"] = document.get("panels", [])
    before = {row["name"]: row for row in document.get("curves", ())}
    for i, row in enumerate(written["curves"]):
        old = before.get(row["name"])
        if old is None:
            continue
        if changed:
            row["panel"] = old.get("panel")
            row["trace_px"] = old.get("trace_px", [])
        else:
            written["curves"][i] = old
