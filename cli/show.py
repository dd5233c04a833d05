"""What the user sees: tables, findings, progress, errors and the exit codes they end with."""

from __future__ import annotations

import sys
import textwrap
from collections.abc import Callable, Iterable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, TextIO

if TYPE_CHECKING:
    from curvefit.errors import ChartError
    from curvefit.records import Finding, Reading

__all__ = [
    "Stages",
    "curve_table",
    "ended",
    "findings_text",
    "quantity_text",
    "say",
    "say_error",
    "table",
    "written",
]

DEFECT, USAGE, UNTRUSTED, INTERRUPTED = 1, 2, 4, 130
_WIDTH = 100


def ended(run: Callable[[], Any], debug: bool) -> int:
    """The exit code with which a command ends; errors are told on standard error.

    Parameters
    ----------
    run : the command; it may return its exit code.
    debug : let a traceback through.
    """
    from curvefit.errors import ChartError

    try:
        code = run()
        sys.stdout.flush()
        if code == INTERRUPTED:
            return _interrupted()
        return code if isinstance(code, int) else 0
    except ChartError as error:
        if debug:
            raise
        say_error(error)
        return error.exit_code
    except BrokenPipeError:  # whoever read our output has had enough
        sys.stderr.close()
        return 0
    except KeyboardInterrupt:
        return _interrupted()
    except Exception as error:
        if type(error).__name__ == "Abort":
            return _interrupted()
        if hasattr(error, "format_message"):  # the command line itself is wrong
            error.show()  # type: ignore[attr-defined]
            return USAGE
        if debug:
            raise
        print(
            f"curvefit has a defect: {type(error).__name__}: {error}\n"
            "  The chart is not at fault. Run the command again with --debug and report the "
            "traceback.",
            file=sys.stderr,
        )
        return DEFECT


def _interrupted() -> int:
    print("interrupted", file=sys.stderr)
    return INTERRUPTED


def say(text: str = "", quiet: bool = False, file: TextIO | None = None) -> None:
    """Prints a line, unless quiet; what the terminal cannot show is replaced."""
    if quiet:
        return
    stream = file or sys.stdout
    encoding = stream.encoding or "utf-8"
    print(text.encode(encoding, "replace").decode(encoding), file=stream)


def say_error(error: ChartError) -> None:
    """Tells an error on standard error: what and where, then what to do."""
    place = str(error.where)
    say(f"Error: {place + ': ' if place else ''}{plain(error.what)}.", file=sys.stderr)
    if error.remedy:
        lines = error.remedy.splitlines()  # a remedy may list things, a line each
        say("\n".join(f"  {plain(line)}" for line in lines) + ".", file=sys.stderr)


def plain(text: str) -> str:
    """Text from a chart or a file made harmless for a terminal, and without its last full stop."""
    return "".join(c if c.isprintable() else "�" for c in text).removesuffix(".")


def quantity_text(value: float | None, unit: str, digits: int = 4) -> str:
    """A number with its unit as people write it; "–" where it is unknown."""
    from curvefit.units import unit as known

    if value is None or value != value:
        return "–"
    return f"{value:.{digits}g} {known(unit).print}".rstrip()


def table(head: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """A plain table of aligned columns, two blanks between them."""
    cells = [list(head), *(list(map(plain, r)) for r in rows)]
    widths = [max(len(r[i]) for r in cells) for i in range(len(head))]
    lines = ["  ".join(c.ljust(w) for c, w in zip(r, widths, strict=True)).rstrip() for r in cells]
    lines.insert(1, "  ".join("-" * w for w in widths))
    return "\n".join(lines)


def curve_table(reading: Reading, units: Mapping[str, str | None] | None = None) -> str:
    """The closing table: panel, curve, quantity, label, flow range, standard uncertainty."""
    import numpy as np

    from curvefit.records import QUANTITIES
    from curvefit.write.outgoing import outgoing
    from curvefit.write.wording import range_text

    rows = []
    for c in outgoing(reading, units).curves:
        u = c.u[np.isfinite(c.u)]
        rows.append(
            [
                c.curve.panel.name if c.curve.panel is not None else "–",
                c.curve.name,
                QUANTITIES[c.units.quantity].title + (" (guess)" if c.curve.guessed else ""),
                c.curve.label or "–",
                range_text(float(c.flow.min()), float(c.flow.max()), c.units.flow),
                quantity_text(float(np.median(u)), c.units.value, 2) if len(u) else "unknown",
            ]
        )
    head = ("panel", "curve", "quantity", "label", "flow range", "standard uncertainty")
    return table(head, rows)


def findings_text(findings: Sequence[Finding], most: int = 40) -> str:
    """Findings in words: what, where, and what to do; the worst first."""
    from curvefit.write.wording import sentence

    rank = {"error": 0, "warning": 1, "info": 2}
    words = {"error": "Error", "warning": "Warning", "info": "Note"}
    lines: list[str] = []
    for f in sorted(findings, key=lambda f: rank[f.severity])[:most]:
        parts = (("panel", f.where.panel), ("axis", f.where.axis), ("curve", f.where.curve))
        place = ", ".join(f"{word} {value}" for word, value in parts if value is not None)
        head = f"{words[f.severity]} {f.code}{f' ({place})' if place else ''}"
        text = f"{head}: {sentence(plain(f.message))}"
        lines += textwrap.wrap(text, _WIDTH, subsequent_indent="    ")
        if f.remedy:
            remedy = sentence(plain(f.remedy))
            lines += textwrap.wrap(remedy, _WIDTH, initial_indent="    ", subsequent_indent="    ")
    if len(findings) > most:
        lines.append(f"… and {len(findings) - most} more, in the report.")
    return "\n".join(lines)


def written(paths: Sequence[Path]) -> str:
    """Where the files are."""
    if not paths:
        return "Nothing was written."
    names = ", ".join(p.name for p in paths)
    return "\n".join(
        textwrap.wrap(
            f"Written to {paths[0].parent}: {names}",
            _WIDTH,
            subsequent_indent="    ",
            break_long_words=False,
            break_on_hyphens=False,
        )
    )


class Stages:
    """Shows on a terminal which stage is under way; silent in a pipe and when quiet.

    Called with the name of each stage as it begins; used in a `with` block.
    """

    def __init__(self, total: int, quiet: bool, what: str = "") -> None:
        self.total, self.what, self.begun = total, what, 0
        self.bar: Any = None
        if not quiet and sys.stderr.isatty():
            from tqdm import tqdm

            form = "{desc:<28} |{bar:24}| {elapsed}"
            self.bar = tqdm(total=total, bar_format=form, leave=False, file=sys.stderr)

    def __enter__(self) -> Stages:
        return self

    def __exit__(self, *error: object) -> None:
        if self.bar is not None:
            self.bar.close()

    def __call__(self, name: str) -> None:
        if self.bar is not None:
            self.bar.set_description_str(f"{self.what} {name}".strip(), refresh=False)
            self.bar.n = self.begun % self.total
            self.bar.refresh()
        self.begun += 1

    def clear(self) -> None:
        """Takes the bar off the terminal, so that something can be printed."""
        if self.bar is not None:
            self.bar.clear()
