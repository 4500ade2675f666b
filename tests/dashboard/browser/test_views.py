"""The pages as HTML."""

from __future__ import annotations

import inspect
import re
from html.parser import HTMLParser

import pytest

from dashboard.browser import charts, pages, tank_chart, views
from dashboard.browser.access import Access
from dashboard.browser.pages import ROOMS
from dashboard.browser.sights import Snapshot
from dashboard.browser.tank_chart import moved, stretch_of
from dashboard.browser.views import alarms as alarms_view
from dashboard.browser.views import card, frame, night, say, sensors, tanks
from dashboard.browser.views import tank as tank_view
from dashboard.browser.visit import Order, Visit
from ingest.words.language import ENGLISH

VOID = {"br", "path", "rect", "polyline", "polygon", "circle", "i"}


class Reader(HTMLParser):
    """Checks that tags are closed in order and keys are given once, and collects the text."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.text: list[str] = []
        self.keys: list[str] = []
        self.tags: list[tuple[str, dict[str, str | None]]] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        self.keys += [value for name, value in attrs if name == "data-k" and value]
        if tag != "br":
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.text.append(data)


def read(html: str) -> Reader:
    reader = Reader()
    reader.feed(html)
    reader.close()
    assert not reader.open
    return reader


def text(html: str) -> str:
    return " ".join("".join(read(html).text).split())


def draw(page: str, access: Access, **query: str) -> str:
    return ROOMS[page].draw(access, access.snapshot(), Visit(page, {"page": page, **query}))


@pytest.mark.parametrize("page", ROOMS)
def test_every_page_is_sound_html_with_names_escaped(page: str, access: Access):
    html = draw(page, access, id="n4")
    reader = read(html)
    assert len(reader.keys) == len(set(reader.keys))
    assert "<salt" not in html
    assert "<script" not in html
    assert "{" not in text(html).replace('{"t": "2026-13-01T10:00", "ec": 41.2}', "")
    assert not re.search(r"\bnan\b", text(html))


@pytest.mark.parametrize("page", ROOMS)
def test_every_page_has_its_empty_state(page: str, bare_access: Access):
    html = draw(page, bare_access, id="l3")
    read(html)
    assert "Nobody is watching yet" in text(html)


def test_what_needs_somebody_stands_first_and_the_rest_by_place(access: Access):
    html = draw("tanks", access)
    names = re.findall(r'<span class="name">([^<]+)</span>', html)
    assert names[:3] == ["O1", "L3", "N1"]
    assert names[3:5] == ["L4", "L5"]
    assert text(html).count("needs somebody now") == 1
    assert (
        "7as they should be" in text(html).replace(" ", "", 0)
        or "7 as they should be" in text(html)
        or "7as" in text(html)
    )


def test_many_tanks_shrink_to_tiles_and_a_person_may_choose(access: Access):
    assert 'class="tile' not in draw("tanks", access)
    assert 'class="tile' in draw("tanks", access, form="tiles")


def test_a_stale_value_is_grey_and_its_age_is_a_warning(access: Access):
    html = draw("tanks", access)
    o1 = html[html.index('data-k="o1"') :]
    o1 = o1[: o1.index("</article>")]
    assert "big doubt" in o1
    assert "age stale" in o1


def test_a_tank_says_what_to_do_first(access: Access):
    page = text(draw("tank", access, id="l3"))
    assert (
        page.index("Turning fresh: 27.4, set 31 ± 2, falling 5.3 an hour.")
        < page.index("Close the fresh-water inflow.")
        < page.index("I am going")
    )
    assert "mOsm/kg stronger than their blood" in page
    assert "Why 55: strained" in page
    assert "looked up: MCGRAW2002" in page


def test_a_calm_tank_is_calm(access: Access):
    page = draw("tank", access, id="l4")
    assert "As it should be." in text(page)
    assert "verb" not in page


def test_an_unknown_tank_shows_the_way_back(access: Access):
    assert "There is no tank of this name." in text(draw("tank", access, id="nowhere"))


def test_the_button_becomes_its_outcome(access: Access):
    snapshot = access.snapshot()
    alarm = next(a for a in snapshot.alarms if a.subject == "tank/l3")
    order = Order("c-1", alarm.subject, alarm.condition, alarm.occurrence)
    assert "<button" in say.going(alarm, snapshot, Visit("tank"))
    waiting = say.going(alarm, snapshot, Visit("tank", orders=(order,)))
    assert "waiting for the worker" in waiting
    assert "<button" not in waiting
    refused = Order("c-1", alarm.subject, alarm.condition, alarm.occurrence, "refused", "role_too_weak")
    assert "refused: your role may not do this" in say.going(alarm, snapshot, Visit("tank", orders=(refused,)))


def without_worker(snapshot: Snapshot) -> Snapshot:
    from dataclasses import replace

    return replace(snapshot, is_worker_running=False)


def test_without_a_worker_an_order_says_so_and_so_does_every_page(access: Access):
    snapshot = without_worker(access.snapshot())
    alarm = snapshot.alarms[0]
    order = Order("c-1", alarm.subject, alarm.condition, alarm.occurrence)
    assert "waiting: the worker is not running" in say.going(alarm, snapshot, Visit("tank", orders=(order,)))
    for page in (tanks.page(snapshot, Visit("tanks")), night.page(snapshot, Visit("night"))):
        assert "Nobody is watching: the worker is not running" in text(page)
        assert 'class="word-of-state on"' in page


def test_the_night_has_three_lines_an_alarm_and_no_notes(access: Access):
    page = draw("night", access)
    assert page.count('class="what"') == page.count('class="do"') == page.count('class="has"') == 3
    assert "Seven tanks are as they should be." in text(page)


def test_refused_payloads_are_shown_with_their_reason(access: Access):
    page = text(draw("sensors", access))
    assert "No probe is declared for this topic." in page
    assert "<script>alert(1)</script>" in page
    assert "Allowed: an ISO 8601 time with its zone." in page


def test_the_chart_moves_on_in_steps_and_a_chosen_stretch_stands_still():
    live = stretch_of({}, now_s=1_000_003.0)
    assert live.is_live
    assert live.to_s >= 1_000_003.0
    assert stretch_of({}, now_s=1_000_004.0) == live
    fixed = stretch_of({"from": "10", "to": "5000"}, now_s=1_000_003.0)
    assert (fixed.from_s, fixed.to_s, fixed.is_live) == (10.0, 5000.0, False)


@pytest.mark.parametrize(
    "query", [{"from": "x", "to": "1"}, {"from": "9", "to": "1"}, {"from": "nan", "to": "5"}, {"span": "eternity"}]
)
def test_a_nonsense_address_shows_the_day(query: dict[str, str]):
    assert stretch_of(query, now_s=1e9).name == "day"


def test_moving_never_goes_beyond_now():
    stretch = stretch_of({"from": "1000", "to": "2000"}, now_s=2300)
    assert moved(stretch, -0.5, now_s=2300) == (500, 1500)
    assert moved(stretch, 0.5, now_s=2300) == (1300, 2300)


def test_every_text_of_the_board_exists_and_none_is_left_over():
    modules = (alarms_view, card, frame, night, say, sensors, tank_view, tanks, charts, tank_chart, pages, views)
    source = "".join(inspect.getsource(module) for module in modules)
    quoted = set(re.findall(r"""["']([a-z0-9_]+)["']""", source)) | set(ROOMS)
    quoted |= {f"span_{name}" for name in tank_chart.SPANS_S} | {"as_cards", "as_tiles"}
    quoted |= {f"tolerated_{side}_short" for side in ("from", "to")}
    assert set(ENGLISH.BOARD) <= quoted
    asked = set(re.findall(r"""\.text\(\s*["']([a-z0-9_]+)["']""", source))
    assert asked <= set(ENGLISH.BOARD)


def test_a_number_that_may_be_wrong_is_not_called_fine(access: Access):
    from dataclasses import replace

    snapshot = access.snapshot()
    n2 = snapshot.tank("n2")
    doubted = replace(n2, shown=replace(n2.shown, quality=3, flags=1 << 18))
    page = say.say_doubted(doubted, Visit("tank"))
    assert doubted.is_doubted
    assert "Doubt: disagrees with its neighbour." in text(page)
    assert "as far as can be told" in text(page)
