"""What the stages hand to each other: Page → Panel(Axis…) → Trace → Curve → Fit(Band) → Finding.

Every record is frozen; its arrays are checked for shape and dtype and set read-only, also after a
pickle or a deepcopy. Every record points to its maker, so that a number can be followed back to
pixels: `fit.curves[0].trace.panel.page`. No algorithm lives here.

Three pixel frames
------------------
*page*    the page as shown (after the EXIF or /Rotate turn): `Page.pixels`, `Word.box`,
          `Stroke.xy`, `Mark.xy`, `Panel.corners`, `Trace.xy`. x right, y down, the centre of the
          top-left pixel at (0, 0). A vector page has 300 pixels to the inch.
*panel*   one plot box made straight: [0, width] × [0, height], by `Panel.warp`: `Trace.flat`.
*stored*  the image as it lies in the file; only `write` and `notes` use it, by `Page.to_stored`.

Names of values end in `_si` where they are SI: flow m³/s, head and NPSH m, power W, efficiency as
a fraction, pressure Pa, speed 1/s, diameter m.
"""

from __future__ import annotations

from curvefit.records.base import (
    BRIDGED,
    BUNDLED,
    CROSSING,
    FLAGS,
    GIVEN,
    QUANTITIES,
    By,
    Finding,
    Quantity,
    flag_names,
)
from curvefit.records.chart import Axis, Mark, Page, Panel, Stroke, Trace, Word
from curvefit.records.pump import Band, Curve, DutyPoint, Fit, Interval, Pump, Reading

__all__ = [
    "BRIDGED",
    "BUNDLED",
    "CROSSING",
    "FLAGS",
    "GIVEN",
    "QUANTITIES",
    "Axis",
    "Band",
    "By",
    "Curve",
    "DutyPoint",
    "Finding",
    "Fit",
    "Interval",
    "Mark",
    "Page",
    "Panel",
    "Pump",
    "Quantity",
    "Reading",
    "Stroke",
    "Trace",
    "Word",
    "flag_names",
]
