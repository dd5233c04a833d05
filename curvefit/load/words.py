"""The characters of a text layer → Word records: lines of text as they are printed."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import project
from curvefit.records import Finding, Word

__all__ = ["words_of"]

Array = NDArray[np.float64]
UNKNOWN = "\ufffd"
UNSURE = 0.9  #: score of letters that follow from the customary code of a font that tells none
RAISED = str.maketrans("0123456789-−+n", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁻⁺ⁿ")
LIGATURES = str.maketrans({"ﬀ": "ff", "ﬁ": "fi", "ﬂ": "fl", "ﬃ": "ffi", "ﬄ": "ffl"})
NOTHING = "\u00ad\u200b\u200c\u200d\ufeff"

# lengths in em (the size of the type)
BLANK = 0.15  #: a gap that stands for a blank
APART = 0.55  #: a gap between texts that are set one by one
WIDE = 1.8  #: a gap that no one text has
NUMBERS = 0.4  #: the same between two digits set apart
BASELINE = 0.12  #: how far apart two characters of one line may stand
SMALL = 0.86  #: a raised or lowered character is at most this large
CAPITAL = 0.7  #: height that is taken for a line without tall letters


class _Line:
    """Characters of one direction in that direction's own frame: u along, v up, all (n,) px."""

    def __init__(self, rows: Array, place: Array, em: Array, extent: Array) -> None:
        self.text = [chr(int(c)) for c in rows[:, 0]]
        self.u, self.v = place.T
        self.em, self.piece, self.sure = em, rows[:, 11], rows[:, 12] > 0
        self.before = rows[:, 13] / np.hypot(*rows[:, 3:5].T) * em
        self.end, self.low, self.high, self.start = extent.T


def words_of(data: bytes, to_page: Array) -> tuple[tuple[Word, ...], tuple[Finding, ...]]:
    """The lines of text of a page, and what is to be said of its text layer.

    Parameters
    ----------
    data : rows of float64, a character each: code point; x, y of its origin, its direction of
        writing × em, left, right, bottom, top of its ink, width and height of the upright box of
        its advance, number of its text object, 1 where the font tells its letters,
        how far before it its text object begins; page points
    to_page : array of shape (3, 3), page points → page px
    """
    rows = np.frombuffer(data, float).reshape(-1, 14)
    rows = rows[np.hypot(rows[:, 3], rows[:, 4]) > 0.5]
    if not len(rows):
        return (), ()
    origin = project(to_page, rows[:, 1:3])
    along = rows[:, 3:5] @ to_page[:2, :2].T
    em = np.hypot(*along.T)
    angle = np.degrees(np.arctan2(-along[:, 1], along[:, 0]))
    keep = _first_of_each(rows, em, origin)
    words: list[Word] = []
    unknown = 0
    for degrees in np.unique(np.round(angle[keep]) % 360):
        near = keep[np.abs((angle[keep] - degrees + 180) % 360 - 180) <= 0.5]
        turn = float(np.median(angle[near]))
        for word in _lines(rows[near], origin[near], em[near], turn, to_page):
            unknown += UNKNOWN in word.text
            if UNKNOWN not in word.text:
                words.append(word)
    return tuple(words), _said(unknown, len(words))


def _said(unknown: int, known: int) -> tuple[Finding, ...]:
    if not unknown:
        return ()
    return (
        Finding(
            "info",
            "page.text-codes",
            f"{unknown} of {unknown + known} texts of the PDF hold letters that the file does not "
            "tell; they are read from their picture or not at all.",
        ),
    )


def _first_of_each(rows: Array, em: Array, origin: Array) -> NDArray[np.intp]:
    """Characters without those printed again at the same place (a halo, a false bold).

    Letters of one text object may share a place: a ligature comes as its letters.
    """
    place = np.round(origin / (0.04 * em[:, None]))
    seen: dict[tuple[float, ...], float] = {}
    keep = [
        i
        for i, (code, x, y, piece) in enumerate(np.c_[rows[:, 0], place, rows[:, 11]])
        if seen.setdefault((code, x, y), piece) == piece
    ]
    return np.array(keep, np.intp)


