"""In which encoding a table is written."""

from __future__ import annotations

import codecs
from typing import TYPE_CHECKING

from ingest.tables.error import TableError

if TYPE_CHECKING:
    from pathlib import Path

_MARKS = (
    (codecs.BOM_UTF8, "utf-8-sig"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)
_SPREADSHEETS = (b"PK\x03\x04", b"\xd0\xcf\x11\xe0")
_BLOCK_BYTES = 1 << 20
WESTERN = "cp1252"
"""What is assumed of a file that is not UTF-8: common practice of logger software."""


def encoding_of(path: Path) -> str:
    """Return the encoding of the file at *path*: by its byte order mark, else UTF-8 if all of it is, else cp1252.

    Raises
    ------
    TableError
        If the file is empty, a spreadsheet, or no text.
    """
    decoder = codecs.getincrementaldecoder("utf-8")()
    with path.open("rb") as file:
        first = file.read(_BLOCK_BYTES)
        _refuse_what_is_no_text(first, path.name)
        for mark, name in _MARKS:
            if first.startswith(mark):
                return name
        try:
            decoder.decode(first)
            while block := file.read(_BLOCK_BYTES):
                decoder.decode(block)
            decoder.decode(b"", final=True)
        except UnicodeDecodeError:
            return WESTERN
    return "utf-8"


def _refuse_what_is_no_text(first: bytes, name: str) -> None:
    found = ""
    if not first:
        found = "an empty file"
    elif first.startswith(_SPREADSHEETS):
        found = "a spreadsheet or an archive"
    elif b"\0" in first and not first.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        found = "bytes that are no text"
    if found:
        allowed = "delimited text; save a spreadsheet as CSV (UTF-8)"
        raise TableError(name, line=0, column="", found=found, allowed=allowed)
