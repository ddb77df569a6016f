"""Draws figures: narrow or full width, readable in grey, the same bytes for the same data."""

import io
from typing import TYPE_CHECKING, Any, assert_never

from reviewkit.exhibit import BarFigure, BinnedFigure, FigureData, IntervalFigure

if TYPE_CHECKING:
    from matplotlib.axes import Axes

COLUMN_CM = 8.5
"""Width of a column of text."""
FULL_CM = 16.0
"""Width of a page of text."""
PAGE_CM = 11.5
"""Width of a figure on a page, so that two and their tables fit on one."""

_CM_IN_INCHES = 2.54
_DPI = 300
_INK, _ACCENT, _PALE = "#1a1a1a", "#0b5a8a", "#c9d6df"  # differ in lightness, so also in grey
_MARKERS = ("o", "s", "D", "^", "v", "P")
_STYLE = {
    "font.family": "DejaVu Sans",
    "font.size": 8.0,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.linewidth": 0.6,
    "axes.edgecolor": _INK,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "axes.unicode_minus": True,
    "text.usetex": False,
    "text.parse_math": False,  # labels may hold dollar signs
    "svg.hashsalt": "reviewkit",
}


def draw(figure: FigureData, width_cm: float = COLUMN_CM) -> bytes:
    """The figure as a PNG of that width, without metadata of machine, program or time."""
    import matplotlib
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    with matplotlib.rc_context():  # whatever the user's own settings are; they are put back afterwards
        matplotlib.rcdefaults()
        settings: Any = matplotlib.rcParams
        settings.update(_STYLE)
        page = Figure(figsize=(width_cm / _CM_IN_INCHES, _height_cm(figure, width_cm) / _CM_IN_INCHES), dpi=_DPI)
        FigureCanvasAgg(page)
        page.set_layout_engine("constrained")
        _draw_on(page.add_subplot(), figure)
        made = io.BytesIO()
        page.savefig(made, format="png", dpi=_DPI, metadata={"Software": None})
    return made.getvalue()


def _height_cm(figure: FigureData, width_cm: float) -> float:
    match figure:
        case IntervalFigure():
            return 1.7 + 0.6 * max(len(figure.rows), 1)
        case BinnedFigure():
            return 0.56 * min(max(width_cm, 9.5), 11.0)
        case BarFigure():
            return 1.6 + 0.52 * max(len(figure.bars), 1)
        case _:
            assert_never(figure)


def _draw_on(axes: "Axes", figure: FigureData) -> None:
    match figure:
        case IntervalFigure():
            _draw_intervals(axes, figure)
        case BinnedFigure():
            _draw_bins(axes, figure)
        case BarFigure():
            _draw_bars(axes, figure)
        case _:
            assert_never(figure)


def _draw_intervals(axes: "Axes", figure: IntervalFigure) -> None:
    if figure.reference is not None:
        axes.axvline(figure.reference, color=_INK, linewidth=0.6, linestyle=(0, (4, 3)))
    for place, row in enumerate(figure.rows):
        if row.low is not None and row.high is not None:
            axes.plot([row.low, row.high], [place, place], color=_ACCENT, linewidth=1.4, solid_capstyle="butt")
        marker = _MARKERS[place % len(_MARKERS)]
        axes.plot(row.estimate, place, marker=marker, color=_ACCENT, markersize=5, markeredgecolor="white")
    axes.set_yticks(range(len(figure.rows)), [_wrapped(row.label) for row in figure.rows])
    axes.set_ylim(len(figure.rows) - 0.5, -0.5)
    axes.set_xlabel(figure.x_label)
    axes.tick_params(axis="y", length=0)
    axes.margins(x=0.08)


def _draw_bins(axes: "Axes", figure: BinnedFigure) -> None:
    for each in figure.bins:
        axes.plot([each.x, each.x], [each.low, each.high], color=_PALE, linewidth=2.4, solid_capstyle="butt")
    axes.plot(
        [each.x for each in figure.bins],
        [each.middle for each in figure.bins],
        linestyle="none",
        marker="o",
        markersize=3.6,
        color=_ACCENT,
    )
    if figure.line is not None and figure.bins:
        ends = (figure.bins[0].x, figure.bins[-1].x)
        intercept, slope = figure.line
        axes.plot(ends, [intercept + slope * end for end in ends], color=_INK, linewidth=0.9, linestyle="--")
    axes.set_xlabel(figure.x_label)
    axes.set_ylabel(figure.y_label)


def _draw_bars(axes: "Axes", figure: BarFigure) -> None:
    places = range(len(figure.bars))
    heights = [height for _, height in figure.bars]
    drawn = axes.barh(list(places), heights, height=0.62, color=_PALE, edgecolor=_INK, linewidth=0.6)
    axes.bar_label(drawn, fmt=lambda height: f"{height:.3g}", padding=2, fontsize=7)
    axes.set_yticks(places, [_wrapped(label) for label, _ in figure.bars])
    axes.invert_yaxis()
    axes.tick_params(axis="y", length=0)
    axes.margins(x=0.12)
    axes.set_xlabel(figure.y_label)
    axes.set_ylabel(figure.x_label)


def _wrapped(label: str) -> str:
    import textwrap

    return "\n".join(textwrap.wrap(label, 24)[:2]) or label
