"""A look at every address before an alarm needs it: is its secret set, and is it one that apprise knows?

It also loads what apprise loads at first use, which takes seconds on a busy machine: better now than with the first call.
"""

from __future__ import annotations

import threading
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence


class AddressCheck:
    """Looks at addresses in a thread of its own.

    Parameters
    ----------
    fault_of : callable
        Returns what is wrong with the address in a secret of that name, empty if nothing is.
    """

    def __init__(self, fault_of: Callable[[str], str]) -> None:
        self._fault_of = fault_of
        self._thread: threading.Thread | None = None
        self.faults: tuple[str, ...] = ()
        """What was wrong at the last look; exchanged as a whole."""

    def look(self, addresses: Sequence[str]) -> None:
        """Begin a look, unless one is still going on."""
        if self._thread is None or not self._thread.is_alive():
            self._thread = threading.Thread(
                target=self._look, args=(tuple(addresses),), name="notify-addresses", daemon=True
            )
            self._thread.start()

    def _look(self, addresses: tuple[str, ...]) -> None:
        self.faults = tuple(fault for address in addresses if (fault := self._fault_of(address)))
