"""The script that Streamlit runs for every visitor: the page that the address asks for."""

from __future__ import annotations

import streamlit as st

from dashboard.browser.live import show
from dashboard.browser.pages import FIRST, ROOMS
from ingest.words.language import ENGLISH


def main() -> None:
    """Show the page asked for, the tanks where there is none of that name."""
    asked = st.query_params.get("page", FIRST)
    page = asked if asked in ROOMS else FIRST
    st.set_page_config(page_title=f"{ENGLISH.text(page)} · euryhale", layout="wide", initial_sidebar_state="collapsed")
    show(page, ROOMS[page])


if __name__ == "__main__":
    main()
