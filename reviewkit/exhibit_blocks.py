"""An exhibit as blocks of a note: its table in finished texts, its figures with alternative texts."""

import string
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import assert_never

from reviewkit.exhibit import BarFigure, BinnedFigure, Cell, Exhibit, FigureData, Interval, IntervalFigure
from reviewkit.note import Figure, Table
from reviewkit.wording import (
    clean,
    counted,
    decimals_for,
    estimate,
    fixed,
    interval,
    number,
    percent,
    sentence,
    significant,
)

NO_VALUE = "–"
"""Stands in a cell that is empty."""

_ERROR_COLUMNS = ("std_error", "standard error", "error")
_MOST_ROWS_IN_WORDS = 12
_MOST_ROWS = 24  # beyond, the figure alone is shown
_MOST_COLUMNS = 8  # beyond, rows and columns change places


def exhibit_blocks(exhibit: Exhibit, place: int) -> tuple[Table | Figure, ...]:
    """The blocks of the exhibit that is number `place` of its note."""
    parts = string.ascii_lowercase if exhibit.rows or len(exhibit.figures) > 1 else [""]
    figures = tuple(
        _figure(figure, exhibit, f"{place}{part}") for part, figure in zip(parts, exhibit.figures, strict=False)
    )
    if not exhibit.rows:
        return figures
    if figures and len(exhibit.rows) > _MOST_ROWS:
        read = replace(figures[0], caption=f"{figures[0].caption} {_ended(exhibit.sentence)}")
        return (read, *figures[1:])
    return (exhibit_table(exhibit, f"Exhibit {place}. "), *figures)


def exhibit_table(exhibit: Exhibit, prefix: str = "") -> Table:
    """The exhibit's table with every cell as text, columns without any left out; `prefix` goes before the caption."""
    shown = tuple(_row(exhibit.columns, row) for row in exhibit.rows)
    filled = [at for at in range(len(exhibit.columns)) if any(row[at] != NO_VALUE for row in shown)]
    rows = tuple(tuple(row[at] for at in filled) for row in shown)
    columns = tuple(_heading(exhibit.columns[at]) for at in filled)
    if len(columns) > _MOST_COLUMNS >= len(rows):
        columns, rows = _turned(columns, rows)
    return Table(sentence(prefix + clean(exhibit.title)), columns, rows, _ended(exhibit.sentence))


def _turned(
    columns: tuple[str, ...], rows: tuple[tuple[str, ...], ...]
) -> tuple[tuple[str, ...], tuple[tuple[str, ...], ...]]:
    """Rows as columns, for few rows of many cells; rows that begin alike are told apart by their second cell."""
    labels = 1 if len({row[0] for row in rows}) == len(rows) else 2
    heads = tuple(": ".join(row[:labels]) for row in rows)
    turned = tuple((column, *cells) for column, *cells in zip(columns, *rows, strict=True))
    return (" ", *heads), turned[labels:]


def _ended(words: str) -> str:
    """The words with a full stop; they may begin with the name of a column, which keeps its letters."""
    tidy = clean(words).strip()
    return tidy if not tidy or tidy[-1] in ".?!" else f"{tidy}."


def alt_text(figure: FigureData, title: str) -> str:
    """What the figure shows, in words and numbers, for readers who do not see it."""
    lead = sentence(clean(title))
    match figure:
        case IntervalFigure():
            return f"{lead} {_intervals_in_words(figure)}"
        case BinnedFigure():
            return f"{lead} {_bins_in_words(figure)}"
        case BarFigure():
            shown = "; ".join(f"{clean(label)}: {percent(height)}" for label, height in figure.bars)
            return f"{lead} Bars, {clean(figure.y_label)} by {clean(figure.x_label)}: {shown}."
        case _:
            assert_never(figure)


# --- cells ------------------------------------------------------------------------------------------------------


def _row(columns: Sequence[str], row: Sequence[Cell]) -> tuple[str, ...]:
    cells = {name.lower(): cell for name, cell in zip(columns, row, strict=True)}
    return tuple(_cell(name, cell, _error_beside(name.lower(), cells)) for name, cell in zip(columns, row, strict=True))


