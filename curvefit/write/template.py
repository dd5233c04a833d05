"""A user's own text template filled with curves, in a fenced-off process.

The template can read what it is given and nothing else: sandboxed Jinja2 without a loader, in a
child process with limits on time, memory and output, which may open no file for writing.
"""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from curvefit import __version__
from curvefit.errors import InputError, LimitError, Location
from curvefit.models import equation as written_out
from curvefit.records import QUANTITIES
from curvefit.write.export import CleanCurve
from curvefit.write.reopen import CurveSet

__all__ = ["Limits", "fill", "variables"]


@dataclass(frozen=True, slots=True)
class Limits:
    """seconds of computing time; memory [bytes] of the child; output [characters]."""

    seconds: int = 10
    memory: int = 512 * 2**20
    output: int = 50_000_000


def variables(opened: CurveSet, curves: Sequence[CleanCurve]) -> dict[str, Any]:
    """What a template can use.

    ``curves``
        A list; each has name, pump, quantity, title, symbol, label, flow_unit, unit, flow, value,
        low, high (lists; None where unknown), points (a list of flow and value), diameter_mm,
        speed_rpm, stages, level, flow_range, coefficients, parameters, equation.
    ``pumps``
        A list; each has name, speed_rpm, stages, suction_sides, density, liquid.
    ``source``
        file, sha256, page. ``findings``: severity, code, message, remedy. ``generator``: a text.
    """
    return {
        "generator": f"curvefit {__version__}",
        "source": {k: opened.source.get(k) for k in ("file", "sha256", "page")},
        "pumps": [
            {
                "name": p.name,
                "speed_rpm": _times(p.speed_si, 60),
                "stages": p.stages,
                "suction_sides": p.suction_sides,
                "density": p.density_si,
                "liquid": p.liquid,
            }
            for p in opened.pumps
        ],
        "curves": [_curve(c) for c in curves],
        "findings": [
            {"severity": f.severity, "code": f.code, "message": f.message, "remedy": f.remedy}
            for f in opened.findings
        ],
    }


def _curve(clean: CleanCurve) -> dict[str, Any]:
    c, units, fit = clean.out.curve, clean.out.units, clean.fit
    flow, value, low, high = (
        [None if np.isnan(v) else float(v) for v in a]
        for a in (clean.flow, clean.value, clean.low, clean.high)
    )
    quantity = QUANTITIES[units.quantity]
    coefficients = None
    if fit is not None and fit.coefficients is not None:
        coefficients = [float(v) for v in fit.coefficients]
    return {
        "name": c.name,
        "pump": c.pump,
        "quantity": units.quantity,
        "title": quantity.title,
        "symbol": quantity.symbol,
        "label": c.label,
        "flow_unit": units.flow,
        "unit": units.value,
        "flow": flow,
        "value": value,
        "low": low,
        "high": high,
        "points": [{"flow": q, "value": v} for q, v in zip(flow, value, strict=True)],
        "diameter_mm": _times(c.diameter_si, 1000),
        "speed_rpm": _times(clean.out.speed_si, 60),
        "stages": c.stages,
        "level": c.level_si,
        "flow_range": [flow[0], flow[-1]],
        "coefficients": coefficients,
        "parameters": dict(fit.parameters) if fit is not None else {},
        "equation": written_out(coefficients, quantity.symbol) if coefficients else "",
    }


def _times(value: float | None, factor: float) -> float | None:
    return None if value is None else float(f"{value * factor:.9g}")


def fill(
    template: str, known: Mapping[str, Any], file: str = "template", limits: Limits | None = None
) -> str:
    """The template filled with the variables.

    Parameters
    ----------
    template : text in the Jinja2 language; the filter `fixed(width, digits)` writes a number
        right-aligned with so many decimals.
    known : see :func:`variables`
    file : name of the template, for messages

    Raises
    ------
    InputError
        If the template is wrong, names what is not there, or reaches for what it may not have;
        the line is named.
    LimitError
        If it runs too long, or takes or writes too much.
    """
    bounds = limits or Limits()
    order = {
        "template": template,
        "known": known,
        "seconds": bounds.seconds,
        "memory": bounds.memory,
        "output": bounds.output,
    }
    code = "from curvefit.write.template import child; child()"
    try:
        done = subprocess.run(
            [sys.executable, "-c", code],
            input=json.dumps(order).encode(),
            capture_output=True,
            timeout=bounds.seconds + 20,
            check=False,
        )
        answer = json.loads(done.stdout)
    except (subprocess.TimeoutExpired, ValueError):
        answer = {"kind": "limit", "what": f"the template took more than {bounds.seconds} s"}
    if answer["kind"] == "text":
        return str(answer["text"])
    where = Location(file=file, line=answer.get("line"))
    if answer["kind"] == "limit":
        raise LimitError(answer["what"], where, "Simplify the template, or choose fewer curves.")
    known_names = ", ".join(sorted(known))
    raise InputError(answer["what"], where, f"A template can use: {known_names}.")


def child() -> None:
    """Fills the template that comes on standard input; runs in the fenced-off process."""
    order = json.loads(sys.stdin.buffer.read())
    answer: dict[str, Any]
    try:
        answer = _filled(order)
    except MemoryError:
        answer = {"kind": "limit", "what": "the template took too much memory"}
    except RecursionError:
        answer = {"kind": "limit", "what": "the template nests too deeply"}
    sys.stdout.buffer.write(json.dumps(answer).encode())


def _filled(order: Mapping[str, Any]) -> dict[str, Any]:
    from jinja2 import StrictUndefined, TemplateError
    from jinja2.sandbox import ImmutableSandboxedEnvironment

    rules = ImmutableSandboxedEnvironment(
        undefined=StrictUndefined, keep_trailing_newline=True, trim_blocks=True, lstrip_blocks=True
    )
    rules.filters["fixed"] = lambda number, width=0, digits=6: f"{number:{width}.{digits}f}"
    _fence(order)
    try:
        parts, size = [], 0
        for part in rules.from_string(order["template"]).generate(**order["known"]):
            parts.append(part)
            size += len(part)
            if size > order["output"]:
                return {"kind": "limit", "what": f"the template wrote more than {size} characters"}
    except (TemplateError, ArithmeticError, TypeError, ValueError, LookupError) as error:
        message = getattr(error, "message", None) or str(error)
        return {"kind": "wrong", "what": f"the template fails: {message}", "line": _line(error)}
    return {"kind": "text", "text": "".join(parts)}


def _line(error: Exception) -> int | None:
    """The line of the template in which an error arose."""
    number = getattr(error, "lineno", None)
    trace = error.__traceback__
    while trace is not None:
        if trace.tb_frame.f_code.co_filename == "<template>":
            number = trace.tb_lineno
        trace = trace.tb_next
    return number


def _fence(order: Mapping[str, Any]) -> None:
    """Limits this process, where the system can."""
    try:
        import resource
    except ImportError:  # no such limits on this system: the parent's time limit stays
        return
    resource.setrlimit(resource.RLIMIT_CPU, (order["seconds"], order["seconds"] + 1))
    resource.setrlimit(resource.RLIMIT_AS, (order["memory"], order["memory"]))
    resource.setrlimit(resource.RLIMIT_FSIZE, (0, 0))
