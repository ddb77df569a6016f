"""The submitted and the alternative model compared term by term, on the rows and the scale that fit."""

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from reviewkit.comparison import Cautions, Comparison, Kind, compare
from reviewkit.design_matrix import CONSTANT, Design
from reviewkit.estimators.fit import Codes
from reviewkit.fitting import FittedModel, check_focus, fit_model
from reviewkit.implied import Focus, MeanModel, Scale, contrast, exponential_mean, smeared_mean
from reviewkit.joint import Progress, Side, effective_clusters, estimate_joint
from reviewkit.model_table import percent_why_not
from reviewkit.refusals import NotEstimable
from reviewkit.specification import Estimator, PerExposure, Specification, Transform, Zeros
from reviewkit.wording import counted, joined

Mask = npt.NDArray[np.bool_]

SEED = 1
"""Of the bootstrap, so that a note can be repeated to the digit."""
FEWEST_CLUSTERS = 8
"""Treated, untreated or effective clusters below which a comparison stays unsettled; common practice, no source."""
_ROUNDING = 1e-8


@dataclass(frozen=True, slots=True)
class Task:
    """What all comparisons of one model share."""

    spec: Specification
    design: Design
    """The rows of either model."""
    reproduced: bool
    progress: Progress


def comparisons(task: Task, own: Mask, usable: Mask, focus: tuple[Focus, ...]) -> tuple[Comparison, ...]:
    """Each focal term on the rows that both models use, then on each model's own rows where these differ.

    `own` marks the rows of the submission, `usable` those of the alternative, both among the rows of the design.
    """
    common = own & usable
    sets = [("common", common, common)] + ([] if np.array_equal(own, usable) else [("own", own, usable)])
    found: list[Comparison] = []
    for label, mine, theirs in sets:
        task.progress("comparing on the same rows" if label == "common" else "comparing on each model's own rows")
        either = mine | theirs
        try:
            here = replace(task, design=task.design.where(either, "in neither model"))
            pair = (
                fit_model(here.spec, Estimator.OLS, here.design, mine[either]),
                fit_model(here.spec, Estimator.POISSON, here.design, theirs[either]),
            )
        except NotEstimable as refusal:
            found += [Comparison(each.term, Kind.MODEL, None, label, why=refusal.message()) for each in focus]
            continue
        for each in focus:
            for kind in (Kind.MODEL, Kind.READING) if _is_read(task.spec, each) else (Kind.MODEL,):
                found.append(_compared(here, pair, each, Comparison(each.term, kind, None, label)))
    return tuple(found)


def _is_read(spec: Specification, focus: Focus) -> bool:
    """Whether the coefficient may be read as if the outcome were a plain log, which is then a comparison of its own."""
    return spec.outcome.transform in (Transform.LOG_PLUS, Transform.ASINH) and focus.alone


def _compared(task: Task, pair: tuple[FittedModel, FittedModel], focus: Focus, about: Comparison) -> Comparison:
    spec = task.spec
    scale = _scale(spec, focus, about.kind)
    try:
        for made in pair:
            _check_told_apart(made, focus)
        if scale is Scale.COEFFICIENT or about.kind is Kind.READING:
            sides = [_coefficient_side(task, made, focus) for made in pair]
        else:
            means = smeared_mean(spec.outcome, pair[0].design), exponential_mean(pair[1].design)
            sides = [_implied_side(task, made, mean, (focus, scale)) for made, mean in zip(pair, means, strict=True)]
        joint = estimate_joint(sides[0], sides[1], task.design.rows, SEED, task.progress)
    except NotEstimable as refusal:
        return replace(about, why=refusal.message())
    except np.linalg.LinAlgError:
        return replace(about, why="the covariance of the two numbers cannot be computed")
    cautions = Cautions(task.reproduced, _few_clusters(pair[0], focus))
    done = compare(joint, replace(about, scale=scale), cautions)
    return replace(
        done,
        coefficient_in_percent=scale is Scale.COEFFICIENT and _in_percent(spec, pair[0], focus),
        printed_inside=_printed_inside(spec, focus, done),
    )


def _scale(spec: Specification, focus: Focus, kind: Kind) -> Scale:
    """The scale of both numbers; a reading takes both coefficients, which are the effect only per unit of it."""
    if _same_quantity(spec) or (kind is Kind.READING and not focus.per_unit):
        return Scale.COEFFICIENT
    return focus.scale(spec.outcome.transform is Transform.NONE)


