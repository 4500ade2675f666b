"""The board in a real Chromium, over a real store that a worker holds."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator
from dataclasses import dataclass
from http.client import HTTPConnection
from pathlib import Path
from typing import TYPE_CHECKING
from urllib.parse import urlsplit

import pytest

from analysis.alarm.kinds import ConditionKind
from dashboard.browser.pages import ROOMS
from ingest.clock import SystemClock
from ingest.store.inbox import Inbox, InboxTaker
from tests.dashboard.browser.scene import MINUTE_US, Scene, make_scene
from tests.harness.browser import ARTEFACTS, chromium, running_board

if TYPE_CHECKING:
    from playwright.sync_api import Browser, ConsoleMessage, Page

pytestmark = pytest.mark.chromium

WAIT_MS = 30_000
SIZES = ((1440, 900), (390, 844), (320, 640))
OVERFLOW = """() => {
  const main = document.querySelector('[data-testid=stMain]');
  return Math.max(main.scrollWidth - main.clientWidth, document.documentElement.scrollWidth - window.innerWidth);
}"""


# The sheet lives in a shadow root: what it holds is found through its host.
FOCUSED = "() => [...document.querySelectorAll('*')].map(e => e.shadowRoot?.activeElement?.textContent).find(Boolean)"
STATE_SIZE = """() => {
  const found = [...document.querySelectorAll('*')].map(e => e.shadowRoot?.querySelector('.word-of-state.on')).find(Boolean);
  return parseFloat(getComputedStyle(found).fontSize);
}"""


@dataclass
class Live:
    """A running board with what stands behind it."""

    scene: Scene
    url: str
    browser: Browser


@pytest.fixture(scope="module")
def live(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Live]:
    with chromium() as browser:
        folder = tmp_path_factory.mktemp("live")
        scene = make_scene(folder, now_us=SystemClock().now_us())
        with running_board(scene.site_file, log=folder / "board.log") as url:
            yield Live(scene, url, browser)
        scene.stop_worker()


@pytest.fixture
def page(live: Live) -> Iterator[Page]:
    """A fresh visitor at a desk; whatever the browser's console complains of fails the test."""
    complaints: list[str] = []

    def note(message: ConsoleMessage) -> None:
        if message.type in ("error", "warning"):
            complaints.append(message.text)

    context = live.browser.new_context(viewport={"width": 1440, "height": 900})
    page = context.new_page()
    page.set_default_timeout(WAIT_MS)
    page.on("console", note)
    page.on("pageerror", lambda error: complaints.append(str(error)))
    yield page
    context.close()
    assert complaints == []


def open_page(page: Page, live: Live, query: str = "") -> None:
    page.goto(f"{live.url}/{query}")
    page.wait_for_selector(".sheet .live")


def card(page: Page, tank: str) -> str:
    return page.inner_text(f'article[data-k="{tank}"]')


def test_the_first_page_shows_the_tanks_of_the_store(page: Page, live: Live):
    open_page(page, live)
    assert page.title() == "Tanks · euryhale"
    assert "Turning fresh" in card(page, "l3")
    assert page.inner_text('article[data-k="l4"] .big') == "31.1"
    assert page.locator('[data-testid="stHeader"]').is_hidden()


def test_a_new_value_appears_by_itself_with_nothing_lost(page: Page, live: Live):
    open_page(page, live)
    page.evaluate("window.sameDocument = true")
    page.mouse.wheel(0, 400)
    page.focus('article[data-k="n2"] a')
    page.wait_for_function("document.querySelector('[data-testid=stMain]').scrollTop > 100")
    scroll = page.evaluate("document.querySelector('[data-testid=stMain]').scrollTop")
    live.scene.read_on("n2", salinity=18.7, temperature=29.0, at_us=SystemClock().now_us())
    page.wait_for_selector('article[data-k="n2"] .big:text("18.7")')
    assert page.evaluate("window.sameDocument") is True
    assert page.evaluate("document.querySelector('[data-testid=stMain]').scrollTop") == scroll
    assert page.evaluate(FOCUSED) == "N2"


def orders(live: Live) -> list[tuple[str, dict[str, object], str | None]]:
    taker = InboxTaker(Inbox(live.scene.folder))
    try:
        return [(c.subject, c.body, c.id) for _, c in taker.after(0)]
    finally:
        taker.close()


