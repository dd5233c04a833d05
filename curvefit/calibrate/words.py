"""The words printed in and around the plot boxes: found by their characters, read by OCR."""

from __future__ import annotations

import re
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.glyphs import (
    TextLine,
    letters_of,
    no_dashes,
    pieces_of,
    text_lines,
    without,
)
from curvefit.calibrate.linework import character_size, crossings, long_strokes
from curvefit.geometry import project
from curvefit.records import Word

__all__ = ["Lettering", "find_text", "read_lines"]

Array = NDArray[np.float64]
Image = NDArray[np.uint8]

_TALLEST = 0.034  # of a character, as a share of the page's long side
_MARGIN = 0.22  # of the line's height, left white around a crop


@dataclass(frozen=True, slots=True, eq=False)
class Lettering:
    """The text of a straightened page, before it is read.

    image : black on white, lines and curves taken out. plain : the same with them. lines : where
    text stands. size : of a character [px], 0 where unknown.
    """

    image: Image
    plain: Image
    lines: tuple[TextLine, ...]
    size: float = 0.0


def find_text(
    flat: Image, zone_of: NDArray[np.int16], frame: Image, ticks: Image, rules: Image
) -> Lettering:
    """Where text stands on the straightened page.

    Parameters
    ----------
    flat : array of shape (height, width), uint8
        Ink of the straightened page.
    zone_of : array of the same shape
        Number of the plot box that each pixel lies in, 0 outside all of them.
    frame, ticks : arrays of the same shape
        Not 0 where the sides of the boxes and their ticks are drawn; what touches a side is a
        tick or a curve.
    rules : array of the same shape
        Not 0 near the long lines that were found.
    """
    import cv2

    dark = (flat > _threshold(flat)).astype(np.uint8)
    long_side = max(flat.shape)
    sides = (frame > 0) | (ticks > 0)
    runs = _long_runs(dark, max(30, int(0.024 * long_side)), zone_of, rules)
    gone = sides | runs
    inside = (zone_of > 0).astype(np.uint8)
    left = dark * ~gone
    size = character_size(left * (1 - inside), 7, _TALLEST * long_side)
    if size is not None:
        strokes = long_strokes(left * inside, size)
        left[strokes] = 0
        within = (strokes | gone) & ~sides & (dark * inside > 0)
        crossed = crossings(left * inside, within, 1 + 0.2 * size)
        gone = (strokes | gone) & ~crossed
    dark[gone] = 0
    letters = letters_of(dark, _TALLEST * long_side)
    at_side = np.unique(letters.label[cv2.dilate(frame, np.ones((3, 3), np.uint8)) > 0])
    at_tick = np.unique(letters.label[cv2.dilate(ticks, np.ones((7, 7), np.uint8)) > 0])
    middle = ((letters.boxes[:, :2] + letters.boxes[:, 2:]) / 2).astype(int)
    zones = zone_of[middle[:, 1], middle[:, 0]].astype(np.int64)
    crumb = (letters.bar | letters.speck) & np.isin(letters.index, [*at_tick, *at_side])
    crumb |= (zones > 0) & np.isin(letters.index, at_side)
    # beside a scale line of its own a dash that touches it is its tick, no minus
    at_run = np.unique(letters.label[cv2.dilate(runs.astype(np.uint8), np.ones((9, 9))) > 0])
    short = (letters.boxes[:, 2:] - letters.boxes[:, :2]).max(1) < 0.6 * (size or 10.0)
    crumb |= (zones == 0) & (letters.bar | short) & np.isin(letters.index, at_run)
    letters, zones = letters.of(~crumb), zones[~crumb]
    keep = no_dashes(letters, zones)
    letters, zones = letters.of(keep), zones[keep]
    lines = text_lines(letters, zones)
    text = np.zeros(int(letters.label.max()) + 1, bool)
    text[letters.index] = True
    other = (letters.label > 0) & ~text[letters.label]
    other = (cv2.dilate(other.astype(np.uint8), np.ones((3, 3), np.uint8)) > 0) | gone
    image = 255 - np.where(other & ~text[letters.label], 0, flat)
    return Lettering(image, 255 - flat, tuple(lines), size or 0.0)


def _threshold(flat: Image) -> float:
    some = flat[flat > 24]
    return float(np.clip(0.3 * np.percentile(some, 95), 36, 80)) if some.size else 255.0


