"""What the page says of the pump: rated speed, stages, suction sides, density, name."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterable, Sequence

from curvefit.notes import PumpNotes
from curvefit.records import Page, Panel, Pump, Word

__all__ = ["page_words", "read_pump", "speed_in", "with_notes"]

_NUMBER = r"(\d{1,2}[ .,']\d{3}|\d{3,5})"
_PER_MINUTE = (
    r"(?:r\.?\s?p\.?\s?m\b|r\s?/\s?min|[1lI|!]\s?/\s?m[il1]n|/\s?min\b|min\s?[-–^(]*\s?1|min⁻¹"
    r"|u\s?/\s?min|u\.?p\.?m\b|tr\s?/\s?min|giri|g\s?/\s?min|rev\s?/\s?min|t\s?/\s?min|omw/min)"
)
_SPEED = re.compile(rf"{_NUMBER}\s?{_PER_MINUTE}", re.IGNORECASE)
_N_SPEED = re.compile(rf"\b(?:n|speed|drehzahl|vitesse|velocit[aà]|velocidad)\s?[=:]\s?{_NUMBER}\b",
                      re.IGNORECASE)  # fmt: skip
_CUT_SPEED = re.compile(r"(\d{3,4})\s1/$")  # the rest of "1/min" was lost
_HERTZ = re.compile(r"\b(50|60)\s?hz\b", re.IGNORECASE)
_POLES = re.compile(r"\b([2468])\s?-?\s?(?:poles?\b|pol(?:ig|e)\b|p[oô]les?\b|poli\b|polos\b)",
                    re.IGNORECASE)  # fmt: skip
_STAGES = re.compile(
    r"\b(\d{1,2})\s?-?\s?(?:stages?\b|stufen?\b|stufig|[eé]tages?\b|stadi\b|etapas?\b)"
    r"|\b(?:stages?|stufen|stufenzahl|[eé]tages|stadi|etapas)\s?[=:]\s?(\d{1,2})\b",
    re.IGNORECASE,
)
_ONE_STAGE = re.compile(
    r"single.?stage|einstufig|monocellulaire|monostadio|monoetapa", re.IGNORECASE
)
_DOUBLE = re.compile(r"double.?suction|doppelstr[oö]mig|double.?entry", re.IGNORECASE)
_DENSITY = re.compile(
    r"(?:ρ|rho|density|dichte|densit[eéà]|densidad)\s?[=:]?\s?(\d{3,4}(?:[.,]\d)?)\s?kg",
    re.IGNORECASE,
)
_GRAVITY = re.compile(
    r"(?:s\.?\s?g\.?|sp\.?\s?gr\.?|specific\s+gravity)\s?[=:]\s?(\d[.,]\d{1,3})", re.IGNORECASE
)
_DENSITY_DM = re.compile(
    r"(?:ρ|rho|density|dichte|densit[eéà]|densidad)\s?[=:]?\s?(\d[.,]\d{1,3})\s?kg\s?/\s?(?:dm|l)",
    re.IGNORECASE,
)
_NAME = re.compile(r"^(?:pump(?:e|\s+type|\s+model)?|model|type|typ|pumpentyp|mod[eè]le|modell?o)"
                   r"\s?[:=]\s?(\S.{0,30})$", re.IGNORECASE)  # fmt: skip


def page_words(page: Page, panels: Sequence[Panel]) -> tuple[Word, ...]:
    """Every word of the page, once."""
    seen: dict[tuple[str, int, int], Word] = {}
    for word in (*page.words, *(w for p in panels for w in p.words)):
        x, y = word.centre
        seen.setdefault((word.text, round(x / 20), round(y / 20)), word)
    return tuple(seen.values())


def speed_in(text: str) -> float | None:
    """A speed of rotation [1/s] that a text states; None where it states none.

    Examples
    --------
    >>> speed_in("n = 1450 rpm") * 60
    1450.0
    """
    match = _SPEED.search(text) or _N_SPEED.search(text) or _CUT_SPEED.match(text.strip())
    if match is None:
        return None
    number = re.sub(r"\D", "", match[1])
    if len(number) == 5 and number.endswith("1"):  # 1450 1/min without its blank
        number = number[:4]
    rpm = float(number)
    if re.search(r"\dl/min", text.replace(" ", "")) and not _of_a_motor(rpm):
        return None  # litres
    return rpm / 60 if 100 <= rpm <= 30000 else None


def _of_a_motor(rpm: float) -> bool:
    """Whether an induction motor on 50 or 60 Hz runs at this speed: up to 8 % below synchronous."""
    synchronous = [120 * f / p for f in (50, 60) for p in (2, 4, 6, 8, 10, 12)]
    return any(0.92 * n <= rpm <= n for n in synchronous)


def read_pump(words: Iterable[Word], on_curves: frozenset[int] = frozenset()) -> Pump:
    """The pump as the words of a page describe it; words that label a curve (by id) aside.

    Notes
    -----
    A frequency with a number of poles gives the synchronous speed 120 f / poles, marked so.
    """
    texts = [w.text for w in words if id(w) not in on_curves]
    speeds = Counter(s for t in texts if (s := speed_in(t)) is not None)
    speed = speeds.most_common(1)[0][0] if len(speeds) == 1 else None
    basis = "printed" if speed is not None else None
    whole = " ".join(texts)
    if not speeds and (hertz := _HERTZ.search(whole)) and (poles := _POLES.search(whole)):
        speed, basis = 2 * float(hertz[1]) / float(poles[1]), "synchronous"
    stages = _STAGES.search(whole)
    count = int(stages[1] or stages[2]) if stages else 1 if _ONE_STAGE.search(whole) else None
    density = None
    if match := _DENSITY_DM.search(whole):
        density = 1000 * float(match[1].replace(",", "."))
    elif match := _DENSITY.search(whole):
        density = float(match[1].replace(",", "."))
    elif match := _GRAVITY.search(whole):
        density = 1000 * float(match[1].replace(",", "."))
    if density is not None and not 500 <= density <= 3000:
        density = None
    name = next((m[1].strip() for t in texts if (m := _NAME.match(t.strip()))), "1")
    sides = 2 if _DOUBLE.search(whole) else None
    return Pump(name, speed, basis, count, sides, density)  # type: ignore[arg-type]


def with_notes(pump: Pump, notes: PumpNotes) -> Pump:
    """The pump with what the notes give; the rest as read."""
    return Pump(
        notes.name,
        pump.speed_si if notes.speed_si is None else notes.speed_si,
        pump.speed_basis if notes.speed_si is None else "printed",
        pump.stages if notes.stages is None else notes.stages,
        pump.suction_sides if notes.suction_sides is None else notes.suction_sides,
        pump.density_si if notes.density_si is None else notes.density_si,
        pump.liquid if notes.liquid is None else notes.liquid,
        by="given",
    )
