"""A note as data: sections, blocks, and the numbers that its figures are drawn from; schema in tests/schemas."""

import json
import math
from pathlib import Path
from typing import Any, assert_never

from reviewkit import FORMAT
from reviewkit.exhibit import BarFigure, Bin, BinnedFigure, FigureData, Interval, IntervalFigure
from reviewkit.note import Block, Excerpt, Figure, Note, Paragraph, Points, ReferenceList, Section, Table
from reviewkit.safekeeping import write_atomically
from reviewkit.wording import clean


def write_json(note: Note, path: Path) -> None:
    """Write the note as one JSON object; the same note gives the same bytes."""
    write_atomically(path, json.dumps(note_object(note), ensure_ascii=False, indent=1, allow_nan=False) + "\n")


def note_object(note: Note) -> dict[str, Any]:
    """The note as plain values; a number that does not exist is null."""
    return {
        "format": FORMAT,
        "title": clean(note.title),
        "audience": str(note.audience),
        "language": clean(note.language),
        "sections": [_section(each) for each in note.sections],
    }


def _section(section: Section) -> dict[str, Any]:
    return {
        "title": clean(section.title),
        "level": section.level,
        "blocks": [_block(each) for each in section.blocks],
    }


def _block(block: Block) -> dict[str, Any]:
    match block:
        case Paragraph():
            return {"kind": "paragraph", "lead": clean(block.lead), "text": clean(block.text)}
        case Points():
            return {"kind": "points", "items": _texts(block.items)}
        case Table():
            return {
                "kind": "table",
                "caption": clean(block.caption),
                "columns": _texts(block.columns),
                "rows": [_texts(row) for row in block.rows],
                "note": clean(block.note),
            }
        case Figure():
            return {
                "kind": "figure",
                "caption": clean(block.caption),
                "alt": clean(block.alt),
                "figure": _figure(block.data),
            }
        case Excerpt():
            return {"kind": "excerpt", "place": clean(block.place), "lines": _texts(block.text.strip().splitlines())}
        case ReferenceList():
            return {"kind": "references", "entries": _texts(block.entries)}
        case _:
            assert_never(block)


def _texts(texts: tuple[str, ...] | list[str]) -> list[str]:
    return [clean(each) for each in texts]


# --- figures ----------------------------------------------------------------------------------------------------


def _figure(figure: FigureData) -> dict[str, Any]:
    match figure:
        case IntervalFigure():
            return {
                "kind": "intervals",
                "x_label": clean(figure.x_label),
                "reference": _number(figure.reference),
                "rows": [_interval(each) for each in figure.rows],
            }
        case BinnedFigure():
            return {
                "kind": "bins",
                "x_label": clean(figure.x_label),
                "y_label": clean(figure.y_label),
                "bins": [_bin(each) for each in figure.bins],
                "line": _line(figure.line),
            }
        case BarFigure():
            return {
                "kind": "bars",
                "x_label": clean(figure.x_label),
                "y_label": clean(figure.y_label),
                "bars": [{"label": clean(label), "height": _number(height)} for label, height in figure.bars],
            }
        case _:
            assert_never(figure)


def _interval(row: Interval) -> dict[str, Any]:
    ends = {"low": _number(row.low), "high": _number(row.high)}
    return {"label": clean(row.label), "estimate": _number(row.estimate), **ends}


def _bin(each: Bin) -> dict[str, Any]:
    ends = {"low": _number(each.low), "high": _number(each.high)}
    return {"x": _number(each.x), "middle": _number(each.middle), **ends, "rows": each.rows}


def _line(line: tuple[float, float] | None) -> dict[str, Any] | None:
    return None if line is None else {"intercept": _number(line[0]), "slope": _number(line[1])}


def _number(value: float | None) -> float | None:
    """The number, or null where it is none: JSON knows neither nan nor infinity."""
    return float(value) if value is not None and math.isfinite(value) else None