def _lines(rows: Array, origin: Array, em: Array, degrees: float, to_page: Array) -> Iterator[Word]:
    """Words of the characters that are written in one direction."""
    cos, sin = np.cos(np.radians(degrees)), np.sin(np.radians(degrees))
    frame = np.array([[cos, -sin], [-sin, -cos]])  # page px → (along, up)
    place = origin @ frame.T
    extent = _extent(rows, place, em, degrees, frame, to_page)
    line = _Line(rows, place, em, extent)
    for group in _joined(line):
        text = _text(line, group)
        if text:
            score = 1.0 if line.sure[group].all() else UNSURE
            yield Word(text, _box(line, group) @ np.linalg.inv(frame).T, score)


def _extent(
    rows: Array, place: Array, em: Array, degrees: float, frame: Array, to_page: Array
) -> Array:
    """(n, 4) end of the advance, lowest and highest ink, begin of the ink, in the line's frame."""
    scale = float(np.sqrt(abs(np.linalg.det(to_page[:2, :2]))))
    c, s = np.abs(np.median(rows[:, 3:5], 0)) / np.hypot(*np.median(rows[:, 3:5], 0))
    if abs((degrees + 45) % 90 - 45) > 2:  # not along an edge of the page: boxes say little
        wide, high = rows[:, 9] * scale, rows[:, 10] * scale
        lean = c * c - s * s
        advance = (wide * c - high * s) / lean if abs(lean) > 0.2 else np.full(len(rows), np.nan)
        fits = (advance > 0.1 * em) & (advance < 1.3 * em)
        advance = np.where(fits, advance, 0.55 * em)
        u, v = place.T
        return np.column_stack([u + advance, v - 0.02 * em, v + CAPITAL * em, u])
    corners = [project(to_page, rows[:, [i, j]]) @ frame.T for i in (5, 6) for j in (7, 8)]
    ink = np.stack(corners)
    advance = place[:, 0] + rows[:, 10 if s > c else 9] * scale
    low, high = ink[:, :, 1].min(0), ink[:, :, 1].max(0)
    return np.column_stack([advance, low, high, ink[:, :, 0].min(0)])


def _joined(line: _Line) -> list[list[int]]:
    """Characters of each printed text, in the order of reading."""
    groups = [g for level in _levels(line) for g in _split(line, level)]
    blank = [all(line.text[i].isspace() for i in g) for g in groups]
    groups = [g for g, b in zip(groups, blank, strict=True) if not b]
    return _with_raised(line, groups)


def _levels(line: _Line) -> Iterator[list[int]]:
    """Characters of like size on one base line."""
    order = np.lexsort((line.v, np.round(np.log(line.em) / 0.05)))
    level = [int(order[0])]
    for i in order[1:]:
        last = level[-1]
        alike = abs(line.em[i] / line.em[last] - 1) < 0.06
        if alike and abs(line.v[i] - line.v[last]) < BASELINE * line.em[i]:
            level.append(int(i))
        else:
            yield level
            level = [int(i)]
    yield level


def _split(line: _Line, level: list[int]) -> list[list[int]]:
    """A level cut where wide blanks stand, and into texts that lie over each other.

    Characters that follow each other in the file belong together before any others do.
    """
    runs: list[list[int]] = []
    for i in sorted(level):
        if runs and _misfit(line, runs[-1], i) < np.inf:
            runs[-1].append(i)
        else:
            runs.append([i])
    groups: list[list[int]] = []
    for run in sorted(runs, key=lambda r: line.u[r[0]]):
        fits = [(_misfit(line, g, run[0]), k) for k, g in enumerate(groups[-8:])]
        misfit, k = min(fits, default=(np.inf, 0))
        if misfit < np.inf:
            groups[-8:][k] += run
        else:
            groups.append(run)
    return groups


def _misfit(line: _Line, group: list[int], i: int) -> float:
    """How badly a character continues a text, em; inf where it does not."""
    last = group[-1]
    gap = (line.u[i] - line.end[last]) / line.em[last]
    same = line.piece[last] == line.piece[i]
    if same and line.u[i] == line.u[last] and line.v[i] == line.v[last]:
        return 0.0  # the letters of a ligature
    digits = line.text[last].isdigit() and line.text[i].isdigit()
    most = WIDE if same else NUMBERS if digits else APART
    if gap > most or gap < -0.3:
        return float(np.inf)
    return float(abs(gap) + (0.0 if same else 0.1))


