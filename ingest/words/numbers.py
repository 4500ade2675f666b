"""Numbers as people read them: the unit always, never more digits than are true."""

from __future__ import annotations

import math

from ingest.words.language import ENGLISH, Language

USUAL_DECIMALS = {
    "salinity": 1,
    "g_kg": 1,
    "temperature": 1,
    "osmolality": 0,
    "conductivity": 2,
    "density": 1,
    "pressure": 1,
    "stress": 0,
    "percent": 0,
}
NO_VALUE = "–"


def decimals_of(uncertainty: float, *, usual: int) -> int:
    """Return how many decimals are true when a value is known to ± *uncertainty*.

    One digit of the uncertainty is kept, two when it begins with 1 (common practice in laboratories); never more
    than *usual* + 1 decimals.
    """
    if not math.isfinite(uncertainty) or uncertainty <= 0:
        return usual
    magnitude = math.floor(math.log10(uncertainty))
    leading = round(uncertainty / 10**magnitude, 6)
    return min(max(0, -magnitude + (1 if leading < 2 else 0)), usual + 1)


def number(value: float | None, decimals: int = 1, *, language: Language = ENGLISH) -> str:
    """Return *value* with *decimals*, the language's minus sign and decimal mark; a dash where there is none."""
    if value is None or not math.isfinite(value):
        return NO_VALUE
    text = f"{value:.{decimals}f}"
    if text.startswith("-"):
        text = text[1:] if not text.strip("-0.") else language.MINUS + text[1:]
    return text.replace(".", language.DECIMAL_MARK)


def plain(value: float | None, *, most_decimals: int = 2, language: Language = ENGLISH) -> str:
    """Return a set value (a limit, a set point) without trailing zeros: 31, 28.5."""
    text = number(value, most_decimals, language=language)
    mark = language.DECIMAL_MARK
    return text.rstrip("0").rstrip(mark) if mark in text else text


def quantity(
    value: float | None,
    kind: str,
    *,
    uncertainty: float = math.nan,
    has_unit: bool = True,
    language: Language = ENGLISH,
) -> str:
    """Return a measured value as it is read aloud: "27.4", "28.6 °C", "802 mOsm/kg", with "± 0.2" where known.

    Parameters
    ----------
    value : float or None
        The value, in the unit of *kind*.
    kind : str
        A key of `USUAL_DECIMALS`.
    uncertainty : float
        Half-width in the same unit; shown, and it decides the digits. NaN where not known.
    has_unit : bool
        False where the unit already stands beside it.
    """
    usual = USUAL_DECIMALS[kind]
    decimals = decimals_of(uncertainty, usual=usual)
    text = number(value, decimals, language=language)
    if text == NO_VALUE:
        return text
    if math.isfinite(uncertainty) and uncertainty > 0:
        text += f" ± {number(uncertainty, decimals, language=language)}"
    unit = language.UNITS[kind] if has_unit else ""
    return f"{text} {unit}" if unit else text


def unit_of(kind: str, *, language: Language = ENGLISH) -> str:
    """Return the unit of *kind* as printed; empty for practical salinity, which has none."""
    return str(language.UNITS[kind])


def set_point(target: float, band: float | None, kind: str = "salinity", *, language: Language = ENGLISH) -> str:
    """Return "31 ± 2", with its unit where it has one."""
    text = plain(target, language=language)
    if band is not None and math.isfinite(band):
        text += f" ± {plain(band, language=language)}"
    unit = language.UNITS[kind]
    return f"{text} {unit}" if unit else text
