"""A laboratory analysis in a file of its own, as the kind of water that it describes.

The file holds the keys of one entry of `analyses:` in the site file.
"""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

from pydantic import ValidationError

from analysis.water.ionic_water import IonicWater
from ingest.site.document import Document, read_document
from ingest.site.problems import SiteFileError, nearest_word
from ingest.site.waters import Analysis

if TYPE_CHECKING:
    from pathlib import Path

    from ingest.site.problems import Problem


def water_of_analysis_file(path: Path) -> IonicWater:
    """Return the water described by the analysis in a YAML file.

    Raises
    ------
    SiteFileError
        With everything that is wrong with the file.
    InvalidInputError
        If the analysis itself cannot be: an ion left out, charges that do not balance.
    MissingPackageError
        If the package `phreeqc` is not installed.
    OSError, UnicodeDecodeError
        If the file cannot be read.
    """
    document = read_document(path.read_text(encoding="utf-8-sig"), path.name)
    if document.problems or not isinstance(document.data, dict):
        allowed = "the keys of an analysis: id, name, ions, unit, ..."
        raise SiteFileError(document.problems or [document.problem((), document.data, allowed)])
    try:
        found = Analysis.model_validate_json(json.dumps(document.data), strict=True)
    except ValidationError as error:
        paths = [details["loc"] for details in error.errors(include_url=False, include_context=False)]
        raise SiteFileError([_problem(document, path) for path in paths]) from error
    return IonicWater.from_analysis(found.ion_analysis())


def _problem(document: Document, path: tuple[str | int, ...]) -> Problem:
    place = path[:-1] if path and path[-1] == "[key]" else path
    key = str(place[0]) if place else ""
    field = Analysis.model_fields.get(key)
    if field is None:
        keys = list(Analysis.model_fields)
        return document.problem(place, key, f"the keys {', '.join(keys)}", nearest_word(key, keys))
    return document.problem(place, document.value(place), field.description or key)
