"""Who is looking, at what, and what this person has asked for: the part of a page that is not the site."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from html import escape

from ingest.words.language import ENGLISH, Language


@dataclass(frozen=True, slots=True)
class Order:
    """Something asked for from this screen, and what became of it."""

    command_id: str
    subject: str
    condition: str
    occurrence: int
    state: str = "waiting"
    """waiting, applied, refused, expired or unsent."""
    reason: str = ""

    @property
    def alarm_key(self) -> str:
        """Return the key of the alarm occurrence it was about."""
        return f"{self.subject} {self.condition} {self.occurrence}"


@dataclass(frozen=True, slots=True)
class Visit:
    """One look at one page.

    Attributes
    ----------
    page : str
        Which page.
    query : mapping
        The address's own parameters, such as the tank.
    width : int
        Width for drawings. [px]
    orders : tuple of Order
        What was asked for from this screen, oldest first.
    """

    page: str
    query: Mapping[str, str] = field(default_factory=dict)
    width: int = 960
    orders: tuple[Order, ...] = ()
    language: Language = ENGLISH

    def order_for(self, alarm_key: str) -> Order | None:
        """Return the newest order about this alarm occurrence."""
        return next((order for order in reversed(self.orders) if order.alarm_key == alarm_key), None)

    def text(self, key: str, /, **values: object) -> str:
        """Return a text of the board, escaped for HTML, values included."""
        return escape(self.language.text(key, **values))


def link(page: str, words: str, *, tank: str = "", classes: str = "") -> str:
    """Return a link to a page of the board; a click changes the page in place, any other use is a plain address."""
    query = f"&amp;id={escape(tank)}" if tank else ""
    chosen = f' class="{classes}"' if classes else ""
    which = f' data-id="{escape(tank)}"' if tank else ""
    return f'<a{chosen} href="?page={page}{query}" data-do="go" data-page="{page}"{which}>{words}</a>'


def age(
    at_us: int | None, *, now_us: int, stale_after_s: float | None, language: Language, classes: str = "age"
) -> str:
    """Return an age that goes on ticking in the browser, and turns to a warning by itself when it is too old."""
    from ingest.words.times import age as age_words

    words = escape(age_words(at_us, now_us=now_us, language=language))
    if at_us is None:
        return f'<span class="{classes} stale">{words}</span>'
    limit = "" if stale_after_s is None else f' data-stale="{stale_after_s:g}"'
    is_stale = stale_after_s is not None and (now_us - at_us) / 1e6 > stale_after_s
    return f'<time class="{classes}{" stale" if is_stale else ""}" data-at="{at_us / 1e6:.3f}"{limit}>{words}</time>'
