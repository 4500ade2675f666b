"""The sign of life: given on request, to an address that really answers."""

from __future__ import annotations

import pytest

from ingest.notify.life_sign import LifeSign
from ingest.secrets import write_secret
from tests.harness.process import wait_until
from tests.ingest.notify.scene import CallBench
from tests.ingest.notify.servers import WebServer


@pytest.fixture
def site_file(tmp_path):
    return tmp_path / "site.yaml"


@pytest.fixture(autouse=True)
def _no_proxy(monkeypatch):
    monkeypatch.setenv("no_proxy", "127.0.0.1")


def test_a_sign_carries_the_time(site_file):
    with WebServer() as server:
        write_secret("watch", server.plain_url, site_file=site_file)
        sign = LifeSign("watch", site_file=site_file)
        sign.ask({"site": "quay", "at_us": 5})
        wait_until(lambda: sign.given == 1, what="the sign")
        assert server.bodies == [{"site": "quay", "at_us": 5}]
        sign.stop()


@pytest.mark.parametrize(("mode", "said"), [("redirect", "302"), ("broken", "500")])
def test_an_answer_that_is_none_is_told(site_file, mode, said):
    with WebServer() as server:
        server.mode = mode
        write_secret("watch", server.plain_url, site_file=site_file)
        sign = LifeSign("watch", site_file=site_file)
        sign.ask({})
        wait_until(lambda: sign.failed == 1, what="the failure")
        assert server.followed == 0
        assert sign.problem
        server.mode = "ok"
        sign.ask({})
        wait_until(lambda: sign.given == 1, what="the recovery")
        assert sign.problem == ""
        sign.stop()


@pytest.mark.parametrize("url", ["", "file:///etc/hostname", "http://127.0.0.1:9/"])
def test_what_cannot_be_reached_is_told(site_file, url):
    if url:
        write_secret("watch", url, site_file=site_file)
    sign = LifeSign("watch", site_file=site_file)
    sign.ask({})
    wait_until(lambda: sign.failed == 1, what="the failure")
    sign.stop()


def test_the_main_loop_asks_for_each_sign(tmp_path):
    with WebServer() as server:
        people = "heartbeat: {url_secret: watch, every_s: 60}\n"
        with CallBench(tmp_path, people=people, secrets={"watch": server.plain_url}) as bench:
            bench.step()
            wait_until(lambda: len(server.bodies) == 1, what="the first sign")
            bench.step(30)
            bench.step(31)
            wait_until(lambda: len(server.bodies) == 2, what="the second sign")
            assert server.bodies[0]["site"] == "quay"
            assert server.bodies[1]["at_us"] == bench.clock.now_us()
            assert bench.worker.calling.condition()["signs_failed"] == 0
