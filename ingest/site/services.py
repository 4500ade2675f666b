"""What the site runs: the store, the way in, the broker, the board."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

from pydantic import BeforeValidator, Field

from ingest.site.section import Section, Slug, Words, one_of, quantity, slug, whole, words


class Store(Section):
    """The section `store:`."""

    path: Words = words("folder of the store, relative to the site file", "run/store")
    hot_days: int = whole(7, 100_000, 400)
    commit_interval_s: float = quantity(0.001, 5, "s", 0.02)

    def folder(self, site_file: Path) -> Path:
        """Return the store's folder, which is relative to the folder of *site_file*."""
        return (site_file.parent / self.path).resolve()


class Intake(Section):
    """The section `intake:`: what is let in."""

    largest_payload_kB: float = quantity(0.1, 4096, "kB of 1024 bytes", 64)  # noqa: N815 - the unit keeps its capital

    @property
    def largest_payload_bytes(self) -> int:
        """Return the size above which a payload is refused unread."""
        return round(self.largest_payload_kB * 1024)


def _version_words(value: object) -> object:
    """Let a bare 5 stand for "5": YAML reads it as a number."""
    return str(value) if isinstance(value, int) and not isinstance(value, bool) else value


class Broker(Section):
    """The section `broker:`. A secret is named here and never written here."""

    host: Words = words("host name or address of the broker", "127.0.0.1")
    port: int = whole(1, 65535, 1883)
    protocol: Annotated[Literal["3.1.1", "5"], BeforeValidator(_version_words)] = one_of("3.1.1", "5", default="3.1.1")
    tls: bool = Field(default=False, description="true or false")
    ca_file: Words | None = words("file of the certificate authority, relative to the site file", None)
    user: Words | None = words("user name at the broker", None)
    secret: Slug | None = slug("name of a secret set with `euryhale secret set`", None)
    client_id: Words | None = words("MQTT client id (default: euryhale- and the id of the site)", None)


class Board(Section):
    """The section `board:`."""

    host: Words = words("address to listen on", "127.0.0.1")
    port: int = whole(1, 65535, 8501)
    allowed_hosts: tuple[Words, ...] = Field(default=("127.0.0.1", "localhost"), description="a list of host names")
    public_url: Words | None = words("address under which people outside reach the board", None)


class CentralStore(Section):
    """The section `central:`: an InfluxDB that receives everything of this and other sites. The site works without it."""

    url: Words = words("address of the central InfluxDB, such as https://central.example:8086")
    bucket: Words = words("bucket (or database) that takes the lines")
    organisation: Words | None = words("organisation, where the server has any", None)
    token_secret: Slug | None = slug("name of the secret that holds the token", None)
    ca_file: Words | None = words("file of the certificate authority, relative to the site file", None)
    largest_queue_MB: float = quantity(1, 1_000_000, "MB", 2000)
