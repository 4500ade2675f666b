"""What a person asks for on a page: put into the inbox, followed until it has an outcome."""

from __future__ import annotations

import time
from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING

from dashboard.browser.visit import Order
from ingest.store.errors import MissingStoreError, StoreBusyError

if TYPE_CHECKING:
    from dashboard.browser.access import Access

MOST_KEPT = 30
LOOK_EVERY_S = 0.1
PATIENCE = 8


def take(access: Access, act: Mapping[str, str]) -> Order:
    """Send the acknowledgement that *act* asks for and return the order to follow.

    Parameters
    ----------
    act : mapping
        Data of the pressed button: subject, condition, occurrence, and the client's UUID `command`.
    """
    order = Order(
        command_id=act["command"],
        subject=act["subject"],
        condition=act["condition"],
        occurrence=int(act["occurrence"]),
    )
    try:
        access.submit(
            "alarm.acknowledge",
            order.subject,
            command_id=order.command_id,
            body={"condition": order.condition, "why": "going"},
            expected=str(order.occurrence),
        )
    except StoreBusyError:
        return replace(order, state="unsent")
    return order


def soon(access: Access, order: Order) -> Order:
    """Return *order* with its outcome if the worker decides at once, as it mostly does: then nobody has to watch it wait."""
    for _ in range(PATIENCE):
        order = _followed(access, order)
        if order.state != "waiting":
            break
        time.sleep(LOOK_EVERY_S)
    return order


def followed(access: Access, orders: tuple[Order, ...]) -> tuple[Order, ...]:
    """Return the orders with what has become of them by now; only waiting ones are asked about."""
    return tuple(_followed(access, order) for order in orders[-MOST_KEPT:])


def _followed(access: Access, order: Order) -> Order:
    if order.state != "waiting":
        return order
    try:
        outcome = access.outcome(order.command_id)
    except MissingStoreError:
        return order
    return order if outcome is None else replace(order, state=outcome.outcome, reason=outcome.reason)
