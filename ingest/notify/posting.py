"""One attempt at one message, through apprise: bounded in time, redirects refused, no throttle but our own.

What apprise does behind one's back, and what is done about it here:

- a redirect counts as delivered though the message is gone: not followed, so it is a failure;
- mail waits 5.5 s between messages: switched off, the sender has a limiter of its own;
- a bad address is only refused when it is added: told as a failed attempt.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import apprise

from ingest.notify.sending import Posted
from ingest.secrets import MissingSecretError, read_secret

if TYPE_CHECKING:
    from pathlib import Path

    from ingest.notify.sending import Parcel

CONNECT_S = 5.0
READ_S = 8.0
WHOLE_S = 30.0
LONGEST_DETAIL = 200


class ApprisePost:
    """Sends parcels to the addresses that are kept as secrets beside a site file.

    The address is read anew for each attempt: a corrected secret is taken up without a restart.
    """

    def __init__(self, site_file: Path) -> None:
        self._site_file = site_file
        self._asset = apprise.AppriseAsset(http_redirects=False, app_id="euryhale", app_desc="euryhale", app_url="")

    def __call__(self, parcel: Parcel) -> Posted:
        """Try once to deliver *parcel*."""
        service, fault = self._service(parcel.address)
        if service is None:
            return Posted(is_delivered=False, detail=fault)
        sending = apprise.Apprise(asset=self._asset)
        sending.add(service)
        kind = apprise.NotifyType.WARNING if parcel.is_alarm else apprise.NotifyType.INFO
        result = sending.notify(
            body=parcel.body, title=parcel.title, notify_type=kind, body_format="text", timeout=WHOLE_S
        )
        if result.status == apprise.AppriseResultStatus.SUCCESS and result.success_count == 1:
            return Posted(is_delivered=True, detail="")
        return Posted(is_delivered=False, detail=_detail(result, service))

    def fault_of(self, address: str) -> str:
        """Return what is wrong with the address in a secret, empty if nothing is; nothing is sent."""
        return self._service(address)[1]

    def _service(self, address: str) -> tuple[Any, str]:
        """Return the service behind an address, or None and why there is none."""
        try:
            url = read_secret(address, site_file=self._site_file).strip()
        except MissingSecretError as error:
            return None, str(error)
        except (OSError, ValueError) as error:
            return None, f"secret {address!r} cannot be read: {type(error).__name__}"
        service = apprise.Apprise.instantiate(url, asset=self._asset)
        if service is None:
            return None, f"the address in secret {address!r} is none that apprise knows"
        service.request_rate_per_sec = 0
        service.socket_connect_timeout = min(service.socket_connect_timeout, CONNECT_S)
        service.socket_read_timeout = min(service.socket_read_timeout, READ_S)
        return service, ""


def _detail(result: Any, service: Any) -> str:
    """Return why an attempt failed; the address, which is a secret, never stands in it."""
    said = [str(getattr(entry, "message", entry)) for entry in result.logs()]
    text = f"{result.status.name.lower()}: {said[-1] if said else 'no word from the service'}"
    return text.replace(service.url(), "(address)")[:LONGEST_DETAIL]
