"""From the text of a site file to the frozen model, or to the list of everything that is wrong with it."""

from __future__ import annotations

import json
import re
from typing import TYPE_CHECKING, Any, get_args

from pydantic import BaseModel, ValidationError

from ingest.site.checks import problems_across
from ingest.site.document import Document, read_document
from ingest.site.models import Site
from ingest.site.problems import Problem, SiteFileError, nearest_word

if TYPE_CHECKING:
    from collections.abc import Collection
    from pathlib import Path

    from pydantic_core import ErrorDetails

_DECIMAL_COMMA = re.compile(r"[-+]?[0-9]+,[0-9]+\Z")
_DIGITS = re.compile(r"[0-9]+\Z")


def load(path: Path, *, known_animals: Collection[str] | None = None) -> Site:
    """Return the site described by the file at *path*.

    Parameters
    ----------
    path : pathlib.Path
        The site file, YAML, UTF-8.
    known_animals : collection of str
        Animals that may be named; the packaged species tables where not given.

    Raises
    ------
    SiteFileError
        With every problem of the file, each naming file, line, key, what was found and what is allowed.
    """
    try:
        text = path.read_text(encoding="utf-8-sig")
    except OSError as error:
        found = error.strerror or type(error).__name__
        raise SiteFileError([Problem(str(path), 1, "", found, "a file that can be read")]) from error
    except UnicodeDecodeError as error:
        line = error.object[: error.start].count(b"\n") + 1
        found = f"the byte 0x{error.object[error.start]:02x}"
        raise SiteFileError([Problem(path.name, line, "", found, "text in UTF-8")]) from error
    return load_text(text, path.name, known_animals=known_animals)


def load_text(text: str, name: str = "site file", *, known_animals: Collection[str] | None = None) -> Site:
    """Return the site that *text* describes; *name* stands in the problems. See `load`."""
    document = read_document(text, name)
    if document.data is None or not isinstance(document.data, dict):
        if not document.problems:
            document.problems.append(document.problem((), document.data, "the sections of a site, 'site:' first"))
        raise SiteFileError(document.problems)
    site = _validated(document)
    document.problems.extend(problems_across(document, known_animals=known_animals))
    if site is None or document.problems:
        raise SiteFileError(document.problems)
    return site


def _validated(document: Document) -> Site | None:
    """Return the model, or None with the problems noted in *document*."""
    try:
        # By way of JSON: its strict mode takes a date as text and a list as tuple, and nothing else in disguise.
        return Site.model_validate_json(json.dumps(document.data), strict=True, by_alias=True, by_name=False)
    except ValidationError as error:
        found = error.errors(include_url=False, include_context=False)
        paths = [details["loc"] for details in found]
        # A list counts as too short when an item of it is wrong: the item's own problem says it all.
        within = [any(other[: len(path)] == path and other != path for other in paths) for path in paths]
        document.problems.extend(
            _problem(document, details) for details, is_around in zip(found, within, strict=True) if not is_around
        )
        return None


def _problem(document: Document, details: ErrorDetails) -> Problem:
    """Return one error of the model as a problem of the file."""
    path = details["loc"]
    if path and path[-1] == "[key]":
        path = path[:-1]
    kind = details["type"]
    found = document.value(path)
    if kind == "extra_forbidden":
        return _unknown_key(document, path)
    if kind == "missing":
        return document.problem(path, None, f"{_words_for(path)}; this key must be there")
    nearest = _nearest(found, path)
    return document.problem(path, found, _words_for(path), nearest)


def _unknown_key(document: Document, path: tuple[str | int, ...]) -> Problem:
    """Return the problem of a key that has no place here."""
    key = str(path[-1])
    if _DIGITS.match(key) and document.value(path) is None:
        allowed = "a decimal point, not a comma, in numbers"
        return Problem(document.name, document.line(path), document.key(path), repr(key), allowed)
    model = _model_at(path[:-1])
    keys = [field.alias or name for name, field in model.model_fields.items()] if model else []
    allowed = f"the keys {', '.join(keys)}"
    return Problem(
        document.name, document.line(path), document.key(path), f"the key {key!r}", allowed, nearest_word(key, keys)
    )


def _nearest(found: object, path: tuple[str | int, ...]) -> str:
    """Return the nearest right value for a wrong one."""
    if isinstance(found, str) and _DECIMAL_COMMA.match(found):
        return found.replace(",", ".")
    if isinstance(found, str) and (number := re.match(r"([-+]?[0-9]+(\.[0-9]+)?)\s*[^0-9.,\s]*\Z", found)):
        return f"{float(number[1]):.10g}" if "number" in _words_for(path) else ""
    if "a text" in _words_for(path) or "hyphens" in _words_for(path):
        if isinstance(found, int | float) and not isinstance(found, bool):
            return f"'{found}' (in quotes)" if "a text" in _words_for(path) else ""
        return _as_slug(found) if "hyphens" in _words_for(path) else ""
    return nearest_word(found, _choices_at(path))


def _as_slug(found: object) -> str:
    """Return the id that comes nearest to *found*."""
    if not isinstance(found, str):
        return ""
    return re.sub(r"[^a-z0-9]+", "-", found.lower()).strip("-")[:40]


def _field_at(path: tuple[str | int, ...]) -> Any:
    """Return the innermost field of the model on the way to *path*, None if there is none."""
    model: Any = Site
    innermost = None
    for part in path:
        if not isinstance(part, str) or model is None:
            continue
        fields = {field.alias or name: field for name, field in model.model_fields.items()}
        if part in fields:
            innermost = fields[part]
            model = _model_within(innermost.annotation)
    return innermost


def _model_at(path: tuple[str | int, ...]) -> type[BaseModel] | None:
    """Return the section that stands at *path*."""
    if not path:
        return Site
    field = _field_at(path)
    return _model_within(field.annotation) if field else None


def _model_within(annotation: Any) -> type[BaseModel] | None:
    """Return the section that an annotation speaks of: itself, or within a list, a dict or "or null"."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    return next((model for part in get_args(annotation) if (model := _model_within(part))), None)


def _words_for(path: tuple[str | int, ...]) -> str:
    """Return what is allowed at *path*, in the words of the field."""
    field = _field_at(path)
    return str(field.description) if field and field.description else "a value of the right kind"


def _choices_at(path: tuple[str | int, ...]) -> list[str]:
    """Return the words that a choice allows at *path*."""
    words = _words_for(path)
    return words.removeprefix("one of: ").split(", ") if words.startswith("one of: ") else []
