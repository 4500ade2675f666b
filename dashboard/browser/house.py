"""The one site that this board shows: opened once by `serve`, asked for by every page."""

from __future__ import annotations

from typing import TYPE_CHECKING

from analysis.errors import EuryhaleError
from dashboard.browser.access import Access

if TYPE_CHECKING:
    from pathlib import Path

    from ingest.clock import Clock

_open: list[Access] = []


def open_site(site_file: Path, *, clock: Clock) -> Access:
    """Open the board on a site; the one before is let go.

    Raises
    ------
    SiteFileError
        If the site file has problems.
    """
    access = Access(site_file, clock=clock)
    _open[:] = [access]
    return access


def access() -> Access:
    """Return the door to the site's stores.

    Raises
    ------
    EuryhaleError
        If no site has been opened: the pages were started by something else than `serve`.
    """
    if not _open:
        raise EuryhaleError("the board has no site; start it with: euryhale board --site FILE")
    return _open[0]
