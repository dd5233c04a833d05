"""What a printed tick number can mean: every reading of its text, each with a cost.

A reader of small print loses points, takes tick marks along and swaps look-alikes. The progression
of an axis decides between the readings; the cost says how far each is from what stands there.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

__all__ = ["Part", "Reading", "numeric", "parts", "readings", "row_readings"]


@dataclass(frozen=True, slots=True)
class Reading:
    """One meaning of a printed number.

    cost : 0 as printed … 1 hardly credible. how : what was assumed, "" for nothing.
    decimals : digits after the point. suffix : a unit printed behind the number, "" without.
    """

    value: float
    cost: float
    how: str = ""
    decimals: int = 0
    suffix: str = ""


@dataclass(frozen=True, slots=True)
class Part:
    """A piece of a text: its characters and the stretch of the line it fills, as fractions."""

    text: str
    start: float
    end: float


_DASHES = "−–—‐‑‒―﹣－˗"
_PLAIN = str.maketrans(
    dict.fromkeys(_DASHES, "-")
    | {"’": "'", "‘": "'", "`": "'", "´": "'", "\u00a0": " ", "\u202f": " ", "\u2009": " "}
    | {"，": ",", "．": ".", "·": ".", "•": ".", "‚": ",", "×": "x", "∗": "*", "％": "%"}
)
_SUPERSCRIPT = {c: str(n) for n, c in enumerate("⁰¹²³⁴⁵⁶⁷⁸⁹")} | {"⁻": "-"}
_LOOKS = str.maketrans("OoQDlI|!i]SsBZzgqbGÖ°", "000011111155822996600")
_LIKE_A_DIGIT = set("OoQDlI|!i]SsBZzgqbGÖ°")
_SUFFIX = re.compile(r"([-+]?[\d.,' ]*\d[.,]?)\s*(%|[A-Za-zµ°\"][A-Za-z0-9³²/.\"]{0,6})$")
_NUMBER = re.compile(r"[-+]?(?:\d[\d.,' ]*|[.,]\d+)$")
_SUPER_RUN = "".join(_SUPERSCRIPT)
_POWER = re.compile(
    r"(?:([-+]?\d+(?:[.,]\d+)?)\s*[x*.]\s*)?10(?:\^\(?([-+]?\d)\)?|([" + _SUPER_RUN + r"]+))$"
)
_E_FORM = re.compile(r"([-+]?\d+(?:[.,]\d+)?)[eE]([-+]?\d{1,2})$")
_MERGED_BLANK = re.compile(r"\S+")


def numeric(text: str) -> bool:
    """Whether the text can be a tick number."""
    return bool(readings(text))


def parts(text: str) -> tuple[Part, ...]:
    """The numbers of a text that holds several with blanks between ("0 20 40"), else the text."""
    clean = text.translate(_PLAIN).strip()
    pieces = list(_MERGED_BLANK.finditer(clean))
    whole = (Part(text, 0.0, 1.0),)
    if len(pieces) < 2 or re.fullmatch(r"[-+]?\d{1,3}( \d{3})+([.,]\d+)?", clean):
        return whole
    if not all(readings(m.group()) and any(c.isdigit() for c in m.group()) for m in pieces):
        return whole
    n = len(clean)
    return tuple(Part(m.group(), m.start() / n, m.end() / n) for m in pieces)


def readings(text: str) -> tuple[Reading, ...]:
    """All meanings of a printed number, the cheapest first; empty where it is no number.

    Parameters
    ----------
    text : str
        As read: "1,000", "0,5", ".5", "−10", "2·10³", "lO", "50 %" …

    Examples
    --------
    >>> [r.value for r in readings("1,000")][:2]
    [1000.0, 1.0]
    >>> readings("0,5")[0].value
    0.5
    >>> readings("Q [m]")
    ()
    """
    clean = re.sub(r"\s+", " ", text.translate(_PLAIN)).strip()
    if not clean or len(clean) > 14:
        return ()
    found = _powers(clean) or _signed(clean, 0.0, "")
    return _cheapest(found)


def row_readings(texts: Sequence[str]) -> list[tuple[Reading, ...]]:
    """The readings of the numbers of one axis, in their order, which are printed alike.

    A number with a leading zero ("05", or "00" at the end of the axis) proves that the reader
    loses decimal points; numbers printed with a point make it likely for those without.
    """
    if not texts:
        return []
    dashed = [t.translate(_PLAIN).strip().startswith("-") for t in texts]
    if sum(dashed) >= 0.7 * len(texts) > 1:  # ticks before the numbers: no axis is all negative
        texts = [t.translate(_PLAIN).strip().lstrip("- ") for t in texts]
    each = [readings(t) for t in texts]
    plain = [re.sub(r"\D", "", t) if re.fullmatch(r"[-−]?\d+", t.strip()) else "" for t in texts]
    proven = any(re.match(r"0+[1-9]", p) for p in plain)
    pointed = sum(bool(re.search(r"\d[.,]\d{1,2}$", t.strip())) for t in texts)
    hinted = pointed >= 0.3 * len(texts) or any(re.fullmatch("00+", p) for p in plain)
    lost = 0.08 if proven else 0.15 if hinted else None
    if lost is None:
        return each
    return [tuple(_with_lost_points(r, lost, proven) for r in some) for some in each]


def _with_lost_points(r: Reading, lost: float, proven: bool) -> Reading:
    if "put in" in r.how:
        return replace(r, cost=min(r.cost, lost))
    if proven and not r.decimals and r.value and not r.how:
        return replace(r, cost=r.cost + 0.5)
    return r


def _cheapest(found: list[Reading]) -> tuple[Reading, ...]:
    best: dict[float, Reading] = {}
    for r in found:
        key = round(r.value, 9)
        if key not in best or r.cost < best[key].cost:
            best[key] = r
    return tuple(sorted(best.values(), key=lambda r: r.cost))


def _powers(clean: str) -> list[Reading]:
    """Readings of "10³", "2·10^2", "5e3"."""
    match = _E_FORM.match(clean)
    if match:
        value = float(match[1].replace(",", ".")) * 10.0 ** int(match[2])
        return [Reading(value, 0.0)]
    match = _POWER.match(clean)
    if not match:
        return []
    exponent = match[2] or "".join(_SUPERSCRIPT[c] for c in match[3])
    if exponent in ("", "-", "+"):
        return []
    mantissa = float(match[1].replace(",", ".")) if match[1] else 1.0
    return [Reading(mantissa * 10.0 ** int(exponent), 0.0)]


def _signed(clean: str, cost: float, how: str) -> list[Reading]:
    """Readings of a text that may carry a sign, a unit, tick marks and look-alikes."""
    if clean in ("-", "--"):
        return [Reading(0.0, 0.3, "a dash for zero")]
    bare = re.sub(r"^[|'\"_:;~*]+\s*|\s*[|'\"_:;~*]+$", "", clean)
    if bare != clean and bare:
        return _signed(bare, cost + 0.1, how)
    if clean.endswith("-"):
        return _signed(clean[:-1].strip(), cost + 0.1, how or "a tick mark taken along")
    if _NUMBER.match(clean):
        return _number(clean, cost, how, "")
    match = _SUFFIX.match(clean)
    if match and _is_unit(match[2]):
        return _number(match[1].strip(), cost + 0.05, how, match[2])
    return _look_alikes(clean, cost)


def _is_unit(word: str) -> bool:
    from curvefit.errors import InputError
    from curvefit.units import parse

    try:
        return parse(word).dimension in ("flow", "length", "ratio", "power", "pressure")
    except InputError:
        return False


def _look_alikes(clean: str, cost: float) -> list[Reading]:
    """Readings with letters taken for the digits that they resemble."""
    letters = [c for c in clean if c in _LIKE_A_DIGIT]
    digits = sum(c.isdigit() for c in clean)
    if not letters or len(letters) > max(digits, 1) + 1:
        return []
    swapped = clean.translate(_LOOKS)
    if not _NUMBER.match(swapped):
        return []
    extra = 0.25 * len(letters) + (0.35 if digits == 0 else 0.0)
    return _number(swapped, min(cost + extra, 0.9), f"{clean} taken for {swapped}", "")


def _number(text: str, cost: float, how: str, suffix: str) -> list[Reading]:
    sign, body = 1.0, text.replace(" ", " ").strip()
    out: list[Reading] = []
    if body.startswith(("-", "+")):
        sign = -1.0 if body[0] == "-" else 1.0
        body = body[1:].strip()
        if sign < 0:  # a tick mark left of the number looks like a minus
            out += _body(body, 1.0, cost + 0.35, how or "a tick mark taken along", suffix)
    return _body(body, sign, cost, how, suffix) + out


def _body(body: str, sign: float, cost: float, how: str, suffix: str) -> list[Reading]:
    """Readings of digits and separators, without a sign."""

    def one(digits: str, extra: float, why: str = "") -> Reading:
        decimals = len(digits.partition(".")[2])
        return Reading(sign * float(digits or "0"), cost + extra, how or why, decimals, suffix)

    if re.fullmatch(r"\d{1,3}([ ']\d{3})+", body):
        return [one(re.sub(r"[ ']", "", body), 0.0)]
    body = body.replace(" ", "").replace("'", "")
    if re.fullmatch(r"\d+", body):
        return [one(body, *_whole_cost(body)), *_points(body, one)]
    if re.fullmatch(r"\d*[.,]\d+", body):
        whole, fraction = re.split(r"[.,]", body)
        out = [one(f"{whole}.{fraction}", 0.0)]
        if len(fraction) == 3 and 1 <= len(whole) <= 3 and whole.strip("0"):
            decimal = 0.4 if fraction == "000" else 0.25  # nobody prints 1, 2, 3 as 1.000, 2.000
            out = [one(whole + fraction, 0.0), one(f"{whole}.{fraction}", decimal)]
        return [*out, one(whole + fraction, 0.75, "a speck taken for a point")]
    if re.fullmatch(r"\d+[.,]", body):
        return [one(body[:-1], 0.1), *_points(body[:-1], one)]
    groups = re.fullmatch(r"(\d{1,3}(?:\.\d{3})+)(?:,(\d+))?", body) or re.fullmatch(
        r"(\d{1,3}(?:,\d{3})+)(?:\.(\d+))?", body
    )
    if groups:
        whole = re.sub(r"[.,]", "", groups[1])
        return [one(f"{whole}.{groups[2]}" if groups[2] else whole, 0.0)]
    return []


def _whole_cost(body: str) -> tuple[float, str]:
    """A leading zero proves that a point was lost: "05" is not five."""
    lost = len(body) > 1 and body[0] == "0" and body.strip("0") != ""
    return (0.6, "") if lost else (0.0, "")


def _points(body: str, make: Callable[[str, float, str], Reading]) -> list[Reading]:
    """Readings with a lost decimal point put back in."""
    why = "a decimal point put in"
    n = len(body)
    leading = n > 1 and body[0] == "0"
    out = []
    if n == 1 and body != "0":
        out.append(make(f".{body}", 0.5, why))
    for k in (1, 2):
        if n > k and (k == 1 or n > 2):
            cost = (0.1 if leading and n - k == 1 else 0.4) + 0.2 * (k - 1) * (not leading)
            out.append(make(f"{body[:-k]}.{body[-k:]}", cost, why))
    if n == 2 and not leading:
        out.append(make(f".{body}", 0.65, why))
    if re.fullmatch(r"10[2-6]", body):
        out.append(make(str(10 ** int(body[2])), 0.55, "a raised exponent"))
    return out
