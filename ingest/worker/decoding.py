"""From messages to readings: what can't be read is kept with its reason, and nothing else stops."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import structlog

from ingest.payloads.reason import PayloadError
from ingest.store.refused import Refusal

if TYPE_CHECKING:
    from collections.abc import Sequence

    from ingest.mqtt import Received
    from ingest.payloads.decoder import Decoder
    from ingest.reading import ChannelReading, RawReading

log = structlog.get_logger(__name__)


@dataclass(slots=True)
class Decoded:
    """What a run of messages held."""

    readings: list[RawReading] = field(default_factory=list)
    channels: list[ChannelReading] = field(default_factory=list)
    refusals: list[Refusal] = field(default_factory=list)
    counts: Counter[str] = field(default_factory=Counter)


def decode(decoder: Decoder, messages: Sequence[Received]) -> Decoded:
    """Decode *messages* in order."""
    result = Decoded()
    readings = result.readings
    for message in messages:
        try:
            found = decoder.decode(
                message.topic,
                message.payload,
                received_at_us=message.received_at_us,
                is_retained=message.is_retained,
            )
        except PayloadError as error:
            _refuse(result, message, (error.code, error.where, error.found, error.allowed), is_partly_kept=False)
            continue
        except Exception as error:
            # A decoder that fails in a way it should not must not take the worker down with it, again and again, at each redelivery.
            log.exception("decoder failed", topic=message.topic)
            _refuse(result, message, ("internal", "decoder", repr(error), "no failure"), is_partly_kept=False)
            continue
        for remark in found.remarks:
            _refuse(result, message, (remark.code, remark.where, remark.found, remark.allowed), is_partly_kept=True)
        readings.extend(found.readings)
        result.channels.extend(found.channels)
    result.counts["messages"] = len(messages)
    return result


def _refuse(result: Decoded, message: Received, details: tuple[str, str, object, str], *, is_partly_kept: bool) -> None:
    code, where, found, allowed = details
    result.refusals.append(
        Refusal(
            topic=message.topic,
            received_at=message.received_at_us,
            payload=message.payload,
            code=code,
            place=where,
            found=str(found),
            allowed=allowed,
            is_partly_kept=is_partly_kept,
        )
    )
    result.counts["remarks" if is_partly_kept else "refused"] += 1
    result.counts[f"refused.{code}"] += 1
