"""The text of a site file as plain data, with the line of every key. All defects of the text itself are found here."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import Any

from ruamel.yaml import YAML
from ruamel.yaml.error import MarkedYAMLError, YAMLError
from ruamel.yaml.nodes import MappingNode, Node, ScalarNode, SequenceNode

from ingest.site.problems import Problem, shown

LARGEST_FILE_CHARACTERS = 5_000_000
DEEPEST = 20

Path = tuple[str | int, ...]

_WHOLE = re.compile(r"-?(0|[1-9][0-9]{0,17})\Z")
_DECIMAL = re.compile(r"[-+]?([0-9]+\.[0-9]*|\.[0-9]+|[0-9]+)([eE][-+]?[0-9]{1,3})?\Z")
_BRACKET = re.compile(r"[\[\]{}\n]")
_SHALLOW = f"at most {DEEPEST} levels"
_LEADING_ZERO = re.compile(r"[-+]?0[0-9]")
_HINTS = (
    ("but got ':'", "one 'key: value' between two commas; put a text that holds ': ' in quotes"),
    ("mapping values are not allowed", "one 'key: value' a line; put a text that holds ': ' in quotes"),
    ("cannot start any token", "a text that begins with a letter; put texts that begin with @ ` % or a tab in quotes"),
    ("could not find expected ':'", "'key: value' with a colon and a space"),
    ("undefined alias", "a text in quotes: a bare * begins a reference in YAML"),
    ("another document", "one document a file: no second '---' line"),
    ("flow node", "brackets and braces that are closed again"),
    ("flow sequence", "a list in brackets [a, b], closed again"),
    ("flow mapping", "a group in braces {key: value}, closed again"),
    ("quoted scalar", "a quote that is closed on the same line"),
    ("block end", "keys of one group begin in the same column"),
    ("block mapping", "keys of one group begin in the same column"),
)


@dataclass(slots=True)
class Document:
    """A site file as read: the data, where each key stands, and the problems of the text.

    Attributes
    ----------
    name : str
        Name of the file.
    data : object
        Dicts, lists, texts, numbers, true, false and None.
    lines : dict of tuple to int
        Line (the first is 1) of every key and list item, by path.
    problems : list of Problem
        What is wrong with the text itself.
    """

    name: str
    data: Any = None
    lines: dict[Path, int] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)

    def line(self, path: Path) -> int:
        """Return the line of *path*, or of the nearest group around it."""
        while path and path not in self.lines:
            path = path[:-1]
        return self.lines.get(path, 1)

    def value(self, path: Path) -> Any:
        """Return what stands at *path*, None where nothing does."""
        value = self.data
        for part in path:
            is_there = isinstance(part, int) and part < len(value) if isinstance(value, list) else False
            if not (is_there or (isinstance(value, dict) and part in value)):
                return None
            value = value[part]
        return value

    def key(self, path: Path) -> str:
        """Return *path* in words: list items counted from 1 and with their id."""
        text = ""
        for depth, part in enumerate(path):
            if isinstance(part, int):
                item = self.value(path[: depth + 1])
                name = item.get("id", item.get("animal")) if isinstance(item, dict) else None
                text += f"[{part + 1}]" + (f" ({name})" if isinstance(name, str | int) else "")
            else:
                text += f".{part}" if text else part
        return text

    def problem(self, path: Path, found: object, allowed: str, nearest: str = "") -> Problem:
        """Return the problem at *path*; *found* is a value, shown as YAML writes it."""
        return Problem(self.name, self.line(path), self.key(path), shown(found), allowed, nearest)


def read_document(text: str, name: str) -> Document:
    """Return the plain data of *text* with the line of every key; nothing is raised for a bad text."""
    document = Document(name)
    if len(text) > LARGEST_FILE_CHARACTERS:
        allowed = f"at most {LARGEST_FILE_CHARACTERS} characters"
        document.problems.append(Problem(name, 1, "", f"{len(text)} characters", allowed))
        return document
    if (line := _line_nested_too_deep(text)) is not None:
        document.problems.append(Problem(name, line, "", "groups nested without end", _SHALLOW))
        return document
    try:
        node = YAML(typ="rt", pure=True, plug_ins=[]).compose(text)
    except MarkedYAMLError as error:
        document.problems.extend(_problems_of_syntax(error, text, name))
    except RecursionError:
        document.problems.append(Problem(name, 1, "", "groups nested without end", _SHALLOW))
    except (YAMLError, ValueError) as error:
        document.problems.append(_problem_of_character(error, text, name))
    else:
        reading = _Reading(document)
        document.data = None if node is None else reading.plain(node, ())
        # Only now do the items have their names.
        document.problems.extend(
            Problem(name, line, document.key(path), found, allowed) for line, path, found, allowed in reading.complaints
        )
    return document


def _line_nested_too_deep(text: str) -> int | None:
    """Return the line in which brackets reach an absurd depth; the parser's time grows with its square."""
    depth, line = 0, 1
    for match in _BRACKET.finditer(text):
        if match[0] == "\n":
            line += 1
        else:
            depth = depth + 1 if match[0] in "[{" else max(depth - 1, 0)
            if depth > 4 * DEEPEST:
                return line
    return None


