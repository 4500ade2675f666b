"""How the times of a table are written, and the way from text to a calendar time."""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from datetime import UTC, date, datetime
from functools import lru_cache
from math import inf

from ingest.clock import MICROSECONDS_PER_SECOND, to_microseconds

UNIX_FORMATS = {"unix_s": 1e6, "unix_ms": 1e3, "unix_us": 1.0}
_UNIX_SPANS = (("unix_s", 3e8, 5e9), ("unix_ms", 3e11, 5e12), ("unix_us", 3e14, 5e15))
_FIELDS = {
    "%Y": r"(?P<Y>\d{4})",
    "%y": r"(?P<y>\d{2})",
    "%m": r"(?P<m>\d{1,2})",
    "%d": r"(?P<d>\d{1,2})",
    "%H": r"(?P<H>\d{1,2})",
    "%I": r"(?P<I>\d{1,2})",
    "%M": r"(?P<M>\d{1,2})",
    "%S": r"(?P<S>\d{1,2})",
    "%f": r"(?P<f>\d{1,6})",
    "%p": r"(?P<p>[AaPp])\.?[Mm]\.?",
    "%b": r"(?P<b>[A-Za-z]{3})[a-z]*\.?",
}
_MONTHS = {name: number for number, name in enumerate(
    ("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec"), 1)}  # fmt: skip
_DATES = (
    "%d.%m.%Y",
    "%d/%m/%Y",
    "%m/%d/%Y",
    "%d-%m-%Y",
    "%m-%d-%Y",
    "%Y/%m/%d",
    "%Y.%m.%d",
    "%d %b %Y",
    "%d-%b-%Y",
    "%b %d %Y",
)
_TIMES = ("%H:%M", "%H:%M:%S", "%H:%M:%S.%f", "%I:%M %p", "%I:%M:%S %p", "%H:%M:%S,%f", "")
CANDIDATES = tuple(f"{day} {clock}".strip() for day in _DATES for clock in _TIMES)
ENOUGH = 0.5
"""Share of the first rows that must fit: a file may hold lines that are no readings. The best share wins."""
EARLY = 20
REMEMBERED = 100_000
_EPOCH_DAY = date(1970, 1, 1).toordinal()

Parsed = tuple[int, bool]
"""Microseconds since 1970, and whether they are UTC (else local time)."""
Parser = Callable[[str], Parsed]


def parser_of(time_format: str) -> Parser:
    """Return the function from a text in *time_format* to a time; it raises ValueError for any other text.

    Parameters
    ----------
    time_format : str
        iso, unix_s, unix_ms, unix_us, or a pattern of %Y %y %m %d %H %I %M %S %f %p %b.
    """
    if time_format == "iso":
        return _from_iso
    if time_format in UNIX_FORMATS:
        factor = UNIX_FORMATS[time_format]
        return lambda text: (round(float(text.replace(",", ".")) * factor), True)
    return _Pattern(time_format)


def _from_iso(text: str) -> Parsed:
    moment = datetime.fromisoformat(text.strip())
    if moment.tzinfo is not None:
        return to_microseconds(moment), True
    return to_microseconds(moment.replace(tzinfo=UTC)), False


class _Pattern:
    """A pattern of fields, with single or double digits, and one or more blanks where the pattern has one.

    Days and times of day come again and again in a table: each is worked out once.
    """

    def __init__(self, time_format: str) -> None:
        day, clock = _split(time_format.strip())
        self._clock_parts = len(clock.split())
        self._day_us = lru_cache(maxsize=REMEMBERED)(_day_from(_expression(day)))
        self._clock_us = lru_cache(maxsize=REMEMBERED)(_clock_from(_expression(clock)))

    def __call__(self, text: str) -> Parsed:
        if not self._clock_parts:
            return self._day_us(text.strip()), False
        day, *clock = text.rsplit(None, self._clock_parts)
        return self._day_us(day) + self._clock_us(" ".join(clock)), False


def _split(time_format: str) -> tuple[str, str]:
    """Return the part of the day and the part of the time of day of a pattern; they are parted by a blank, or T."""
    match = re.search(r"[ T](?=%[HI])", time_format)
    if match is None:
        return time_format, ""
    if match[0] == "T":
        raise ValueError("T between date and time is ISO 8601; give iso as the format")
    return time_format[: match.start()], time_format[match.end() :]


