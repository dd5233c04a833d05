"""What a printed label can mean: a quantity, a diameter, a speed, a number of stages, a level.

One text has several readings, each with a cost; which one holds is decided by the company it
keeps (`families`, `levels`, `quantities`).
"""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass
from typing import Literal

from curvefit.units import unit

__all__ = ["Kind", "Meaning", "meanings", "quantity_named"]

Kind = Literal["quantity", "diameter", "speed", "percent", "stages", "power", "length", "letter"]


@dataclass(frozen=True, slots=True)
class Meaning:
    """One reading of a label.

    value : SI (diameter m, speed 1/s, percent as a fraction, power W, length m, stages); None for
    a quantity or a letter. unit : UCUM code as printed. cost : how far the text is bent, 0 none.
    plain : the text says what it is (a sign, a unit) rather than a bare number.
    """

    kind: Kind
    value: float | None
    unit: str
    cost: float
    plain: bool
    text: str
    quantity: str | None = None


# Names of quantities as they stand on curves and in legends: English, German, French, Italian,
# Spanish, Portuguese. Longest first where one holds another.
_NAMES: tuple[tuple[str, str], ...] = (
    ("npsh_required", r"n\.?\s?p\.?\s?s\.?\s?h\.?|haltedruckh[oö]he|nps[hn]|mpsh|npsrh|nfsh"),
    (
        "overall_efficiency",
        r"overall\s*eff|gesamtwirkungsgrad|[ηn]\s?_?(?:gr|ges|tot|gl|agg)\b"
        r"|wire.?to.?water|rendement\s*(?:global|total)|rendimento\s*(?:globale|totale|total)"
        r"|rendimiento\s*(?:global|total)",
    ),
    (
        "efficiency",
        r"effic\w*|\beff\b\.?|wirkungsgrad|rendement|rendimento|rendimiento|eficiencia"
        r"|efici[eê]ncia|^[ηῃ]|[ηη]\s*(?:\[?%|pump|p\b|h\b|$|-|\()|\beta\b|^n\s*\[?%\]?$",
    ),
    (
        "input_power",
        r"\bp\s?_?1\b|input\s*power|power\s*input|aufnahmeleistung|leistungsaufnahme"
        r"|puissance\s*absorb[eé]e\s*r[eé]seau|electric\w*\s*power",
    ),
    (
        "shaft_power",
        r"\bp\s?_?[2z]?\s*(?:$|[\[\(]|=|-\s?q)|\bp_?[2z]\b|power|\bb\.?h\.?p\b\.?"
        r"|leistung|wellenleistung|puissance|potenza|potencia|pot[eê]ncia|^\s*n?\s*\[?kw\]?$|^hp$",
    ),
    (
        "differential_pressure",
        r"Δ\s?p|∆\s?p|\bdp\b|differential\s*press\w*|f[oö]rderdruck"
        r"|pression\s*diff\w*|pressione\s*diff\w*",
    ),
    (
        "head",
        r"total\s*head|\bhead\b|\bt\.?d\.?h\b|f[oö]rderh[oö]he|hauteur|h\.?m\.?t\b"
        r"|prevalenza|altura|altezza|carga|^h\s*(?:$|[\[\(]|-\s?q|=)|\bq\s?[-–/]\s?h\b|\bh\s?\(q\)",
    ),
)
_NAMED = tuple((q, re.compile(p, re.IGNORECASE)) for q, p in _NAMES)

_LIKE_ETA = ("n", "ŋ", "п", "ղ", "ή", "ῃ", "ƞ", "Ƞ")  # what readers make of a lone η
_DIGITS = str.maketrans({"O": "0", "o": "0", "Q": "0", "l": "1", "I": "1", "|": "1", "S": "5",
                         "B": "8", "Z": "2", "z": "2"})  # fmt: skip
