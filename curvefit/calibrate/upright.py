"""Which way up the page is: two separate decisions, a quarter turn and a half turn."""

from __future__ import annotations

from curvefit.calibrate.glyphs import TextLine
from curvefit.calibrate.words import Lettering, crop_of

__all__ = ["quarter_turns"]

_CLEAR = 3.0  # so many times more lines of text one way than the other settle it
_SURE = 0.9  # lines read with this mean score are not upside down


def quarter_turns(lettering: Lettering) -> int:
    """Quarter turns clockwise, 0–3, that set the page upright.

    Notes
    -----
    Numbers along both axes outnumber the titles that read upwards, so a clear majority of words
    settles the quarter; where there is none, short words are read both ways and only what comes
    out as a number counts. The half turn is settled by the longest lines, since an upside-down
    6, 9, 0 or 8 reads well: first as they are, and turned only where that is not sure.
    """
    words = [line for line in lettering.lines if len(line.letters) > 1]
    if not words:
        return 0
    upright = sum(line.vertical for line in words)
    across = len(words) - upright
    if across >= 4 and across >= _CLEAR * upright:
        quarter = 0
    elif upright >= 4 and upright >= _CLEAR * across:
        quarter = 1
    else:
        quarter = _quarter(lettering, words)
    return _half(lettering, words, quarter)


def _quarter(lettering: Lettering, words: list[TextLine]) -> int:
    from curvefit.ocr import recognise

    def numbers(vertical: bool) -> float:
        short = [w for w in words if w.vertical == vertical and w.length < 4 * w.height]
        short = sorted(short, key=lambda w: -w.height * w.length)[:16]
        turns = (1, 3) if vertical else (0, 2)
        worth = []
        for turn in turns:
            read = recognise([crop_of(lettering.image, w, turn) for w in short])
            worth.append(sum(s for t, s in read if t.replace(".", "").replace(",", "").isdigit()))
        return max(worth)

    return 1 if numbers(True) > numbers(False) else 0


def _half(lettering: Lettering, words: list[TextLine], quarter: int) -> int:
    from curvefit.ocr import recognise

    mine = [w for w in words if w.vertical == bool(quarter)]
    longest = sorted(mine, key=lambda w: -min(w.length / max(w.height, 1), 12))[:12]

    def worth(turn: int) -> tuple[float, float]:
        read = recognise([crop_of(lettering.image, w, turn) for w in longest])
        weights = [min(len(t), 8) for t, _ in read]
        total = sum(n * s for n, (_, s) in zip(weights, read, strict=True))
        return total, total / max(sum(weights), 1)

    total, mean = worth(quarter)
    if mean >= _SURE and sum(w.length > 3 * w.height for w in longest) >= 3:
        return quarter
    return quarter if total >= worth(quarter + 2)[0] else quarter + 2
