"""What the user knows about a chart: the records, and the reading of STEM.notes.toml."""

from curvefit.notes.given import (
    AxisNotes,
    CurveNotes,
    GivenMark,
    Notes,
    PageNotes,
    PanelNotes,
    PumpNotes,
)
from curvefit.notes.merge import merge, merge_given
from curvefit.notes.reader import given_entries, notes_from, read_notes
from curvefit.notes.standing import standing_notes

__all__ = [
    "AxisNotes",
    "CurveNotes",
    "GivenMark",
    "Notes",
    "PageNotes",
    "PanelNotes",
    "PumpNotes",
    "given_entries",
    "merge",
    "merge_given",
    "notes_from",
    "read_notes",
    "standing_notes",
]
