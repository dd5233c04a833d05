"""The characters of a PDF page, found in the child process."""

from __future__ import annotations

import ctypes
from array import array
from typing import Any

from curvefit.load.refusal import Refusal

__all__ = ["FIELDS", "Text"]

#: what is said of each character: code point; origin, direction of writing × em, box of its ink,
#: size of the upright box around its advance and line height [pt]; number of its text object;
#: 1 where the font tells its letters, 0 where they follow from the customary code; how far its
#: text object begins before it [pt]
FIELDS = (
    *("code", "x", "y", "across", "up", "left", "right", "bottom", "top"),
    *("wide", "high", "piece", "sure", "before"),
)
# codes of the ligatures in the TeX text encodings OT1 and T1, where a font has no map of its own
UNMAPPED = {first + k: 0xFB00 + k for first in (11, 27) for k in range(5)}
Box = tuple[float, float, float, float]
HIDDEN = 3, 7  # render modes: neither filled nor stroked
UNKNOWN = 0xFFFD  # nothing tells which letter this shape is
PRIVATE = range(0xE000, 0xF900)  # code points that mean what a font likes


class Text:
    """The visible characters within the page's box; `count` of them."""

    def __init__(self, page: Any, box: Box, limits: dict[str, Any]) -> None:
        import pypdfium2.raw as raw

        self._values = array("d")
        self._piece: float | None = None
        text = raw.FPDFText_LoadPage(page.raw)
        if text:
            number = max(raw.FPDFText_CountChars(text), 0)
            if number > limits["characters"]:
                raise Refusal(
                    "limit",
                    f"the page holds {number} characters; at most {limits['characters']} are read.",
                    "Save the page with the chart alone, or as PNG.",
                )
            for i in range(number):
                self._take(text, i, box)
            raw.FPDFText_ClosePage(text)
        self.count = len(self._values) // len(FIELDS)

    def packed(self) -> bytes:
        """A row of `FIELDS` for each character."""
        return self._values.tobytes()

    def _take(self, text: Any, i: int, box: Box) -> None:
        import pypdfium2.raw as raw

        code = raw.FPDFText_GetUnicode(text, i)
        sure = raw.FPDFText_HasUnicodeMapError(text, i) != 1
        code = code if sure else UNMAPPED.get(code, code)
        if code < 32 or raw.FPDFText_IsGenerated(text, i) == 1:
            return
        piece = raw.FPDFText_GetTextObject(text, i)
        if piece and raw.FPDFTextObj_GetTextRenderMode(piece) in HIDDEN:
            return
        x, y = ctypes.c_double(), ctypes.c_double()
        left, right, bottom, top = (ctypes.c_double() for _ in range(4))
        m = raw.FS_MATRIX()
        if not (
            raw.FPDFText_GetCharOrigin(text, i, x, y)
            and raw.FPDFText_GetMatrix(text, i, m)
            and raw.FPDFText_GetCharBox(text, i, left, right, bottom, top)
        ):
            return
        if not (box[0] <= x.value <= box[2] and box[1] <= y.value <= box[3]):
            return
        size = raw.FPDFText_GetFontSize(text, i)
        at = ctypes.cast(piece, ctypes.c_void_p).value or 0 if piece else 0
        edges = [v.value for v in (left, right, bottom, top)]
        loose = raw.FS_RECTF()
        raw.FPDFText_GetLooseCharBox(text, i, loose)
        advance = abs(loose.right - loose.left), abs(loose.top - loose.bottom)
        if code in PRIVATE:
            code = UNKNOWN
        direction = m.a * size, m.b * size
        piece_number = float(at % (1 << 50))
        before = 0.0
        if piece_number != self._piece and piece:
            before = _before(piece, x.value, y.value, direction)
        self._piece = piece_number
        self._values.extend((code, x.value, y.value, *direction, *edges, *advance))
        self._values.extend((piece_number, sure, before))


def _before(piece: Any, x: float, y: float, direction: tuple[float, float]) -> float:
    """How far before its first letter a text object begins [pt]; 0 where that is not known."""
    import pypdfium2.raw as raw

    edges = [ctypes.c_float() for _ in range(4)]
    if not raw.FPDFPageObj_GetBounds(piece, *edges):
        return 0.0
    left, bottom, right, top = (e.value for e in edges)
    em = max(abs(direction[0]), abs(direction[1]))
    if not (left - em < x < right + em and bottom - em < y < top + em):
        return 0.0  # it lies in a form, and its bounds in the form's own space
    if abs(direction[1]) < 0.02 * em:
        return x - left if direction[0] > 0 else right - x
    if abs(direction[0]) < 0.02 * em:
        return y - bottom if direction[1] > 0 else top - y
    return 0.0
