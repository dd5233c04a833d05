"""Where the numbers of an axis leave real doubt."""

from __future__ import annotations

from curvefit.calibrate.consensus import Progression, near_value
from curvefit.calibrate.evidence import Evidence
from curvefit.calibrate.rows import Column
from curvefit.calibrate.snap import Scale
from curvefit.errors import Location
from curvefit.records import Finding

__all__ = ["bowed", "doubts_of", "marks_remedy"]


def marks_remedy(panel: str, axis: str) -> str:
    """The notes that set an axis right."""
    return (
        f'In the notes give panel "{panel}" axis "{axis}" two marks: '
        "the pixel and the printed value of two ticks."
    )


def doubts_of(
    name: str, column: Column, p: Progression, scale: Scale, side_px: float
) -> tuple[list[Finding], bool]:
    """The findings on one axis, and whether it is refused."""
    panel, _, axis = name.partition(".")
    where = Location(panel=panel, axis=name)
    remedy = marks_remedy(panel, axis)
    misfits = [lb for lb, r in zip(p.labels, p.chosen, strict=True) if r is None]
    near = [lb for lb in misfits if near_value(lb, p) is not None]
    total = p.exact + len(misfits)
    share = p.exact / total
    read = ", ".join(lb.text for lb in p.labels)
    if share < 0.4 or (p.exact < 3 and share < 0.75):
        message = (
            f"the numbers read ({read}) contradict each other: {p.exact} of {total} lie on one "
            "scale, more than half are needed; the axis is not used."
        )
        return [Finding("error", "axis.contradiction", message, where, remedy)], True
    out = []
    if share < 0.6:
        message = f"only {p.exact} of {total} numbers read ({read}) lie on one scale."
        out.append(Finding("warning", "axis.outliers", message, where, remedy))
    elif near:
        told = "; ".join(f"{lb.text} corrected to {near_value(lb, p):g}" for lb in near)
        message = f"numbers corrected by the progression of the axis: {told}."
        out.append(Finding("info", "axis.corrected", message, where, remedy))
    if p.exact < 3:
        message = f"{p.exact} numbers carry the scale ({read}); 3 would let one check another."
        out.append(Finding("warning", "axis.few-marks", message, where, remedy))
    elif p.rival > 0.75 * p.score and p.score - p.rival < 0.7:
        message = f"the numbers read ({read}) allow two scales nearly alike."
        out.append(Finding("warning", "axis.ambiguous", message, where, remedy))
    if not scale.kind:
        message = "no ticks or grid lines fit the numbers: the scale rests on their middles."
        out.append(Finding("warning", "axis.no-ticks", message, where, remedy))
    elif scale.rms > max(1.0, 0.0012 * side_px):
        message = f"the ticks lie {scale.rms:.1f} px (rms) off an even scale, 1 px is usual."
        out.append(Finding("warning", "axis.uneven", message, where, remedy))
    return out, False


def bowed(evidence: Evidence, panel: str) -> list[Finding]:
    """What is said of a box that the warp may not have made square."""
    w, h = evidence.warp.size
    most = max(1.5, 0.002 * min(w, h))
    worst = max(evidence.bow)
    if worst > most:
        message = (
            f"the sides of the box are bowed by {worst:.1f} px more than could be taken out, "
            f"{most:.1f} px are usual; the uncertainty of its scales was widened."
        )
        remedy = "Scan the page flat, or photograph it from straight above without a fold."
    elif max(evidence.loose) > most:
        message = (
            "the page was seen at a slant, and neither a frame nor ticks tell how much: places "
            f"far from the axes may be off by {max(evidence.loose):.0f} px, {most:.1f} px are "
            "usual; the uncertainty of the scales was widened."
        )
        remedy = (
            f'Scan the page flat, or give corners = [[x, y], …] of panel "{panel}" in the notes.'
        )
    else:
        return []
    return [Finding("warning", "panel.bow", message, Location(panel=panel), remedy)]