_FRACTIONS = {"½": " 1/2", "¼": " 1/4", "¾": " 3/4", "⅛": " 1/8", "⅜": " 3/8", "⅝": " 5/8",
              "⅞": " 7/8", "⅓": " 1/3", "⅔": " 2/3"}  # fmt: skip

_SIGN = r"[Øø⌀∅Φφϕ]"
_LIKE_SIGN = r"[0OoDQ@689¢°©&$]"  # what readers make of the diameter sign
_NUMBER = r"\d{1,4}(?:[.,]\d{1,3})?"
_DIAMETER_WORD = (
    r"(?:dia(?:m(?:eter|[eè]tre|etro)?)?\.?|imp(?:eller)?\.?|laufrad|roue|girante"
    r"|[Dd]2(?=\s*[=:])|[Dd])"
)
_PERCENT = r"(?:%|٪|‰|°/o|º/o|o/o|0/0|°/0|9/6|o/0|0/o|9[6o]|0/|%o)"
_RPM = (r"(?:r\.?p\.?m\.?|r[/.]?min|1\s?/\s?min|[lI|!7]/min|/\s?min|min\s?[-–^]*\s?1|min⁻¹"
        r"|u/min|upm|tr/min|giri/min|g/min|rev/min|t/min|omw/min)")  # fmt: skip
_STAGE = r"(?:stages?|stg\.?|st\.?|stufen?|stufig|[eé]tages?|stadi|giranti|etapas?|est[aá]gios?)"


def quantity_named(text: str) -> str | None:
    """The quantity that a label or legend names; None if it names none."""
    clean = unicodedata.normalize("NFC", text).replace("\u03b7", "η").strip(" .:;,")
    return next((q for q, pattern in _NAMED if pattern.search(clean)), None)


def meanings(text: str) -> tuple[Meaning, ...]:
    """Every reading of a label, cheapest first; empty where it says nothing that is known here.

    Examples
    --------
    >>> [(m.kind, round(m.value, 4)) for m in meanings("Ø210")]
    [('diameter', 0.21)]
    >>> meanings("8404")[0].value
    0.404
    """
    clean = _plain(text)
    if not clean or len(clean) > 40:
        return ()
    found: list[Meaning] = []
    for read in (_percents, _speeds, _stages, _amounts, _diameters, _letters):
        found += read(clean, text.strip())
    quantity = quantity_named(text)
    if clean in _LIKE_ETA:
        found.append(Meaning("quantity", None, "", 0.5, False, text.strip(), "efficiency"))
    if quantity is not None and not any(m.plain for m in found):
        found.append(Meaning("quantity", None, "", 0.0, True, text.strip(), quantity))
    best: dict[tuple[object, ...], Meaning] = {}
    found = [m for m in found if m.value is None or m.value > 0]
    for m in sorted(found, key=lambda m: m.cost):
        best.setdefault((m.kind, m.value, m.quantity), m)
    return tuple(best.values())


def _plain(text: str) -> str:
    for sign, words in _FRACTIONS.items():
        text = text.replace(sign, words)
    text = unicodedata.normalize("NFKC", text.replace("″", '"').replace("''", '"'))
    text = text.replace("⁄", "/").replace("“", '"').replace("”", '"')
    return re.sub(r"\s+", " ", text).strip(" .:;,'`|_~-–—")


def _float(text: str) -> float:
    """A printed number: a comma or point before exactly three digits sets off thousands."""
    if re.fullmatch(r"[1-9]\d?[.,]\d{3}", text):
        return float(re.sub(r"[.,]", "", text))
    return float(text.replace(",", "."))