def _problems_of_syntax(error: MarkedYAMLError, text: str, name: str) -> list[Problem]:
    """Return what the parser stumbled over; tabs in the indentation are all listed, not the first alone."""
    lines = text.splitlines()
    tabbed = [number for number, line in enumerate(lines, 1) if "\t" in line[: len(line) - len(line.lstrip())]]
    if tabbed:
        return [Problem(name, number, "", "a tab before the first word", "spaces only") for number in tabbed]
    said = f"{error.context or ''} {error.problem or ''}".strip()
    # What is never closed is best shown where it was opened.
    is_open = "quoted scalar" in said or "while parsing a flow" in said
    mark = (error.context_mark if is_open else None) or error.problem_mark or error.context_mark
    number = mark.line + 1 if mark else 1
    allowed = next((hint for part, hint in _HINTS if part in said), "well-formed YAML")
    line = lines[number - 1].strip() if number <= len(lines) else "the end of the file"
    return [Problem(name, number, "", shown(line), f"{allowed} ({said})")]


def _problem_of_character(error: Exception, text: str, name: str) -> Problem:
    """Return the problem of a character that no text may hold."""
    position = getattr(error, "position", 0)
    number = text.count("\n", 0, position) + 1 if isinstance(position, int) else 1
    return Problem(name, number, "", str(error).splitlines()[0], "printable characters, UTF-8")


class _Reading:
    """One walk over the nodes of a document."""

    def __init__(self, document: Document) -> None:
        self.document = document
        self.seen: set[int] = set()
        self.complaints: list[tuple[int, Path, str, str]] = []

    def plain(self, node: Node, path: Path) -> Any:
        """Return the plain value of *node* and note where its keys stand."""
        if id(node) in self.seen:
            self.complain(node, path, "a reference (*)", "every value written out: no & and * in a site file")
            return None
        self.seen.add(id(node))
        if len(path) > DEEPEST:
            self.complain(node, path, "groups nested too deep", _SHALLOW)
            return None
        if not str(node.tag).startswith("tag:yaml.org,2002:") or "python" in str(node.tag):
            self.complain(node, path, f"the type mark {node.tag}", "plain values: no ! in a site file")
            return None
        if isinstance(node, MappingNode):
            return self.mapping(node, path)
        if isinstance(node, SequenceNode):
            return self.sequence(node, path)
        return _scalar(node) if isinstance(node, ScalarNode) else None

    def mapping(self, node: MappingNode, path: Path) -> dict[str, Any]:
        """Return the group of *node*; a key given twice is a problem and the first stays."""
        group: dict[str, Any] = {}
        for key_node, value_node in node.value:
            if not isinstance(key_node, ScalarNode):
                self.complain(key_node, path, "a key that is a group or a list", "a word as key")
                continue
            key = str(key_node.value)
            if key in group:
                first = self.document.lines[(*path, key)]
                self.complain(key_node, (*path, key), f"{key!r} a second time", f"once (first in line {first})")
                continue
            self.document.lines[(*path, key)] = key_node.start_mark.line + 1
            group[key] = self.plain(value_node, (*path, key))
        return group

    def sequence(self, node: SequenceNode, path: Path) -> list[Any]:
        """Return the list of *node*."""
        items = []
        for index, item in enumerate(node.value):
            self.document.lines[(*path, index)] = item.start_mark.line + 1
            items.append(self.plain(item, (*path, index)))
        return items

    def complain(self, node: Node, path: Path, found: str, allowed: str) -> None:
        """Note a problem in the line of *node*."""
        self.complaints.append((node.start_mark.line + 1, path, found, allowed))


def _scalar(node: ScalarNode) -> Any:
    """Return the value of a scalar; numbers only as people write them (010, 0x1f, 1_000, .nan stay texts)."""
    text = str(node.value)
    if node.style in ('"', "'", "|", ">"):
        return text
    kind = str(node.tag).rpartition(":")[2]
    if kind == "null":
        return None
    if kind == "bool":
        return text.lower() == "true"
    if kind == "int" and _WHOLE.match(text):
        return int(text)
    if kind in ("int", "float") and _DECIMAL.match(text) and not _LEADING_ZERO.match(text):
        number = float(text)
        return number if abs(number) < float("inf") else text
    return text