def _with_raised(line: _Line, groups: list[list[int]]) -> list[list[int]]:
    """Groups of small characters joined to the text that they stand above or below of."""
    em = np.array([np.median(line.em[g]) for g in groups])
    v = np.array([np.median(line.v[g]) for g in groups])
    start = np.array([line.u[g].min() for g in groups])
    stop = np.array([max(line.end[i] for i in g if not line.text[i].isspace()) for g in groups])
    gone: set[int] = set()
    for k in np.argsort(em):
        lift = (v[k] - v) / em
        gap = np.maximum(start[k] - stop, start - stop[k]) / em
        fits = (em[k] < SMALL * em) & (em[k] > 0.4 * em) & (np.abs(lift - 0.15) < 0.6)
        fits &= (gap < 0.2) & (stop[k] - start[k] < 2.5 * em) & (start[k] > start)
        if fits.any():
            best = int(np.nonzero(fits)[0][np.argmin(gap[fits])])
            groups[best] = sorted(groups[best] + groups[k], key=lambda i: line.u[i])
            stop[best] = max(stop[best], stop[k])
            gone.add(int(k))
    return [g for k, g in enumerate(groups) if k not in gone]


def _text(line: _Line, group: list[int]) -> str:
    em = max(line.em[i] for i in group)
    base = float(np.median([line.v[i] for i in group if line.em[i] > SMALL * em]))
    text = ""
    end: float | None = None
    for i in group:
        letter = line.text[i]
        if end is not None and _missing(line, group, i, text, line.u[i] - end):
            text, end = text + _lost(line, group, i, end), None
        elif letter.isdigit() and line.before[i] > 0.42 * line.em[i]:
            text += _lost(line, group, i, line.u[i] - line.before[i])
        if line.em[i] < SMALL * em and line.v[i] - base > 0.15 * em:
            letter = letter.translate(RAISED)
        wide = end is not None and line.u[i] - end > BLANK * line.em[i]
        if not letter.isspace():
            text += " " + letter if wide and not text.endswith(" ") else letter
            end = line.end[i]
        elif text and not text.endswith(" "):
            text += " "
    return "".join(c for c in text if c not in NOTHING).translate(LIGATURES).strip()


def _missing(line: _Line, group: list[int], i: int, text: str, gap: float) -> bool:
    """Whether a letter has gone lost before a digit: a reader drops one printed over its like.

    The place of a letter is empty, in one text object, and no blank stands there.
    """
    k = group.index(i)
    return (
        line.text[i].isdigit()
        and not text[-1:].isspace()
        and k > 0
        and line.piece[group[k - 1]] == line.piece[i]
        and 0.42 * line.em[i] < gap < 0.8 * line.em[i]
    )


def _lost(line: _Line, group: list[int], i: int, place: float) -> str:
    """The letter of another text that stands where one is missing; unknown if none or several."""
    em = line.em[i]
    there = (np.abs(line.u - place) < 0.08 * em) & (np.abs(line.v - line.v[i]) < BASELINE * em)
    there &= np.abs(line.em / em - 1) < 0.06
    there[group] = False
    letters = {line.text[k] for k in np.nonzero(there)[0]}
    return letters.pop() if len(letters) == 1 else UNKNOWN


def _box(line: _Line, group: list[int]) -> Array:
    """(4, 2) clockwise from the top left, in the line's frame."""
    inked = [i for i in group if not line.text[i].isspace()]
    tall = max(inked, key=lambda i: line.em[i])
    low = min(line.v[tall], *(line.low[i] for i in inked))
    high = max(line.v[tall] + CAPITAL * line.em[tall], *(line.high[i] for i in inked))
    left, right = min(line.start[i] for i in inked), max(line.end[i] for i in inked)
    return np.array([[left, high], [right, high], [right, low], [left, low]])
