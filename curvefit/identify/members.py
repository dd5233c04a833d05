"""Families of a page: its lines grouped, their labels dealt, and handed on between panels."""

from __future__ import annotations

from collections.abc import Sequence

from curvefit.identify import doubts
from curvefit.identify.families import Deal, deal, movable, order
from curvefit.identify.impellers import agree, member
from curvefit.identify.ink import Sample, line_sample, same_ink
from curvefit.identify.line import Line
from curvefit.identify.look import again, along, missing
from curvefit.identify.placing import Label, same_place, spot, text_height
from curvefit.identify.wording import Meaning
from curvefit.records import Trace

__all__ = ["name_families"]


def name_families(
    lines: Sequence[Line], labels: dict[str, tuple[Label, ...]], used: set[int]
) -> set[int]:
    """Give each line of a family its diameter, speed, stages or letter; ids of the words used.

    Parameters
    ----------
    lines : all lines of the page with their quantities.
    labels : of each panel; used : ids of words that already name something.
    """
    taken: set[int] = set()
    plain = [x for x in lines if not x.iso]
    groups: dict[tuple[str, str], list[Line]] = {}
    for line in plain:
        groups.setdefault((line.panel.name, line.quantity), []).append(line)
    heads = ("head", "differential_pressure")
    settled = False  # whether a family is named throughout: others can be named after it
    for (panel, quantity), group in sorted(groups.items(), key=lambda g: g[0][1] not in heads):
        free = [w for w in labels[panel] if id(w.word) not in used | taken]
        others = [x for x in lines if x.panel.name == panel and x not in group]
        taken |= _label_group(group, quantity, free, others, search=not settled)
        settled |= len(group) > 1 and all(x.marked for x in group)
        taken |= _quantity_words(group, free)
    agree(list(groups.values()))
    for group in groups.values():
        doubts.of_family(group)
    return taken


def _label_group(
    group: Sequence[Line],
    quantity: str,
    free: Sequence[Label],
    others: Sequence[Line],
    search: bool,
) -> set[int]:
    legend = _from_legend(group, free)
    if legend is not None:
        return legend
    found = _dealt(group, quantity, free, [x.trace for x in others], search)
    if found is None:
        return set()
    taken = set()
    for line, got in zip(group, found.given, strict=True):
        if got is None or (len(group) == 1 and not _stands_alone(line, *got)):
            continue
        _set(line, *got)
        doubts.of_label(line, *got)
        taken |= same_place(got[0], free)
    for k in movable([member(x) for x in group], quantity, found):
        doubts.of_shift(group[k])
    return taken


def _dealt(
    group: Sequence[Line],
    quantity: str,
    free: Sequence[Label],
    others: Sequence[Trace],
    search: bool,
) -> Deal | None:
    """Labels dealt to a family; where some line got none or a bent one, after a second look.

    search : look for labels of which nothing is known yet, too (the dear part).
    """
    members = [member(x) for x in group]
    found = deal(members, quantity, free, others)
    if len(group) < 2 or (found is not None and found.kind == "letter"):
        return found
    panel, words = group[0].panel, list(free)
    if found is not None:
        named = [(x.trace, g[0]) for x, g in zip(group, found.given, strict=True) if g is not None]
        unnamed = [x.trace for x, g in zip(group, found.given, strict=True) if g is None]
        bent = [g[0] for g in found.given if g is not None and g[1].cost >= 0.3]
        bent += [w for w in found.unread if w is not None]
        words += [*missing(panel, named, unnamed), *again(panel, bent)]
        found = _better(found, deal(members, quantity, words, others))
    unnamed = [x.trace for k, x in enumerate(group) if found is None or found.given[k] is None]
    if search and unnamed:
        kinds = ("diameter", "speed", "stages") if found is None else (found.kind,)

        def wanted(label: Label) -> bool:
            return any(m.kind in kinds and (m.plain or m.cost <= 0.5) for m in label.meanings)

        words += along(panel, unnamed, text_height(panel), wanted)
        found = _better(found, deal(members, quantity, words, others))
    return found


def _better(before: Deal | None, after: Deal | None) -> Deal | None:
    """The deal after a second look, if it is of the same kind and names no fewer lines."""
    if before is None or after is None:
        return after or before
    more = sum(g is not None for g in after.given) >= sum(g is not None for g in before.given)
    return after if after.kind == before.kind and more else before


def _stands_alone(line: Line, label: Label, meaning: Meaning) -> bool:
    """Whether a label says enough to name a line that has no family: a sign or unit, close by."""
    seen = spot(label, line.trace)
    return meaning.plain and meaning.kind != "percent" and min(seen.gap, seen.end, seen.start) < 2.0


def _set(line: Line, label: Label, meaning: Meaning) -> None:
    line.label, line.label_cost = label.text, meaning.cost
    value = meaning.value
    if meaning.kind == "diameter":
        line.diameter, line.diameter_unit = value, meaning.unit
    elif meaning.kind == "speed":
        line.speed, line.speed_unit = value, meaning.unit
    elif meaning.kind == "percent":
        line.speed_ratio, line.speed_unit = value, "%"
    elif meaning.kind == "stages" and value is not None:
        line.stages = int(value)


def _from_legend(group: Sequence[Line], free: Sequence[Label]) -> set[int] | None:
    """Labels dealt by a legend that names every line of a family: texts with line samples.

    Each sample goes to the one line that looks like it; where looks do not tell them all apart,
    the largest goes to the uppermost.
    """
    if len(group) < 2:
        return None
    page = group[0].panel.page
    entries: list[tuple[Label, Meaning, Sample]] = []
    for label in free:
        meaning = next((m for m in label.meanings if m.kind in _NUMBERED), None)
        beside = min(spot(label, x.trace).gap for x in group) < 1.0
        if meaning is None or (beside and not label.masked):
            continue
        sample = line_sample(page, label.word)
        if sample is not None:
            entries.append((label, meaning, sample))
    values = {m.value for _, m, _ in entries}
    if len(values) != len(group) or len(entries) != len(group):
        return None
    alike = [[x for x in group if _looks_like(x, s)] for _, _, s in entries]
    lines = [a[0] for a in alike if len(a) == 1]
    if len({id(x) for x in lines}) < len(group):
        ranks = order([member(x) for x in group], group[0].quantity)
        entries.sort(key=lambda e: -(e[1].value or 0.0))
        lines = [group[k] for k in ranks]
    for line, (label, meaning, _) in zip(lines, entries, strict=True):
        _set(line, label, meaning)
    return {id(label.word) for label, _, _ in entries}


_NUMBERED = ("diameter", "speed", "stages")


def _looks_like(line: Line, sample: Sample) -> bool:
    return same_ink(line.trace.colour, sample.colour) and line.trace.dash == sample.dash


def _quantity_words(group: Sequence[Line], free: Sequence[Label]) -> set[int]:
    """Words that name the quantity of a line ("η", "NPSH"): used, and kept as its label."""
    taken = set()
    for line in group:
        for label in free:
            for meaning in label.means("quantity"):
                seen = spot(label, line.trace)
                if min(seen.gap, seen.end, seen.start) < 2.5 and meaning.quantity == line.quantity:
                    taken.add(id(label.word))
                    if not line.label:
                        line.label = label.text
                    if "3" in label.text and line.quantity == "npsh_required":
                        line.npsh_basis = "NPSH3"
    return taken
