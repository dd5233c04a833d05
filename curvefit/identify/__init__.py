"""Pixel traces → engineering curves: axis, quantity, impeller, speed or level of each line."""

from __future__ import annotations

from curvefit.notes import Notes
from curvefit.records import Curve, Finding, Page, Panel, Pump, Trace

__all__ = ["identify"]


def identify(
    page: Page,
    panels: tuple[Panel, ...],
    traces: tuple[Trace, ...],
    notes: Notes | None = None,
) -> tuple[tuple[Curve, ...], tuple[Pump, ...], tuple[Finding, ...]]:
    """The curves that the traces are, the pumps of the page, and what stayed in doubt.

    Parameters
    ----------
    page : Page
    panels : the plot boxes of the page with their axes and words.
    traces : the lines followed in them.
    notes : what the user knows; it wins over what is read here.

    Returns
    -------
    curves : one for each trace that lies on a known flow and value axis, in the order of traces;
        values in SI with their uncertainty, names unique.
    pumps : at least one.
    findings : doubts about the page as a whole; doubts about one curve stand with the curve.

    Raises
    ------
    NotesError
        If a note about a curve or pump matches nothing; the message lists what exists.
    """
    from curvefit.identify.assemble import assemble

    return assemble(page, panels, traces, notes or Notes())
