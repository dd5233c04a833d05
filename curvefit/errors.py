"""What curvefit raises, and the exit code each error ends with.

::

    ChartError                 nothing trustworthy could be made of the chart       exit 4
    ├── InputError             the command line or a hand-written file is wrong     exit 2
    │   └── NotesError         a notes file: file, line and key are named           exit 2
    ├── OpenError              the input cannot be opened or is no format we read   exit 3
    │   └── LimitError         it would take more memory, time or pixels than allowed  exit 3
    ├── NoChart                the page holds no plot box with readable axes        exit 4
    └── WriteError             the output cannot be written                         exit 6

A stage that cannot produce its record raises; one that produces it with doubt attaches
a :class:`curvefit.records.Finding` instead.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

__all__ = [
    "ChartError",
    "InputError",
    "LimitError",
    "Location",
    "NoChart",
    "NotesError",
    "OpenError",
    "WriteError",
]


@dataclass(frozen=True, slots=True)
class Location:
    """Where something was found: any part may be unknown (None).

    `box_px` is (left, top, right, bottom) in pixels of the page as shown.
    """

    file: str | None = None
    page: int | None = None
    panel: str | None = None
    axis: str | None = None
    curve: str | None = None
    box_px: tuple[float, float, float, float] | None = None
    line: int | None = None
    key: str | None = None

    def __str__(self) -> str:
        parts = [self.file] if self.file else []
        parts += [
            f"{word} {value}"
            for word, value in (
                ("page", self.page),
                ("panel", self.panel),
                ("axis", self.axis),
                ("curve", self.curve),
                ("line", self.line),
                ("key", self.key),
            )
            if value is not None
        ]
        if self.box_px is not None:
            parts.append("pixels {:.0f},{:.0f} to {:.0f},{:.0f}".format(*self.box_px))
        return ", ".join(parts)


class ChartError(Exception):
    """Nothing trustworthy could be produced.

    Parameters
    ----------
    what : str
        The number or thing found and the one needed.
    where : Location
        File, page, panel, axis, pixel box, line and key, as far as known.
    remedy : str
        What the user can do; names the notes key or the option.

    Attributes
    ----------
    partial : the Reading as far as it got, or None.
    """

    exit_code = 4
    partial: object | None = None

    def __init__(self, what: str, where: Location | None = None, remedy: str = "") -> None:
        super().__init__(what)
        self.what = what
        self.where = where or Location()
        self.remedy = remedy

    def at(self, **known: object) -> ChartError:
        """The same error with parts of its location filled in where they are still unknown."""
        missing = {k: v for k, v in known.items() if getattr(self.where, k) is None}
        self.where = replace(self.where, **missing)  # type: ignore[arg-type]
        return self

    def __reduce__(self) -> tuple[object, ...]:
        return type(self), (self.what, self.where, self.remedy)

    def __str__(self) -> str:
        place = str(self.where)
        return "".join(
            (f"{place}: " if place else "", self.what, f" {self.remedy}" if self.remedy else "")
        )


class InputError(ChartError):
    """The command line or a hand-written file is wrong."""

    exit_code = 2


class NotesError(InputError):
    """A notes file holds an entry that cannot be used."""


class OpenError(ChartError):
    """The input cannot be opened or is not a format curvefit reads."""

    exit_code = 3


class LimitError(OpenError):
    """Reading the input would take more pixels, memory or time than allowed."""


class NoChart(ChartError):
    """The page holds no plot box with readable axes."""


class WriteError(ChartError):
    """The output cannot be written."""

    exit_code = 6
