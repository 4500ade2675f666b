"""A site's own species and figures, laid over the packaged tables with author and reason."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence
from types import MappingProxyType
from typing import Any

from analysis.animal import tables
from analysis.animal.stage import Certainty, Figure, Stage
from analysis.errors import InvalidInputError


def with_overrides(
    stages: Mapping[str, Stage], overrides: Sequence[Mapping[str, Any]], *, where: str = "site"
) -> dict[str, Stage]:
    """Return *stages* with a site's own figures laid over them.

    Parameters
    ----------
    stages : Mapping of str to Stage
        The packaged tables.
    overrides : sequence of mappings
        Each with ``animal`` (id or other name), ``figure`` (key), ``value`` (a number, or None for "not known"),
        ``author`` and ``reason``.
    where : str
        The file, for the message.

    Raises
    ------
    InvalidInputError
        If an entry names no stage, no figure, no author or no reason, or a value outside what a figure may be.
    """
    changed = dict(stages)
    for number, entry in enumerate(overrides, start=1):
        place = f"{where}, override {number}"
        for key in ("animal", "figure", "author", "reason"):
            if not isinstance(entry.get(key), str) or not str(entry[key]).strip():
                raise InvalidInputError(
                    key, found=entry.get(key), allowed="a text; it is kept with the figure", where=place
                )
        stage = tables.find(str(entry["animal"]), changed)
        changed[stage.id] = _with_figure(stage, entry, where=place)
    return _with_younger(changed)


def with_species(
    stages: Mapping[str, Stage], species: Sequence[Mapping[str, Any]], *, where: str = "site"
) -> dict[str, Stage]:
    """Return *stages* and a site's own species, written as the packaged files are; a known species is replaced.

    Raises
    ------
    InvalidInputError
        As `analysis.animal.tables.species_from_mapping`.
    """
    changed = dict(stages)
    for raw in species:
        own = tables.species_from_mapping(raw, file=where, source_keys=None)
        prefix = own[0].id.split("/", 1)[0] + "/"
        changed = {key: stage for key, stage in changed.items() if not key.startswith(prefix)}
        changed.update((stage.id, stage) for stage in own)
    return changed


def _with_figure(stage: Stage, entry: Mapping[str, Any], *, where: str) -> Stage:
    key = str(entry["figure"])
    figures = dict(stage.figures)
    before = figures.get(key)
    if entry.get("value") is None:
        if before is None:
            raise InvalidInputError("figure", found=key, allowed="a figure that the stage has", where=where)
        del figures[key]
    else:
        raw = {
            "value": entry["value"],
            "unit": tables.unit_of(key),
            "sources": [str(entry["author"])],
            "certainty": Certainty.SITE.value,
            "note": str(entry["reason"]),
            "replaces": _words(before),
        }
        figures[key] = tables.checked_figure(key, raw, where=where, source_keys=None)
    return dataclasses.replace(stage, figures=MappingProxyType(figures))


def _words(figure: Figure | None) -> str:
    return "" if figure is None else f"{figure.value:g} ({figure.mark})"


def _with_younger(stages: Mapping[str, Stage]) -> dict[str, Stage]:
    """Point every stage to the overridden versions of its younger stages."""
    linked: dict[str, Stage] = {}
    for key, stage in stages.items():
        younger = tuple(linked.get(young.id, stages.get(young.id, young)) for young in stage.younger)
        linked[key] = dataclasses.replace(stage, younger=younger)
    return linked
