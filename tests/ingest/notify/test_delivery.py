"""From a tank that falls out of its band to a message in a person's hand, with real servers at the end."""

from __future__ import annotations

import pytest

from ingest.secrets import write_secret
from tests.ingest.notify.scene import ONE_PERSON, PEOPLE, CallBench
from tests.ingest.notify.servers import MailServer, WebServer


@pytest.fixture
def mail():
    with MailServer() as server:
        yield server


@pytest.fixture
def web():
    with WebServer() as server:
        yield server


def secrets(mail: MailServer, web: WebServer) -> dict[str, str]:
    return {"ana-mail": mail.url, "ana-push": web.url, "rui-voice": web.url.replace("call", "voice")}


def test_a_fall_reaches_a_person_by_every_channel_and_says_what_matters(tmp_path, mail, web):
    with CallBench(tmp_path, secrets=secrets(mail, web)) as bench:
        bench.fall("s0")
        assert bench.alarm("t0", "salinity_low") == "unacknowledged"
        bench.step_until(lambda: bool(mail.messages and web.bodies), "mail and push")
        bench.step_until(lambda: {row["outcome"] for row in bench.deliveries()} == {"delivered"}, "the reports")
        text = mail.texts()[0]
        assert mail.subjects() == web.titles() == ["URGENT: T0 too fresh"]
        assert "T0: Too fresh: 27.0, set 31." in text
        assert "Animals: Pacific whiteleg shrimp, PL10, 80 000." in text
        assert "First: Close the fresh-water inflow" in text
        assert "Ana Reis, if you are going: acknowledge on the board" in text
        assert "Quay House" in text
        assert len(bench.deliveries()) == 2
        assert bench.open_outbox() == 0
        assert [row["is_delivered"] for row in bench.rows("SELECT * FROM delivery_attempt")] == [1, 1]
        made = bench.queries.events(kind_prefix="call.made")
        assert [event.body["who"] for _, event in made] == ["ana"]


def test_the_message_says_how_fast_it_falls_and_how_long_is_left(tmp_path, mail, web):
    with CallBench(tmp_path, secrets=secrets(mail, web)) as bench:
        for minute in range(30):
            bench.minutes(1, {"s0": 31.0 - 0.1 * max(0, minute - 5)})
            bench.step()
        bench.step_until(lambda: bool(mail.messages), "the mail")
        text = mail.texts()[0]
        assert "alling 6.0 an hour" in text, text
        assert "Time left: About " in text, text
        assert "until salinity" in text, text


def test_without_people_alarms_work_and_nothing_stays_open(tmp_path):
    with CallBench(tmp_path, people="") as bench:
        bench.fall("s0")
        assert bench.open_outbox() > 0
        bench.step()
        assert bench.open_outbox() == 0
        assert bench.deliveries() == []


def test_nobody_answers_and_the_next_person_is_called_until_somebody_acknowledges(tmp_path, mail, web):
    with CallBench(tmp_path, secrets=secrets(mail, web)) as bench:
        bench.fall("s0")
        bench.step_until(lambda: len(web.bodies) == 1, "the first call")
        bench.step(300)
        bench.step_until(lambda: len(web.bodies) == 2, "the second person")
        assert "Nobody has answered so far." in web.bodies[1]["message"]
        assert bench.act("alarm.acknowledge", "t0", "salinity_low").outcome == "applied"
        bench.step()
        assert bench.phases() == ["paused"]
        before = len(bench.deliveries())
        bench.step(290)
        assert len(bench.deliveries()) == before, "somebody is going"


def test_going_pauses_the_calls_for_the_time_to_respond_and_no_longer(tmp_path, mail, web):
    with CallBench(tmp_path, secrets=secrets(mail, web)) as bench:
        bench.fall("s0")
        bench.step()
        bench.act("alarm.acknowledge", "t0", "salinity_low")
        bench.step()
        before = len(bench.deliveries())
        bench.step(900)
        assert bench.phases() == ["calling"]
        assert len(bench.deliveries()) > before


