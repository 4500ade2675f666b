"""The one-time code in a message: it names call-out, call, person and expiry, and only this site can have made it.

A code is written ``PERSON.CALL_OUT.CALL.SEAL``; the seal is the time of expiry and the first half of an HMAC over
all of it, in base 32.

References
----------
.. [1] H. Krawczyk, M. Bellare, R. Canetti, HMAC: Keyed-Hashing for Message Authentication, RFC 2104, 1997, section 5
       (truncated output: not less than half the hash, not less than 80 bits). From memory.
.. [2] S. Josefsson, The Base16, Base32, and Base64 Data Encodings, RFC 4648, 2006, section 6.
"""

from __future__ import annotations

import base64
import binascii
import hashlib
import hmac
import re
import secrets
import struct
from typing import TYPE_CHECKING, NamedTuple

from analysis.errors import EuryhaleError
from ingest.clock import MICROSECONDS_PER_SECOND
from ingest.secrets import MissingSecretError, read_secret, write_secret

if TYPE_CHECKING:
    from pathlib import Path

KEY_NAME = "answer-key"
SEAL_BYTES = 16
VALID_S = 12 * 3600.0
"""How long a code can be used. A later call carries a code of its own."""
_MINUTE_US = 60 * MICROSECONDS_PER_SECOND
_CODE = re.compile(r"([a-z][a-z0-9-]{0,39})\.([0-9]{1,15})\.([0-9]{1,9})\.([a-z2-7]{32})")


class CodeError(EuryhaleError):
    """A code that is not believed; `reason` is a stable word: unreadable, wrong_seal, expired, unknown, used."""

    def __init__(self, reason: str) -> None:
        self.reason = reason
        super().__init__(f"the code of an answer is not believed: {reason}")


class Code(NamedTuple):
    """What a code names. [us UTC]"""

    person: str
    call_out: int
    call: int
    expires_at_us: int


def key_of(site_file: Path) -> bytes:
    """Return the site's key, made at the first start and kept with its secrets."""
    try:
        text = read_secret(KEY_NAME, site_file=site_file)
    except MissingSecretError:
        text = secrets.token_hex(32)
        write_secret(KEY_NAME, text, site_file=site_file)
    return text.strip().encode()


def written(code: Code, key: bytes) -> str:
    """Return a code as it stands in a message; its expiry is kept to the minute."""
    minute = struct.pack(">I", code.expires_at_us // _MINUTE_US)
    seal = base64.b32encode(minute + _mac(code, minute, key)).decode().lower()
    return f"{code.person}.{code.call_out}.{code.call}.{seal}"


def verified(text: str, key: bytes, *, now_us: int) -> Code:
    """Return what a code names. This is the one place where a code is believed.

    Parameters
    ----------
    text : str
        What came; blanks, capitals and words around the code do no harm.
    key : bytes
        From `key_of`.
    now_us : int
        The present time. [us UTC]

    Raises
    ------
    CodeError
        If it is not a code, not this site's, or too old. Whether it was used is the store's to say.
    """
    found = _CODE.search(text.lower())
    if found is None:
        raise CodeError("unreadable")
    person, call_out, call, seal = found.groups()
    try:
        content = base64.b32decode(seal.upper())
    except binascii.Error as error:
        raise CodeError("unreadable") from error
    minute, mac = content[:4], content[4:]
    code = Code(person, int(call_out), int(call), struct.unpack(">I", minute)[0] * _MINUTE_US)
    if not hmac.compare_digest(mac, _mac(code, minute, key)):
        raise CodeError("wrong_seal")
    if code.expires_at_us <= now_us:
        raise CodeError("expired")
    return code


def _mac(code: Code, minute: bytes, key: bytes) -> bytes:
    content = f"{code.person}|{code.call_out}|{code.call}|".encode() + minute
    return hmac.new(key, content, hashlib.sha256).digest()[:SEAL_BYTES]