def _long_runs(
    dark: Image, shortest: int, zone_of: NDArray[np.int16], rules: Image
) -> NDArray[np.bool_]:
    """Where straight lines along x or y run, a pixel wider on each side.

    Inside a plot box short pieces of the lines found count too (a grid broken by curves); letters
    in a row run on as long, so that elsewhere only long runs do.
    """
    import cv2

    runs = np.zeros(dark.shape, bool)
    for along_x in (True, False):

        def bar(n: int, along_x: bool = along_x) -> Image:
            return np.ones((1, n) if along_x else (n, 1), np.uint8)

        closed = cv2.morphologyEx(dark, cv2.MORPH_CLOSE, bar(5))
        # a heading is as long as a line, but thicker
        thick = cv2.morphologyEx(closed, cv2.MORPH_OPEN, np.ones((9, 9), np.uint8))
        within = closed * (zone_of > 0).astype(np.uint8)
        inside = cv2.morphologyEx(within, cv2.MORPH_OPEN, bar(shortest)) * (rules > 0)
        inside |= cv2.morphologyEx(within, cv2.MORPH_OPEN, bar(5 * shortest))
        outside = cv2.morphologyEx(
            dark * (zone_of == 0).astype(np.uint8), cv2.MORPH_OPEN, bar(2 * shortest)
        )
        outside[thick > 0] = 0
        wide = np.ones((3, 1) if along_x else (1, 3), np.uint8)
        runs |= cv2.dilate((inside | outside).astype(np.uint8), wide) > 0
    return runs


def crop_of(image: Image, line: TextLine, turn: int) -> Image:
    """The line cut out with a margin and turned `turn` quarters clockwise."""
    x0, y0, x1, y1 = line.box
    m = _MARGIN * line.height + 1
    left, top = max(int(x0 - m), 0), max(int(y0 - m), 0)
    cut = image[top : int(y1 + m) + 1, left : int(x1 + m) + 1]
    return np.ascontiguousarray(np.rot90(cut, -turn))


def read_lines(
    lettering: Lettering, lines: list[TextLine], matrix: Array, turn: int
) -> tuple[Word, ...]:
    """The words of the lines, in page px.

    matrix : (3, 3) page px → straightened px. turn : quarter turns clockwise that set the page
    upright.
    """
    first = _read(lettering, lines, turn)
    # numbers side by side are several, words are one line
    crowded = [
        r
        for r in first
        if (_SEVERAL.match(r.text) or (r.line.zone and re.search(r"%.*\d", r.text)))
        and len(pieces_of(r.line)) > 1
    ]
    parts = [p for r in crowded for p in pieces_of(r.line)]
    held = [r for r in first if r not in crowded] + _read(lettering, parts, turn)
    held = _widened(lettering, lines, held, turn)
    held = _with_units(_trimmed(lettering, held, turn))
    back = np.linalg.inv(matrix)
    return tuple(Word(r.text, project(back, _corners(r.line.box, r.turn)), r.score) for r in held)


@dataclass(frozen=True, slots=True, eq=False)
class _Read:
    line: TextLine
    turn: int
    text: str
    score: float


_SEVERAL = re.compile(r"^[\d.,%\s−–—_-]{2,}$")


_MOST_WIDENED, _MOST_PLAIN = 40, 12
_TWO_WAYS = 0.6  # score of a label that is read in two ways
_MARKS = "-–—_./\\|'`,:;~= "


def _widened(
    lettering: Lettering, lines: list[TextLine], read: list[_Read], turn: int
) -> list[_Read]:
    """Labels that a curve has taken characters of, read once more from more of the page.

    Only what makes a label, longer than and ending on what was read, counts.
    """
    from curvefit.ocr import recognise

    size = lettering.size
    known = {id(r.line): r for r in read}

    torn = [
        line
        for line in lines
        if line.zone
        and line.vertical == bool(turn % 2)
        and 0.4 * size < line.height < 1.8 * size
        and line.length < 4.5 * size
        and (id(line) not in known or not _sound(known[id(line)]))
    ]

    def untouched(line: TextLine) -> bool:
        a, b = (crop_of(image, line, turn) for image in (lettering.image, lettering.plain))
        return np.array_equal(a, b)

    # a plain number may have lost its Ø or %; a table is full of them, no curve near
    plain = [line for line in torn if id(line) in known and known[id(line)].text.isdigit()]
    plain.sort(key=untouched)
    torn = [line for line in torn if line not in plain][:_MOST_WIDENED] + plain[:_MOST_PLAIN]
    wider = [_wider(line, size, turn) for line in torn]
    crops = [crop_of(lettering.plain, line, turn) for line in wider]
    out = dict(known)
    for line, wide, (text, score) in zip(torn, wider, recognise(crops), strict=True):
        old = known.get(id(line))
        text = text.strip(_MARKS)
        if score < 0.7 or not _WHOLE.match(text):
            continue
        if old is not None and _WHOLE.match(old.text):
            if text != old.text:  # two readings: neither is sure
                surer = old if old.score > score else _Read(line, turn, text, score)
                out[id(line)] = replace(surer, score=min(surer.score, _TWO_WAYS))
        elif old is None or _completes(text, old.text):
            out[id(line)] = _Read(wide, turn, text, score)
    return list(out.values())