def _percents(clean: str, text: str) -> list[Meaning]:
    """ "75 %", "η = 75%", "75" (bare), "7596": a level or a share of the rated speed."""
    found = []
    body = re.sub(r"^(?:[ηῃn]|eta|eff\.?)\s*[=:]?\s*", "", clean, flags=re.IGNORECASE)
    digits = body.translate(_DIGITS) if re.match(r"[\dOolISBZ]", body) else body
    match = re.fullmatch(rf"({_NUMBER})\s?{_PERCENT}", body)
    if match and 0 < _float(match[1]) <= 130:
        cost = 0.0 if body.endswith("%") else 0.3
        found.append(Meaning("percent", _float(match[1]) / 100, "%", cost, True, text))
    match = re.fullmatch(rf"({_NUMBER})\s?(?:{_PERCENT}|[%°º*])", digits)
    if match and 0 < _float(match[1]) <= 130:
        cost = 0.3 if body.endswith("%") else 0.5
        found.append(Meaning("percent", _float(match[1]) / 100, "%", cost, True, text))
    match = re.fullmatch(r"(\d{2}(?:[.,]\d)?)", body)
    if match and 10 <= _float(match[1]) <= 99:
        found.append(Meaning("percent", _float(match[1]) / 100, "%", 0.6, False, text))
    return found


def _speeds(clean: str, text: str) -> list[Meaning]:
    found = []
    body = re.sub(r"^n\s*[=:≈~]?\s*", "", clean, flags=re.IGNORECASE)
    match = re.fullmatch(rf"(\d{{2,5}}|\d{{1,2}}[.,' ]\d{{3}})\s?{_RPM}", body, re.IGNORECASE)
    if match:
        rpm = float(re.sub(r"\D", "", match[1]))
        found.append(Meaning("speed", rpm / 60, "/min", 0.0, True, text))
    match = re.fullmatch(rf"({_NUMBER})\s?h[zx2]", body, re.IGNORECASE)
    if match and 5 <= _float(match[1]) <= 120:
        found.append(Meaning("speed", _float(match[1]), "Hz", 0.0, True, text))
    match = re.fullmatch(r"(\d{3,4}|\d[.,]\d{3})", body)
    if match and 200 <= (rpm := float(re.sub(r"\D", "", match[1]))) <= 7000:
        stated = body != clean
        found.append(Meaning("speed", rpm / 60, "/min", 0.1 if stated else 0.6, stated, text))
    return found


def _stages(clean: str, text: str) -> list[Meaning]:
    match = re.fullmatch(rf"(\d{{1,2}})\s?-?\s?{_STAGE}", clean, re.IGNORECASE) or re.fullmatch(
        r"[zi]\s?=\s?(\d{1,2})", clean
    )
    return [Meaning("stages", float(match[1]), "", 0.0, True, text)] if match else []


def _amounts(clean: str, text: str) -> list[Meaning]:
    """ "15 kW", "3 m": levels of lines of equal power or NPSH."""
    body = re.sub(r"^(?:P2?|NPSH[rR]?)\s*[=:]?\s*", "", clean)
    match = re.fullmatch(rf"({_NUMBER})\s?(kw|hp|bhp|ps|cv|ch|m|ft)\.?", body, re.IGNORECASE)
    if not match:
        return []
    word = match[2].lower()
    value = _float(match[1])
    if word in ("m", "ft"):
        code = "m" if word == "m" else "[ft_i]"
        return [Meaning("length", value * unit(code).factor, code, 0.0, True, text)]
    code = "[HP]" if word in ("hp", "bhp") else "kW"
    watts = value * (735.49875 if word in ("ps", "cv", "ch") else unit(code).factor)
    return [Meaning("power", watts, code, 0.0, True, text)]


