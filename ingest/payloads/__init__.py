"""From the bytes of a message to readings."""

from __future__ import annotations

from ingest.payloads.decoded import Decoded, Promise, Remark
from ingest.payloads.decoder import Decoder
from ingest.payloads.pairing import Pairing
from ingest.payloads.reason import PayloadError, Reason

__all__ = ["Decoded", "Decoder", "Pairing", "PayloadError", "Promise", "Reason", "Remark"]
