"""Checks of the sensors of a site file: their place, their topics, what they are said to report."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from ingest.site.problems import listed, nearest_word
from ingest.site.sensors import QUANTITIES, SENML_NAME
from ingest.topics import fault_of_topic

if TYPE_CHECKING:
    from collections.abc import Iterator

    from ingest.site.document import Document, Path
    from ingest.site.problems import Problem

SENML = ("senml-json", "senml-cbor")


def problems_of_sensors(document: Document) -> Iterator[Problem]:
    """Yield every problem of the section `sensors`."""
    sensors = document.value(("sensors",))
    if not isinstance(sensors, list):
        return
    taken: dict[str, Path] = {}
    for index, sensor in enumerate(sensors):
        if isinstance(sensor, dict):
            path: Path = ("sensors", index)
            yield from _place(document, path, sensor)
            yield from _fields(document, path, sensor)
            yield from _compensation(document, path, sensor)
            yield from _ranges(document, path, sensor)
            yield from _topics(document, path, sensor, taken)


def _place(document: Document, path: Path, sensor: dict[str, Any]) -> Iterator[Problem]:
    places = [key for key in ("tank", "source_water") if sensor.get(key) is not None]
    if len(places) != 1:
        found = "nothing" if not places else "both tank and source_water"
        allowed = "where the sensor sits: tank or source_water, exactly one"
        problem = document.problem(path, None, allowed)
        yield problem._replace(found=found)
    for key, section, what in (("tank", "tanks", "a tank"), ("source_water", "source_waters", "a source water")):
        named = sensor.get(key)
        known = _ids(document, section)
        if isinstance(named, str) and named not in known:
            yield document.problem((*path, key), named, listed(known, what), nearest_word(named, known))


def _ids(document: Document, section: str) -> list[str]:
    entries = document.value((section,))
    found = [entry.get("id") for entry in entries if isinstance(entry, dict)] if isinstance(entries, list) else []
    return [value for value in found if isinstance(value, str)]


def _named(sensor: dict[str, Any]) -> list[tuple[tuple[str, ...], str]]:
    """Return the field name of every quantity and channel, and under which keys it stands."""
    fields, channels = sensor.get("fields"), sensor.get("channels")
    named: list[tuple[tuple[str, ...], Any]] = []
    if isinstance(fields, dict):
        named += [(("fields", name), fields.get(name)) for name in QUANTITIES]
    if isinstance(channels, dict):
        named += [
            (("channels", name, "field"), channel.get("field"))
            for name, channel in channels.items()
            if isinstance(channel, dict)
        ]
    return [(keys, field) for keys, field in named if isinstance(field, str)]


def _fields(document: Document, path: Path, sensor: dict[str, Any]) -> Iterator[Problem]:
    fields, named = sensor.get("fields"), _named(sensor)
    if isinstance(fields, dict) and not named:
        allowed = "at least one of conductivity, temperature, pressure, or a channel"
        yield document.problem((*path, "fields"), fields, allowed)
    seen: dict[str, tuple[str, ...]] = {}
    times = [(("fields", "time"), fields["time"])] if isinstance(fields, dict) and fields.get("time") else []
    for keys, field in [*named, *times]:
        if field in seen:
            allowed = f"a field read once (also {'.'.join(seen[field])})"
            yield document.problem((*path, *keys), field, allowed)
        seen.setdefault(field, keys)
        if isinstance(field, str) and sensor.get("payload", "json") == "json" and "" in field.split("."):
            yield document.problem((*path, *keys), field, "names joined by single dots, such as ec.value")
        if sensor.get("payload") in SENML and isinstance(field, str) and not SENML_NAME.match(field):
            allowed = "a SenML name: letters, digits and - : . / _, a letter or digit first"
            yield document.problem((*path, *keys), field, allowed)
    if sensor.get("payload", "json") != "json" and times:
        allowed = "no time field: SenML carries its own time, and a plain number has the time received"
        yield document.problem((*path, "fields", "time"), fields["time"] if fields else None, allowed)
    for name in _channel_names(sensor):
        if name in (*QUANTITIES, "time"):
            yield document.problem((*path, "channels", name), name, "a channel name other than those under fields")


def _channel_names(sensor: dict[str, Any]) -> list[str]:
    channels = sensor.get("channels")
    return list(channels) if isinstance(channels, dict) else []


def _compensation(document: Document, path: Path, sensor: dict[str, Any]) -> Iterator[Problem]:
    compensation = sensor.get("compensation")
    at = (*path, "compensation")
    if sensor.get("reports") == "compensated" and compensation is None:
        allowed = (
            "how the sensor compensates, such as {method: linear, coefficient_percent_per_K: 1.91, "
            "reference_temperature_degC: 25}"
        )
        yield document.problem(at, None, allowed)
    if sensor.get("reports", "raw") == "raw" and compensation is not None:
        yield document.problem(at, compensation, "no compensation where reports is raw; else reports: compensated")
    if not isinstance(compensation, dict):
        return
    coefficient = compensation.get("coefficient_percent_per_K")
    if compensation.get("method") == "linear" and coefficient is None:
        allowed = "a number from 0.1 to 5 [%/K], from the sensor's settings; this key must be there"
        yield document.problem((*at, "coefficient_percent_per_K"), None, allowed)
    if compensation.get("method") == "natural-water" and coefficient is not None:
        allowed = "no coefficient: the natural-water curve of ISO 7888 has none"
        yield document.problem((*at, "coefficient_percent_per_K"), coefficient, allowed)


def _ranges(document: Document, path: Path, sensor: dict[str, Any]) -> Iterator[Problem]:
    for key in ("conductivity_mS_cm", "temperature_degC"):
        at = (*path, "span", key)
        pair = document.value(at)
        if _rising(pair) is False:
            yield document.problem(at, pair, "[low, high], low below high")
    for name in _channel_names(sensor):
        at = (*path, "channels", name)
        pair = [document.value((*at, "low")), document.value((*at, "high"))]
        if _rising(pair) is False:
            yield document.problem((*at, "high"), pair[1], f"a number above low, {pair[0]}")


def _rising(pair: object) -> bool | None:
    """Return whether a pair of numbers rises; None where it is no such pair."""
    if not isinstance(pair, list) or len(pair) != 2:
        return None
    if not all(isinstance(value, int | float) and not isinstance(value, bool) for value in pair):
        return None
    return bool(pair[0] < pair[1])


def _topics(document: Document, path: Path, sensor: dict[str, Any], taken: dict[str, Path]) -> Iterator[Problem]:
    """Yield the problems of a sensor's topics; *taken* collects the topics of the sensors before it."""
    payload, topic = sensor.get("payload", "json"), sensor.get("topic")
    if topic is None and payload != "number":
        yield document.problem((*path, "topic"), None, "an MQTT topic; this key must be there")
    for keys, text in _topic_texts(sensor):
        at = (*path, *keys)
        if (fault := fault_of_topic(text)) is not None:
            yield document.problem(at, text, fault)
            continue
        # A SenML topic may carry the records of several sensors: there the SenML names tell them apart.
        is_shared = payload in SENML
        claims = [f"{text}\0{field}" for _, field in _named(sensor)] if is_shared else [text]
        rivals = [text, *claims] if is_shared else [text, f"{text}\0"]
        clash = next((taken[rival] for rival in rivals if rival in taken), None)
        if clash is not None:
            what = "a topic with SenML names that no other sensor has" if is_shared else "a topic of its own"
            allowed = f"{what} (also in line {document.line(clash)}, {document.key(clash)})"
            yield document.problem(at, text, allowed)
        for claim in [*claims, f"{text}\0"] if is_shared else claims:
            taken.setdefault(claim, at)


def _topic_texts(sensor: dict[str, Any]) -> list[tuple[tuple[str, ...], str]]:
    """Return every topic that a sensor sends to, and the keys under which it stands."""
    topic = sensor.get("topic")
    if sensor.get("payload", "json") != "number":
        return [(("topic",), topic)] if isinstance(topic, str) else []
    prefix = f"{topic}/" if isinstance(topic, str) else ""
    return [(keys, prefix + field) for keys, field in _named(sensor)]