def _same_quantity(spec: Specification) -> bool:
    """Whether both coefficients are the same quantity: a log without constant against an exponential mean."""
    exposed = spec.exposure is not None and spec.outcome.per_exposure is PerExposure.NO
    plain = spec.outcome.transform is Transform.LOG and spec.outcome.zeros is not Zeros.REPLACED
    return plain and not exposed


def _in_percent(spec: Specification, made: FittedModel, focus: Focus) -> bool:
    column = made.design.columns_of_x[made.design.names.index(focus.term)]
    return percent_why_not(spec.outcome, Estimator.OLS, column, made.design) is None


def _coefficient_side(task: Task, made: FittedModel, focus: Focus) -> Side:
    return Side(made.fit, made.rows, _codes(task, made), made.design.names.index(focus.term))


def _implied_side(task: Task, made: FittedModel, mean: MeanModel, of: tuple[Focus, Scale]) -> Side:
    _check_within_reach(task, made, of)
    return Side(made.fit, made.rows, _codes(task, made), None, mean, contrast(made.design, *of))


def _check_within_reach(task: Task, made: FittedModel, of: tuple[Focus, Scale]) -> None:
    """Refuse an effect at rows where a left-out column is no longer the combination that it is in the data."""
    if not made.collinear:
        return
    whole = task.design.where(np.isin(np.arange(task.design.rows), made.rows), "not in this model")
    out = [whole.names.index(name) for name, _ in made.collinear]
    kept = np.delete(np.arange(len(whole.names)), out)
    scale = np.linalg.norm(whole.x[:, kept], axis=0)
    shares = np.linalg.lstsq(whole.x[:, kept] / scale, whole.x[:, out])[0] / scale[:, None]
    effect = contrast(whole, *of)
    for rows in (effect.first, effect.second):
        gaps = np.abs(rows[:, out] - rows[:, kept] @ shares).max(axis=0)
        beyond = gaps > _ROUNDING * np.abs(rows).max()
        if beyond.any():
            names = joined([whole.names[out[place]] for place in np.flatnonzero(beyond)])
            raise NotEstimable(f"term `{of[0].term}`", f"its effect rests on {names}, of which these rows tell nothing")


def _check_told_apart(made: FittedModel, focus: Focus) -> None:
    if (focus.term, (CONSTANT,)) in made.collinear:
        raise NotEstimable(f"term `{focus.term}`", "it does not vary in the rows that can be fitted")
    check_focus((focus,), made)


def _codes(task: Task, made: FittedModel) -> Codes | None:
    """The clusters of the model's rows, counted among the rows of both."""
    return None if task.design.clusters is None else task.design.clusters[made.rows]


def _few_clusters(made: FittedModel, focus: Focus) -> str | None:
    """Why the clusters are too few for a conclusion, or None."""
    codes = made.design.clusters
    if codes is None:
        return None
    for which, count in arm_clusters(made.design, focus):
        if count < FEWEST_CLUSTERS:
            return f"{counted(count, f'{which} cluster')} only"
    place = made.design.names.index(focus.term)
    effective = effective_clusters(made.fit, codes, made.design.cluster_count, place)
    if effective < FEWEST_CLUSTERS:
        return f"the clusters weigh as much as {effective:.1f} equal ones"
    return None


def arm_clusters(design: Design, focus: Focus) -> list[tuple[str, int]]:
    """Clusters with a row at the higher value, and with a row at the base, for a two-valued focal column."""
    if focus.values is None or focus.column is None or design.clusters is None:
        return []
    values = design.columns[focus.column]
    base, high = focus.values
    return [
        (name, int(np.unique(design.clusters[values == value]).size))
        for name, value in (("treated", high), ("untreated", base))
    ]


def _printed_inside(spec: Specification, focus: Focus, done: Comparison) -> bool | None:
    printed = dict(spec.printed_terms).get(focus.term)
    if printed is None or printed.estimate is None or done.alternative_interval is None:
        return None
    if done.scale is not Scale.COEFFICIENT and done.kind is not Kind.READING:
        return None
    low, high = done.alternative_interval
    return printed.estimate.high >= low and printed.estimate.low <= high
