"""Flags, qualities and refusals in words."""

from __future__ import annotations

from analysis.flags import words as flag_codes
from ingest.words.language import ENGLISH, Language


def flag_words(flags: int, *, language: Language = ENGLISH) -> list[str]:
    """Return the flags of a reading in words; a flag newer than the language keeps its code."""
    return [str(language.FLAGS.get(code, code.replace("_", " "))) for code in flag_codes(flags)]


def quality_word(quality: int, *, language: Language = ENGLISH) -> str:
    """Return the QARTOD quality 1, 2, 3, 4 or 9 as an answer to "can I believe it?"."""
    return str(language.QUALITIES[int(quality)])


def refusal_words(reason_code: str, *, language: Language = ENGLISH) -> str:
    """Return why a payload was not used."""
    return str(language.REFUSALS.get(reason_code, language.REFUSALS["unknown"]))


def command_words(state: str, reason: str = "", *, is_worker_running: bool = True, language: Language = ENGLISH) -> str:
    """Return what became of something a person asked for: waiting, applied, refused or expired."""
    if state == "waiting" and not is_worker_running:
        state = "no_worker"
    known = language.COMMAND_REASONS
    return str(language.COMMAND_STATES[state]).format(reason=known.get(reason, reason or known["unknown"]))
