"""From a specification and a table to arrays: the design matrix, the outcome, weights, offsets and clusters."""

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from reviewkit.column_values import Columns, condition_holds, numeric_values, present, slope_values
from reviewkit.expressions import Column, Factor, Node, Term, columns_of, part_text
from reviewkit.refusals import NotEstimable, Refusal
from reviewkit.specification import Specification, WeightKind

if TYPE_CHECKING:
    import pandas

Array = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]

CONSTANT = "(constant)"
_EXACT = 2**53  # whole numbers up to here are told apart as floats
LARGEST = 1e100
"""Size of a value beyond which its square could no longer be held."""
MOST_LEVELS = 1000
"""Classes that factor() may have before it must be absorbed instead."""


@dataclass(frozen=True, slots=True)
class Level:
    """One class of a factor: the column's share of a design column is 1 where it takes this value."""

    column: str
    value: float | str


@dataclass(frozen=True, slots=True)
class DesignColumn:
    """A column of the design matrix: the product of its parts; no parts for the constant."""

    name: str
    parts: tuple[Node | Level, ...]

    def values(self, columns: Columns, rows: int) -> Array:
        """The column's values, (rows,)."""
        product = np.ones(rows)
        for part in self.parts:
            product *= part_values(part, columns)
        return product

    def derivative(self, focal: str, columns: Columns, rows: int) -> Array:
        """The column's derivative by the numeric column `focal`, (rows,), by the product rule."""
        total = np.zeros(rows)
        for place, part in enumerate(self.parts):
            if isinstance(part, Level) or focal not in columns_of(part):
                continue
            product = slope_values(part, focal, columns)
            for other in (*self.parts[:place], *self.parts[place + 1 :]):
                product = product * part_values(other, columns)
            total += product
        return total


