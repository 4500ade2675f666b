"""The way in: topic and bytes to readings, built once for a site file."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ingest.payloads.json_object import json_route
from ingest.payloads.number import number_route
from ingest.payloads.pairing import Pairing
from ingest.payloads.reason import PayloadError, Reason, shown
from ingest.payloads.senml_pack import senml_route
from ingest.payloads.times import Window

if TYPE_CHECKING:
    from ingest.payloads.decoded import Decoded, Route
    from ingest.site.models import Site


class Decoder:
    """Decodes every message of a site. Not for use by several threads at once.

    Parameters
    ----------
    site : Site
        What is installed.
    pairing : Pairing, optional
        The waiting halves of readings that come as plain numbers, as last committed.

    Attributes
    ----------
    pairing : Pairing
        The waiting halves. Commit `pairing.to_dict()` with each block, before its acknowledgement.
    """

    def __init__(self, site: Site, *, pairing: Pairing | None = None) -> None:
        self.pairing = pairing if pairing is not None else Pairing(site)
        self._largest = site.intake.largest_payload_bytes
        self._routes = _routes(site, self.pairing)

    @property
    def topics(self) -> tuple[str, ...]:
        """Return every topic to subscribe to."""
        return tuple(self._routes)

    def decode(self, topic: str, payload: bytes, *, received_at_us: int, is_retained: bool = False) -> Decoded:
        """Return the readings of one message.

        Parameters
        ----------
        topic : str
            As delivered by the broker.
        payload : bytes
            As delivered by the broker.
        received_at_us : int
            Microseconds since 1970, UTC.
        is_retained : bool
            Whether the broker had kept the message and delivered it at subscription.

        Returns
        -------
        Decoded
            Readings, channel readings, and a remark for every value that could not be used.

        Raises
        ------
        PayloadError
            If the payload gives nothing usable. Nothing else is ever raised.
        """
        route = self._routes.get(topic)
        if route is None:
            raise PayloadError(Reason.UNKNOWN_TOPIC, shown(topic), "a message", "a topic that the site file names")
        if len(payload) > self._largest:
            found, allowed = f"{len(payload)} bytes", f"at most {self._largest} bytes"
            raise PayloadError(Reason.TOO_LARGE, shown(topic), found, allowed)
        return route(payload, received_at_us, is_retained)


def _routes(site: Site, pairing: Pairing) -> dict[str, Route]:
    """Return the decoder of each topic."""
    window = Window.of(site.identity.horizon)
    routes: dict[str, Route] = {}
    packs: dict[str, list[int]] = {}
    for index, sensor in enumerate(site.sensors):
        for topic, name in sensor.topics().items():
            if sensor.payload == "json":
                routes[topic] = json_route(sensor, index=index, window=window)
            elif sensor.payload == "number":
                routes[topic] = number_route(sensor, index=index, name=name, pairing=pairing)
            else:
                packs.setdefault(topic, []).append(index)
    for topic, indices in packs.items():
        routes[topic] = senml_route(site.sensors, indices=indices, window=window)
    return routes