def _error_beside(name: str, cells: Mapping[str, Cell]) -> float | None:
    """The standard error that belongs to a column: its own, its namesake's, or the row's only one."""
    own = name if name.endswith(" error") else f"{name} error"
    found = [cells[each] for each in (own, *_ERROR_COLUMNS) if each in cells]
    return found[0] if found and isinstance(found[0], float) and found[0] > 0 else None


def _cell(column: str, cell: Cell, error: float | None) -> str:
    """One cell: estimates follow the digits of their row's standard error."""
    name = column.lower()
    if cell is None or cell == "" or cell != cell:  # the last is true of not-a-number only
        return NO_VALUE
    if isinstance(cell, str):
        return clean(cell)
    if isinstance(cell, int):
        return fixed(cell, 0)
    if "percent" in name or name.endswith("%"):
        return percent(cell).removesuffix(" %")
    if name == "p" or name.startswith(("p_", "p value")):
        return "< 0.001" if cell < 0.001 else fixed(cell, 3)
    if error is not None and name not in ("statistic", "df", "t", "z"):
        return _with_error(cell, error)
    return fixed(cell, 2) if name in ("statistic", "t", "z") else number(cell)


def _with_error(cell: float, error: float) -> str:
    return significant(cell, 3) if error < 1e-6 else fixed(cell, decimals_for(error, 2))


def _heading(column: str) -> str:
    words = clean(column).replace("_", " ").strip()
    return words if len(words) < 2 or words[1].isupper() else words[:1].upper() + words[1:]


# --- figures in words -------------------------------------------------------------------------------------------


def _figure(figure: FigureData, exhibit: Exhibit, number_shown: str) -> Figure:
    shown = _sentence_case(clean(_drawn(figure, exhibit.title)))
    return Figure(_ended(f"Exhibit {number_shown}. {shown}"), alt_text(figure, exhibit.title), figure)


def _drawn(figure: FigureData, title: str) -> str:
    match figure:
        case BinnedFigure():
            return f"{figure.y_label} against {figure.x_label}"
        case BarFigure():
            return f"{figure.y_label} by {figure.x_label}"
        case IntervalFigure():
            return title
        case _:
            assert_never(figure)


def _sentence_case(words: str) -> str:
    """A capital first letter, unless the words begin with the name of a column."""
    first = words.split(" ", 1)[0]
    return words if "_" in first or not first.isalpha() else words[:1].upper() + words[1:]


def _intervals_in_words(figure: IntervalFigure) -> str:
    rows = figure.rows
    if len(rows) > _MOST_ROWS_IN_WORDS:
        ordered = sorted(rows, key=lambda row: row.estimate)
        rows = (figure.rows[0], figure.rows[-1], ordered[0], ordered[-1])
        lead = f"{counted(len(figure.rows), 'estimate')} with intervals; first, last, smallest and largest of"
    else:
        lead = "Estimates with intervals of"
    shown = "; ".join(_interval_in_words(row) for row in rows)
    line = "" if figure.reference is None else f" A vertical line stands at {number(figure.reference)}."
    return f"{lead} {clean(figure.x_label)}: {shown}.{line}"


def _interval_in_words(row: Interval) -> str:
    label = clean(row.label)
    if row.low is None or row.high is None:
        return f"{label}: {estimate(row.estimate)}, no interval"
    decimals = decimals_for((row.high - row.low) / 4, 2)
    return f"{label}: {fixed(row.estimate, decimals)} ({interval(row.low, row.high)})"


def _bins_in_words(figure: BinnedFigure) -> str:
    y_label, x_label = clean(figure.y_label), clean(figure.x_label)
    if not figure.bins:
        return f"Binned means of {y_label} against {x_label}: too few rows to draw any."
    ordered = sorted(figure.bins, key=lambda one: one.middle)
    first, last, low, high = figure.bins[0], figure.bins[-1], ordered[0], ordered[-1]
    shown = "; ".join(
        f"{name} {estimate(one.middle)} at {estimate(one.x)}"
        for name, one in (("first", first), ("last", last), ("lowest", low), ("highest", high))
    )
    line = "" if figure.line is None else f" A straight line has the slope {estimate(figure.line[1])}."
    bins = counted(len(figure.bins), "bin")
    return f"Binned means of {y_label} against {x_label}, {bins} each with the range of its middle rows: {shown}.{line}"
