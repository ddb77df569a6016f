"""What each column of a table looks like, for lists that people choose from."""

import re
from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING

from reviewkit.readers.traces import TracedTransform, trace_transform

if TYPE_CHECKING:
    import numpy
    import numpy.typing

    from reviewkit.readers.tables import Table

_DATE = re.compile(r"^(?:\d{4}[-/.]\d{1,2}([-/.]\d{1,2})?|\d{1,2}[-/.]\d{1,2}[-/.]\d{2,4})(?:[T ]\d{1,2}:\d{2}.*)?$")
_LOGGED_NAME = re.compile(r"^(?:ln|log)(?:[_.]?\w)|[_.](?:ln|log)$|^l_\w", re.IGNORECASE)
_ASINH_NAME = re.compile(r"^(?:ihs|asinh|arcsinh)", re.IGNORECASE)
_LOOKED_AT = 200


class ColumnKind(StrEnum):
    """What a column can serve as."""

    NUMBER = "number"
    WHOLE_NUMBER = "whole number"
    TWO_VALUED = "two-valued"
    TEXT = "text"
    DATE = "date"
    CONSTANT = "constant"
    EMPTY = "empty"


@dataclass(frozen=True, slots=True)
class ColumnDescription:
    """One column: counts of rows, smallest and largest value in the column's unit."""

    name: str
    label: str
    kind: ColumnKind
    rows: int
    missing: int
    zeros: int
    negatives: int
    distinct: int
    smallest: float | str | None
    largest: float | str | None
    hints: tuple[str, ...] = ()
    traced: TracedTransform | None = None
    """Where the column equals a transform of another one."""

    @property
    def is_number(self) -> bool:
        """Whether the column can be an outcome or enter as it stands."""
        return not isinstance(self.smallest, str) and self.kind is not ColumnKind.EMPTY


def describe_columns(table: "Table") -> tuple[ColumnDescription, ...]:
    """One description a column, in file order; hints come from names, labels and the numbers themselves."""
    return tuple(_described(table, str(column)) for column in table.frame.columns)


def _described(table: "Table", column: str) -> ColumnDescription:
    import pandas

    values = table.frame[column]
    label = table.labels.get(column, "")
    if pandas.api.types.is_numeric_dtype(values):
        return _described_number(table, column, label)
    known = values.dropna()
    texts = known.unique()
    shown = sorted(map(str, texts)) if len(texts) else []
    smallest, largest = (shown[0], shown[-1]) if shown else (None, None)
    kind = _text_kind([str(each) for each in texts[:_LOOKED_AT]], len(texts))
    missing = len(values) - len(known)
    return ColumnDescription(column, label, kind, len(values), missing, 0, 0, len(texts), smallest, largest)


def _text_kind(some: list[str], distinct: int) -> ColumnKind:
    if not some:
        return ColumnKind.EMPTY
    if all(_DATE.match(each) for each in some):
        return ColumnKind.DATE
    return {1: ColumnKind.CONSTANT, 2: ColumnKind.TWO_VALUED}.get(distinct, ColumnKind.TEXT)


def _described_number(table: "Table", column: str, label: str) -> ColumnDescription:
    import numpy

    values = table.frame[column].to_numpy(dtype="float64", na_value=numpy.nan)
    known = values[~numpy.isnan(values)]
    distinct = len(numpy.unique(known))
    smallest, largest = (float(known.min()), float(known.max())) if distinct else (None, None)
    kind = ColumnKind.DATE if column in table.dates else _number_kind(known, distinct)
    zeros, negatives = int((known == 0).sum()), int((known < 0).sum())
    traced = trace_transform(table, column) if kind is ColumnKind.NUMBER else None
    hints = _hints(table, column, label, traced)
    counts = (len(values), len(values) - len(known), zeros, negatives, distinct)
    return ColumnDescription(column, label, kind, *counts, smallest, largest, hints, traced)


def _number_kind(known: "numpy.typing.NDArray[numpy.float64]", distinct: int) -> ColumnKind:
    import numpy

    few = {0: ColumnKind.EMPTY, 1: ColumnKind.CONSTANT, 2: ColumnKind.TWO_VALUED}
    if distinct in few:
        return few[distinct]
    finite = known[numpy.isfinite(known)]
    return ColumnKind.WHOLE_NUMBER if (finite == numpy.round(finite)).all() else ColumnKind.NUMBER


def _hints(table: "Table", column: str, label: str, traced: TracedTransform | None) -> tuple[str, ...]:
    coded = "numbers stand for texts" if column in table.value_labels else ""
    named = "" if traced else _named_hint(column, label)
    return tuple(hint for hint in (traced.sentence() if traced else "", named, coded) if hint)


def _named_hint(column: str, label: str) -> str:
    words = set(re.findall(r"[a-z]+", label.lower()))
    if _LOGGED_NAME.search(column) or words & {"log", "logged", "ln", "logarithm"}:
        return "may already be a log"
    if _ASINH_NAME.match(column) or words & {"asinh", "arcsinh", "ihs"}:
        return "may already be an inverse hyperbolic sine"
    return ""


__all__ = ["ColumnDescription", "ColumnKind", "TracedTransform", "describe_columns"]
