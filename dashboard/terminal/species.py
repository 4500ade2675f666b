"""`euryhale species`: the animals the tool knows, and every figure with its source and how sure it is."""

from __future__ import annotations

import json
import math
import sys
from typing import TYPE_CHECKING, Any

from analysis.animal import tables
from analysis.animal.fallback_rules import RULES
from analysis.animal.fallbacks import resolved
from analysis.animal.stage import Certainty, Figure, Supports
from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    import argparse
    from collections.abc import Iterable

    from analysis.animal.stage import Stage

HELP = "list the animals the tool knows, or show one with every figure and its source"

CAUTION = (
    "Published averages, most of them read in abstracts; stocks differ. Test any transfer on a few animals first, "
    "and override a figure in the site file where your own stock says otherwise."
)
USAGE_ERROR = 2
NOT_KNOWN = "not known"

SHOWN_LIMITS = (
    ("level_low", "lethal, fresh side (slow change)"),
    ("tolerable_low", "tolerable, fresh side"),
    ("optimal_low", "optimal from"),
    ("optimal_high", "optimal to"),
    ("tolerable_high", "tolerable, salt side"),
    ("level_high", "lethal, salt side (slow change)"),
    ("jump_low", "lethal jump downward"),
    ("jump_high", "lethal jump upward"),
    ("isosmotic", "isosmotic point"),
    ("slope", "slope of the body fluid"),
    ("tau_up", "settling time upward"),
    ("tau_down", "settling time downward"),
    ("optimal_low_degC", "optimal temperature from"),
    ("optimal_high_degC", "optimal temperature to"),
    ("tolerable_low_degC", "tolerable temperature from"),
    ("tolerable_high_degC", "tolerable temperature to"),
)
"""What the stress model uses: key, and the words for a person."""


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("species", help=HELP, description=HELP, epilog=CAUTION)
    parser.add_argument("animal", nargs="?", help="genus-species/stage, or genus-species for all its stages")
    parser.add_argument("--json", action="store_true", help="print JSON")


def run(args: argparse.Namespace) -> int:
    """List the stages, or show one."""
    stages = tables.load()
    wanted = (args.animal or "").strip().lower().rstrip("/")
    if wanted and "/" in wanted:
        try:
            stage = tables.find(wanted, stages)
        except InvalidInputError as error:
            print(f"euryhale species: {error}", file=sys.stderr)
            return USAGE_ERROR
        print(json.dumps(_whole(stage), ensure_ascii=False, indent=1) if args.json else _page(stage))
        return 0
    chosen = [stage for stage in stages.values() if not wanted or stage.id.startswith(f"{wanted}/")]
    if not chosen:
        near = ", ".join(tables.nearest(wanted, {stage.id.split("/")[0] for stage in stages.values()}))
        print(f"euryhale species: animal: found {args.animal!r}; allowed: for example {near}", file=sys.stderr)
        return USAGE_ERROR
    print(json.dumps([_brief(stage) for stage in chosen], ensure_ascii=False, indent=1) if args.json else _list(chosen))
    return 0


def supported_words(supports: Supports) -> list[str]:
    """Return the parts of the stress that can be told, in words."""
    names = {
        Supports.RANGE: "salinity itself",
        Supports.CHANGE: "change",
        Supports.EXPOSURE: "exposure",
        Supports.THERMAL: "temperature",
        Supports.INTERNAL: "body fluid",
    }
    return [words for part, words in names.items() if supports & part]


def _brief(stage: Stage) -> dict[str, Any]:
    return {
        "id": stage.id,
        "also": list(stage.aliases),
        "species": stage.species,
        "common_name": stage.common_name,
        "stage": stage.name,
        "confidence": stage.confidence,
        "supports": supported_words(stage.supports),
    }


