"""Checks across the sections of a site file: references, ids, topics, bands.

They work on the plain data, not on the model, so that they run beside the errors of single fields: a person
gets everything at once. What has the wrong shape is passed over here; the model complains of it.
"""

from __future__ import annotations

import json
import re
from functools import cache
from typing import TYPE_CHECKING, Any
from zoneinfo import available_timezones

from pydantic import ValidationError

from analysis.animal import tables
from analysis.errors import InvalidInputError
from ingest.site.call_checks import problems_of_calls
from ingest.site.problems import listed, nearest_word
from ingest.site.section import ANIMAL_PATTERN
from ingest.site.sensor_checks import problems_of_sensors
from ingest.site.tanks import MAIN_HALL, SetPoint
from ingest.site.waters import PLAIN_WATER_KINDS, Analysis

if TYPE_CHECKING:
    from collections.abc import Collection, Iterator

    from ingest.site.document import Document, Path
    from ingest.site.problems import Problem

LISTS_WITH_IDS = ("source_waters", "analyses", "halls", "tanks", "sensors", "people")


def problems_across(document: Document, *, known_animals: Collection[str] | None = None) -> list[Problem]:
    """Return every problem that lies between the parts of a site file.

    Parameters
    ----------
    document : Document
        The plain data of the file.
    known_animals : collection of str
        Animals that may be named; the packaged species tables where not given.
    """
    return [
        *_time_zone(document),
        *_ids(document),
        *_references(document),
        *_set_points(document),
        *_analyses(document),
        *_stock(document),
        *_animals(document, packaged_animals() if known_animals is None else known_animals),
        *problems_of_sensors(document),
        *problems_of_calls(document),
    ]


def items(document: Document, section: str) -> Iterator[tuple[Path, dict[str, Any]]]:
    """Yield path and group of every item of a list section that has the shape of a group."""
    entries = document.value((section,))
    if isinstance(entries, list):
        for index, entry in enumerate(entries):
            if isinstance(entry, dict):
                yield (section, index), entry


def ids(document: Document, section: str) -> list[str]:
    """Return the ids of a list section, in the order of the file."""
    return [entry["id"] for _, entry in items(document, section) if isinstance(entry.get("id"), str)]


@cache
def time_zones() -> frozenset[str]:
    """Return the names of the IANA list; the machine's disk is searched once."""
    return frozenset(available_timezones())


def _time_zone(document: Document) -> Iterator[Problem]:
    path = ("site", "time_zone")
    zone = document.value(path)
    if not isinstance(zone, str):
        return
    zones = time_zones()
    if zone not in zones:
        nearest = nearest_word(zone, zones) or _zone_by_city(zone, zones)
        yield document.problem(path, zone, "a time zone of the IANA list, such as Europe/Lisbon", nearest)


def _zone_by_city(zone: str, zones: Collection[str]) -> str:
    """Return the zone whose city is the one that was written."""
    city = zone.strip().rpartition("/")[2].replace(" ", "_").lower()
    return next((known for known in sorted(zones) if known.rpartition("/")[2].lower() == city), "")


def _ids(document: Document) -> Iterator[Problem]:
    for section in LISTS_WITH_IDS:
        yield from _each_once(document, [((*path, "id"), entry.get("id")) for path, entry in items(document, section)])
    stock = [
        ((*path, "first_stock", "id"), entry["first_stock"].get("id"))
        for path, entry in items(document, "tanks")
        if isinstance(entry.get("first_stock"), dict)
    ]
    yield from _each_once(document, stock)
    for path, entry in items(document, "analyses"):
        if entry.get("id") in PLAIN_WATER_KINDS:
            allowed = "an id other than seawater and sodium-chloride, which are built in"
            yield document.problem((*path, "id"), entry["id"], allowed)


def _each_once(document: Document, found: list[tuple[Path, Any]]) -> Iterator[Problem]:
    first: dict[str, Path] = {}
    for path, value in found:
        if not isinstance(value, str):
            continue
        if value in first:
            allowed = f"an id used once (first in line {document.line(first[value])})"
            yield document.problem(path, value, allowed)
        first.setdefault(value, path)


def _references(document: Document) -> Iterator[Problem]:
    halls = ids(document, "halls") if document.value(("halls",)) is not None else [MAIN_HALL]
    waters = [*PLAIN_WATER_KINDS, *ids(document, "analyses")]
    for path, tank in items(document, "tanks"):
        hall = tank.get("hall", MAIN_HALL)
        if isinstance(hall, str) and hall not in halls:
            found = hall if "hall" in tank else None
            yield document.problem((*path, "hall"), found, listed(halls, "a hall"), nearest_word(hall, halls))
        yield from _water(document, (*path, "water"), waters)
    for path, _ in items(document, "source_waters"):
        yield from _water(document, (*path, "kind"), waters)


