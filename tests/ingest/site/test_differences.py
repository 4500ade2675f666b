"""What one site file changes against another."""

from __future__ import annotations

from ingest.site import Difference, differences, load_text
from tests.ingest.site.examples import FULL, SMALL


def test_equal_sites_do_not_differ() -> None:
    assert differences(load_text(FULL), load_text(FULL)) == []


def test_order_is_no_difference() -> None:
    first, second = FULL.split("  - id: intake-ct")[0], "  - id: intake-ct" + FULL.split("  - id: intake-ct")[1]
    sensors = first.split("sensors:\n")
    tail = second.split("  - {id: p1-ct")
    turned = sensors[0] + "sensors:\n" + tail[0] + sensors[1] + "  - {id: p1-ct" + tail[1]
    assert differences(load_text(FULL), load_text(turned)) == []


def test_changes_are_named_by_id_with_before_and_after() -> None:
    new = FULL.replace("salinity: 31, band", "salinity: 30, band").replace("larkfen/intake", "larkfen/sluice")
    assert differences(load_text(FULL), load_text(new)) == [
        Difference("tanks (l3).set_point.salinity", 31.0, 30.0, needs_restart=False),
        Difference("sensors (intake-ct).topic", "larkfen/intake", "larkfen/sluice", needs_restart=False),
    ]


def test_store_and_client_need_a_restart() -> None:
    new = FULL.replace("run/store", "run/other").replace("larkfen-worker", "lark-2").replace("1883", "1884")
    found = {one.what: one.needs_restart for one in differences(load_text(FULL), load_text(new))}
    assert found == {"store.path": True, "broker.client_id": True, "broker.port": False}


def test_a_removed_and_an_added_thing_are_whole() -> None:
    new = SMALL.replace("t1-ct", "t1-new")
    removed, added = differences(load_text(SMALL), load_text(new))
    assert (removed.what, removed.after) == ("sensors (t1-ct)", None)
    assert (added.what, added.before) == ("sensors (t1-new)", None)
    assert added.after["topic"] == "larkfen/t1"
