"""A page that refreshes itself: looks, draws, shows, and does what a person has just asked for.

All pages live at one address and are told apart by its query (`?page=tank&id=l3`): the sheet stays where it is from
page to page and only what differs is changed; back and forward in the browser work.
"""

from __future__ import annotations

import gc
from dataclasses import dataclass
from typing import TYPE_CHECKING

import streamlit as st

from dashboard.browser import house, orders, sheet
from dashboard.browser.theme import frame_css
from dashboard.browser.visit import Visit
from ingest.words.language import ENGLISH

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from dashboard.browser.access import Access
    from dashboard.browser.sights import Snapshot
    from dashboard.browser.visit import Order

REFRESH_S = 2.0
ORDERS = "orders"
KEY = "sheet"


@dataclass(frozen=True, slots=True)
class Room:
    """A page of the board.

    Attributes
    ----------
    draw : callable
        From access, snapshot and visit to HTML.
    act : callable, optional
        For what only this page offers: from what was pressed, snapshot and visit to the new query, or None.
    is_night : bool
        Whether the page is dark whatever the reader's theme.
    """

    draw: Callable[[Access, Snapshot, Visit], str]
    act: Callable[[Mapping[str, str], Snapshot, Visit], dict[str, str] | None] | None = None
    is_night: bool = False


def show(page: str, room: Room) -> None:
    """Show a page and keep it fresh."""
    st.html(f"<style>{frame_css(is_night=room.is_night)}</style>")
    _refreshing(page, room)
    _settle()


@st.fragment(run_every=REFRESH_S)
def _refreshing(page: str, room: Room) -> None:
    access = house.access()
    kept: tuple[Order, ...] = orders.followed(access, st.session_state.get(ORDERS, ()))
    st.session_state[ORDERS] = kept
    visit = Visit(page, st.query_params.to_dict(), sheet.width_of(KEY), kept, ENGLISH)
    snapshot = access.snapshot()
    done = sheet.show(
        room.draw(access, snapshot, visit),
        key=KEY,
        page=f"{page} {visit.query.get('id', '')}",
        now_s=access.clock.now_us() / 1e6,
        zone=snapshot.zone_name,
        language=visit.language,
        is_night=room.is_night,
    )
    if done is not None:
        _do(access, done, snapshot, visit, room)


def _do(access: Access, done: Mapping[str, str], snapshot: Snapshot, visit: Visit, room: Room) -> None:
    if done["do"] == "go":
        _turn_to({name: done[name] for name in ("page", "id") if done.get(name)})
        st.rerun(scope="app")
    if done["do"] == "going":
        order = orders.take(access, done)
        if snapshot.is_watching:
            order = orders.soon(access, order)
        st.session_state[ORDERS] = (*visit.orders, order)
    elif room.act is not None:
        query = room.act(done, snapshot, visit)
        if query is not None:
            _turn_to({"page": visit.page, **query})
    st.rerun(scope="fragment")


def _turn_to(query: Mapping[str, str]) -> None:
    if st.query_params.to_dict() != dict(query):
        st.query_params.from_dict(query)


@st.cache_resource(show_spinner=False)
def _settle() -> bool:
    """Put everything that is loaded by the first page out of the collector's way.

    Streamlit collects garbage after every run of a page; with its libraries loaded that costs five times the page itself.
    """
    gc.collect()
    gc.freeze()
    return True
