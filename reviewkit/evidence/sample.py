"""Sample and outcome: which rows are used, and what the untransformed outcome looks like."""

import numpy as np
import numpy.typing as npt

from reviewkit.design_matrix import Design
from reviewkit.exhibit import BarFigure, Cell, Exhibit
from reviewkit.implied import Focus
from reviewkit.model_table import ModelTable
from reviewkit.wording import counted, joined, number, share

Array = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]

_EVERY = slice(None)

FEWEST_IN_CLASS = 10
"""Rows under which classes of the outcome are put together, so that no single row shows."""


def sample_exhibit(design: Design, tables: tuple[ModelTable, ModelTable | None], label: str, focus: Focus) -> Exhibit:
    """Rows used and left out, zeros, distinct values and quartiles of the outcome.

    `design` holds every usable row, also those that one model leaves out; `label` names the outcome with its unit;
    for a two-valued `focus` both groups are described.
    """
    y, table = _observed(design), tables[0]
    rows: list[tuple[Cell, ...]] = [("rows in the table", design.table_rows)]
    rows += [(f"left out: {why}", lost) for why, lost in design.dropped]
    rows.append(("rows that can be used", design.rows))
    rows += [(f"used by the {name} model", used) for name, used in _used(tables) if used != design.rows]
    if design.multiplicity is not None:
        rows.append(("observations (frequency weights)", float(design.observations)))
    if table.clusters:
        rows.append(("clusters", table.clusters))
    zeros = float((y == 0).mean())
    rows += [("zeros, percent", 100 * zeros), ("distinct values", int(np.unique(y).size))]
    rows += [("mean", float(y.mean())), ("standard deviation", float(y.std(ddof=1)) if y.size > 1 else None)]
    rows += _quartiles("quartile", y)
    if zeros:
        rows += _quartiles("quartile of values above zero", y[y > 0])
    rows += _by_group(design, focus)
    return Exhibit(
        "sample",
        f"Sample and outcome: {label}",
        ("measure", "value"),
        tuple(rows),
        _sentence(design, tables, zeros),
        (_distribution(y, label),),
    )


def _quartiles(name: str, y: Array) -> list[tuple[Cell, ...]]:
    if y.size < 4 * FEWEST_IN_CLASS:
        return []
    first, second, third = np.quantile(y, (0.25, 0.5, 0.75))
    return [
        (f"first {name}", float(first)),
        (name.replace("quartile", "median"), float(second)),
        (f"third {name}", float(third)),
    ]


def _observed(design: Design, rows: Mask | slice = _EVERY) -> Array:
    """The outcome of each observation in `rows`: a row as often as its frequency weight says."""
    y = design.y[rows]
    return y if design.multiplicity is None else np.repeat(y, design.multiplicity[rows].astype(int))


def _by_group(design: Design, focus: Focus) -> list[tuple[Cell, ...]]:
    """Rows, zeros, mean, and mean above zero of both groups; none where a group is too small to be described."""
    if focus.values is None or focus.column is None:
        return []
    groups = [(value, _observed(design, design.columns[focus.column] == value)) for value in focus.values]
    if min(part.size for _, part in groups) < FEWEST_IN_CLASS:
        return []
    rows: list[tuple[Cell, ...]] = []
    for value, part in groups:
        name = f"{focus.column} = {value if isinstance(value, str) else number(value)}"
        positive = part[part > 0]
        rows += [(f"{name}: rows", int(part.size)), (f"{name}: mean", float(part.mean()))]
        if (design.y == 0).any():
            rows.append((f"{name}: zeros, percent", 100 * float((part == 0).mean())))
            rows.append((f"{name}: mean above zero", float(positive.mean()) if positive.size else None))
    return rows


def _used(tables: tuple[ModelTable, ModelTable | None]) -> list[tuple[str, int]]:
    return [
        (name, table.design.rows) for name, table in zip(("submitted", "alternative"), tables, strict=True) if table
    ]


def _sentence(design: Design, tables: tuple[ModelTable, ModelTable | None], zeros: float) -> str:
    left = joined([f"{counted(lost, 'row')} ({why})" for why, lost in design.dropped])
    parts = [f"{number(design.rows)} of {counted(design.table_rows, 'row')} can be used"]
    parts += [f"left out: {left}"] if left else []
    parts += [f"the {name} model uses {number(used)}" for name, used in _used(tables) if used != design.rows]
    return f"{'; '.join(parts)}; {share(zeros)} of the outcomes are zero."


def _distribution(y: Array, label: str) -> BarFigure:
    """Shares of rows by class of the outcome: zero by itself, then classes between round edges."""
    bars: list[tuple[str, float]] = []
    for below, name in ((y < 0, "< 0"), (y == 0, "0")):
        if below.any():
            bars.append((name, 100 * float(below.mean())))
    positive = y[y > 0]
    edges = _round_edges(positive)
    counts = np.histogram(positive, bins=edges)[0] if len(edges) > 1 else np.empty(0)
    bars += [
        (f"{low:.6g}–{high:.6g}", 100 * float(count) / y.size)
        for low, high, count in zip(edges, edges[1:], counts, strict=False)
    ]
    return BarFigure(label, "share of rows (%)", tuple(bars))


def _round_edges(positive: Array) -> list[float]:
    """Edges 1, 2, 5 times powers of ten around the values, thinned until every class has enough rows."""
    if positive.size < 2 * FEWEST_IN_CLASS:
        return []
    low, high = np.floor(np.log10(positive.min())), np.ceil(np.log10(positive.max()))
    edges = [step * 10.0**power for power in np.arange(low, high + 1) for step in (1, 2, 5)]
    edges = [edge for edge in edges if edge <= 10.0**high]
    start = max((edge for edge in edges if edge <= positive.min()), default=edges[0])
    stop = min((edge for edge in edges if edge > positive.max()), default=edges[-1] * 2)
    kept, wanted = [start], max(FEWEST_IN_CLASS, positive.size // 12)
    for edge in (*(edge for edge in edges if start < edge < stop), stop):
        if ((positive >= kept[-1]) & (positive < edge)).sum() >= wanted:
            kept.append(edge)
    if kept[-1] != stop:
        kept = [*kept[:-1], stop] if len(kept) > 1 else [start, stop]
    return kept
