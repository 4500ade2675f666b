"""An alarm in words: what is wrong, what to do first, how long there is."""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import UTC, tzinfo

from ingest.words import numbers, times
from ingest.words.language import ENGLISH, Language, fullest

QUANTITY_OF_CODE = {
    "salinity_low": "salinity",
    "salinity_high": "salinity",
    "temperature_low": "temperature",
    "temperature_high": "temperature",
    "changing_too_fast": "salinity",
    "heading_out_of_range": "salinity",
    "leaving_optimal_band": "salinity",
    "off_plan": "salinity",
}

FAST_PER_H = 12.0
"""From here on a rate is said for ten minutes: nobody pictures 60 an hour."""


@dataclass(frozen=True, slots=True)
class AlarmFacts:
    """What is known about one alarm; everything but the code may be missing (NaN, empty or None).

    Attributes
    ----------
    code : str
        The condition, a key of the language's table ALARMS.
    quantity : str
        Which quantity value, limit, set point and rate are in; by default that of the code.
    rate_per_h : float
        Signed: negative is falling. [unit of the quantity per hour]
    difference_percent : float
        How far two sensors are apart. [%]
    time_left_min, time_left_low_min, time_left_high_min : float
        Until `next_limit`, with its range. [min]
    next_limit : float
        The limit towards which it goes, where it is not `limit` itself.
    clock_offset_s : float
        How far a clock is off. [s]
    """

    code: str
    quantity: str = ""
    tank: str = ""
    sensor: str = ""
    other_sensor: str = ""
    ion: str = ""
    driver: str = ""
    reason: str = ""
    channel: str = ""
    value: float = math.nan
    limit: float = math.nan
    set_point: float = math.nan
    band: float = math.nan
    rate_per_h: float = math.nan
    stress: float = math.nan
    difference_percent: float = math.nan
    time_left_min: float = math.nan
    time_left_low_min: float = math.nan
    time_left_high_min: float = math.nan
    next_limit: float = math.nan
    clock_offset_s: float = math.nan
    since_us: int | None = None


@dataclass(frozen=True, slots=True)
class AlarmWords:
    """One alarm as people read it."""

    title: str
    what: str
    do: str
    left: str

    @property
    def sentence(self) -> str:
        """Return what is wrong and what to do, as one line."""
        return f"{self.what} {self.do}"


def alarm_words(facts: AlarmFacts, *, now_us: int = 0, zone: tzinfo = UTC, language: Language = ENGLISH) -> AlarmWords:
    """Return the words for *facts*; a code that the language does not know still says that a look is needed."""
    title, whats, dos = language.ALARMS.get(facts.code, language.ALARMS["unknown"])
    values = _values(facts, now_us, zone, language)
    return AlarmWords(
        title=title,
        what=fullest(whats, values),
        do=fullest(dos, values),
        left=_capitalised(_left(facts, language)),
    )


def _capitalised(text: str) -> str:
    return text[:1].upper() + text[1:]


def priority_word(priority: str, *, language: Language = ENGLISH) -> str:
    """Return "urgent", "soon" or "note" in the language."""
    return str(language.PRIORITIES[priority][0])


def priority_letter(priority: str, *, language: Language = ENGLISH) -> str:
    """Return the letter on the pennant."""
    return str(language.PRIORITIES[priority][1])


def stress_band(stress: float, *, language: Language = ENGLISH) -> str:
    """Return the word for a stress of 0 to 100; empty for NaN."""
    return next((str(word) for top, word in language.STRESS_BANDS if stress < top), "")


def _values(facts: AlarmFacts, now_us: int, zone: tzinfo, language: Language) -> dict[str, str]:
    kind = facts.quantity or QUANTITY_OF_CODE.get(facts.code, "salinity")
    values = {
        name: text
        for name, text in (
            ("code", facts.code.replace("_", " ")),
            ("tank", facts.tank),
            ("sensor", facts.sensor),
            ("other_sensor", facts.other_sensor),
            ("ion", facts.ion),
            ("reason", facts.reason),
            ("channel", facts.channel),
            ("driver", language.STRAINS.get(facts.driver, facts.driver)),
            ("left", _left(facts, language)),
        )
        if text
    }
    for name in ("value", "limit", "set_point"):
        number = getattr(facts, name)
        if math.isfinite(number):
            values[name] = _with_unit(number, kind, language, is_set=name != "value")
    if math.isfinite(facts.set_point) and math.isfinite(facts.band):
        values["set_point"] = numbers.set_point(facts.set_point, facts.band, kind, language=language)
    if math.isfinite(facts.rate_per_h):
        values |= _rate(facts, kind, language)
    if math.isfinite(facts.stress):
        values["stress"] = numbers.number(facts.stress, 0, language=language)
        values["stress_band"] = stress_band(facts.stress, language=language)
    if math.isfinite(facts.difference_percent):
        values["difference"] = f"{numbers.number(abs(facts.difference_percent), 0, language=language)} %"
    if math.isfinite(facts.clock_offset_s):
        values["offset"] = times.duration(abs(facts.clock_offset_s), language=language)
    if facts.since_us is not None:
        values["since"] = times.moment(facts.since_us, zone, now_us=now_us or facts.since_us, language=language)
    return values


def _rate(facts: AlarmFacts, kind: str, language: Language) -> dict[str, str]:
    """Return the rate only when it points the way the code complains of: a recovering tank is not "turning fresh"."""
    falls = facts.rate_per_h < 0
    if (facts.code.endswith("_low") and not falls) or (facts.code.endswith("_high") and falls):
        return {}
    is_fast = abs(facts.rate_per_h) >= FAST_PER_H
    key, amount = ("per_ten_minutes", facts.rate_per_h / 6) if is_fast else ("per_hour", facts.rate_per_h)
    text = _with_unit(abs(amount), kind, language, is_set=False)
    if not any(digit in text for digit in "123456789"):
        return {}
    rate = str(language.TIMES[key]).format(n=text)
    return {"rate": rate, "falling" if falls else "rising": rate}


def _with_unit(value: float, kind: str, language: Language, *, is_set: bool) -> str:
    if not is_set:
        return numbers.quantity(value, kind, language=language)
    unit = numbers.unit_of(kind, language=language)
    return f"{numbers.plain(value, language=language)} {unit}".strip()


def _left(facts: AlarmFacts, language: Language) -> str:
    left = times.time_left(facts.time_left_min, facts.time_left_low_min, facts.time_left_high_min, language=language)
    if not left or not math.isfinite(facts.next_limit):
        return left
    kind = facts.quantity or QUANTITY_OF_CODE.get(facts.code, "salinity")
    limit = _with_unit(facts.next_limit, kind, language, is_set=True)
    return str(language.TIMES["until"]).format(left=left, quantity=language.QUANTITIES[kind], limit=limit)
