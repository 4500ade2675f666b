"""Every probe: when it was heard, what it says, whether it can be believed; and what came in but could not be used."""

from __future__ import annotations

from html import escape
from typing import NamedTuple

from analysis.flags import Quality
from analysis.sensor.health import Belief
from dashboard.browser.sights import SensorSight, Snapshot
from dashboard.browser.views.frame import framed, teach
from dashboard.browser.visit import Visit, age, link
from ingest.store.queries import Refused
from ingest.words import numbers, times
from ingest.words.trust import belief_word, finding_words, flag_words, quality_word, refusal_words

SHOWN_BYTES = 160


class Placed(NamedTuple):
    """A probe where it sits."""

    place: str
    tank: str
    salinity_kind: str
    sensor: SensorSight


def page(snapshot: Snapshot, visit: Visit, *, refused: list[Refused], counters: dict[str, int]) -> str:
    """Return the page."""
    sensors = [Placed(tank.name, tank.id, tank.salinity_kind, s) for tank in snapshot.tanks for s in tank.sensors]
    sensors += [Placed(sensor.source_water or "", "", "salinity", sensor) for sensor in snapshot.waters]
    if not sensors:
        body = teach(
            visit.text("no_sensors_title"),
            visit.text("no_sensors"),
            steps=(visit.text("no_sensors_1"), visit.text("no_sensors_2")),
        )
    else:
        body = _table(snapshot, visit, sensors) + _refused(snapshot, visit, refused, counters)
    return framed(snapshot, visit, title=visit.language.text("sensors"), place=snapshot.site_name, body=body)


def trust_words(sensor: SensorSight, snapshot: Snapshot, visit: Visit) -> tuple[str, str]:
    """Return the answer to "can I believe it?" and the reason, as text."""
    language = visit.language
    if sensor.measured_at_us is None:
        return str(language.SENSOR_STATES["never"]), ""
    if not sensor.is_fresh(snapshot.now_us):
        expected = times.duration(sensor.interval_s, language=language)
        return str(language.SENSOR_STATES["silent"]), language.text("expected_every", interval=expected)
    why = flag_words(sensor.flags, language=language)
    if sensor.belief is None or sensor.belief <= doubt_of(sensor.quality):
        return quality_word(sensor.quality, language=language), ", ".join(why)
    why += [finding_words(reason, language=language) for reason in sensor.reasons if reason["belief"] > Belief.BELIEVE]
    return belief_word(sensor.belief, language=language), ", ".join(why)


def doubt_of(quality: int) -> Belief:
    """Return how far the flag of the newest reading alone lets a sensor be believed."""
    if quality in (Quality.PASS, Quality.NOT_EVALUATED):
        return Belief.BELIEVE
    return Belief.DOUBT if quality == Quality.SUSPECT else Belief.DO_NOT_USE


def _table(snapshot: Snapshot, visit: Visit, sensors: list[Placed]) -> str:
    heads = (
        ("probe", ""),
        ("where", ""),
        ("heard", ""),
        ("salinity", "n"),
        ("conductivity", "n"),
        ("temperature", "n"),
        ("believe", ""),
    )
    head = "".join(f'<th class="{c}">{visit.text(key)}</th>' for key, c in heads)
    rows = "".join(_row(placed, snapshot, visit) for placed in sensors)
    count = visit.language.counted("sensors", len(sensors))
    return (
        f'<section data-k="sensors"><h2>{visit.text("probes")} <small>{escape(count)}</small></h2><div class="scroll">'
        f'<table class="stack"><thead><tr>{head}</tr></thead><tbody>{rows}</tbody></table></div></section>'
    )


def _row(placed: Placed, snapshot: Snapshot, visit: Visit) -> str:
    language = visit.language
    sensor, place = placed.sensor, escape(placed.place)
    where = link("tank", place, tank=placed.tank, classes="word") if placed.tank else place
    word, reason = trust_words(sensor, snapshot, visit)
    is_calm = sensor.is_fresh(snapshot.now_us) and max(doubt_of(sensor.quality), sensor.belief or 0) == Belief.BELIEVE
    style = "" if is_calm else ' style="color:var(--soon);font-weight:600"'
    cells = (
        (
            "salinity",
            numbers.quantity(
                sensor.salinity, placed.salinity_kind, uncertainty=sensor.salinity_uncertainty, language=language
            ),
        ),
        ("conductivity", numbers.quantity(sensor.conductivity_mS_cm, "conductivity", language=language)),
        ("temperature", numbers.quantity(sensor.temperature_degC, "temperature", language=language)),
    )
    values = "".join(f'<td class="n" data-l="{visit.text(key)}">{escape(text)}</td>' for key, text in cells)
    heard = age(sensor.measured_at_us, now_us=snapshot.now_us, stale_after_s=sensor.stale_after_s, language=language)
    return (
        f'<tr data-k="{escape(sensor.id)}"><th scope="row">{escape(sensor.name)}</th><td>{where}</td><td>{heard}</td>{values}'
        f'<td><span{style}>{escape(word)}</span> <span class="quiet">{escape(reason)}</span></td></tr>'
    )


def _refused(snapshot: Snapshot, visit: Visit, refused: list[Refused], counters: dict[str, int]) -> str:
    if not refused:
        return f'<section data-k="refused"><h2>{visit.text("refused")}</h2><p class="quiet">{visit.text("none_refused")}</p></section>'
    total = sum(number for name, number in counters.items() if name.startswith("refused"))
    small = visit.text("refused_total", n=max(total, len(refused)))
    head = "".join(f"<th>{visit.text(key)}</th>" for key in ("when", "topic", "why_refused", "as_sent"))
    rows = "".join(_refusal(item, snapshot, visit) for item in refused)
    return (
        f'<section data-k="refused"><h2>{visit.text("refused")} <small>{small}</small></h2><div class="scroll"><table class="stack one">'
        f"<thead><tr>{head}</tr></thead><tbody>{rows}</tbody></table></div></section>"
    )


def _refusal(item: Refused, snapshot: Snapshot, visit: Visit) -> str:
    moment = times.moment(item.received_at, snapshot.zone, now_us=snapshot.now_us, language=visit.language)
    why = escape(refusal_words(item.code, language=visit.language))
    details = [visit.text("refused_found", place=item.place or "–", found=item.found)] if item.found else []
    if item.allowed:
        details.append(visit.text("refused_allowed", allowed=item.allowed))
    if item.is_partly_kept:
        details.append(visit.text("rest_kept"))
    payload = item.payload[:SHOWN_BYTES].decode("utf-8", errors="replace")
    dots = "…" if len(item.payload) > SHOWN_BYTES else ""
    return (
        f'<tr data-k="refused-{item.id}"><td class="quiet">{escape(moment)}</td><td><code>{escape(item.topic)}</code></td>'
        f'<td><b>{why}</b><br><span class="quiet">{" ".join(details)}</span></td><td><code>{escape(payload)}{dots}</code></td></tr>'
    )
