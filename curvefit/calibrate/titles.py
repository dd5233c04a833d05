"""Axis titles in the words of the trade → quantity and unit.

Titles come as `Head (m)`, `H [m]`, `Head, m`, `Q - US gpm`, `P2/kW`, `Förderstrom in l/s`, `m`;
small print is misread in ways that are known (l for 1, ³ for ', η for n), so words and units are
compared after look-alikes are folded together.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from functools import lru_cache

from curvefit.calibrate.consensus import text_distance
from curvefit.calibrate.lexicon import MISREAD_UNITS, SYMBOLS, WORDS
from curvefit.errors import InputError
from curvefit.records import QUANTITIES
from curvefit.units import UNITS, Unit, fold, parse

__all__ = ["Title", "read_title"]


@dataclass(frozen=True, slots=True)
class Title:
    """What a title says.

    quantity : key of QUANTITIES or None; unit : UCUM code or None; printed_unit : as on the page.
    factor : multiplies printed numbers on the way to `unit`. dimension : of quantity or unit.
    guessed : rests on a lone symbol or a look-alike.
    """

    text: str
    quantity: str | None = None
    unit: str | None = None
    printed_unit: str = ""
    factor: float = 1.0
    dimension: str | None = None
    guessed: bool = False

    @property
    def strength(self) -> int:
        """0 nothing … 3 quantity and unit."""
        return 2 * (self.unit is not None) + (self.quantity is not None)


_DIMENSIONS = ("flow", "length", "ratio", "power", "pressure")
_NEVER = ("1", "[in_i]", "mm", "cm")  #: no axis is scaled in these; "H in m" holds an "in"
_DEFAULT = {"flow": "flow", "ratio": "efficiency", "power": "shaft_power"}
_ALIKE = str.maketrans(
    {
        "l": "1",
        "i": "1",
        "|": "1",
        "!": "1",
        "]": "1",
        "o": "0",
        "²": "3",
        "'": "3",
        "°": "3",
        "ε": "3",
        "´": "3",
        "’": "3",
        "*": "3",
        '"': "3",
        "”": "3",
        "^": None,
        "?": "3",
        "\\": "/",
    }
)
_ACCENTS = str.maketrans("äöüàáâãåèéêëìíîïòóôõùúûçñ", "aouaaaaaeeeeiiiioooouuucn")
_TIMES = re.compile(
    r"(?:[x×*·]\s*)(10+)(?:\^?([2-6²³⁴⁵⁶]))?(?![\d.])|^\(?(10+)(?:\^([2-6])|([²³⁴⁵⁶]))?\s*(?=[a-zA-Z])|'000"
)


def read_title(text: str) -> Title:
    """What a line of text says of an axis; quantity and unit are None where it says nothing.

    Examples
    --------
    >>> t = read_title("Förderhöhe H [m]")
    >>> t.quantity, t.unit
    ('head', 'm')
    >>> read_title("Q, US gal/min").unit
    '[gal_us]/min'
    """
    clean = re.sub(r"\s+", " ", text).strip()
    if not clean or len(clean) > 70:
        return Title(text)
    body, multiplier = _multiplier(clean)
    best = Title(text)
    for name, printed in _splits(body):
        found = _unit(printed)
        if found is None:
            continue
        u, exact = found
        quantity, sure = _quantity(name, u.dimension)
        title = _joined(text, quantity, sure, u, printed, exact, multiplier, bool(name.strip()))
        if title is not None and _rank(title) > _rank(best):
            best = title
    if best.unit is None:
        quantity, sure = _quantity(body, None)
        if quantity is not None and (sure or len(body) > 3):
            best = Title(text, quantity, factor=multiplier, guessed=not sure,
                         dimension=QUANTITIES[quantity].dimension)  # fmt: skip
    return best


def _rank(t: Title) -> tuple[int, bool, int]:
    return t.strength, not t.guessed, len(t.printed_unit)


def _multiplier(text: str) -> tuple[str, float]:
    """The text without "×1000" and its like, and the number that they stand for."""
    supers = dict(zip("²³⁴⁵⁶", "23456", strict=True))
    bare = re.sub(r"[\[\(]\s*(?=10)", lambda m: m.group(), text)
    for match in _TIMES.finditer(bare.replace("[10", "[ 10").replace("(10", "( 10")):
        source = match.string
        if match.group() == "'000":
            value = 1000.0
        else:
            base = match[1] or match[3]
            power = match[2] or match[4] or match[5] or "1"
            value = float(base) ** int(supers.get(power, power))
        if value >= 10:
            return (source[: match.start()] + " " + source[match.end() :]).strip(), value
    inner = re.search(r"([\[\(])\s*(10+)(?:\^?([2-6²³⁴⁵⁶]))?\s*[x×*·]?\s*(?=[a-zA-Z])", text)
    if inner and float(inner[2]) >= 10:
        power = supers.get(inner[3] or "1", inner[3] or "1")
        value = float(inner[2]) ** int(power)
        return text[: inner.start()] + inner[1] + text[inner.end() :], value
    return text, 1.0


def _splits(body: str) -> list[tuple[str, str]]:
    """Ways to part the title into name and unit."""
    out = []
    for match in re.finditer(r"[\[\(\{<|]\s*([^\[\]\(\)\{\}]{1,22}?)\s*(?:[\]\)\}>|1l]|$)", body):
        out.append((body[: match.start()] + " " + body[match.end() :], match[1]))
        out.append((body[: match.start()], body[match.start() + 1 :].rstrip(")]}")))
    for mark in (" in ", " en ", ",", " - ", "- ", " – ", "—", "-", "/", ":", ";", "=", "."):
        k = body.rfind(mark) if mark != "/" else body.find(mark)
        if k > 0:
            out.append((body[:k], body[k + len(mark) :]))
    words = body.split(" ")
    for n in (1, 2, 3):
        if len(words) > n:
            out.append((" ".join(words[:-n]), " ".join(words[-n:])))
            out.append((" ".join(words[n:]), " ".join(words[:n])))
    nested = re.match(r"(.*?)[\[\(](.*)[\]\)]$", body)
    if nested:
        out.append((nested[1], nested[2]))
    out.append(("", body))
    stuck = re.match(r"(.*[a-zöüé0-9)])\s*(%|m3/h|m³/h|l/s|kw|hp|ft|gpm)\W*$", body, re.I)
    if stuck:
        out.append((stuck[1], stuck[2]))
    joined = re.match(r"(.*\D)[\[(1lI|]\s*(m|ft|kw|hp|%|l/s)\s*[\])1lI|]$", body, re.I)
    if joined:
        out.append((joined[1], joined[2]))
    return out


@lru_cache(maxsize=1)
def _folded() -> dict[str, Unit]:
    table: dict[str, Unit] = {}
    for u in UNITS:
        if u.dimension in _DIMENSIONS and u.code not in _NEVER:
            for spelling in (*u.spellings, fold(u.print)):
                if len(spelling) > 1 or spelling in "m%w":
                    table.setdefault(spelling.translate(_ALIKE), u)
    return table


def _unit(printed: str) -> tuple[Unit, bool] | None:
    """The unit that a text names, and whether it does so without look-alikes."""
    text = _bared(printed)
    if not text or len(text) > 22:
        return None
    try:
        u = parse(text)
        if u.dimension in _DIMENSIONS and u.code not in _NEVER:
            return u, True
        if u.code == "/min":
            return None  # a speed, not litres in a minute with a misread l
    except InputError:
        pass  # no spelling as it stands: perhaps with look-alikes
    folded = fold(text.rstrip(".")).translate(_ALIKE)
    if folded in _folded() and len(folded) > 1:
        return _folded()[folded], False
    for pattern, code in MISREAD_UNITS:
        if re.fullmatch(pattern, folded) or re.fullmatch(pattern, fold(text)):
            return parse(code), False
    return None


def _bared(printed: str) -> str:
    """A unit without the brackets about it; "gpm (US)" keeps its own."""
    text = printed.strip().strip("[]{}|,;:").strip()
    while text and text[0] in "([" and text.count("(") + text.count("[") >= 1:
        text = text[1:].strip(" ,;:|")
    for opening, closing in ("()", "[]"):
        while text.endswith(closing) and text.count(closing) > text.count(opening):
            text = text[:-1].strip(" ,;:|")
    return text


def _quantity(name: str, dimension: str | None) -> tuple[str | None, bool]:
    """The quantity that words or a symbol name, and whether that is certain."""
    plain = name.strip().lower().translate(_ACCENTS).replace("ß", "ss")
    tokens = [t for t in re.split(r"[^\wηŋΔ∆δ]+", plain) if t]
    joined = "".join(tokens)
    for quantity, words in WORDS:
        if dimension is not None and not _fits(quantity, dimension):
            continue
        for word in words:
            if (len(word) >= 5 and word in joined) or word in tokens or word == joined:
                return _by_dimension(quantity, dimension), True
    for quantity, words in WORDS:  # a letter or two misread
        if dimension is not None and not _fits(quantity, dimension):
            continue
        for word in words:
            slack = 1 if len(word) < 8 else 2
            if len(word) >= 4 and any(
                abs(len(t) - len(word)) <= slack and text_distance(t, word) <= slack
                for t in (*tokens, joined)
                if len(t) >= 4
            ):
                return _by_dimension(quantity, dimension), True
    if re.search(r"n.?p.?s.?h", joined) and dimension in (None, "length"):
        return "npsh_required", True
    for token in tokens:
        known = SYMBOLS.get(token)
        if known and (len(tokens) <= 3) and (dimension is None or _fits(known[0], dimension)):
            if not known[1] and dimension is None:
                continue
            return _by_dimension(known[0], dimension), known[1] or dimension is not None
    return None, False


def _fits(quantity: str, dimension: str) -> bool:
    own = QUANTITIES[quantity].dimension
    return own == dimension or (quantity == "head" and dimension == "pressure")


def _by_dimension(quantity: str, dimension: str | None) -> str:
    return "differential_pressure" if quantity == "head" and dimension == "pressure" else quantity


def _joined(
    text: str,
    quantity: str | None,
    sure: bool,
    u: Unit,
    printed: str,
    exact: bool,
    multiplier: float,
    named: bool,
) -> Title | None:
    factor, shown = multiplier, _bared(printed)
    if not u.coded:  # metric horsepower: numbers are handed on in kW
        factor *= u.factor / parse(u.code).factor
    if not exact:
        shown = u.print
    title = Title(text, quantity, u.code, shown, factor, u.dimension, guessed=not sure)
    if quantity is None:
        if u.code == "W" and printed.strip("[]() ") == "w":
            return None  # an m upside down
        if named and len(re.sub(r"\W", "", text)) > len(re.sub(r"\W", "", printed)) + 14:
            return None  # a sentence that happens to end in a unit
        if u.dimension == "length" and (u.code not in ("m", "[ft_i]") or (named and not exact)):
            return None
        default = _DEFAULT.get(u.dimension)
        title = replace(title, quantity=default, guessed=not exact or u.dimension in ("power",))
    return title