def _whole(stage: Stage) -> dict[str, Any]:
    ready = resolved(stage)
    return _brief(stage) | {
        "regulation": stage.regulation,
        "notes": stage.notes,
        "figures": {key: _figure(figure) for key, figure in stage.figures.items()},
        "remarks": [
            {"text": remark.text, "certainty": remark.certainty.value, "sources": list(remark.sources)}
            for remark in stage.remarks
        ],
        "gates": [
            {"kind": gate.kind, "text": gate.text, "certainty": gate.certainty.value, "sources": list(gate.sources)}
            for gate in stage.gates
        ],
        "used": {key: _figure(figure) for key, figure in ready.figures.items()},
        "not_known": [key for key, _ in SHOWN_LIMITS if math.isnan(ready.value(key))],
        "sources": _citations(stage.figures.values()),
    }


def _figure(figure: Figure) -> dict[str, Any]:
    return {
        "value": figure.value if math.isfinite(figure.value) else None,
        "unit": figure.unit,
        "certainty": figure.certainty.value,
        "sources": list(figure.sources),
        "note": figure.note,
        "replaces": figure.replaces,
    }


def _citations(figures: Iterable[Figure]) -> dict[str, str]:
    known = tables.sources()
    keys = dict.fromkeys(key for figure in figures for key in figure.sources)
    return {key: known[key]["citation"] for key in keys if key in known}


def _list(stages: list[Stage]) -> str:
    width = max(len(stage.id) for stage in stages)
    lines = [
        f"{stage.id:<{width}}  {stage.confidence}  {', '.join(supported_words(stage.supports)) or NOT_KNOWN}"
        for stage in stages
    ]
    head = f"{'animal':<{width}}  grade, and what can be told of it"
    tail = "Grade A: the key limits come from a named study; B: one study, short or a proxy; C: recalled or partial."
    return "\n".join([head, *lines, "", tail, CAUTION])


def _page(stage: Stage) -> str:
    ready = resolved(stage)
    told = ", ".join(supported_words(stage.supports)) or NOT_KNOWN
    lines = [
        f"{stage.id}: {stage.common_name} ({stage.species}), {stage.name}",
        f"grade {stage.confidence}; {stage.regulation}",
    ]
    lines += [f"can be told: {told}", "", "Published figures:"]
    lines += [_figure_line(key, figure) for key, figure in stage.figures.items()]
    lines += [f"  {remark.text} ({remark.certainty.value}: {', '.join(remark.sources)})" for remark in stage.remarks]
    lines += ["", "What the stress uses:"]
    for key, words in SHOWN_LIMITS:
        lines.append(_used_line(words, ready.figures.get(key)))
    if stage.gates:
        lines += ["", "Before any change of water:"]
        lines += [
            f"  {gate.kind}: {gate.text} ({gate.certainty.value}: {', '.join(gate.sources)})" for gate in stage.gates
        ]
    if stage.notes:
        lines += ["", f"Notes: {stage.notes}"]
    cited = _citations(stage.figures.values())
    lines += ["", "Sources:", *(f"  {key}: {citation}" for key, citation in cited.items())]
    return "\n".join([*lines, "", CAUTION])


def _figure_line(key: str, figure: Figure) -> str:
    extra = "".join(f"; {text}" for text in (figure.note, figure.replaces and f"instead of {figure.replaces}") if text)
    unit = "" if figure.unit == "1" else f" {figure.unit}"
    return f"  {key} = {figure.value:g}{unit} ({figure.mark}{extra})"


def _used_line(words: str, figure: Figure | None) -> str:
    if figure is None:
        return f"  {words}: {NOT_KNOWN}"
    unit = "" if figure.unit == "1" else f" {figure.unit}"
    value = "none" if math.isinf(figure.value) else f"{figure.value:.4g}{unit}"
    rule = figure.note.split(":")[0] if figure.certainty is Certainty.ASSUMED else ""
    why = f" - {RULES[rule]}" if rule in RULES else f" - {figure.note}" if figure.note else ""
    return f"  {words}: {value} ({figure.mark}{why})"
