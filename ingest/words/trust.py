"""Flags, qualities and refusals in words."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from analysis.flags import words as flag_codes
from ingest.words.language import ENGLISH, Language, fields

if TYPE_CHECKING:
    from collections.abc import Mapping


def flag_words(flags: int, *, language: Language = ENGLISH) -> list[str]:
    """Return the flags of a reading in words; a flag newer than the language keeps its code."""
    return [str(language.FLAGS.get(code, code.replace("_", " "))) for code in flag_codes(flags)]


def quality_word(quality: int, *, language: Language = ENGLISH) -> str:
    """Return the QARTOD quality 1, 2, 3, 4 or 9 as an answer to "can I believe it?"."""
    return str(language.QUALITIES[int(quality)])


def belief_word(belief: int, *, language: Language = ENGLISH) -> str:
    """Return what to do with a sensor: believe, doubt, do not use."""
    return str(language.SENSOR_BELIEFS[int(belief)])


def finding_words(reason: Mapping[str, Any], *, language: Language = ENGLISH) -> str:
    """Return one reason of an assessment (`finding` and `figures`, as the store keeps them) in words."""
    templates = language.SENSOR_FINDINGS.get(reason["finding"], language.SENSOR_FINDINGS["unknown"])
    figures = {name: value for name, value in reason["figures"].items() if value is not None}
    chosen = next((text for text in templates if fields(text) <= figures.keys()), templates[-1])
    return str(chosen).format(**figures) if fields(str(chosen)) <= figures.keys() else str(reason["finding"])


def refusal_words(reason_code: str, *, language: Language = ENGLISH) -> str:
    """Return why a payload was not used."""
    return str(language.REFUSALS.get(reason_code, language.REFUSALS["unknown"]))


def command_words(state: str, reason: str = "", *, is_worker_running: bool = True, language: Language = ENGLISH) -> str:
    """Return what became of something a person asked for: waiting, applied, refused or expired."""
    if state == "waiting" and not is_worker_running:
        state = "no_worker"
    known = language.COMMAND_REASONS
    return str(language.COMMAND_STATES[state]).format(reason=known.get(reason, reason or known["unknown"]))