def test_back_to_normal_stops_the_waking_and_the_entry_stays_listed(tmp_path, mail, web):
    with CallBench(tmp_path, secrets=secrets(mail, web)) as bench:
        bench.fall("s0")
        bench.step_until(lambda: len(web.bodies) == 1, "the first call")
        bench.minutes(6, {"s0": 31.0})
        assert bench.alarm("t0", "salinity_low") == "returned_unacknowledged"
        bench.step()
        assert bench.phases() == ["listed"]
        bench.step(3600)
        assert len({row["number"] for row in bench.deliveries()}) == 1
        bench.act("alarm.acknowledge", "t0", "salinity_low")
        bench.step()
        assert bench.phases() == ["over"]


def test_one_cause_is_one_call_and_followers_are_gathered(tmp_path, mail, web):
    with CallBench(tmp_path, sensors=5, secrets=secrets(mail, web)) as bench:
        bench.fall("s0", "s1")
        bench.step_until(lambda: len(mail.messages) == 1, "the first message")
        assert mail.subjects() == ["URGENT: T0 too fresh and 1 more"]
        assert "Also: T1 too fresh 27.0." in mail.texts()[0]
        low = {"s0": 27.0, "s1": 27.0, "s2": 27.0, "s3": 27.0}
        bench.minutes(4, low)
        bench.step()
        bench.step()
        assert len([row for row in bench.deliveries() if row["reason"] == "joined" and row["channel"] == "mail"]) == 1
        assert len(mail.messages) == 1, "gathered for ten seconds"
        bench.step(10)
        bench.step_until(lambda: len(mail.messages) == 2, "the message about the followers")
        assert mail.subjects()[1] == "URGENT: T0 too fresh and 3 more"
        assert "One more tank has joined." in mail.texts()[1]
        assert len(bench.phases()) == 1


def test_servers_that_refuse_hang_and_redirect_get_it_when_they_are_back(tmp_path):
    with MailServer() as mail, WebServer() as web:
        mail.refuses, web.mode = True, "redirect"
        with CallBench(tmp_path, people=ONE_PERSON, secrets=secrets(mail, web)) as bench:
            bench.fall("s0")
            bench.step_until(lambda: mail.tries >= 1 and web.tries >= 1, "first attempts")
            bench.step_until(lambda: len(bench.rows("SELECT * FROM delivery_attempt")) >= 2, "their reports")
            assert web.followed == 0, "a redirect is not followed"
            assert {row["outcome"] for row in bench.deliveries()} == {None}
            mail.refuses, web.mode = False, "broken"
            bench.step(20)
            bench.step_until(lambda: len(mail.messages) == 1 and web.tries >= 2, "mail is back")
            web.mode = "ok"
            bench.step(60)
            bench.step_until(lambda: len(web.bodies) == 1, "push is back")
            bench.step_until(lambda: {r["outcome"] for r in bench.deliveries()} == {"delivered"}, "all reports")
            failed = [row for row in bench.rows("SELECT * FROM delivery_attempt") if not row["is_delivered"]]
            assert len(failed) >= 3
            assert all(row["detail"] for row in failed)


def test_a_server_that_is_not_there_is_told_on_every_screen_until_it_is(tmp_path):
    web = WebServer()
    with MailServer() as mail, CallBench(tmp_path, people=ONE_PERSON, secrets=secrets(mail, web)) as bench:
        bench.fall("s0")
        bench.step_until(lambda: len(bench.rows("SELECT * FROM delivery_attempt")) >= 2, "attempts")
        assert bench.worker.calling.problem == ""
        bench.step(121)
        bench.step_until(lambda: "do not go out" in bench.worker.calling.problem, "the problem to be told")
        assert "do not go out" in bench.queries.meta()["delivery_problem"]
        assert bench.queries.meta()["delivery_failing_since"] > 0
        with web:
            bench.step(300)
            bench.step_until(lambda: len(web.bodies) == 1, "the message after all")
            bench.step_until(lambda: {r["outcome"] for r in bench.deliveries()} == {"delivered"}, "the report")
            bench.step(5)
            assert bench.worker.calling.problem == ""
            assert bench.queries.meta()["delivery_problem"] == ""


def test_one_server_that_hangs_holds_up_no_other(tmp_path):
    with MailServer() as mail, WebServer() as web:
        web.mode = "hang"
        with CallBench(tmp_path, people=ONE_PERSON, secrets=secrets(mail, web)) as bench:
            bench.fall("s0")
            bench.step_until(lambda: len(mail.messages) == 1, "the mail")
            assert web.bodies == []
            bench.step_until(lambda: web.tries >= 1, "the push to be tried")


