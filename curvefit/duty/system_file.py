"""Reads a SYSTEM.toml: every entry checked, every error with file, line and key."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

from curvefit.duty.liquid import Liquid, atmosphere, water
from curvefit.duty.losses import FITTINGS, Fitting, Pipe, k_of_type
from curvefit.duty.system import Operation, Suction, System
from curvefit.errors import InputError, Location, OpenError
from curvefit.units import parse, parse_quantity

__all__ = ["read_system", "system_from"]

_TOP = (
    "static_head",
    "loss_coefficient",
    "known_point",
    "liquid",
    "suction",
    "discharge",
    "uncertainty",
    "operation",
)
_PIPE = (
    "name",
    "length",
    "inside_diameter",
    "roughness",
    "friction_factor",
    "hazen_williams_c",
)
_FITTING = ("name", "type", "k", "inside_diameter", "larger_diameter", "count")
_GRADES = ("1U", "1E", "1B", "2B", "2U", "3B")


def read_system(path: str | Path) -> System:
    """The System that a TOML file describes.

    Raises
    ------
    OpenError
        If the file cannot be read.
    InputError
        If an entry is missing, unknown, of a wrong unit or out of range: file, line and key are
        named.
    """
    path = Path(path)
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise OpenError(
            f"the system file cannot be read: {error}",
            Location(file=str(path)),
            "Give the path of a UTF-8 text file in TOML.",
        ) from error
    return system_from(text, str(path))


def system_from(text: str, file: str = "SYSTEM.toml") -> System:
    """The System that a TOML text describes; see :func:`read_system`."""
    try:
        entries = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        line = re.search(r"line (\d+)", str(error))
        raise InputError(
            f"not valid TOML: {error}",
            Location(file=file, line=int(line[1]) if line else None),
            'A value with a unit stands in quotes: static_head = "12 m".',
        ) from error
    return _Reader(text, file).system(entries)


class _Reader:
    """Takes entries out of nested tables and knows where each of them stands in the file."""

    def __init__(self, text: str, file: str) -> None:
        self.lines = text.splitlines()
        self.file = file

    def fail(self, key: str, what: str, remedy: str) -> InputError:
        return InputError(what, Location(file=self.file, line=self.line_of(key), key=key), remedy)

    def line_of(self, key: str) -> int | None:
        """The line on which a key such as "discharge.pipe[2].length" stands, or its table does."""
        table, _, name = key.rpartition(".")
        start = self.header(table)
        if name.endswith("]"):
            return self.header(key) or None
        for i, one in enumerate(self.lines[start:], start + 1):
            if i > start + 1 and re.match(r"\s*\[", one) and table:
                break
            if re.search(rf"(^|[\s.{{,\[]){re.escape(name)}\s*(=|\])", one):
                return i
        return start or None

    def header(self, table: str) -> int:
        """The line of a table's header, 0 where there is none."""
        name, _, number = table.rstrip("]").partition("[")
        rows = [
            i
            for i, one in enumerate(self.lines, 1)
            if name and re.match(rf"\s*\[+\s*{re.escape(name)}\s*\]", one)
        ]
        which = int(number) - 1 if number else 0
        return rows[which] if which < len(rows) else 0

    def known(self, table: object, names: tuple[str, ...], where: str) -> Mapping[str, Any]:
        if not isinstance(table, dict):
            raise self.fail(where, f"{where} is not a table", f"Write it as [{where}] with keys.")
        for name in table:
            if name not in names:
                key = f"{where}.{name}" if where else name
                raise self.fail(key, f"key {name!r} is not known", f"Known: {', '.join(names)}.")
        return table

    def quantity(
        self,
        table: Mapping[str, Any],
        where: str,
        name: str,
        dimension: str,
        least: float | None = None,
        above: float | None = None,
    ) -> float:
        key = f"{where}.{name}" if where else name
        if name not in table:
            raise self.fail(where or key, f"{name} is missing", f'Add {name} = "…" with its unit.')
        try:
            value = parse_quantity(table[name], dimension)
        except InputError as error:
            raise self.fail(key, error.what, error.remedy) from error
        if least is not None and not value >= least:
            raise self.fail(key, f"{name} is {table[name]!r}", f"It must be at least {least:g}.")
        if above is not None and not value > above:
            raise self.fail(key, f"{name} is {table[name]!r}", f"It must be above {above:g}.")
        return value

    def maybe(
        self, table: Mapping[str, Any], where: str, name: str, dimension: str, **limits: float
    ) -> float | None:
        return self.quantity(table, where, name, dimension, **limits) if name in table else None

    def number(self, table: Mapping[str, Any], where: str, name: str, above: float = 0.0) -> float:
        value = table[name]
        if isinstance(value, bool) or not isinstance(value, (int, float)) or not value > above:
            raise self.fail(
                f"{where}.{name}", f"{name} is {value!r}", f"Give a number above {above:g}."
            )
        return float(value)

    def system(self, entries: dict[str, Any]) -> System:
        top = self.known(entries, _TOP, "")
        static = self.quantity(top, "", "static_head", "length")
        liquid, barometer = self.liquid(top.get("liquid", {})), 101325.0
        side = self.known(
            top.get("suction", {}),
            ("level", "pressure", "absolute_pressure", "altitude", "pipe", "fitting"),
            "suction",
        )
        if "altitude" in side:
            barometer = atmosphere(self.quantity(side, "suction", "altitude", "length"))
        out = self.known(top.get("discharge", {}), ("pipe", "fitting"), "discharge")
        suction, discharge = self.parts(side, "suction"), self.parts(out, "discharge")
        k = self.coefficient(top, static)
        if (k is not None) == bool(suction or discharge):
            raise self.fail(
                "loss_coefficient",
                "the losses are stated "
                + ("twice, by a coefficient and by parts" if k is not None else "nowhere"),
                "Give one of loss_coefficient, known_point, or pipes and fittings.",
            )
        doubt = self.known(top.get("uncertainty", {}), ("losses", "static_head"), "uncertainty")
        return System(
            static,
            liquid,
            k,
            suction,
            discharge,
            self.suction(side, barometer),
            self.operation(top.get("operation", {})),
            self.maybe(doubt, "uncertainty", "losses", "ratio", least=0.0) or 0.0,
            self.maybe(doubt, "uncertainty", "static_head", "length", least=0.0) or 0.0,
            self.file,
        )

    def coefficient(self, top: Mapping[str, Any], static: float) -> float | None:
        """k of k·Q² [m/(m³/s)²], from itself or from one known point."""
        if "loss_coefficient" in top and "known_point" in top:
            raise self.fail(
                "known_point",
                "loss_coefficient and known_point are both given",
                "Keep one of them.",
            )
        if "known_point" in top:
            point = self.known(top["known_point"], ("flow", "head"), "known_point")
            flow = self.quantity(point, "known_point", "flow", "flow", above=0.0)
            head = self.quantity(point, "known_point", "head", "length")
            if head < static:
                raise self.fail(
                    "known_point.head",
                    f"the known point's head is {head:g} m, below the static head of {static:g} m",
                    "The head at a flow is at least the static head.",
                )
            return (head - static) / flow**2
        if "loss_coefficient" not in top:
            return None
        value = top["loss_coefficient"]
        remedy = 'Write "0.0021 m/(m3/h)2", or a number in m/(m³/s)².'
        if isinstance(value, str):
            match = re.fullmatch(r"\s*(\S+)\s+(\w+)\s*/\s*\(?([^()]+?)\)?\s*(?:\^?2|²)\s*", value)
            try:
                if not match:
                    raise ValueError
                length, rate = parse(match[2], "length"), parse(match[3], "flow")
                value = float(match[1]) * length.factor / rate.factor**2
            except (ValueError, InputError) as error:
                raise self.fail(
                    "loss_coefficient", f"{value!r} is not understood", remedy
                ) from error
        if isinstance(value, bool) or not isinstance(value, (int, float)) or value < 0:
            raise self.fail("loss_coefficient", f"loss_coefficient is {value!r}", remedy)
        return float(value)

    def liquid(self, table: object) -> Liquid:
        names = ("name", "temperature", "density", "kinematic_viscosity", "vapour_pressure")
        given = self.known(table, names, "liquid")
        if "density" not in given:
            temperature = self.maybe(given, "liquid", "temperature", "temperature")
            try:
                return water(293.15 if temperature is None else temperature)
            except InputError as error:
                raise self.fail("liquid.temperature", error.what, error.remedy) from error
        return Liquid(
            str(given.get("name", "liquid as stated")),
            self.quantity(given, "liquid", "density", "density", above=0.0),
            self.maybe(given, "liquid", "kinematic_viscosity", "viscosity", above=0.0),
            self.maybe(given, "liquid", "vapour_pressure", "pressure", least=0.0),
        )

    def suction(self, side: Mapping[str, Any], barometer: float) -> Suction | None:
        if "level" not in side:
            if {"pressure", "absolute_pressure", "altitude"} & set(side):
                raise self.fail(
                    "suction",
                    "the suction level is missing",
                    'Add level = "1.5 m": free surface above (+) or below (−) the pump.',
                )
            return None
        level = self.quantity(side, "suction", "level", "length")
        absolute = self.maybe(side, "suction", "absolute_pressure", "pressure", least=0.0)
        gauge = self.maybe(side, "suction", "pressure", "pressure") or 0.0
        return Suction(level, barometer + gauge if absolute is None else absolute)

    def operation(self, table: object) -> Operation:
        names = (
            "preferred_range",
            "allowable_range",
            "hours_per_year",
            "grade",
            "npsh_ratio",
            "npsh_margin",
        )
        given, default = self.known(table, names, "operation"), Operation()
        grade = given.get("grade")
        if grade is not None and grade not in _GRADES:
            raise self.fail(
                "operation.grade", f"grade {grade!r} is not known", f"Known: {', '.join(_GRADES)}."
            )
        hours = given.get("hours_per_year")
        if hours is not None:
            hours = self.number(given, "operation", "hours_per_year")
            if hours > 8784:
                raise self.fail("operation.hours_per_year", f"{hours:g} hours", "A year has 8784.")
        return Operation(
            self.span(given, "preferred_range") or default.preferred,
            self.span(given, "allowable_range"),
            hours,
            grade,
            self.number(given, "operation", "npsh_ratio") if "npsh_ratio" in given else 1.1,
            self.quantity(given, "operation", "npsh_margin", "length", least=0.0)
            if "npsh_margin" in given
            else default.npsh_margin,
            next(
                (
                    (f"operation.{n}", self.line_of(f"operation.{n}"))
                    for n in ("npsh_margin", "npsh_ratio")
                    if n in given
                ),
                None,
            ),
        )

    def span(self, table: Mapping[str, Any], name: str) -> tuple[float, float] | None:
        if name not in table:
            return None
        value = table[name]
        try:
            low, high = (parse_quantity(v, "ratio") for v in value)
        except (InputError, TypeError, ValueError) as error:
            raise self.fail(
                f"operation.{name}", f"{value!r} is no range", 'Write ["70 %", "120 %"].'
            ) from error
        if not 0 <= low < high:
            raise self.fail(
                f"operation.{name}", f"{value!r} does not rise", 'Write ["70 %", "120 %"].'
            )
        return low, high

    def parts(self, side: Mapping[str, Any], where: str) -> tuple[Pipe | Fitting, ...]:
        found: list[Pipe | Fitting] = []
        makers: tuple[tuple[str, Callable[[Mapping[str, Any], str, int], Pipe | Fitting]], ...]
        makers = (("pipe", self.pipe), ("fitting", self.fitting))
        for kind, make in makers:
            rows = side.get(kind, [])
            if not isinstance(rows, list):
                raise self.fail(
                    f"{where}.{kind}", f"{where}.{kind} is not a list", f"Write [[{where}.{kind}]]."
                )
            found += [make(row, f"{where}.{kind}[{i}]", i) for i, row in enumerate(rows, 1)]
        return tuple(found)

    def pipe(self, row: Mapping[str, Any], where: str, number: int) -> Pipe:
        row = self.known(row, _PIPE, where)
        ways = [n for n in ("roughness", "friction_factor", "hazen_williams_c") if n in row]
        if len(ways) != 1:
            raise self.fail(
                where,
                f"{len(ways)} of roughness, friction_factor, hazen_williams_c are given",
                'Give one of them, e.g. roughness = "0.05 mm".',
            )
        return Pipe(
            str(row.get("name", f"pipe {number}")),
            self.quantity(row, where, "length", "length", least=0.0),
            self.quantity(row, where, "inside_diameter", "length", above=0.0),
            self.maybe(row, where, "roughness", "length", least=0.0),
            self.number(row, where, "friction_factor") if "friction_factor" in row else None,
            self.number(row, where, "hazen_williams_c") if "hazen_williams_c" in row else None,
        )

    def fitting(self, row: Mapping[str, Any], where: str, number: int) -> Fitting:
        row = self.known(row, _FITTING, where)
        bore = self.quantity(row, where, "inside_diameter", "length", above=0.0)
        count = self.number(row, where, "count") if "count" in row else 1.0
        if ("k" in row) == ("type" in row):
            raise self.fail(
                where, "k and type: exactly one is needed", f"Types: {', '.join(FITTINGS)}."
            )
        if "k" in row:
            name = str(row.get("name", f"fitting {number}"))
            return Fitting(name, self.number(row, where, "k", above=-1e-12), bore, count)
        kind = str(row["type"])
        if kind not in FITTINGS:
            raise self.fail(
                f"{where}.type", f"fitting {kind!r} is not known", f"Known: {', '.join(FITTINGS)}."
            )
        larger = self.maybe(row, where, "larger_diameter", "length", above=bore)
        if kind.startswith("sudden") and larger is None:
            raise self.fail(
                where, f"a {kind} needs the larger bore too", 'Add larger_diameter = "150 mm".'
            )
        source, meaning = FITTINGS[kind]
        name = str(row.get("name", meaning))
        return Fitting(name, k_of_type(kind, bore, larger), bore, count, source)
