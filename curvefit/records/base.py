"""What all records share: checked read-only arrays, rebuilding, flags, quantities, findings."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, fields
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import Location

__all__ = [
    "BRIDGED",
    "BUNDLED",
    "CROSSING",
    "FLAGS",
    "GIVEN",
    "QUANTITIES",
    "Array",
    "By",
    "Finding",
    "Quantity",
    "Record",
    "Side",
    "flag_names",
    "hold",
]

Array = NDArray[np.float64]
By = Literal["read", "given"]
Side = Literal["bottom", "top", "left", "right"]
Severity = Literal["info", "warning", "error"]

# per-point flags of a trace: a bit each
BRIDGED = 1  #: no ink was seen here: the line was carried over a gap
CROSSING = 2  #: another line crosses here: the ink is shared
BUNDLED = 4  #: runs together with a neighbour; sigma spans the bundle
GIVEN = 8  #: drawn by the user
FLAGS = {"bridged": BRIDGED, "crossing": CROSSING, "bundled": BUNDLED, "given": GIVEN}


def flag_names(bits: int) -> str:
    """The flags of one point in words, joined by a space; "" for none."""
    return " ".join(name for name, bit in FLAGS.items() if bits & bit)


@dataclass(frozen=True, slots=True)
class Quantity:
    """A quantity that a chart can show: its symbol in equations and its dimension."""

    name: str
    symbol: str
    dimension: str
    title: str


QUANTITIES = {
    q.name: q
    for q in (
        Quantity("flow", "Q", "flow", "Flow"),
        Quantity("head", "H", "length", "Total head"),
        Quantity("efficiency", "η", "ratio", "Pump efficiency"),
        Quantity("shaft_power", "P", "power", "Shaft power"),
        Quantity("input_power", "P1", "power", "Input power"),
        Quantity("overall_efficiency", "η_gr", "ratio", "Overall efficiency"),
        Quantity("npsh_required", "NPSHr", "length", "NPSH required"),
        Quantity("differential_pressure", "Δp", "pressure", "Differential pressure"),
        Quantity("iso_efficiency", "H", "length", "Line of equal efficiency"),
        Quantity("iso_shaft_power", "H", "length", "Line of equal shaft power"),
        Quantity("iso_npsh_required", "H", "length", "Line of equal NPSH required"),
    )
}


def hold(record: Any, name: str, dtype: Any, shape: tuple[int | None, ...]) -> None:
    """Check one array field's shape, cast its dtype and set it read-only."""
    value = getattr(record, name)
    if value is None:
        return
    array = np.array(value, dtype=dtype)
    expected = tuple(n if s is None else s for n, s in zip(array.shape, shape, strict=False))
    if array.ndim != len(shape) or array.shape != expected:
        raise ValueError(f"{type(record).__name__}.{name} has shape {array.shape}, needs {shape}")
    array.setflags(write=False)
    object.__setattr__(record, name, array)


def rebuild(cls: type, state: dict[str, Any]) -> Any:
    return cls(**state)


class Record:
    """Pickle and deepcopy go through the constructor, so that arrays stay read-only."""

    __slots__ = ()

    def __reduce__(self) -> tuple[Callable[..., Any], tuple[Any, ...]]:
        state = {f.name: getattr(self, f.name) for f in fields(self) if f.init}  # type: ignore[arg-type]
        return rebuild, (type(self), state)


@dataclass(frozen=True, slots=True)
class Finding(Record):
    """Something the user should know: what, where and what to do about it."""

    severity: Severity
    code: str
    message: str
    where: Location = field(default_factory=Location)
    remedy: str = ""
