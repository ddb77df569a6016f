"""One piece of evidence: a table, a figure's data, the facts it yields, the sentence that reads it."""

from dataclasses import dataclass

from reviewkit.facts import Fact

Cell = str | int | float | None
"""A cell of an exhibit's table: full precision; writers format it."""


@dataclass(frozen=True, slots=True)
class Interval:
    """An estimate with its interval, one row of an `IntervalFigure`; ends may be missing."""

    label: str
    estimate: float
    low: float | None
    high: float | None


@dataclass(frozen=True, slots=True)
class IntervalFigure:
    """Estimates with intervals beneath each other, a vertical line at `reference`."""

    x_label: str
    rows: tuple[Interval, ...]
    reference: float | None = 0.0


@dataclass(frozen=True, slots=True)
class Bin:
    """Rows summarised together, never fewer than the setting allows: middle, spread and count."""

    x: float
    middle: float
    low: float
    high: float
    rows: int


@dataclass(frozen=True, slots=True)
class BinnedFigure:
    """Binned means with the 10 to 90 % range of each bin; single rows are never drawn."""

    x_label: str
    y_label: str
    bins: tuple[Bin, ...]
    line: tuple[float, float] | None = None
    """Intercept and slope of a line to draw."""


@dataclass(frozen=True, slots=True)
class BarFigure:
    """Shares of rows by class, in per cent of all rows."""

    x_label: str
    y_label: str
    bars: tuple[tuple[str, float], ...]


FigureData = IntervalFigure | BinnedFigure | BarFigure


@dataclass(frozen=True, slots=True)
class Exhibit:
    """A table with its reading; `sentence` states in plain words what the table shows."""

    name: str
    title: str
    columns: tuple[str, ...]
    rows: tuple[tuple[Cell, ...], ...]
    sentence: str
    figures: tuple[FigureData, ...] = ()
    facts: tuple[Fact, ...] = ()
