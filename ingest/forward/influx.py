"""The central store as InfluxDB: writes by the v2 write interface, questions in InfluxQL, the one language that 1, 2 and 3 serve."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import urllib3
from influxdb_client.client.influxdb_client import InfluxDBClient
from influxdb_client.client.write_api import SYNCHRONOUS
from influxdb_client.domain.write_precision import WritePrecision
from influxdb_client.rest import ApiException

from ingest.forward.central import CentralUnreachableError, LinesRefusedError

if TYPE_CHECKING:
    from collections.abc import Sequence

    from ingest.forward.central import CentralAccess

CLIENT_ERRORS = range(400, 500)
LATER = frozenset({401, 403, 404, 408, 429})
"""Answers that a person or time can put right (token, bucket, too many requests): the lines are good and wait."""


class InfluxCentral:
    """A connection to an InfluxDB.

    Writes are synchronous: the client library's batching mode keeps lines in memory and loses them in a long outage.
    """

    def __init__(self, access: CentralAccess) -> None:
        self._access = access
        self._client = InfluxDBClient(
            url=access.url,
            token=access.token,
            org=access.organisation or "-",
            timeout=round(access.timeout_s * 1000),
            verify_ssl=True,
            ssl_ca_cert=None if access.ca_file is None else str(access.ca_file),
            enable_gzip=False,
        )
        self._writer = self._client.write_api(write_options=SYNCHRONOUS)

    def write(self, lines: Sequence[str]) -> None:
        """Write *lines* and wait for the server's yes.

        Raises
        ------
        CentralUnreachableError
            If the server does not answer, is busy, or does not know this token or bucket.
        LinesRefusedError
            If it has read the lines and refuses them; what was good in them is stored.
        """
        body = "\n".join(lines).encode()
        try:
            self._writer.write(bucket=self._access.bucket, record=body, write_precision=WritePrecision.US)  # type: ignore[arg-type]
        except ApiException as error:
            reason = f"{error.status} {error.reason}: {str(error.body)[:300]}"
            if error.status in CLIENT_ERRORS and error.status not in LATER:
                raise LinesRefusedError(f"the central store refuses lines: {reason}") from error
            raise CentralUnreachableError(f"the central store answers {reason}") from error
        except (urllib3.exceptions.HTTPError, OSError) as error:
            raise CentralUnreachableError(
                f"the central store at {self._access.url} is out of reach: {error}"
            ) from error

    def ask(self, question: str) -> list[dict[str, Any]]:
        """Return the rows that answer an InfluxQL question; tags stand beside the fields, times in microseconds UTC.

        Raises
        ------
        CentralUnreachableError
            If the server does not answer, or answers with an error.
        """
        try:
            answer = self._client.api_client.call_api(  # type: ignore[no-untyped-call]
                "/query",
                "GET",
                query_params=[("db", self._access.bucket), ("q", question), ("epoch", "u")],
                header_params={"Authorization": f"Token {self._access.token}"} if self._access.token else {},
                response_type=object,
                _return_http_data_only=True,
            )
        except (ApiException, urllib3.exceptions.HTTPError, OSError) as error:
            raise CentralUnreachableError(f"the central store does not answer: {error}") from error
        return _rows(answer)

    def close(self) -> None:
        """Let go of the connection."""
        self._client.close()  # type: ignore[no-untyped-call]


def _rows(answer: Any) -> list[dict[str, Any]]:
    rows: list[dict[str, Any]] = []
    for result in answer.get("results", []):
        if "error" in result:
            raise CentralUnreachableError(f"the central store does not understand: {result['error']}")
        for series in result.get("series", []):
            tags = series.get("tags", {})
            rows += [{**tags, **dict(zip(series["columns"], values, strict=True))} for values in series["values"]]
    return rows