@dataclass(frozen=True, slots=True)
class Design:
    """What every estimator works on; all arrays have one entry a row that is used."""

    columns_of_x: tuple[DesignColumn, ...]
    x: Array
    """Design matrix, (n, k)."""
    y: Array
    """Outcome as it stands in the data, (n,)."""
    weights: Array | None
    """Weights of observations, (n,); None where there are none."""
    multiplicity: Array | None
    """How many observations a row stands for, (n,): frequency weights only."""
    exposure: Array | None
    clusters: npt.NDArray[np.int64] | None
    """Cluster of each row as 0 … G-1, (n,)."""
    columns: Columns
    dropped: tuple[tuple[str, int], ...]
    """Why rows of the table are not used, and how many; each row counted once."""
    table_rows: int

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the columns of `x`."""
        return tuple(column.name for column in self.columns_of_x)

    @property
    def rows(self) -> int:
        """Rows of the table that are used."""
        return len(self.y)

    @property
    def observations(self) -> float:
        """n: rows, or the sum of frequency weights."""
        return float(self.rows if self.multiplicity is None else self.multiplicity.sum())

    def share(self, mask: Mask) -> float:
        """Share of the observations that the rows of a mask (n,) hold."""
        return float(np.average(mask, weights=self.multiplicity))

    @property
    def offset(self) -> Array:
        """log(exposure), (n,); zero without one."""
        return np.zeros(self.rows) if self.exposure is None else np.log(self.exposure)

    @property
    def cluster_count(self) -> int:
        """G; 0 without clusters."""
        return 0 if self.clusters is None else int(self.clusters.max(initial=-1)) + 1

    def where(self, mask: Mask, why: str) -> "Design":
        """The rows of `mask`; the others are counted under `why`."""
        lost = int(mask.size - mask.sum())
        if not lost:
            return self
        if lost == mask.size:
            raise NotEstimable("sample", f"no rows are left ({why}: {lost:,} rows)")
        clusters = None if self.clusters is None else np.unique(self.clusters[mask], return_inverse=True)[1]
        return replace(
            self,
            x=self.x[mask],
            y=self.y[mask],
            weights=None if self.weights is None else self.weights[mask],
            multiplicity=None if self.multiplicity is None else self.multiplicity[mask],
            exposure=None if self.exposure is None else self.exposure[mask],
            clusters=clusters,
            columns={name: values[mask] for name, values in self.columns.items()},
            dropped=(*self.dropped, (why, lost)),
        )

    def keeping(self, places: Sequence[int]) -> "Design":
        """The design with only these columns of x."""
        kept = tuple(self.columns_of_x[place] for place in places)
        return self if len(kept) == len(self.columns_of_x) else replace(self, columns_of_x=kept, x=self.x[:, places])

    def with_column(self, column: str, value: float | str) -> Array:
        """The design matrix with `column` set to `value` in every row, (n, k)."""
        kind = self.columns[column].dtype
        changed = {**self.columns, column: np.full(self.rows, value, dtype=kind)}
        return self._changed(column, lambda each: each.values(changed, self.rows))

    def derivative_by(self, column: str) -> Array:
        """The derivative of each design column by a numeric column, (n, k)."""
        d = np.zeros_like(self.x)
        for place, each in enumerate(self.columns_of_x):
            if any(column in part_columns(part) for part in each.parts):
                d[:, place] = each.derivative(column, self.columns, self.rows)
        return d

    def _changed(self, column: str, values: Callable[[DesignColumn], Array]) -> Array:
        x = self.x.copy()
        for place, each in enumerate(self.columns_of_x):
            if any(column in part_columns(part) for part in each.parts):
                x[:, place] = values(each)
        return x


def build_design(spec: Specification, frame: "pandas.DataFrame") -> Design:
    """Build the design of a specification from a table.

    Rows with a missing or non-finite value in a used column are left out and counted.

    Raises:
        Refusal: A column is unknown or of the wrong kind.
        NotEstimable: No rows are left.
    """
    if spec.absorb:
        raise Refusal(
            "model.absorb", "absorbed effects are not estimated in this version", "terms", "Write factor(…) for each"
        )
    if not spec.terms:
        raise Refusal("model.terms", "no term is given", "one term or more", 'Add terms = ["…"]')
    if len(spec.errors.by) > 1:
        raise Refusal("errors.by", "clusters in two ways are not estimated in this version", "one column")
    columns = _used_columns(spec, frame)
    kept, dropped = _usable_rows(spec, columns, len(frame))
    columns = {name: values[kept] for name, values in columns.items()}
    pieces = _design_columns(spec.terms, columns)
    rows = len(kept)
    x = np.empty((rows, len(pieces)))
    for place, piece in enumerate(pieces):
        x[:, place] = piece.values(columns, rows)
        if max(-x[:, place].min(), x[:, place].max()) > LARGEST:
            raise NotEstimable(f"term `{piece.name}`", f"it has values beyond {LARGEST:.0e} in size", "smaller values")
    weights = columns[spec.weights.column] if spec.weights else None
    frequency = spec.weights is not None and spec.weights.kind is WeightKind.FREQUENCY
    return Design(
        columns_of_x=pieces,
        x=x,
        y=columns[spec.outcome.column],
        weights=weights,
        multiplicity=weights if frequency else None,
        exposure=columns[spec.exposure] if spec.exposure else None,
        clusters=np.unique(columns[spec.errors.by[0]].astype(str), return_inverse=True)[1] if spec.errors.by else None,
        columns=columns,
        dropped=dropped,
        table_rows=len(frame),
    )


def part_columns(part: Node | Level) -> tuple[str, ...]:
    """The columns of the data behind a part of a design column."""
    return (part.column,) if isinstance(part, Level) else columns_of(part)


def part_values(part: Node | Level, columns: Columns) -> Array:
    """The values of a part of a design column, (n,)."""
    if isinstance(part, Level):
        return np.asarray(columns[part.column] == part.value, dtype=float)
    return numeric_values(part, columns)


def two_valued(values: npt.NDArray[Any]) -> tuple[float, float] | None:
    """The lower and the higher of exactly two values of a numeric column, else None."""
    found = np.unique(values) if values.dtype != object else np.empty(0)
    return (float(found[0]), float(found[1])) if found.size == 2 else None


def _used_columns(spec: Specification, frame: "pandas.DataFrame") -> dict[str, npt.NDArray[Any]]:
    numeric = [spec.outcome.column, spec.exposure, spec.weights.column if spec.weights else None]
    names = [name for name in numeric if name]
    names += [name for term in spec.terms for name in columns_of(term)]
    names += [*spec.errors.by, *(columns_of(spec.where) if spec.where is not None else ())]
    columns = {name: _column(frame, name) for name in dict.fromkeys(names)}
    for name in filter(None, numeric):
        _need_numbers(name, columns[name], "")
    for term in spec.terms:
        for part in term.parts:
            for name in columns_of(part) if not isinstance(part, Factor) else ():
                _need_numbers(name, columns[name], f"Write factor({Column(name)}) for classes")
    return columns


def _column(frame: "pandas.DataFrame", name: str) -> npt.NDArray[Any]:
    from pandas.api.types import is_bool_dtype, is_integer_dtype, is_numeric_dtype

    if name not in frame.columns:
        if re.match(r"[LFD]\d*\.", name):
            why = "lags and leads need the data's order, which a specification does not hold"
            raise Refusal(f"column `{name}`", why, remedy="Make a column of it, and name that")
        near = _nearest(name, [str(each) for each in frame.columns])
        raise Refusal(f"column `{name}`", "the data have no such column", near, "Check its spelling")
    values = frame[name]
    if is_integer_dtype(values.dtype) and values.abs().max() > _EXACT:
        values = values.astype(str)  # numbers of that size would run together as floats
    if is_numeric_dtype(values.dtype) or is_bool_dtype(values.dtype):
        return np.asarray(values.to_numpy(dtype=float, na_value=np.nan))
    texts = values.astype(object)
    column = texts.map(str).to_numpy(dtype=object)
    column[values.isna().to_numpy()] = None
    return np.asarray(column)


def _nearest(name: str, columns: list[str]) -> str:
    from difflib import get_close_matches

    near = get_close_matches(name, columns, 5, 0.5) or columns[:12]
    return ", ".join(near) + (" …" if len(columns) > len(near) else "")


def _need_numbers(name: str, values: npt.NDArray[Any], remedy: str) -> None:
    if values.dtype == object:
        raise Refusal(f"column `{name}`", "it holds text where numbers are needed", "a numeric column", remedy)


def _usable_rows(
    spec: Specification, columns: Columns, rows: int
) -> tuple[npt.NDArray[np.int64], tuple[tuple[str, int], ...]]:
    """Positions of the rows to use, and why the others are not: the condition first, then column by column."""
    usable, dropped = np.ones(rows, dtype=bool), []

    def keep(mask: Mask, why: str) -> None:
        lost = int((usable & ~mask).sum())
        if lost:
            dropped.append((why, lost))
            usable[:] &= mask

    if spec.where is not None:
        keep(condition_holds(spec.where, columns), "outside the sample condition")
    in_condition = set(columns_of(spec.where)) if spec.where is not None else set()
    in_model = {name for term in spec.terms for name in columns_of(term)} | {spec.outcome.column, *spec.errors.by}
    in_model |= {name for name in (spec.exposure, spec.weights.column if spec.weights else None) if name}
    for name, values in columns.items():
        if name in in_model or name not in in_condition:
            keep(~_missing(values), f"missing {name}")
            if values.dtype != object:
                keep(np.isfinite(values), f"{name} not finite")
    _keep_weights(spec, columns, usable, keep)
    for term in spec.terms:
        for part in term.parts:
            if not isinstance(part, Factor | Column):
                keep(np.isfinite(np.broadcast_to(numeric_values(part, columns), rows)), f"{part} not defined")
    if not usable.any():
        listed = "; ".join(f"{why}: {count:,}" for why, count in dropped) or "the table is empty"
        raise NotEstimable("sample", f"no rows are left ({listed})", remedy="Check the condition and the columns")
    return np.flatnonzero(usable), tuple(dropped)


def _missing(values: npt.NDArray[Any]) -> Mask:
    return ~present(values) if values.dtype == object else np.isnan(values)


def _keep_weights(spec: Specification, columns: Columns, usable: Mask, keep: Callable[[Mask, str], None]) -> None:
    if spec.exposure:
        keep(columns[spec.exposure] > 0, f"{spec.exposure} not above 0")
    if not spec.weights:
        return
    weights = columns[spec.weights.column]
    if (weights[usable] < 0).any():
        raise Refusal(f"column `{spec.weights.column}`", "a weight is negative", "weights of 0 or more")
    if spec.weights.kind is WeightKind.FREQUENCY and (weights[usable] % 1 != 0).any():
        raise Refusal(
            f"column `{spec.weights.column}`",
            "a frequency weight is not a whole number",
            "whole numbers",
            'Perhaps kind = "analytic" or "probability" is meant',
        )
    keep(weights != 0, "weight of zero")


def _design_columns(terms: Sequence[Term], columns: Columns) -> tuple[DesignColumn, ...]:
    """The constant and the columns of each term; a factor loses its base class where the margin is in the model."""
    present = {frozenset(map(str, term.parts)) for term in terms} | {frozenset[str]()}
    found = [DesignColumn(CONSTANT, ())]
    for term in terms:
        built: list[tuple[str, tuple[Node | Level, ...]]] = [("", ())]
        for part in term.parts:
            rest = frozenset(str(other) for other in term.parts if other is not part)
            choices = _part_columns(part, columns, drop_base=rest in present)
            built = [
                (f"{name}:{label}" if name else label, (*parts, piece))
                for name, parts in built
                for label, piece in choices
            ]
        found += [DesignColumn(name, parts) for name, parts in built]
    return tuple({column.name: column for column in found}.values())


def _part_columns(part: Node | Factor, columns: Columns, drop_base: bool) -> list[tuple[str, Node | Level]]:
    if not isinstance(part, Factor):
        return [(part_text(part), part)]
    levels = factor_levels(part, columns)
    return [(_level_name(part, level), Level(part.column, level)) for level in levels[1 if drop_base else 0 :]]


def factor_levels(factor: Factor, columns: Columns) -> list[float | str]:
    """The classes of a factor, its base first: the stated one, else the first in order."""
    values = columns[factor.column]
    levels: list[float | str] = sorted(set(values.tolist()))
    if len(levels) > MOST_LEVELS:
        raise Refusal(f"factor({factor.column})", f"it has {len(levels):,} classes", f"at most {MOST_LEVELS:,}")
    if factor.base is None:
        return levels
    if factor.base not in levels:
        shown = ", ".join(_shown(level) for level in levels[:12])
        raise Refusal(f"{factor}", "the base is not among the classes in use", shown)
    return [factor.base, *(level for level in levels if level != factor.base)]


def _level_name(factor: Factor, level: float | str) -> str:
    return f"factor({Column(factor.column)})[{_shown(level)}]"


def _shown(level: float | str) -> str:
    return level if isinstance(level, str) else f"{level:.12g}"