def _sound(read: _Read) -> bool:
    return bool(_WHOLE.match(read.text)) and read.score > 0.95


def _wider(line: TextLine, size: float, turn: int) -> TextLine:
    """The line with room for two more characters in front and one behind."""
    x0, y0, x1, y1 = line.box
    lack = max(size - line.height, 0.0)
    front, behind = 1.5 * size, 0.6 * size
    grown = {
        0: (x0 - front, y0 - lack, x1 + behind, y1 + lack),
        1: (x0 - lack, y0 - behind, x1 + lack, y1 + front),
        2: (x0 - behind, y0 - lack, x1 + front, y1 + lack),
        3: (x0 - lack, y0 - front, x1 + lack, y1 + behind),
    }[turn]
    box = (max(grown[0], 0.0), max(grown[1], 0.0), grown[2], grown[3])
    return TextLine(box, line.vertical, line.letters, line.zone)


def _completes(text: str, torn: str) -> bool:
    """Whether a label is what was torn, with what was lost of it or without what is none of it."""
    figures = re.sub(r"\D", "", torn)
    longer = len(text) > len(torn) and figures[-1:] in text
    return longer or text in torn


_FIRST = "0123456789OoQCGDcøØ⌀∅@φΦ("  # what a label begins with, or its Ø is read as
_LAST = re.compile(r"(^[^%]*\w|[%\"″”'])$")


def _trimmed(lettering: Lettering, read: list[_Read], turn: int) -> list[_Read]:
    """Labels without the end of a curve that stands in their row, where they read better so."""
    odd = [
        r
        for r in read
        if r.line.zone
        and len(r.line.letters) > 2
        and any(c.isdigit() for c in r.text)
        and not _LABEL.match(r.text)
    ]
    ends = [(r, 0) for r in odd if r.text[0] not in _FIRST or _flat(r.line)]
    ends += [(r, -1) for r in odd if not _LAST.search(r.text)]
    shorter = [(r, part) for r, k in ends if (part := without(r.line, k))]
    again = {id(x.line): x for x in _read(lettering, [part for _, part in shorter], turn)}
    best = {id(r): r for r in read}
    for r, part in shorter:
        new = again.get(id(part))
        if new is not None and _LABEL.match(new.text):
            old = best[id(r)]
            if not _LABEL.match(old.text) or len(new.text) > len(old.text):
                best[id(r)] = new
    return list(best.values())


def _flat(line: TextLine) -> bool:
    """Whether what comes first lies: a piece of a line, no figure."""
    sizes = line.letters[:, 2:] - line.letters[:, :2]
    along, across = (1, 0) if line.vertical else (0, 1)
    tall = float(np.percentile(sizes[:, across], 75))
    first = sizes[-1 if line.vertical else 0]
    return bool(first[across] < 0.8 * tall and first[along] > 0.8 * tall)


_UNIT = re.compile(r"^(mm|rpm|1/min|min-1|Hz|in)$")
_BARE = re.compile(r"^[ØøD⌀∅]?\s?\d[\d.,]*$")


def _with_units(read: list[_Read]) -> list[_Read]:
    """A unit one space behind a number inside a box is the end of its label."""
    numbers = [r for r in read if r.line.zone and not r.line.vertical and _BARE.match(r.text)]
    out = {id(r): r for r in read}
    for unit in (r for r in read if r.line.zone and _UNIT.match(r.text)):
        x0, y0, x1, y1 = unit.line.box
        for r in numbers:
            a0, b0, a1, b1 = r.line.box
            tall = b1 - b0
            if -0.2 * tall < x0 - a1 < 1.6 * tall and abs(y1 - b1) < 0.4 * tall and r.turn == 0:
                line = TextLine(
                    (a0, min(b0, y0), x1, max(b1, y1)),
                    False,
                    np.r_[r.line.letters, unit.line.letters],
                    r.line.zone,
                )
                out[id(r)] = _Read(line, 0, f"{r.text} {unit.text}", min(r.score, unit.score))
                out.pop(id(unit), None)
                break
    return list(out.values())


