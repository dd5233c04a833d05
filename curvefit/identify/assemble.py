"""The steps of identify in order: axes, quantities, iso lines, families, notes, names, records."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from curvefit.errors import Location, NotesError
from curvefit.identify import doubts
from curvefit.identify.counts import too_few
from curvefit.identify.given import apply, dropped, pump_notes
from curvefit.identify.inside import inside
from curvefit.identify.leaders import follow_leaders
from curvefit.identify.levels import Level, iso_lines, levels
from curvefit.identify.line import Line
from curvefit.identify.members import name_families
from curvefit.identify.naming import names
from curvefit.identify.placing import Label, labels_of, same_place
from curvefit.identify.pumps import page_words, read_pump, with_notes
from curvefit.identify.quantities import Choice, choose, usable_axes
from curvefit.identify.scales import agreements, with_units
from curvefit.identify.values import values
from curvefit.notes import Notes
from curvefit.records import Axis, Curve, Finding, Page, Panel, Pump, Trace

__all__ = ["assemble"]


def assemble(
    page: Page, panels: Sequence[Panel], traces: Sequence[Trace], notes: Notes
) -> tuple[tuple[Curve, ...], tuple[Pump, ...], tuple[Finding, ...]]:
    """See :func:`curvefit.identify.identify`."""
    findings: list[Finding] = []
    traces = [inside(t) for t in traces]
    settled, of, labels = [], [], []
    for panel in panels:
        known, said = with_units(panel, panels)
        settled.append(known)
        findings += [*said, *agreements(known)]
        own = [t for t in traces if t.panel is panel or t.panel.name == panel.name]
        drawn, words = follow_leaders(known, own, labels_of(known))
        of.append(drawn)
        labels.append(words)
    iso = [iso_lines(p, t, w) for p, t, w in zip(settled, of, labels, strict=True)]
    plain = [[t for t in ts if t not in i] for ts, i in zip(of, iso, strict=True)]
    choices = choose(settled, plain, labels)
    lines: list[Line] = []
    used: set[int] = set()
    for panel, ts, isos, words in zip(settled, of, iso, labels, strict=True):
        made, taken, doubtful = _lines_of(panel, ts, isos, words, choices)
        lines += made
        used |= taken
        findings += doubtful
    lines.sort(key=lambda x: next(i for i, t in enumerate(traces) if t is x.trace))
    used |= name_families(lines, dict(zip((p.name for p in settled), labels, strict=True)), used)
    pumps = _pumps(page, settled, labels, used, notes)
    for line in lines:
        line.pump = pumps[0].name
        if line.speed_ratio is not None and pumps[0].speed_si is not None:
            line.speed = line.speed_ratio * pumps[0].speed_si
    as_read = names(lines)
    gone = dropped(lines, as_read, notes)
    apply(lines, as_read, notes)
    found, lines = lines, [line for i, line in enumerate(lines) if i not in gone]
    pumps = _with_named(pumps, lines, notes)
    final = names(lines)
    findings += doubts.of_page(lines, settled, labels, used)
    findings += too_few(found, settled, labels, findings)
    curves = tuple(_curve(line, name) for line, name in zip(lines, final, strict=True))
    return curves, pumps, tuple(findings)


def _lines_of(
    panel: Panel,
    traces: Sequence[Trace],
    isos: Sequence[Trace],
    labels: Sequence[Label],
    choices: Sequence[Choice],
) -> tuple[list[Line], set[int], list[Finding]]:
    """The lines of one panel with axis and quantity, and the labels that iso lines took."""
    flows, axes = usable_axes(panel)
    flow = next((a for a in flows if a.unit is not None), None)
    made: list[Line] = []
    findings: list[Finding] = []
    used: set[int] = set()
    for choice in choices:
        if not any(choice.trace is t for t in traces):
            continue
        if flow is None or choice.axis.unit is None:
            findings.append(doubts.no_unit(choice.trace, panel, flow, choice.axis))
            continue
        line = Line(
            choice.trace,
            panel,
            flow,
            choice.axis,
            choice.quantity,
            values(choice.trace, flow, choice.axis),
        )
        doubts.of_choice(line, choice)
        made.append(line)
    head = _head_axis(axes)
    if isos and flow is not None and head is not None:
        heads = [x.trace for x in made if x.quantity in ("head", "differential_pressure")]
        for trace, level in zip(isos, levels(isos, labels, heads), strict=True):
            made.append(_iso_line(trace, panel, flow, head, level))
            if level.label is not None:
                used |= same_place(level.label, labels)
    seen = {id(x.trace) for x in made} | {id(c.trace) for c in choices}
    findings += [
        doubts.no_axis(t, panel) for t in traces if id(t) not in seen and (flow is None or not axes)
    ]
    return made, used, findings


def _head_axis(axes: Sequence[Axis]) -> Axis | None:
    fitting = [a for a in axes if a.quantity in ("head", "differential_pressure") and a.unit]
    fitting += [a for a in axes if a.quantity is None and a.unit in ("m", "[ft_i]")]
    return fitting[0] if fitting else None


def _iso_line(trace: Trace, panel: Panel, flow: Axis, head: Axis, level: Level) -> Line:
    line = Line(
        trace, panel, flow, head, level.quantity, values(trace, flow, head, iso=True), iso=True
    )
    line.level, line.level_unit = level.value, level.unit
    line.label = level.label.text if level.label is not None else ""
    doubts.of_level(line, level)
    return line


def _pumps(
    page: Page,
    panels: Sequence[Panel],
    labels: Sequence[Sequence[Label]],
    used: set[int],
    notes: Notes,
) -> tuple[Pump, ...]:
    read = read_pump(page_words(page, panels), frozenset(used))
    given = pump_notes(notes)
    if len(given) == 1:
        return (with_notes(read, given[0]),)
    if given:
        blank = Pump("1")
        return tuple(
            with_notes(read if p.name == read.name or i == 0 else blank, p)
            for i, p in enumerate(given)
        )
    return (read,)


def _with_named(pumps: tuple[Pump, ...], lines: Sequence[Line], notes: Notes) -> tuple[Pump, ...]:
    """The pumps with those that notes name on curves; a name that no pump note has is one."""
    known = {p.name for p in pumps}
    for line in lines:
        if line.pump in known:
            continue
        if len(known) > 1 or notes.pumps:
            exist = ", ".join(f'"{n}"' for n in sorted(known))
            raise NotesError(
                f'a [[curve]] note names the pump "{line.pump}", which no [[pump]] note has',
                Location(file=notes.file, panel=line.panel.name, key="pump"),
                f"Pumps that exist: {exist}.",
            )
        pumps = (*pumps, Pump(line.pump, by="given"))
        known.add(line.pump)
    named = {line.pump for line in lines}
    kept = tuple(p for p in pumps if p.name in named)
    return kept or pumps


def _curve(line: Line, name: str) -> Curve:
    v = line.values
    findings = tuple(
        replace(f, where=replace(f.where, panel=line.panel.name, curve=name)) for f in line.findings
    )
    return Curve(
        name=name,
        quantity=line.quantity,
        flow_si=v.flow,
        value_si=v.value,
        flow_unit=str(line.flow_axis.unit),
        unit=str(line.value_axis.unit),
        trace=line.trace,
        panel=line.panel,
        flow_axis=line.flow_axis.name,
        value_axis=line.value_axis.name,
        pump=line.pump,
        sigma_si=v.sigma,
        trace_sigma_si=v.trace_sigma,
        calibration_si=v.calibration,
        correlation_si=v.correlation,
        flags=v.flags,
        diameter_si=line.diameter,
        diameter_unit=line.diameter_unit,
        speed_si=line.speed,
        speed_unit=line.speed_unit,
        speed_ratio=line.speed_ratio,
        stages=line.stages,
        level_si=line.level,
        level_unit=line.level_unit,
        npsh_basis=line.npsh_basis,
        label=line.label,
        guessed=tuple(sorted(line.doubts)),
        by="given" if line.given else line.trace.by,
        findings=findings,
    )
