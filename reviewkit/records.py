"""Facts and exhibits as plain JSON values, and back without loss."""

import math
from collections.abc import Mapping
from dataclasses import fields
from typing import Any

from reviewkit.exhibit import BarFigure, Bin, BinnedFigure, Exhibit, FigureData, Interval, IntervalFigure
from reviewkit.facts import NOT_STATED, STUDY, Fact, NotStated, Source, SourceKind, Standing, Value
from reviewkit.printed import Printed, read_printed
from reviewkit.refusals import Refusal

Json = Any
"""What `json` reads and writes."""

_FIGURES: Mapping[str, type] = {"intervals": IntervalFigure, "bins": BinnedFigure, "bars": BarFigure}
_KINDS = {kind: name for name, kind in _FIGURES.items()}


def value_json(value: Value) -> Json:
    """A fact's value: text and numbers as they are, several as a list, the other two as small objects."""
    match value:
        case NotStated():
            return {"not_stated": True}
        case Printed():
            return {"printed": value.text}
        case tuple():
            return list(value)
        case float() if not math.isfinite(value):
            return {"number": str(value)}
        case _:
            return value


def value_from(record: Json, where: str = "a recorded value") -> Value:
    """The value that `value_json` wrote."""
    match record:
        case {"not_stated": True}:
            return NOT_STATED
        case {"printed": str(text)}:
            return read_printed(text)
        case {"number": str(text)}:
            return float(text)
        case list():
            return tuple(str(each) for each in record)
        case bool() | int() | float():
            return float(record)
        case str():
            return record
        case _:
            raise Refusal(where, f"`{str(record)[:40]}` is not one that ReviewKit writes")


def fact_json(fact: Fact) -> Json:
    """One fact as an object."""
    return {
        "name": fact.name,
        "value": value_json(fact.value),
        "standing": fact.standing.value,
        "source": {"kind": fact.source.kind.value, "place": fact.source.place, "quote": fact.source.quote},
        "subject": fact.subject,
        "confirmed": fact.confirmed,
    }


def fact_from(record: Json) -> Fact:
    """The fact that `fact_json` wrote."""
    source = record["source"]
    return Fact(
        record["name"],
        value_from(record["value"]),
        Standing(record["standing"]),
        Source(SourceKind(source["kind"]), source["place"], source["quote"]),
        record.get("subject", STUDY),
        bool(record.get("confirmed", True)),
    )


def exhibit_json(exhibit: Exhibit) -> Json:
    """One exhibit as an object, at full precision."""
    return {
        "name": exhibit.name,
        "title": exhibit.title,
        "columns": list(exhibit.columns),
        "rows": [[_cell(each) for each in row] for row in exhibit.rows],
        "sentence": exhibit.sentence,
        "figures": [_figure_json(each) for each in exhibit.figures],
        "facts": [fact_json(each) for each in exhibit.facts],
    }


def exhibit_from(record: Json) -> Exhibit:
    """The exhibit that `exhibit_json` wrote."""
    return Exhibit(
        record["name"],
        record["title"],
        tuple(record["columns"]),
        tuple(tuple(row) for row in record["rows"]),
        record["sentence"],
        tuple(_figure_from(each) for each in record["figures"]),
        tuple(fact_from(each) for each in record["facts"]),
    )


def _cell(value: Any) -> Json:
    """A cell without the numbers that JSON lacks; array scalars become Python's own."""
    plain = value.item() if hasattr(value, "item") else value
    return None if isinstance(plain, float) and not math.isfinite(plain) else plain


def _figure_json(figure: FigureData) -> Json:
    return {
        "kind": _KINDS[type(figure)],
        **{each.name: _part_json(getattr(figure, each.name)) for each in fields(figure)},
    }


def _part_json(part: Any) -> Json:
    match part:
        case tuple():
            return [_part_json(each) for each in part]
        case Interval() | Bin():
            return [_cell(getattr(part, each.name)) for each in fields(part)]
        case _:
            return _cell(part)


def _figure_from(record: Json) -> FigureData:
    content = {name: part for name, part in record.items() if name != "kind"}
    match record["kind"]:
        case "intervals":
            return IntervalFigure(**{**content, "rows": tuple(Interval(*row) for row in content["rows"])})
        case "bins":
            line = content["line"]
            bins = tuple(Bin(*row) for row in content["bins"])
            return BinnedFigure(**{**content, "bins": bins, "line": None if line is None else tuple(line)})
        case _:
            return BarFigure(**{**content, "bars": tuple((name, share) for name, share in content["bars"])})
