"""Panels in which fewer lines were found than there must be: none, or fewer than labels say."""

from __future__ import annotations

from collections.abc import Sequence

from curvefit.errors import Location
from curvefit.identify.line import Line
from curvefit.identify.placing import Label
from curvefit.records import Finding, Panel

__all__ = ["too_few"]

_NAMING = ("diameter", "speed", "stages")


def too_few(
    lines: Sequence[Line],
    panels: Sequence[Panel],
    labels: Sequence[Sequence[Label]],
    said: Sequence[Finding],
) -> list[Finding]:
    """Warnings of panels in which no line, or fewer lines than labels, were found.

    Parameters
    ----------
    lines : all lines of the page; labels : of each panel.
    said : findings so far: a panel about which a warning says why is left out.
    """
    told = {f.where.panel for f in said if f.severity != "info" and f.code in _WHY}
    found = []
    for panel, words in zip(panels, labels, strict=True):
        if panel.name in told:
            continue
        own = [x for x in lines if x.panel.name == panel.name]
        named = _named(panel, words)
        if not own:
            found.append(_none(panel))
        elif len(named) > max(_families(own), 1):
            found.append(_fewer(panel, named, _families(own)))
    return found


_WHY = ("curve.no-axis", "curve.no-unit", "label.unmatched")


def _families(lines: Sequence[Line]) -> int:
    """How many lines the largest family of one quantity has."""
    quantities = [x.quantity for x in lines if not x.iso]
    return max((quantities.count(q) for q in set(quantities)), default=0)


def _named(panel: Panel, labels: Sequence[Label]) -> list[str]:
    """Labels inside the box, each of another value, that name lines of one family."""
    width, height = panel.warp.size
    inside = [w for w in labels if 0 < w.centre[0] < width and 0 < w.centre[1] < height]
    best: dict[float, str] = {}
    for kind in _NAMING:
        plain = {m.value: w.text for w in inside for m in w.means(kind) if m.plain and m.cost < 0.3}
        values = {v: text for v, text in plain.items() if v is not None}
        if not values:
            continue
        low, high = 0.7 * min(values), 1.3 * max(values)  # bare numbers go with those that say so
        for w in inside:
            for m in w.means(kind):
                if m.cost <= 0.3 and m.value is not None and low < m.value < high:
                    values.setdefault(m.value, w.text)
        best = values if len(values) > len(best) else best
    return [best[v] for v in sorted(best, reverse=True)]


def _none(panel: Panel) -> Finding:
    return Finding(
        "warning",
        "curve.none-in-panel",
        f"no curve was found in panel {panel.name}, though its axes could be read",
        Location(panel=panel.name),
        "draw its lines in the notes ([[curve]] with path), or drop the panel if it has none",
    )


def _fewer(panel: Panel, named: Sequence[str], lines: int) -> Finding:
    texts = ", ".join(f'"{t}"' for t in named[:6])
    return Finding(
        "warning",
        "curve.fewer-than-labels",
        f"{len(named)} labels in panel {panel.name} name lines of a family ({texts}), but"
        f" {lines} such line{'s were' if lines != 1 else ' was'} found",
        Location(panel=panel.name),
        "draw the missing lines in the notes (a [[curve]] note with path)",
    )
