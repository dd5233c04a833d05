"""One entry of a notes file: each value checked, each error with file, line and key."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from curvefit.errors import InputError, Location, NotesError
from curvefit.notes.given import Box, Point
from curvefit.notes.lines import Lines
from curvefit.records import Page
from curvefit.units import parse, parse_quantity

__all__ = ["Entry"]

_FRACTION = re.compile(r"(\d+)[ -](\d+)/(\d+)(.*)")


@dataclass(frozen=True, slots=True)
class Entry:
    """The values of one table of the file, and where it stands there."""

    file: str
    table: str
    index: int
    values: Mapping[str, Any]
    lines: Lines
    page: Page | None

    def wrong(self, key: str | None, what: str, remedy: str) -> NotesError:
        """The error for a key of this entry."""
        line = self.lines.key(self.table, self.index, key)
        name = f"{self.table}.{key}" if key else self.table
        return NotesError(what, Location(file=self.file, line=line, key=name), remedy)

    def only(self, known: Sequence[str]) -> None:
        """Refuses keys that are not known."""
        for key in self.values:
            if key not in known:
                raise self.wrong(
                    key, f"key {key!r} is not known in {self.table}", f"Known: {', '.join(known)}."
                )

    @property
    def line(self) -> int | None:
        """The line on which the entry starts."""
        return self.lines.key(self.table, self.index)

    def text(self, key: str) -> str | None:
        """A text, or None where the key is missing."""
        value = self.values.get(key)
        if value is not None and not (isinstance(value, str) and value.strip()):
            raise self.wrong(key, f"{key} is {value!r}", f'Write a text in quotes: {key} = "…".')
        return value

    def choice(self, key: str, known: Sequence[str]) -> str | None:
        """One of the known words, or None."""
        value = self.text(key)
        if value is not None and value not in known:
            raise self.wrong(key, f"{key} is {value!r}", f"Known: {', '.join(known)}.")
        return value

    def flag(self, key: str) -> bool:
        """true or false; false where the key is missing."""
        value = self.values.get(key, False)
        if not isinstance(value, bool):
            raise self.wrong(key, f"{key} is {value!r}", f"Write {key} = true or {key} = false.")
        return value

    def whole(self, key: str, least: int, most: int) -> int | None:
        """A whole number in a range, or None."""
        value = self.values.get(key)
        if value is None:
            return None
        if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= most:
            raise self.wrong(
                key, f"{key} is {value!r}", f"Write a whole number from {least} to {most}."
            )
        return value

    def number(self, key: str, value: object) -> float:
        """A finite number."""
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise self.wrong(key, f"{value!r} in {key} is no number", "Write a number like 12.5.")
        if not math.isfinite(value):
            raise self.wrong(key, f"{value!r} in {key} is not finite", "Write a number like 12.5.")
        return float(value)

    def unit(self, key: str, dimensions: Sequence[str]) -> str | None:
        """A unit's UCUM code (its spelling where it has none), or None."""
        text = self.text(key)
        if text is None:
            return None
        try:
            found = parse(text, dimensions[0] if len(dimensions) == 1 else None)
        except InputError as error:
            raise self.wrong(key, error.what, error.remedy) from error
        if dimensions and found.dimension not in dimensions:
            raise self.wrong(
                key,
                f"{text!r} is a unit of {found.dimension}",
                f"A unit of {' or '.join(dimensions)} is needed here.",
            )
        return found.code if found.coded else text

    def quantity(self, key: str, dimension: str, example: str) -> tuple[float, str] | None:
        """An SI value and its unit's code from a text such as "210 mm", or None."""
        value = self.values.get(key)
        if value is None:
            return None
        if not isinstance(value, str):
            raise self.wrong(
                key, f"{key} is {value!r}, without a unit", f'Write {key} = "{example}".'
            )
        text = _decimal(value)
        try:
            si = parse_quantity(text, dimension)
            unit = re.sub(r"^[-+\d.eE\s]+", "", text) if text.strip() else ""
            code = parse(unit, dimension).code
        except InputError as error:
            raise self.wrong(key, f"{key}: {error.what}", error.remedy) from error
        if not si > 0:
            raise self.wrong(key, f"{key} is {value!r}", "It must be above zero.")
        return si, code

    def point(self, key: str, value: object | None = None) -> Point | None:
        """A point [x, y] of the stored image in page px, or None."""
        value = self.values.get(key) if value is None else value
        if value is None:
            return None
        if not isinstance(value, list) or len(value) != 2:
            raise self.wrong(key, f"{value!r} in {key} is no point", "Write [x, y] in pixels.")
        x, y = (self.number(key, v) for v in value)
        if self.page is None:
            return x, y
        width, height = self.page.stored_size
        if not (-0.5 * width <= x <= 1.5 * width and -0.5 * height <= y <= 1.5 * height):
            raise self.wrong(
                key,
                f"the point [{x:g}, {y:g}] lies far outside the picture",
                f"The stored picture is {width} pixels wide and {height} high.",
            )
        shown = self.page.from_stored(np.array([[x, y]]))[0]
        return float(shown[0]), float(shown[1])

    def points(self, key: str, least: int, most: int | None = None) -> tuple[Point, ...]:
        """Points [[x, y], …] in page px; empty where the key is missing."""
        found = tuple(
            p for v in self.list(key) if (p := self.point(key, v if v is not None else 0))
        )
        if key in self.values and not least <= len(found) <= (most or len(found)):
            need = f"{least}" if most == least else f"at least {least}"
            raise self.wrong(
                key, f"{key} has {len(found)} points", f"{need} points [x, y] are needed."
            )
        return found

    def box(self, key: str, value: object | None = None) -> Box | None:
        """A box [left, top, right, bottom] in page px, or None."""
        value = self.values.get(key) if value is None else value
        if value is None:
            return None
        if not isinstance(value, list) or len(value) != 4:
            raise self.wrong(
                key, f"{value!r} in {key} is no box", "Write [left, top, right, bottom] in pixels."
            )
        left, top, right, bottom = (self.number(key, v) for v in value)
        if not (left < right and top < bottom):
            raise self.wrong(
                key,
                f"the box {value!r} has no area",
                "Write [left, top, right, bottom] with left < right and top < bottom.",
            )
        ends = [self.point(key, [x, y]) for x in (left, right) for y in (top, bottom)]
        low, high = np.min(ends, axis=0), np.max(ends, axis=0)  # type: ignore[arg-type]
        return float(low[0]), float(low[1]), float(high[0]), float(high[1])

    def boxes(self, key: str) -> tuple[Box, ...]:
        """Boxes [[left, top, right, bottom], …], or a single one, in page px."""
        rows = self.list(key)
        if rows and not isinstance(rows[0], list):
            rows = [rows]
        return tuple(b for v in rows if (b := self.box(key, v)))

    def list(self, key: str) -> Any:
        """A list; empty where the key is missing."""
        value = self.values.get(key, [])
        if not isinstance(value, list):
            raise self.wrong(key, f"{key} is {value!r}", f"Write a list: {key} = […].")
        return value

    def each(self, key: str, read: Callable[[object], Any]) -> tuple[Any, ...]:
        """The items of a list, each read by a function."""
        return tuple(read(v) for v in self.list(key))


def _decimal(text: str) -> str:
    """ "8 1/2 in" as "8.5 in"; other texts as they are."""
    match = _FRACTION.match(text.strip())
    if not match or int(match[3]) == 0:
        return text
    return f"{int(match[1]) + int(match[2]) / int(match[3])!r} {match[4]}"
