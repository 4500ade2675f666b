"""Paper and ink: every colour, size and rule of the board in one file.

Three sets of colours: day (light), dusk (dark) and night. Normal is uncoloured; colour belongs to what is not normal,
and shape, letter and words always stand beside it. Text keeps 4.5:1 against its ground (WCAG 2.2, 1.4.3), drawn parts 3:1
(1.4.11); the tests compute both.
"""

from __future__ import annotations

from importlib.resources import files
from typing import Any

DAY = {
    "paper": "#FBFAF6",
    "sheet": "#FFFFFF",
    "ink": "#1C2A33",
    "ink2": "#4F5D67",
    "rule": "#DAD6CB",
    "rule2": "#EBE8DF",
    "edge": "#8B8F8C",
    "water": "#1F6180",
    "water2": "#6FA3B8",
    "wash": "#E4EFF3",
    "tol": "#F0ECDE",
    "opt": "#D9E8E2",
    "blood": "#8A2F3C",
    "urgent": "#B3261E",
    "soon": "#875000",
    "note": "#41586B",
    "urgentbg": "#FCEFED",
    "soonbg": "#FBF4E4",
    "notebg": "#F1F4F6",
}
DUSK = {
    "paper": "#121A20",
    "sheet": "#18232B",
    "ink": "#E7EBEC",
    "ink2": "#A3B3BC",
    "rule": "#33424C",
    "rule2": "#26333C",
    "edge": "#70818C",
    "water": "#7FC0DA",
    "water2": "#4C8AA3",
    "wash": "#1D313B",
    "tol": "#302F29",
    "opt": "#233A33",
    "blood": "#EE9AA6",
    "urgent": "#FF8A80",
    "soon": "#F2B560",
    "note": "#A6BED1",
    "urgentbg": "#3A2220",
    "soonbg": "#352B1A",
    "notebg": "#202D36",
}
NIGHT = {
    **DUSK,
    "paper": "#0B1013",
    "sheet": "#10171B",
    "ink": "#E4E2DA",
    "ink2": "#A5A9A5",
    "rule": "#2A3237",
    "rule2": "#1D2428",
}
SETS = {"day": DAY, "dusk": DUSK, "night": NIGHT}

TEXT_ON_GROUND = ("ink", "ink2", "water", "blood", "urgent", "soon", "note")
"""Colours in which words are set."""
GROUNDS = ("paper", "sheet", "urgentbg", "soonbg", "notebg")

SERIF = "'Source Serif', 'Source Serif 4', Georgia, serif"
SANS = "'Source Sans', 'Source Sans 3', system-ui, sans-serif"


def contrast(one: str, other: str) -> float:
    """Return the contrast ratio of two colours "#RRGGBB" (WCAG 2.2, relative luminance)."""
    bright, dark = sorted((_luminance(one), _luminance(other)), reverse=True)
    return (bright + 0.05) / (dark + 0.05)


def _luminance(colour: str) -> float:
    channels = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def _streamlit_colours(colours: dict[str, str]) -> dict[str, str]:
    return {
        "primaryColor": colours["water"],
        "backgroundColor": colours["paper"],
        "secondaryBackgroundColor": colours["sheet"],
        "textColor": colours["ink"],
        "borderColor": colours["rule"],
        "linkColor": colours["water"],
        "redColor": colours["urgent"],
        "orangeColor": colours["soon"],
        "blueColor": colours["water"],
        "grayColor": colours["ink2"],
    }


def streamlit_config() -> dict[str, Any]:
    """Return the options under which Streamlit wears this theme: two colour sets, our faces, no chrome."""
    options: dict[str, Any] = {
        "client.toolbarMode": "minimal",
        "client.showSidebarNavigation": False,
        "theme.font": "sans-serif",
        "theme.headingFont": "serif",
        "theme.baseFontSize": 15,
        "theme.baseRadius": "none",
        "theme.showWidgetBorder": True,
    }
    for scheme, colours in (("light", DAY), ("dark", DUSK)):
        options |= {f"theme.{scheme}.{name}": value for name, value in _streamlit_colours(colours).items()}
    return options


def variables(colours: dict[str, str]) -> str:
    """Return a set of colours as CSS custom properties."""
    return "".join(f"--{name}:{value};" for name, value in colours.items())


FRAME_CSS = """
[data-testid=stHeader],[data-testid=stDecoration],[data-testid=stStatusWidget],[data-testid=stToolbar]{display:none!important}
[data-testid=stMainBlockContainer]{padding:0!important;max-width:none!important}
[data-testid=stMain] [data-testid=stVerticalBlock]{gap:0}
[data-testid=stElementContainer]{opacity:1!important;transition:none!important}
[data-testid=stElementContainer]:has(style){display:none}
body:has([data-testid=stApp]:not([data-test-connection-state=CONNECTED]))>:not(#root):has([role=dialog]){display:none!important}
body:has([data-testid=stApp]:not([data-test-connection-state=CONNECTED])) [data-testid=stDialog]{display:none!important}
"""
"""For the document around our sheet: Streamlit's own bar, padding and fading away; that the connection is lost the sheet says itself."""


def frame_css(*, is_night: bool) -> str:
    """Return the style of the document around the sheet; at night its ground is dark whatever the reader's theme."""
    ground = f".stApp,[data-testid=stApp]{{background:{NIGHT['paper']}!important}}" if is_night else ""
    return FRAME_CSS + ground


def sheet_css() -> str:
    """Return the whole style of the sheet: the three sets of colours, the faces, and the rules of sheet.css."""
    rules = (files("dashboard.browser") / "sheet.css").read_text(encoding="utf-8")
    return (
        f".sheet{{{variables(DAY)}--serif:{SERIF};--sans:{SANS};color-scheme:light}}\n"
        f".sheet[data-scheme=dusk]{{{variables(DUSK)}color-scheme:dark}}\n"
        f".sheet[data-scheme=night]{{{variables(NIGHT)}color-scheme:dark}}\n{rules}"
    )
