"""The summary of many charts: a CSV with a row a page, and an HTML index, worst findings first."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping
from html import escape
from typing import Any
from urllib.parse import quote

__all__ = ["summary_csv", "summary_html"]

_COLUMNS = (
    "input",
    "state",
    "page",
    "panels",
    "curves",
    "quantities",
    "errors",
    "warnings",
    "notes",
    "worst_finding",
    "error",
    "seconds",
)

_PAGE = """<!doctype html>
<html lang="en"><head><meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" \
content="default-src 'none'; style-src 'unsafe-inline'; img-src data:">
<title>Charts read by curvefit</title><style>
:root{{color-scheme:light dark}}
body{{font:16px/1.5 system-ui,sans-serif;margin:2rem auto;max-width:70rem;padding:0 1rem}}
li{{display:flex;gap:1.2rem;padding:.9rem 0;border-top:1px solid #8886;list-style:none}}
ul{{padding:0}}img{{width:200px;height:150px;object-fit:contain;background:#fff}}
.no{{width:200px;height:150px;background:#8882;flex:none}}
b.bad::before{{content:"✗ "}}b.doubt::before{{content:"! "}}b.good::before{{content:"✓ "}}
p{{margin:.2rem 0}}small{{opacity:.8}}
</style></head><body><h1>Charts read by curvefit</h1><p>{intro}</p>
<p>Look at each overlay before its numbers are used. Readings from a chart do not replace the
manufacturer's data or a witnessed test.</p><ul>{rows}</ul></body></html>
"""


def summary_csv(outcomes: Iterable[Mapping[str, Any]]) -> str:
    """The CSV (RFC 4180) of outcomes: a row for each page, one without a page for what failed.

    Parameters
    ----------
    outcomes : with "relative", "state", "pages", "error", "seconds"
    """
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\r\n")
    writer.writerow(_COLUMNS)
    for one in outcomes:
        pages: Iterable[Mapping[str, Any]] = one["pages"] or ({},)
        for page in pages:
            counts = page.get("findings", {})
            row = (
                one["relative"],
                one["state"],
                page.get("page", ""),
                page.get("panels", ""),
                page.get("curves", ""),
                " ".join(page.get("quantities", ())),
                *(counts.get(level, "") for level in ("error", "warning", "info")),
                page.get("worst", ""),
                one["error"],
                one["seconds"],
            )
            writer.writerow([_harmless(v) for v in row])
    return out.getvalue()


def _harmless(value: Any) -> Any:
    """Text that a spreadsheet would take for a formula, with an apostrophe before it."""
    return f"'{value}" if isinstance(value, str) and value[:1] in tuple("=+-@\t\r") else value


def summary_html(outcomes: Iterable[Mapping[str, Any]]) -> str:
    """The index page: every chart with a small picture, the worst first; self-contained."""
    listed = sorted(outcomes, key=lambda o: (-_badness(o), o["relative"]))
    failed = sum(not o["pages"] for o in listed)
    intro = f"{len(listed)} charts, {failed} of them could not be read."
    return _PAGE.format(intro=intro, rows="".join(_item(o) for o in listed))


def _badness(one: Mapping[str, Any]) -> int:
    """Failed charts first, then by errors and warnings."""
    if not one["pages"]:
        return 1_000_000
    counts = [p["findings"] for p in one["pages"]]
    return sum(1000 * c.get("error", 0) + c.get("warning", 0) for c in counts)


def _item(one: Mapping[str, Any]) -> str:
    name = escape(one["relative"])
    if not one["pages"]:
        text = f'<b class="bad">{name}</b><p>{escape(one["error"])}</p>'
        return f'<li><div class="no"></div><div>{text}</div></li>'
    parts = []
    for page in one["pages"]:
        counts = page["findings"]
        bad, doubt = counts.get("error", 0), counts.get("warning", 0)
        kind = "bad" if bad else "doubt" if doubt else "good"
        report = next((f for f in page["files"] if f.endswith(".report.html")), None)
        address = quote(f"{one['relative']}/{report}") if report else ""
        title = f'<a href="{escape(address)}">{name}</a>' if report else name
        picture = page.get("thumbnail", "")
        shown = (
            f'<img alt="what was read, drawn over the page" src="{escape(picture)}">'
            if picture
            else '<div class="no"></div>'
        )
        parts.append(
            f'<li>{shown}<div><b class="{kind}">{title}</b>, page {page["page"]}'
            f"<p>{page['curves']} curves in {page['panels']} plots: "
            f"{escape(', '.join(page['quantities']))}</p>"
            f"<p>{bad} errors, {doubt} warnings, {counts.get('info', 0)} notes</p>"
            f"<p><small>{escape(page['worst'])}</small></p></div></li>"
        )
    return "".join(parts)