def _read(lettering: Lettering, lines: list[TextLine], turn: int) -> list[_Read]:
    from curvefit.ocr import NUMERIC, readings

    jobs: list[tuple[TextLine, int]] = []
    for line in lines:
        if line.vertical == bool(turn % 2) or len(line.letters) == 1:
            jobs.append((line, turn))
        else:  # upwards or downwards: both are tried
            jobs += [(line, (turn + 1) % 4), (line, (turn + 3) % 4)]
    crops = [crop_of(lettering.image, line, t) for line, t in jobs]
    for (line, t), crop in list(zip(jobs, crops, strict=True)):
        plain = crop_of(lettering.plain, line, t)
        if line.zone and not np.array_equal(crop, plain):  # a line crosses it: with it as well
            jobs.append((line, t))
            crops.append(plain)
    best: dict[int, _Read] = {}
    worth: dict[int, float] = {}
    for (line, t), (free, number) in zip(jobs, readings(crops, (None, NUMERIC)), strict=True):
        text, score = number if _stands_for_number(free[0], number) else free
        text = _tidy(text, line)
        value = _worth(text, score)
        if _plausible(text, score, line) and value > worth.get(id(line), 0.0):
            best[id(line)], worth[id(line)] = _Read(line, t, text, score), value
    return list(best.values())


_LABEL = re.compile(
    r"^([ØøD⌀∅0O]?\s?\d{2,4}(\s?(mm|rpm|1/min|min-1|Hz))?|\d{1,2}([.,]\d)?\s?%|"
    r"\d{1,2}( \d{1,2}/\d{1,2})?[\"″”])$"
)


_WHOLE = re.compile(  # no label of a curve is shorter
    r"^([ØøD⌀∅]\s?\d{2,4}(\s?mm)?|[0O]\s?\d{3}(\s?mm)?|\d{3,4}\s?(mm|rpm|1/min|min-1)|\d\d([.,]\d)?\s?%|"
    r"\d{1,2}( \d{1,2}/\d{1,2})?[\"″”])$"
)


def _worth(text: str, score: float) -> float:
    """Of a reading: surer and longer is better, and best what curves are labelled with."""
    return score * min(len(text), 8) * (1.25 if _LABEL.match(text) else 1.0)


def _stands_for_number(free: str, number: tuple[str, float]) -> bool:
    """Whether letters were read for figures that look like them: an O for a 0, an l for a 1."""
    if not free or not number[0] or any(c.isdigit() for c in number[0]) is False:
        return False
    return (
        free != number[0]
        and all(c in "OoDQlI|iSsBZz.,-% " or c.isdigit() for c in free)
        and (len(free) <= 2 or sum(c.isdigit() for c in free) >= 0.5 * len(free))
    )


_STROKES = frozenset("1lIiíìïj|/\\")  # what a dash alone is read as


def _plausible(text: str, score: float, line: TextLine) -> bool:
    """Not a crumb of a drawing: inside a box, strokes read as a sign or two are no words."""
    if not any(c.isalnum() for c in text):
        return False
    if line.zone and len(text) <= 2 and (score < 0.6 or text in _STROKES):
        return False
    return score > 0.3


def _corners(box: tuple[float, float, float, float], turn: int) -> Array:
    """Corners of a box clockwise from the text's own top left; turned, the text is upright."""
    x0, y0, x1, y1 = box
    x1, y1 = x1 - 1, y1 - 1
    return np.roll(np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]]), turn, axis=0)


_TAIL = re.compile(r"^(\d[\d.,]*\d|\d|\d[\d.,]*\s?%)\s*[-–—_.]$")
_RING = re.compile(r"^(\d[\d.,]*\s?%)[6o°]$")  # the second ring of a % read twice
_NUMBER = re.compile(r"^[-−–—]?\s*\d")


def _tidy(text: str, line: TextLine) -> str:
    """A dash in front of a number stays only where a dash was printed: a flat mark of its own.

    Behind a number it is the end of a tick.
    """
    text = _RING.sub(r"\1", _TAIL.sub(r"\1", text))
    if not _NUMBER.match(text) or text[0].isdigit():
        return text
    first = line.letters[0] if not line.vertical else line.letters[-1]
    w, h = first[2] - first[0], first[3] - first[1]
    if line.vertical:
        w, h = h, w
    return text if h < 0.35 * line.height and w < line.height else text[1:].lstrip()
