"""The comparison of the two models: numbers on one scale, their difference, and what follows."""

import math

from reviewkit.comparison import Comparison, Kind, Verdict
from reviewkit.exhibit import Cell, Exhibit, Interval, IntervalFigure
from reviewkit.implied import Scale
from reviewkit.wording import estimate, interval, percent, size_percent

WIDEST_BOUND = 50.0
"""Per cent beyond which a bound says little; common practice, no source."""

SCALE_WORDS = {
    Scale.COEFFICIENT: "coefficient",
    Scale.LOG_RATIO: "log ratio of means",
    Scale.SEMI_ELASTICITY: "average semi-elasticity of the mean",
    Scale.ELASTICITY: "elasticity of the mean",
    Scale.LEVEL: "difference of means in the outcome's unit",
}
_ROWS = {"own": "with each model on its own rows, "}
COLUMNS = ("term", "number", "value", "low", "high")


def comparison_exhibit(comparisons: tuple[Comparison, ...], level: float) -> Exhibit:
    """Each comparison as a row, with a picture of both numbers and their intervals."""
    shown = tuple(each for each in comparisons if each.submitted is not None)
    return Exhibit(
        "comparison",
        f"The two models on one scale, with {100 * level:.0f} % intervals",
        COLUMNS,
        tuple(row for each in comparisons for row in _rows(each)),
        " ".join(comparison_sentence(each) for each in comparisons[:4]),
        tuple(_figure(scale, shown) for scale in dict.fromkeys(each.scale for each in shown if each.scale)),
    )


def _rows(each: Comparison) -> list[tuple[Cell, ...]]:
    """The two numbers, their difference, and the two bounds, a line each."""
    if each.submitted is None or each.scale is None:
        return [(each.term, f"no comparison: {each.why}", None, None, None)]
    side = "submitted" if each.kind is Kind.MODEL else "submitted coefficient, read as in a plain log model"
    own = "" if each.rows == "common" else ", each model's own rows"
    scale = SCALE_WORDS[each.scale]
    rows: list[tuple[Cell, ...]] = [
        (each.term, f"{side}, {scale}{own}", each.submitted, *(each.submitted_interval or (None, None))),
        (each.term, f"alternative, {scale}{own}", each.alternative, *(each.alternative_interval or (None, None))),
        (each.term, "difference", each.difference, *(each.interval or (None, None))),
    ]
    if each.relative_percent is not None and each.relative_interval is not None:
        rows.append((each.term, "difference, percent of submitted", each.relative_percent, *each.relative_interval))
    bounds = (
        ("percent within which they agree", each.agree_within_percent),
        ("percent by which they differ at least", each.differ_by_at_least_percent),
    )
    return [*rows, *((each.term, name, bound, None, None) for name, bound in bounds if bound is not None)]


def _figure(scale: Scale, comparisons: tuple[Comparison, ...]) -> IntervalFigure:
    rows: list[Interval] = []
    for each in comparisons:
        if each.scale is not scale or each.submitted is None or each.alternative is None:
            continue
        side = "submitted" if each.kind is Kind.MODEL else "as read"
        own = "" if each.rows == "common" else ", own rows"
        for name, value, ends in (
            (f"{each.term}: {side}{own}", each.submitted, each.submitted_interval),
            (f"{each.term}: alternative{own}", each.alternative, each.alternative_interval),
        ):
            low, high = ends or (None, None)
            rows.append(Interval(name, value, low, high))
    distinct = tuple({row.label: row for row in rows}.values())
    return IntervalFigure(SCALE_WORDS[scale], distinct)


def comparison_sentence(each: Comparison) -> str:
    """What the numbers of one comparison say, with the bound; never that the two agree without it."""
    if each.submitted is None or each.alternative is None or each.scale is None:
        return f"For {each.term}, no comparison, since {(each.why or 'there is none').rstrip('.')}."
    side = (
        "the submitted model implies"
        if each.kind is Kind.MODEL
        else "the coefficient, read as in a plain log model, says"
    )
    told = f"For {each.term}, {_ROWS.get(each.rows, '')}{side} {_told(each, each.submitted, each.submitted_interval)}, "
    told += f"the alternative {_told(each, each.alternative, each.alternative_interval)}"
    return f"{told}; {verdict_words(each)}."


def verdict_words(each: Comparison) -> str:
    """The conclusion in words, with the bounds that the data put on the difference."""
    if each.conclusion is None:
        return f"no conclusion is drawn: {each.why}"
    bound = each.agree_within_percent
    if each.conclusion is Verdict.AGREES and bound is not None:
        return f"they agree within {percent(bound)} of {_submitted(each)}"
    if each.excludes_zero and each.relative_percent is not None and each.relative_interval is not None:
        smallest, largest = sorted(abs(end) for end in each.relative_interval)
        words = f"they differ by {size_percent(each.relative_percent)} of {_submitted(each)}, an amount that the data "
        words += f"put between {percent(smallest)} and {percent(largest)}"
    elif each.excludes_zero:
        words = "they differ, by an amount that is no stable share of the submitted number, since that may be zero"
    elif bound is not None and bound <= WIDEST_BOUND:
        words = f"we found no sign of a difference; the data bound it at {percent(bound)} of {_submitted(each)}"
    else:
        words = "we found no sign of a difference, but the data say little about it"
    return f"{words} ({each.why})" if each.why else words


def _submitted(each: Comparison) -> str:
    """What the bounds are shares of: told in percent, a log ratio is still compared in logs."""
    in_percent = each.scale is Scale.LOG_RATIO or each.coefficient_in_percent
    return "the submitted number (compared in logs)" if in_percent else "the submitted number"


def _told(each: Comparison, value: float, own: tuple[float, float] | None) -> str:
    """The number with its interval: in per cent for a log ratio of means."""
    low, high = own or (None, None)
    if (each.scale is Scale.LOG_RATIO or each.coefficient_in_percent) and max(
        map(abs, (value, low or 0.0, high or 0.0))
    ) < 20:
        ends = [None if end is None else 100 * math.expm1(end) for end in (low, high)]
        inner = interval(ends[0], ends[1], "%")
        return f"{percent(100 * math.expm1(value))} ({inner})"
    return f"{estimate(value)} ({interval(low, high)})"