def test_i_am_going_reaches_the_inbox_and_its_outcome_comes_back(page: Page, live: Live):
    open_page(page, live, "?page=tank&id=l3")
    before = len(orders(live))
    page.click("button.verb")
    page.wait_for_selector('.sent:has-text("waiting for the worker")')
    subject, body, command_id = orders(live)[-1]
    assert len(orders(live)) == before + 1
    assert (subject, body["condition"]) == ("tank/l3", "salinity_low")
    assert re.fullmatch(r"[0-9a-f]{8}-[0-9a-f]{4}-4[0-9a-f]{3}-[89ab][0-9a-f]{3}-[0-9a-f]{12}", str(command_id))
    now_us = SystemClock().now_us()
    with live.scene.store.transaction() as connection:
        connection.execute(
            "INSERT INTO command_outcome VALUES (?, 'alarm.acknowledge', 'tank/l3', 'Duty 1', 'applied', '', NULL, ?)",
            (command_id, now_us),
        )
    raised_us = now_us - 12 * MINUTE_US
    live.scene.alarm(
        "l3",
        ConditionKind.SALINITY_LOW,
        "acknowledged",
        value=27.4,
        limit=29,
        at_us=raised_us,
        priority="urgent",
        act="acknowledged",
        by="Duty 1",
        now_us=now_us,
    )
    page.wait_for_selector(".quiet:has-text('Duty 1 has it since')")
    page.wait_for_selector('.sent:has-text("done")')


def test_a_refusal_is_shown_to_the_person_who_asked(page: Page, live: Live):
    open_page(page, live, "?page=alarms")
    page.click('article[data-k^="tank/n1"] button')
    page.wait_for_selector('article[data-k^="tank/n1"] .sent')
    command_id = page.get_attribute('article[data-k^="tank/n1"] .sent', "data-order")
    with live.scene.store.transaction() as connection:
        connection.execute(
            "INSERT INTO command_outcome VALUES (?, 'alarm.acknowledge', 'tank/n1', 'Duty 1', 'refused', 'role_too_weak', NULL, 0)",
            (command_id,),
        )
    page.wait_for_selector('.sent.refused:has-text("your role may not do this")')


def test_pages_change_in_place_and_the_way_back_works(page: Page, live: Live):
    open_page(page, live)
    page.evaluate("window.sameDocument = true")
    page.click('article[data-k="l4"] a')
    page.wait_for_selector('h1:text("L4")')
    page.wait_for_url(re.compile(r"page=tank&id=l4"))
    page.click('nav a:has-text("Sensors")')
    page.wait_for_selector('h1:text("Sensors")')
    page.go_back()
    page.wait_for_selector('h1:text("L4")')
    assert page.evaluate("window.sameDocument") is True


def test_short_addresses_lead_to_their_page(page: Page, live: Live):
    page.goto(f"{live.url}/tank?id=q1")
    page.wait_for_selector('h1:text("Q1")')
    page.goto(f"{live.url}/night")
    page.wait_for_selector('h1:text("Night")')


def test_a_chart_is_read_off_zoomed_and_set_back(page: Page, live: Live):
    open_page(page, live, "?page=tank&id=r1")
    page.wait_for_selector("svg.plot")
    box = page.locator("svg.plot").bounding_box()
    page.mouse.move(box["x"] + box["width"] * 0.4, box["y"] + 120)
    readout = page.wait_for_selector(".readout").inner_text()
    value = float(re.search(r"Salinity ([\d.]+)", readout).group(1))
    assert 14 < value < 22
    page.mouse.down()
    page.mouse.move(box["x"] + box["width"] * 0.6, box["y"] + 120, steps=4)
    page.mouse.up()
    page.wait_for_url(re.compile(r"from=[\d.]+&to=[\d.]+"))
    page.wait_for_selector("[data-do=move][data-share='0.5']")
    page.click('[data-span="hour"]')
    page.wait_for_selector('[data-span="hour"][aria-pressed="true"]')
    page.focus(".chart")
    page.keyboard.press("ArrowLeft")
    page.wait_for_selector(".readout:visible")


def test_data_and_picture_can_be_taken_along(page: Page, live: Live):
    open_page(page, live, "?page=tank&id=q1&span=hour")
    with page.expect_download() as data:
        page.click('a:has-text("data (CSV)")')
    lines = Path(data.value.path()).read_text().splitlines()
    assert lines[0].startswith("time_utc,sensor,salinity")
    assert len(lines) > 50
    with page.expect_download() as picture:
        page.click('a:has-text("picture (PNG)")')
    content = Path(picture.value.path()).read_bytes()
    assert content.startswith(b"\x89PNG")
    assert len(content) > 10_000
    ARTEFACTS.mkdir(exist_ok=True)
    (ARTEFACTS / "tank-picture.png").write_bytes(content)


@pytest.mark.slow
def test_nobody_watches_is_said_at_three_metres(live: Live, tmp_path: Path):
    scene = make_scene(tmp_path, now_us=SystemClock().now_us(), days=0.1)
    with running_board(scene.site_file, log=tmp_path / "board.log") as url:
        page = live.browser.new_page()
        page.set_default_timeout(WAIT_MS)
        page.goto(url + "/?page=alarms")
        page.wait_for_selector(".alarm button")
        scene.stop_worker()
        page.wait_for_selector('.word-of-state.on:has-text("Nobody is watching")')
        page.click(".alarm button >> nth=0")
        page.wait_for_selector('.sent:has-text("waiting: the worker is not running")')
        assert page.evaluate(STATE_SIZE) >= 18
        page.close()