def _water(document: Document, path: Path, waters: list[str]) -> Iterator[Problem]:
    kind = document.value(path)
    if isinstance(kind, str) and kind not in waters:
        allowed = f"a kind of water: {', '.join(waters)} (an entry of analyses makes a new one)"
        yield document.problem(path, kind, allowed, nearest_word(kind, waters))


def _set_points(document: Document) -> Iterator[Problem]:
    for path, tank in items(document, "tanks"):
        set_point = tank.get("set_point")
        if not isinstance(set_point, dict) or _has_unknown_key(set_point):
            continue
        at = (*path, "set_point")
        salinity, band = _number(set_point.get("salinity")), _number(set_point.get("band"))
        tidal = set_point.get("tidal_band")
        if salinity is not None and tidal is not None:
            yield document.problem((*at, "tidal_band"), tidal, "either salinity (with band) or tidal_band, not both")
        if band is not None and salinity is None:
            yield document.problem((*at, "band"), band, "a band only beside a salinity; a tide has a tidal_band")
        if band is not None and salinity is not None and 0 < salinity < band:
            yield document.problem((*at, "band"), band, f"a band no wider than the salinity {salinity:g} itself")
        if set_point.get("temperature_band_K") is not None and set_point.get("temperature_degC") is None:
            found = set_point["temperature_band_K"]
            yield document.problem((*at, "temperature_band_K"), found, "a band only beside a temperature_degC")
        yield from ordered(document, (*at, "tidal_band"))


def _has_unknown_key(set_point: dict[str, Any]) -> bool:
    """Return whether a key of a set point is misspelt: what would follow from that is not told twice."""
    return not SetPoint.model_fields.keys() >= set_point.keys()


def _analyses(document: Document) -> Iterator[Problem]:
    """Yield what only the chemistry can tell: charges that do not balance, no cation or no anion."""
    for path, entry in items(document, "analyses"):
        try:
            Analysis.model_validate_json(json.dumps(entry), strict=True).ion_analysis()
        except ValidationError:
            continue  # told field by field
        except InvalidInputError as error:
            problem = document.problem((*path, "ions"), None, f"{error.what}: {error.allowed}")
            yield problem._replace(found=str(error.found))


def _stock(document: Document) -> Iterator[Problem]:
    for path, tank in items(document, "tanks"):
        stock = tank.get("first_stock")
        if not isinstance(stock, dict):
            continue
        set_point = tank.get("set_point")
        has_salinity = isinstance(set_point, dict) and (
            _has_unknown_key(set_point)
            or set_point.get("salinity") is not None
            or set_point.get("tidal_band") is not None
        )
        if not has_salinity:
            allowed = "set_point with a salinity or a tidal_band: a stocked tank without one has no alarm of its own"
            yield document.problem((*path, "set_point"), set_point, allowed)


def _animals(document: Document, known_animals: Collection[str]) -> Iterator[Problem]:
    paths: list[Path] = [(*path, "first_stock", "animal") for path, _ in items(document, "tanks")]
    paths += [(*path, "animal") for path, _ in items(document, "species")]
    for path in paths:
        animal = document.value(path)
        if isinstance(animal, str) and re.match(ANIMAL_PATTERN, animal) and animal not in known_animals:
            allowed = "an animal of the species tables; euryhale species lists them"
            yield document.problem(path, animal, allowed, nearest_word(animal, known_animals))
    for path, entry in items(document, "species"):
        figures = entry.get("figures")
        for figure in figures if isinstance(figures, dict) else ():
            if figure not in tables.KNOWN_KEYS:
                allowed = "a figure of the species tables, such as tolerable_low_ppt"
                yield document.problem(
                    (*path, "figures", figure), figure, allowed, nearest_word(figure, tables.KNOWN_KEYS)
                )


@cache
def packaged_animals() -> frozenset[str]:
    """Return the ids of the packaged species tables, and the other names of their stages."""
    stages = tables.load()
    return frozenset(stages).union(*(stage.aliases for stage in stages.values()))


def ordered(document: Document, path: Path) -> Iterator[Problem]:
    """Yield the problem of a [low, high] pair that does not rise."""
    pair = document.value(path)
    if isinstance(pair, list) and len(pair) == 2:
        low, high = _number(pair[0]), _number(pair[1])
        if low is not None and high is not None and not low < high:
            yield document.problem(path, pair, "[low, high], low below high")


def _number(value: object) -> float | None:
    return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else None
