"""The same clean curves as an XLSX workbook: a sheet a quantity, equations, findings, source."""

from __future__ import annotations

import io
import re
import zipfile
from collections.abc import Mapping, Sequence
from typing import Any

from curvefit import __version__
from curvefit.records import QUANTITIES, Finding
from curvefit.write.curves_csv import neutral
from curvefit.write.curves_json import equation
from curvefit.write.export import CleanCurve

__all__ = ["workbook"]

_STILL = "2000-01-01T00:00:00Z"


def workbook(
    curves: Sequence[CleanCurve],
    findings: Sequence[Finding],
    source: Mapping[str, Any],
    picture: bytes | None = None,
) -> bytes:
    """The bytes of the workbook; the same for the same curves.

    Parameters
    ----------
    curves : clean curves
    findings : all findings about them
    source : file, sha256 and page of the chart
    picture : PNG of the page with what was read drawn over it, where it is at hand
    """
    from openpyxl import Workbook

    book = Workbook()
    book.remove(book.active)
    for quantity in dict.fromkeys(c.out.units.quantity for c in curves):
        chosen = [c for c in curves if c.out.units.quantity == quantity]
        _points(book.create_sheet(QUANTITIES[quantity].title[:31]), chosen)
    _equations(book.create_sheet("Equations"), curves)
    _rows(
        book.create_sheet("Findings"),
        ("severity", "code", "panel", "axis", "curve", "message", "remedy"),
        [
            (f.severity, f.code, f.where.panel, f.where.axis, f.where.curve, f.message, f.remedy)
            for f in findings
        ],
    )
    sheet = book.create_sheet("Source")
    facts = [("written by", f"curvefit {__version__}"), *source.items()]
    _rows(sheet, ("what", "value"), [(k, v) for k, v in facts])
    if picture is not None:
        from openpyxl.drawing.image import Image

        image = Image(io.BytesIO(picture))
        scale = min(1.0, 900 / image.width)
        image.width, image.height = int(image.width * scale), int(image.height * scale)
        sheet.add_image(image, f"A{len(facts) + 3}")
    out = io.BytesIO()
    book.save(out)
    return _still(out.getvalue())


def _points(sheet: Any, curves: Sequence[CleanCurve]) -> None:
    """Two columns a curve and, where they are known, the ends of its band."""
    column = 1
    for clean in curves:
        units = clean.out.units
        heads = [f"flow [{units.flow}]", f"value [{units.value}]", "low", "high"]
        values = [clean.flow, clean.value, clean.low, clean.high]
        sheet.cell(1, column, neutral(clean.name))
        for k, (head, numbers) in enumerate(zip(heads, values, strict=True)):
            sheet.cell(2, column + k, head)
            for i, number in enumerate(numbers):
                if number == number:
                    sheet.cell(3 + i, column + k, float(number))
        column += 5
    sheet.freeze_panes = "A3"


def _equations(sheet: Any, curves: Sequence[CleanCurve]) -> None:
    rows = []
    for clean in curves:
        if clean.fit is None:
            continue
        fit = clean.fit
        named = {f"c{k}": float(c) for k, c in enumerate(fit.coefficients)} if (
            fit.coefficients is not None
        ) else fit.parameters  # fmt: skip
        limits = (*fit.flow_range, fit.units.flow, fit.units.value)
        rows += [(clean.name, equation(fit), name, value, *limits) for name, value in named.items()]
    head = ("curve", "equation", "term", "value", "flow from", "flow to", "flow unit", "unit")
    _rows(sheet, head, rows)


def _rows(sheet: Any, head: Sequence[str], rows: Sequence[Sequence[Any]]) -> None:
    for i, row in enumerate([head, *rows], 1):
        for k, value in enumerate(row, 1):
            if value is not None:
                sheet.cell(i, k, _harmless(value) if isinstance(value, str) else value)
    sheet.freeze_panes = "A2"


def _harmless(text: str) -> str:
    """Text that is no formula and holds nothing that a sheet cannot hold."""
    return neutral(re.sub(r"[\x00-\x08\x0b\x0c\x0e-\x1f]", "�", text))[:32767]


def _still(data: bytes) -> bytes:
    """The workbook without the time of its making, so that equal curves give equal bytes."""
    out = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(data)) as old, zipfile.ZipFile(out, "w") as new:
        for entry in old.infolist():
            content = old.read(entry)
            if entry.filename == "docProps/core.xml":
                content = re.sub(rb"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\dZ", _STILL.encode(), content)
            still = zipfile.ZipInfo(entry.filename, (1980, 1, 1, 0, 0, 0))
            still.compress_type = zipfile.ZIP_DEFLATED
            new.writestr(still, content)
    return out.getvalue()