@pytest.mark.slow
def test_a_lost_connection_is_obvious(live: Live, tmp_path: Path):
    scene = make_scene(tmp_path, now_us=SystemClock().now_us(), days=0.1)
    page = live.browser.new_page()
    page.set_default_timeout(60_000)
    with running_board(scene.site_file, log=tmp_path / "board.log") as url:
        page.goto(url)
        page.wait_for_selector(".sheet .live")
    page.wait_for_selector('.sheet.lost .lost-line:visible:has-text("connection to the board is lost")')
    page.wait_for_selector("[role=dialog]", state="attached")
    assert page.locator("[role=dialog]").is_hidden()
    ARTEFACTS.mkdir(exist_ok=True)
    page.screenshot(path=ARTEFACTS / "lost.png")
    page.close()
    scene.stop_worker()


@pytest.mark.slow
@pytest.mark.parametrize("room", ROOMS)
def test_every_page_reflows_and_its_targets_can_be_hit(page: Page, live: Live, room: str):
    """WCAG 2.2: 1.4.10 reflow at 320 px; 2.5.8 targets of 24 px (words within a line of text are exempt there)."""
    ARTEFACTS.mkdir(exist_ok=True)
    for width, height in SIZES:
        page.set_viewport_size({"width": width, "height": height})
        open_page(page, live, f"?page={room}&id=l3")
        if room == "tank":
            page.wait_for_selector("svg.plot")
        assert page.evaluate(OVERFLOW) <= 0
        for target in page.locator("nav a, button").all():
            box = target.bounding_box()
            assert box is None or (box["height"] >= 24 and box["width"] >= 24)
        page.screenshot(path=ARTEFACTS / f"{room}-{width}.png")


def test_the_night_is_dark_whatever_the_readers_theme(page: Page, live: Live):
    open_page(page, live, "?page=night")
    page.wait_for_selector('.sheet[data-scheme="night"]')
    colours = page.evaluate("[getComputedStyle(document.querySelector('.stApp')).backgroundColor]")
    assert colours == ["rgb(11, 16, 19)"]
    page.click('nav a:has-text("Tanks")')
    page.wait_for_selector('.sheet[data-scheme="day"]')


def test_the_dark_theme_of_the_reader_is_worn(live: Live):
    context = live.browser.new_context(color_scheme="dark")
    page = context.new_page()
    page.set_default_timeout(WAIT_MS)
    open_page(page, live)
    page.wait_for_selector('.sheet[data-scheme="dusk"]')
    ARTEFACTS.mkdir(exist_ok=True)
    page.screenshot(path=ARTEFACTS / "tanks-dusk.png")
    context.close()


def answer(url: str, path: str, *, host: str | None = None) -> tuple[int, str]:
    parts = urlsplit(url)
    connection = HTTPConnection(parts.hostname, parts.port, timeout=20)
    connection.request("GET", path, headers={} if host is None else {"Host": host})
    response = connection.getresponse()
    body = response.read().decode(errors="replace")
    connection.close()
    return response.status, body


def test_only_allowed_hosts_are_answered(live: Live):
    assert answer(live.url, "/health")[0] == 200
    for path in ("/", "/health", "/_stcore/health"):
        assert answer(live.url, path, host="elsewhere.example")[0] == 400


def test_health_tells_whether_somebody_watches(live: Live):
    status, body = answer(live.url, "/health")
    assert status == 200
    assert json.loads(body)["is_worker_running"] is True
    assert json.loads(body)["tanks"] == len(live.scene.waters)


def test_programs_are_not_let_in_by_the_agent_interface(live: Live):
    status, body = answer(live.url, "/_stcore/agent/interact")
    assert status >= 400, body


@pytest.mark.slow
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_axe_finds_nothing_serious(live: Live, scheme: str):
    axe = pytest.importorskip("axe_playwright_python.sync_playwright", reason="needs the package axe-playwright-python")
    context = live.browser.new_context(color_scheme=scheme, reduced_motion="reduce")
    page = context.new_page()
    page.set_default_timeout(WAIT_MS)
    found = []
    for room in (*ROOMS, "tanks&form=tiles"):
        open_page(page, live, f"?page={room}&id=l3")
        found += [
            (room, violation["id"], node["html"][:120])
            for violation in axe.Axe().run(page).response["violations"]
            if violation["impact"] in ("serious", "critical")
            for node in violation["nodes"]
        ]
    context.close()
    assert found == []