def test_a_secret_that_is_not_set_is_a_failed_attempt_with_its_reason(tmp_path, mail, web):
    with CallBench(tmp_path, people=ONE_PERSON, secrets={"ana-mail": mail.url, "ana-push": "nonsense"}) as bench:
        bench.fall("s0")
        bench.step_until(lambda: len(bench.rows("SELECT * FROM delivery_attempt")) == 2, "attempts")
        (detail,) = [r["detail"] for r in bench.rows("SELECT * FROM delivery_attempt") if not r["is_delivered"]]
        assert detail == "the address in secret 'ana-push' is none that apprise knows"


def test_an_address_that_leads_nowhere_is_told_before_any_alarm_needs_it(tmp_path, mail):
    with CallBench(tmp_path, people=ONE_PERSON, secrets={"ana-mail": mail.url}) as bench:
        bench.step_until(lambda: "secret 'ana-push' is not set" in bench.worker.calling.problem, "the fault")
        write_secret("ana-push", "json://127.0.0.1:1/", site_file=bench.site_file)
        bench.step(300)
        bench.step_until(lambda: bench.worker.calling.problem == "", "the all-clear")
        assert mail.messages == [], "nothing is sent to find out"


def test_the_daily_test_goes_the_real_way_once_a_day(tmp_path, mail, web):
    people = PEOPLE + "test_message: {at: '09:30'}\n"
    with CallBench(tmp_path, people=people, secrets=secrets(mail, web)) as bench:
        bench.step_until(lambda: len(mail.messages) == 1 and len(web.bodies) == 1, "the test message")
        assert mail.subjects() == ["Test: Quay House"]
        assert "Nothing is wrong" in mail.texts()[0]
        bench.restart()
        bench.step(60)
        bench.step(3600)
        assert len(bench.deliveries()) == 2
        bench.step(86_400)
        bench.step_until(lambda: len(mail.messages) == 2, "the next day's")


def test_nobody_on_duty_is_told_and_somebody_is_called_when_the_shift_begins(tmp_path, mail, web):
    # The bench begins on Thursday, 2026-05-28 at 21:26 in Lisbon.
    people = PEOPLE.replace("  - {who: ana, wait_min: 5}\n  - {who: rui, wait_min: 5}\n", "  - {who: duty}\n") + (
        "duty: {shifts: [{who: rui, begin: '22:00', end: '06:00'}]}\n"
    )
    with CallBench(tmp_path, people=people, secrets=secrets(mail, web)) as bench:
        bench.fall("s0")
        bench.step()
        bench.step(5)
        assert bench.deliveries() == []
        assert "nobody is on duty" in bench.queries.meta()["delivery_problem"]
        bench.step(1800)
        bench.step_until(lambda: len(web.bodies) == 1, "the one on duty")
        bench.step(5)
        assert bench.queries.meta()["delivery_problem"] == ""


def test_quiet_hours_hold_back_what_is_not_urgent_and_never_the_rest(tmp_path, mail, web):
    quiet = PEOPLE + "duty: {quiet_hours: [{begin: '20:00', end: '06:00'}]}\n"
    with CallBench(tmp_path, people=quiet, secrets=secrets(mail, web)) as bench:
        bench.fall("s0")
        bench.step_until(lambda: len(web.bodies) == 1, "an urgent call in quiet hours")


def test_a_shelved_alarm_calls_nobody_any_more(tmp_path, mail, web):
    with CallBench(tmp_path, secrets=secrets(mail, web)) as bench:
        bench.fall("s0")
        bench.step_until(lambda: len(web.bodies) == 1, "the first call")
        until_us = bench.clock.now_us() + 3_600_000_000
        assert bench.act("alarm.shelve", "t0", "salinity_low", why="known", until_us=until_us).outcome == "applied"
        bench.step()
        assert bench.phases() == ["over"]


def test_health_tells_of_the_calls(tmp_path, mail, web):
    from ingest.worker import health

    with CallBench(tmp_path, secrets=secrets(mail, web)) as bench:
        found = health.condition(bench.worker)
        assert found["delivery_problem"] == ""
        assert found["deliveries_on_their_way"] == 0