def _expression(pattern: str) -> re.Pattern[str]:
    expression, position = "", 0
    for match in re.finditer(r"%.", pattern):
        if match[0] not in _FIELDS:
            raise ValueError(f"fields of a time: {' '.join(_FIELDS)}; {match[0]} is none")
        expression += _literal(pattern[position : match.start()]) + _FIELDS[match[0]]
        position = match.end()
    return re.compile(expression + _literal(pattern[position:]) + r"\s*\Z")


def _day_from(expression: re.Pattern[str]) -> Callable[[str], int]:
    names = expression.groupindex
    if "d" not in names or not names.keys() & {"Y", "y"} or not names.keys() & {"m", "b"}:
        raise ValueError("a pattern with day, month and year: %d, %m (or %b), %Y (or %y), and a blank before %H")

    def day_us(text: str) -> int:
        match = expression.match(text.lstrip())
        if match is None:
            raise ValueError(text)
        part = match.groupdict()
        year = int(part["Y"]) if "Y" in part else 2000 + int(part["y"])
        month = int(part["m"]) if "m" in part else _MONTHS[part["b"].lower()]
        days = date(year, month, int(part["d"])).toordinal() - _EPOCH_DAY
        return days * 86_400 * MICROSECONDS_PER_SECOND

    return day_us


def _clock_from(expression: re.Pattern[str]) -> Callable[[str], int]:
    def clock_us(text: str) -> int:
        match = expression.match(text)
        if match is None:
            raise ValueError(text)
        part = match.groupdict()
        hour = int(part.get("H", 0))
        if "I" in part:
            hour = int(part["I"]) % 12 + (12 if part.get("p", "a").lower() == "p" else 0)
        minute, second = int(part.get("M", 0)), int(part.get("S", 0))
        if hour > 23 or minute > 59 or second > 59:
            raise ValueError(text)
        seconds = (hour * 60 + minute) * 60 + second
        return seconds * MICROSECONDS_PER_SECOND + int(part.get("f", "0").ljust(6, "0"))

    return clock_us


def _literal(text: str) -> str:
    return r"\s+".join(re.escape(part) for part in text.split(" ")) if text else ""


def format_of(texts: Sequence[str]) -> str:
    """Return the format in which all of *texts* are written, but for a few.

    Raises
    ------
    ValueError
        With words on what would be allowed: no format fits, day and month cannot be told apart, the year has
        two digits.
    """
    samples = [text for text in (text.strip() for text in texts) if text]
    if not samples:
        raise ValueError("times, where there are none")
    if _share("iso", samples) >= ENOUGH and not samples[0].isdigit():
        return "iso"
    for name, low, high in _UNIX_SPANS:
        if _share(name, samples, low=low * UNIX_FORMATS[name], high=high * UNIX_FORMATS[name]) >= ENOUGH:
            return name
    shares = {candidate: _share(candidate, samples) for candidate in CANDIDATES}
    best = max(shares.values())
    fitting = [candidate for candidate in CANDIDATES if shares[candidate] == best]
    if best >= ENOUGH:
        if len({candidate[:8] for candidate in fitting} & {"%d/%m/%Y", "%m/%d/%Y", "%d-%m-%Y", "%m-%d-%Y"}) > 1:
            raise ValueError(f"day and month that can be told apart; give the format: {' or '.join(fitting[:2])}")
        return fitting[0]
    if re.match(r"\d{1,2}[./-]\d{1,2}[./-]\d{2}(\D|\Z)", samples[0]):
        raise ValueError("years of four digits; or give the format, such as %d.%m.%y %H:%M")
    raise ValueError("times in a known format; or give the format, such as %d.%m.%Y %H:%M")


def _share(time_format: str, texts: Sequence[str], *, low: float = -inf, high: float = inf) -> float:
    """Return the share of *texts* that are times in a format, between two limits."""
    parse, fitting = parser_of(time_format), 0
    for number, text in enumerate(texts, 1):
        try:
            fitting += low <= parse(text)[0] <= high
        except (ValueError, OverflowError, KeyError):
            if number == EARLY and not fitting:
                return 0.0
    return fitting / len(texts)
