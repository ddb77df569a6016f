"""The facts that a re-estimation yields about its model: what script or text say is held against them."""

import math
from collections.abc import Callable, Iterable, Mapping
from typing import TYPE_CHECKING

import numpy as np

from reviewkit.comparison import Comparison, Kind
from reviewkit.design_matrix import Design
from reviewkit.estimators.fit import leverage
from reviewkit.facts import NOT_STATED, Fact, Source, SourceKind, Standing, Value
from reviewkit.implied import Scale
from reviewkit.model_table import ModelTable, reproduced
from reviewkit.specification import Transform, Zeros
from reviewkit.specified import TRANSFORM_WORDS

if TYPE_CHECKING:
    from reviewkit.reestimation import Reestimation


def refit_facts(found: "Reestimation", design: Design, clusters: Mapping[str, float]) -> tuple[Fact, ...]:
    """All facts of a re-estimation; `design` has every usable row, zeros included."""
    values: dict[str, tuple[Value | None, str]] = {}
    values |= {name: (value, "sample") for name, value in _outcome_facts(found, design).items()}
    values |= {name: (value, "models") for name, value in _model_facts(found, clusters).items()}
    first = found.comparison[0] if found.comparison else None
    read = next((each for each in found.comparison if each.kind is Kind.READING), None)
    if first is not None:
        values |= {name: (value, "comparison") for name, value in _comparison_facts(first, read).items()}
    subject = f"model:{found.name}"
    return tuple(
        Fact(name, value, Standing.DONE, Source(SourceKind.EXHIBIT, exhibit), subject)
        for name, (value, exhibit) in values.items()
        if value is not None
    )


def _outcome_facts(found: "Reestimation", design: Design) -> dict[str, Value | None]:
    y, outcome = design.y, found.specification.outcome
    positive = y[y > 0]
    zeros = design.share(y == 0)
    shifted = outcome.transform is Transform.LOG_PLUS
    return {
        "outcome.zero_share": zeros,
        "outcome.negative_share": design.share(y < 0),
        "outcome.distinct_values": float(np.unique(y).size),
        "outcome.smallest_positive": float(positive.min()) if positive.size else None,
        "outcome.lower_quartile_positive": float(np.quantile(positive, 0.25)) if positive.size else None,
        "outcome.transform": TRANSFORM_WORDS[outcome.transform],
        "outcome.constant": outcome.constant if shifted else None,
        "outcome.zeros": _zeros_word(outcome.transform, outcome.zeros, zeros),
    }


def _zeros_word(transform: Transform, zeros: Zeros, share: float) -> str:
    if share == 0:
        return "none present"
    if zeros is Zeros.DROPPED:
        return "dropped"
    if zeros is Zeros.REPLACED:
        return "replaced by a small value"
    words = {Transform.LOG_PLUS: "constant added", Transform.ASINH: "inverse hyperbolic sine"}
    return words.get(transform, "kept")


def _model_facts(found: "Reestimation", clusters: Mapping[str, float]) -> dict[str, Value | None]:
    table = found.submitted
    focus = found.comparison[0].term if found.comparison else None
    row = table.term(focus) if focus else None
    printed = dict(found.specification.printed_terms).get(focus or "")
    return {
        "estimator": {"ols": "least squares", "poisson": "Poisson"}.get(table.estimator, str(table.estimator)),
        "errors.kind": {"cluster": "clustered"}.get(table.errors.kind, str(table.errors.kind)),
        "errors.type": table.errors.type or None,
        "errors.clusters": float(table.clusters) if table.clusters else None,
        "n.used": table.observations,
        "refit.reproduced": reproduced(found.specification, found.agreement, table),
        "refit.focus": focus,
        "refit.coefficient": row.estimate if row else None,
        "refit.coefficient_error": row.std_error if row else None,
        "refit.printed_estimate": printed.estimate if printed else None,
        "refit.printed_error": printed.std_error if printed else None,
        "refit.separated_rows": _separated(found),
        "refit.largest_leverage": float(leverage(table.fit).max()),
        "refit.clusters": float(table.clusters) if table.clusters else None,
        "refit.treated_clusters": _number(clusters.get("treated")),
        "refit.untreated_clusters": _number(clusters.get("untreated")),
        "refit.effective_clusters": _number(clusters.get("effective")),
    }


def _separated(found: "Reestimation") -> float | None:
    table: ModelTable | None = found.alternative
    if table is None:
        return None
    return float(sum(lost for why, lost in table.dropped if why == "fitted as a certain zero"))


def _comparison_facts(first: Comparison, read: Comparison | None) -> dict[str, Value | None]:
    low, high = first.alternative_interval or (None, None)
    own_low, own_high = first.submitted_interval or (None, None)
    inside = (read or first).printed_inside
    done = first.submitted is not None
    return {
        "refit.scale": str(first.scale) if first.scale else None,
        "refit.conclusion": str(first.conclusion) if first.conclusion else "none",
        "refit.why_no_conclusion": first.why if first.conclusion is None else None,
        "refit.difference_excludes_zero": _yes(first.excludes_zero),
        "refit.agree_within_percent": _number_or_none(first.agree_within_percent) if done else None,
        "refit.differ_by_at_least_percent": _number_or_none(first.differ_by_at_least_percent) if done else None,
        "refit.relative_percent": _number_or_none(first.relative_percent) if done else None,
        "refit.relative_smallest": _relative_end(first, min) if done else None,
        "refit.relative_largest": _relative_end(first, max) if done else None,
        "refit.submitted": first.submitted,
        "refit.submitted_low": own_low,
        "refit.submitted_high": own_high,
        "refit.alternative": first.alternative,
        "refit.alternative_low": low,
        "refit.alternative_high": high,
        "refit.submitted_percent": _in_percent(first, first.submitted),
        "refit.alternative_percent": _in_percent(first, first.alternative),
        "refit.alternative_percent_low": _in_percent(first, low),
        "refit.alternative_percent_high": _in_percent(first, high),
        "refit.printed_reading_inside": NOT_STATED if inside is None else _yes(inside),
        "refit.sign_turns": _yes(first.sign_turns),
        "refit.error_ratio": first.error_ratio,
        "refit.effective_rows": first.effective if first.method != "leave-one-cluster-out" else None,
        "refit.weak": _yes(first.weak is not None),
    }


def _relative_end(first: Comparison, which: Callable[[Iterable[float]], float]) -> Value:
    """The smaller or larger size of the difference in per cent of the submitted number, where it is off zero."""
    ends = first.relative_interval
    return NOT_STATED if ends is None or ends[0] * ends[1] <= 0 else which(abs(end) for end in ends)


def _in_percent(first: Comparison, value: float | None) -> Value | None:
    """A log ratio in percent; not stated where the scale has no percent."""
    if value is None:
        return None
    if first.scale is Scale.LOG_RATIO or first.coefficient_in_percent:
        return 100 * math.expm1(value) if abs(value) < 50 else NOT_STATED
    return NOT_STATED


def _number(value: float | None) -> float | None:
    return None if value is None else float(value)


def _number_or_none(value: float | None) -> Value:
    return NOT_STATED if value is None else value


def _yes(holds: bool | None) -> str | None:
    return None if holds is None else "yes" if holds else "no"