def _diameters(clean: str, text: str) -> list[Meaning]:
    found = []

    def add(value: float, code: str, cost: float, plain: bool) -> None:
        si = value * unit(code).factor
        if 0.03 <= si <= 2.5:
            found.append(Meaning("diameter", si, code, cost, plain, text))

    signed = re.fullmatch(rf"(?:{_SIGN}|{_DIAMETER_WORD})\s*[=:.]?\s*(.+)", clean)
    body = signed[1] if signed else clean
    said = signed is not None
    if inches := _inches(body):
        value, quoted = inches
        add(value, "[in_i]", 0.0 if said or quoted else 0.3, said or quoted)
    match = re.fullmatch(rf"({_NUMBER})\s?(mm|cm|in\.?|inch(?:es)?)", body, re.IGNORECASE)
    if match:
        code = {"m": "mm", "c": "cm", "i": "[in_i]"}[match[2][0].lower()]
        add(_float(match[1]), code, 0.0, True)
    match = re.fullmatch(r"([1-9]\d{1,3}(?:[.,]\d)?)\s?[-/]\s?(\d{2,4})(?:\s?mm)?", body)
    if match and abs(float(match[2]) / _float(match[1]) - 1) < 0.25:  # a stepped trim
        add(_float(match[1]), "mm", 0.2, said)
    number = re.fullmatch(r"(\d{2,4}(?:[.,]\d)?)", body)
    if number:
        value = float(number[1].replace(",", "."))
        bare = 0.3 if value < 1000 else 0.9
        add(value, "mm", (0.0 if said else bare) + (0.6 if value < 60 else 0.0), said)
    found += _bent_diameters(body if said else clean, text, said)
    return found


def _bent_diameters(clean: str, text: str, said: bool) -> list[Meaning]:
    """Readings of a diameter whose sign was taken for another character, or whose digits were."""
    found = []
    match = re.fullmatch(rf"{_LIKE_SIGN}\s?[=.:]?\s?(\d{{2,4}}(?:[.,]\d)?)(\s?mm)?", clean)
    if match and not said and not match[1].startswith("0"):
        value = float(match[1].replace(",", "."))
        if 30 <= value <= 1500:
            found.append(Meaning("diameter", value / 1000, "mm", 0.5, False, text))
    digits = r"\d" if said else r"\d.*\d"
    if re.search(digits, clean) and re.fullmatch(r"[\dOoQlI|SBZz]{2,5}", clean):
        digits = clean.translate(_DIGITS)
        if digits != clean:
            for body, cost in [(digits, 0.4)] if said else [(digits, 0.7), (digits[1:], 0.8)]:
                if 2 <= len(body) <= 4 and not body.startswith("0") and 60 <= int(body) <= 1500:
                    found.append(Meaning("diameter", int(body) / 1000, "mm", cost, False, text))
    return found


def _inches(body: str) -> tuple[float, bool] | None:
    """Inches of "8 1/2", '8.5"', "10-3/4 in"; and whether a sign or word says inches."""
    quoted = bool(re.search(r"(\"|\bin\b\.?|inch|zoll)$", body, re.IGNORECASE))
    bare = re.sub(r"\s*(\"|\bin\b\.?|inch(?:es)?|zoll)$", "", body, flags=re.IGNORECASE)
    match = re.fullmatch(r"(\d{1,2})[ -]\s?(\d{1,2})/(2|4|8|16|32|3)", bare)
    if match and int(match[2]) < int(match[3]):
        return int(match[1]) + int(match[2]) / int(match[3]), quoted
    match = re.fullmatch(r"(\d{1,2})([137])/(2|4|8)", bare)
    if match and quoted and int(match[2]) < int(match[3]):  # the blank was lost
        return int(match[1]) + int(match[2]) / int(match[3]), quoted
    match = re.fullmatch(r"(\d{1,2}(?:[.,]\d{1,3})?)", bare)
    if (
        match
        and (quoted or re.search(r"[.,]", bare))
        and 2 <= float(match[1].replace(",", ".")) <= 60
    ):
        return float(match[1].replace(",", ".")), quoted
    return None


def _letters(clean: str, text: str) -> list[Meaning]:
    """A trim letter or code: names a line, and no diameter is made of it."""
    if re.fullmatch(r"[A-HKMNPRSXYZ][1-9]?'?|II|III|IV|[①-⑨]", clean) and not quantity_named(clean):
        return [Meaning("letter", None, "", 0.4, False, text)]
    return []
