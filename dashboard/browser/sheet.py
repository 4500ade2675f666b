"""The sheet: one HTML page handed to the browser whole; there only what differs is changed.

Names and all other text from outside are escaped where the HTML is made (`html.escape`); the script carries no data.
"""

from __future__ import annotations

from collections.abc import Mapping
from importlib.resources import files
from typing import Any

import streamlit as st

from dashboard.browser.theme import sheet_css
from ingest.words.language import Language

LOST_AFTER_S = 12.0
"""So long without a new page and the sheet says that the connection is lost. Pages come every two seconds."""

DEFAULT_WIDTH = 960

_render = st.components.v2.component(
    "euryhale_sheet",
    css=sheet_css(),
    js=(files("dashboard.browser") / "sheet.js").read_text(encoding="utf-8"),
)


def width_of(key: str) -> int:
    """Return the width that the sheet *key* last measured for its drawings. [px]"""
    state = st.session_state.get(key)
    width = state.get("width") if isinstance(state, Mapping) else None
    return int(width) if isinstance(width, int | float) else DEFAULT_WIDTH


def show(
    html: str, *, key: str, page: str, now_s: float, zone: str, language: Language, is_night: bool = False
) -> dict[str, str] | None:
    """Show *html* and return what a person has just done on it, or None.

    Parameters
    ----------
    html : str
        The page; every text in it from outside is already escaped.
    key : str
        One for all pages, so that the sheet keeps its place in the document.
    page : str
        Which page it is: when it changes the sheet begins at its top.
    now_s : float
        The server's time: ages on the page are counted from it, not from the reader's clock.

    Returns
    -------
    dict or None
        The data attributes of what was pressed, with `do` and the client's UUID `command`.
    """
    words = language.TIMES
    result = _render(
        key=key,
        data={
            "html": html,
            "page": page,
            "now": now_s,
            "zone": zone,
            "scheme": "night" if is_night else "reader",
            "lost_after": LOST_AFTER_S,
            "width": width_of(key),
            "ages": {
                name: words[name]
                for name in ("just_now", "seconds_ago", "minutes_ago", "hours_ago", "days_ago", "ahead")
            },
        },
        default={"width": DEFAULT_WIDTH},
        on_act_change=_nothing,
        on_width_change=_nothing,
    )
    act: Any = result.act
    return {str(name): str(value) for name, value in act.items()} if isinstance(act, Mapping) else None


def _nothing() -> None:
    """Do nothing by itself: the page's own run looks at what was done."""
