"""Page, Panel → Trace…: every line of a plot box to a fraction of a pixel, with its uncertainty."""

from __future__ import annotations

from collections.abc import Sequence

from curvefit.notes import CurveNotes
from curvefit.records import Panel, Trace

__all__ = ["trace"]


def trace(panel: Panel, curve_notes: Sequence[CurveNotes] = ()) -> tuple[Trace, ...]:
    """The lines of one plot box, named "line 1" … from left to right and top to bottom.

    Parameters
    ----------
    panel : Panel
    curve_notes : sequence of CurveNotes
        Given paths are followed, stretches left out and lines dropped as they say.

    Notes
    -----
    `Trace.sigma` is the standard uncertainty of the line alone, perpendicular to it: the fit to
    the ink, the wobble that neighbouring points share, what bridged and hidden stretches leave
    open. The scale of the axes is not in it.
    """
    if panel.page.vector:
        from curvefit.trace.strokes import has_curves, trace_strokes

        if has_curves(panel):
            return trace_strokes(panel, tuple(curve_notes))
    from curvefit.trace.given import with_notes
    from curvefit.trace.traces import followed, traces_of

    return with_notes(panel, traces_of(panel), curve_notes, lambda path: followed(panel, path))
