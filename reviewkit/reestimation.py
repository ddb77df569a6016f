"""From a specification and a table to both models, their comparison, the exhibits, and the facts they yield."""

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Protocol

import numpy as np
import numpy.typing as npt

from reviewkit.comparison import LEVEL, Cautions, Comparison, Kind, compare
from reviewkit.design_matrix import Design, build_design
from reviewkit.estimators.basis import Basis, well_conditioned
from reviewkit.estimators.fit import Codes, Fit, Sample
from reviewkit.estimators.separation import separated_rows
from reviewkit.evidence.baseline import baseline_exhibit
from reviewkit.evidence.comparison import comparison_exhibit
from reviewkit.evidence.models import models_exhibit
from reviewkit.evidence.percents import percent_exhibit
from reviewkit.evidence.sample import sample_exhibit
from reviewkit.exhibit import Exhibit
from reviewkit.facts import Fact
from reviewkit.implied import Focus, Scale, contrast, exponential_mean, resolve_focus, smeared_mean
from reviewkit.joint import FITTERS, Progress, Side, effective_clusters, estimate_joint
from reviewkit.model_table import Agreement, ModelTable, agreements, model_table, percent_why_not
from reviewkit.refit_facts import refit_facts
from reviewkit.refusals import NotEstimable, Refusal
from reviewkit.specification import Estimator, PerExposure, Specification, Transform, Zeros
from reviewkit.transforms import transformed
from reviewkit.wording import counted, joined

if TYPE_CHECKING:
    import pandas

Array = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]

SEED = 1
"""Of the bootstrap, so that a note can be repeated to the digit."""
FEWEST_CLUSTERS = 8
"""Treated, untreated or effective clusters below which a comparison stays unsettled; common practice, no source."""


class DataTable(Protocol):
    """A table as the readers give it."""

    @property
    def name(self) -> str:
        """File name without its folder."""

    @property
    def frame(self) -> "pandas.DataFrame":
        """The columns."""

    @property
    def sha256(self) -> str:
        """Checksum of the file."""

    @property
    def labels(self) -> dict[str, str]:
        """Labels of columns, where the file has them."""


@dataclass(frozen=True, slots=True)
class Reestimation:
    """All that a re-estimation found."""

    name: str
    specification: Specification
    data_name: str
    data_sha256: str
    data_rows: int
    submitted: ModelTable
    alternative: ModelTable | None
    alternative_why_not: str | None
    agreement: tuple[Agreement, ...]
    comparison: tuple[Comparison, ...]
    exhibits: tuple[Exhibit, ...]
    facts: tuple[Fact, ...]
    warnings: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class _Made:
    """A fit with what it was made from."""

    fit: Fit
    design: Design
    rows: npt.NDArray[np.int64]
    """Places of its rows among all usable rows."""
    left_out: tuple[str, ...]


def reestimate(spec: Specification, table: DataTable, progress: Progress | None = None) -> Reestimation:
    """Fit the submitted model and its alternative, compare them, and gather the evidence.

    Raises:
        Refusal: The specification does not fit the data.
        NotEstimable: The submitted model cannot be estimated.
    """
    from threadpoolctl import threadpool_limits

    with threadpool_limits(limits=1):
        return _reestimate(spec, table, progress or (lambda _: None))


def _reestimate(spec: Specification, table: DataTable, progress: Progress) -> Reestimation:
    if spec.estimator not in (Estimator.OLS, Estimator.POISSON):
        raise Refusal("model.estimator", f"`{spec.estimator}` is not estimated in this version", "ols, poisson")
    progress("building the design")
    design = build_design(spec, table.frame)
    own = _submission_rows(spec, design)
    progress("fitting the submitted model")
    submitted = _made(spec, spec.estimator, design, own)
    focus = resolve_focus(spec, design)
    _check_focus(focus, submitted, design)
    first = model_table(spec, spec.estimator, submitted.fit, submitted.design, submitted.left_out)
    progress("fitting the alternative")
    usable, alternative, why_not = _alternative(spec, design)
    second = (
        model_table(spec, Estimator.POISSON, alternative.fit, alternative.design, alternative.left_out)
        if alternative
        else None
    )
    agreement = agreements(spec, first)
    cases = (
        _comparisons(spec, design, (own, usable), focus, _reproduced(spec, agreement, first), progress)
        if alternative
        else ()
    )
    comparison = cases or tuple(Comparison(each.term, Kind.MODEL, None, "common", why=why_not) for each in focus)
    found = Reestimation(
        spec.name, spec, table.name, table.sha256, len(table.frame), first, second, why_not, agreement, comparison,
        _exhibits(spec, table, (first, second), agreement, (comparison, focus, submitted)), (),
        _warnings(design, first, second, usable, own),
    )  # fmt: skip
    return replace(found, facts=_facts(found, design, focus))


def _submission_rows(spec: Specification, design: Design) -> Mask:
    """The rows that the submission uses: all, or those with an outcome above zero where zeros were dropped."""
    dropped = spec.outcome.zeros is Zeros.DROPPED
    if spec.estimator is Estimator.OLS and spec.outcome.transform is not Transform.NONE and dropped:
        return design.y > 0
    return np.ones(design.rows, dtype=bool)


def _made(spec: Specification, estimator: Estimator, design: Design, rows: Mask) -> _Made:
    """Fit one model on some of the usable rows."""
    part = design.where(rows, "outcome zero or negative" if estimator is Estimator.OLS else "fitted as a certain zero")
    y = part.y if estimator is not Estimator.OLS else transformed(spec.outcome, part.y, part.exposure)
    _check_outcome(spec, y, part)
    basis = well_conditioned(part.x)
    left_out = tuple(
        f"{part.names[place]} (a combination of {joined([part.names[other] for other in others])})"
        for place, others in basis.collinear
    )
    part = part.keeping(basis.kept)
    sample = make_sample(part, basis, y, part.offset if estimator is not Estimator.OLS else np.zeros(part.rows))
    return _Made(FITTERS[estimator](sample), part, np.flatnonzero(rows), left_out)


def make_sample(design: Design, basis: Basis, y: Array, offset: Array) -> Sample:
    """The arrays of an estimation, weights brought to mean one over observations."""
    ones = np.ones(design.rows)
    multiplicity = ones if design.multiplicity is None else design.multiplicity
    weights = ones
    if design.weights is not None and design.multiplicity is None:
        weights = design.weights / design.weights.mean()
    return Sample(basis, y, weights, multiplicity, offset, design.clusters)


def _check_outcome(spec: Specification, y: Array, design: Design) -> None:
    where = f"outcome `{spec.outcome.column}`"
    if design.observations <= len(design.names):
        raise NotEstimable(
            where,
            f"{counted(design.observations, 'observation')} for {counted(len(design.names), 'coefficient')}",
            "more observations than coefficients",
            "Use fewer terms, or check the sample condition",
        )
    if y.min() == y.max():
        raise NotEstimable(
            where, f"it has one value only in the {counted(design.rows, 'row')} used", "two values or more"
        )


def _check_focus(focus: tuple[Focus, ...], made: _Made, design: Design) -> None:
    for each in focus:
        if each.term not in made.design.names or any(f"{each.term}" in _partners(text) for text in made.left_out):
            why = next((text for text in made.left_out if each.term in text), "it does not vary in the rows used")
            raise NotEstimable(f"term `{each.term}`", f"its effect cannot be told from the others: {why}")


def _partners(left_out: str) -> list[str]:
    import re

    return re.split(r" \(a combination of |, | and |\)$", left_out)


def _alternative(spec: Specification, design: Design) -> tuple[Mask, _Made | None, str | None]:
    """The rows of the Poisson alternative, its fit, and why there is none."""
    rows = np.ones(design.rows, dtype=bool)
    if spec.estimator is Estimator.POISSON:
        return rows, None, "the submission is itself a Poisson model of the mean"
    if spec.alternative not in (None, Estimator.POISSON):
        return rows, None, f"`{spec.alternative}` is not estimated in this version"
    if (design.y < 0).any():
        negative = int((design.y < 0).sum())
        return rows, None, f"the outcome is negative in {counted(negative, 'row')}: its mean need not be positive"
    try:
        rows = ~separated_rows(well_conditioned(design.x).z, design.y)
        return rows, _made(spec, Estimator.POISSON, design, rows), None
    except NotEstimable as refusal:
        return rows, None, refusal.message()


def _comparisons(
    spec: Specification,
    design: Design,
    rows: tuple[Mask, Mask],
    focus: tuple[Focus, ...],
    reproduced: bool,
    progress: Progress,
) -> tuple[Comparison, ...]:
    """Each focal term on common rows, then on each model's own rows where these differ."""
    own, usable = rows
    common = own & usable
    sets = [("common", common, common)] + ([] if np.array_equal(own, usable) else [("own", own, usable)])
    found = []
    for label, mine, theirs in sets:
        progress(f"comparing on {'common' if label == 'common' else 'own'} rows")
        try:
            pair = (_made(spec, Estimator.OLS, design, mine), _made(spec, Estimator.POISSON, design, theirs))
        except NotEstimable as refusal:
            found += [Comparison(each.term, Kind.MODEL, None, label, why=refusal.message()) for each in focus]
            continue
        for each in focus:
            cautions = Cautions(reproduced, _few_clusters(pair[0], each, design))
            for kind in (Kind.MODEL, Kind.READING) if _is_read(spec, each) else (Kind.MODEL,):
                about = Comparison(each.term, kind, None, label)
                found.append(_compared(spec, design, pair, (each, about, cautions), progress))
    return tuple(found)


def _is_read(spec: Specification, focus: Focus) -> bool:
    """Whether the coefficient may be read as if the outcome were a plain log, which is then a comparison of its own."""
    return spec.outcome.transform in (Transform.LOG_PLUS, Transform.ASINH) and focus.column is not None


def _compared(
    spec: Specification,
    design: Design,
    pair: tuple[_Made, _Made],
    asked: tuple[Focus, Comparison, Cautions],
    progress: Progress,
) -> Comparison:
    focus, about, cautions = asked
    coefficient = _same_quantity(spec)
    in_levels = spec.outcome.transform is Transform.NONE
    scale = Scale.COEFFICIENT if coefficient else focus.scale(in_levels)
    about = replace(about, scale=scale)
    try:
        sides = tuple(
            _side(spec, made, focus, (scale, design, alternative, about.kind is Kind.READING and not alternative))
            for alternative, made in enumerate(pair)
        )
        joint = estimate_joint(sides[0], sides[1], design.rows, SEED, progress)
    except (NotEstimable, np.linalg.LinAlgError) as error:
        why = error.message() if isinstance(error, Refusal) else "the covariance cannot be computed"
        return replace(about, scale=None, why=why)
    done = compare(joint, about, cautions)
    if scale is Scale.COEFFICIENT:
        done = replace(done, coefficient_in_percent=_in_percent(spec, pair[0], focus))
    return replace(done, printed_inside=_printed_inside(spec, focus, done))


def _same_quantity(spec: Specification) -> bool:
    """Whether both coefficients are the same quantity: a log without constant against an exponential mean."""
    exposed = spec.exposure is not None and spec.outcome.per_exposure is PerExposure.NO
    plain = spec.outcome.transform is Transform.LOG and spec.outcome.zeros is not Zeros.REPLACED
    return plain and not exposed


def _in_percent(spec: Specification, made: _Made, focus: Focus) -> bool:
    column = made.design.columns_of_x[made.design.names.index(focus.term)]
    return percent_why_not(spec.outcome, Estimator.OLS, column, made.design) is None


def _side(spec: Specification, made: _Made, focus: Focus, how: tuple[Scale, Design, int, bool]) -> Side:
    scale, design, alternative, as_read = how
    codes: Codes | None = None if design.clusters is None else design.clusters[made.rows]
    place = made.design.names.index(focus.term) if focus.term in made.design.names else None
    if place is None:
        raise NotEstimable(f"term `{focus.term}`", "it does not vary in the rows that can be fitted")
    if scale is Scale.COEFFICIENT or as_read:
        return Side(made.fit, made.rows, codes, place)
    model = exponential_mean(made.design) if alternative else smeared_mean(spec.outcome, made.design)
    return Side(made.fit, made.rows, codes, None, model, contrast(made.design, focus, scale))


def _few_clusters(made: _Made, focus: Focus, design: Design) -> str | None:
    """Why the clusters are too few for a conclusion, or None."""
    codes = made.design.clusters
    if codes is None:
        return None
    for which, count in _arm_clusters(made.design, focus):
        if count < FEWEST_CLUSTERS:
            return f"{counted(count, f'{which} cluster')} only"
    place = made.design.names.index(focus.term)
    effective = effective_clusters(made.fit, codes, made.design.cluster_count, place)
    if effective < FEWEST_CLUSTERS:
        return f"the clusters weigh as much as {effective:.1f} equal ones"
    return None


def _arm_clusters(design: Design, focus: Focus) -> list[tuple[str, int]]:
    """Clusters with a row at the higher value, and with a row at the base, for a two-valued focal column."""
    if focus.values is None or focus.column is None or design.clusters is None:
        return []
    values = design.columns[focus.column]
    base, high = focus.values
    return [
        (name, int(np.unique(design.clusters[values == value]).size))
        for name, value in (("treated", high), ("untreated", base))
    ]


def _reproduced(spec: Specification, agreement: tuple[Agreement, ...], table: ModelTable) -> bool:
    """Whether nothing printed speaks against the refit: estimates met; n met where it was printed."""
    estimates = [each.estimate for each in agreement if each.estimate is not None]
    n_met = spec.printed_n is None or spec.printed_n.agrees(table.observations)
    return all(estimates) and n_met


def _printed_inside(spec: Specification, focus: Focus, done: Comparison) -> bool | None:
    printed = dict(spec.printed_terms).get(focus.term)
    if printed is None or printed.estimate is None or done.alternative_interval is None:
        return None
    if done.scale is not Scale.COEFFICIENT and done.kind is not Kind.READING:
        return None
    low, high = done.alternative_interval
    return printed.estimate.high >= low and printed.estimate.low <= high


def _exhibits(
    spec: Specification,
    table: DataTable,
    tables: tuple[ModelTable, ModelTable | None],
    agreement: tuple[Agreement, ...],
    rest: tuple[tuple[Comparison, ...], tuple[Focus, ...], _Made],
) -> tuple[Exhibit, ...]:
    first, second = tables
    comparison, focus, made = rest
    names = tuple(each.term for each in focus)
    label = table.labels.get(spec.outcome.column) or spec.outcome.column
    base = make_sample(made.design, made.fit.sample.basis, made.design.y, np.zeros(made.design.rows))
    place = made.design.names.index(names[0])
    shown = second or first
    return (
        sample_exhibit(shown, label),
        models_exhibit(first, second, agreement, names),
        comparison_exhibit(comparison, LEVEL),
        percent_exhibit(first, second, names),
        baseline_exhibit(base, made.design, place, label),
    )


def _warnings(design: Design, first: ModelTable, second: ModelTable | None, usable: Mask, own: Mask) -> tuple[str, ...]:
    found = [f"left out of the submitted model: {each}" for each in first.collinear]
    found += [f"left out of the alternative: {each}" for each in second.collinear] if second else []
    separated = int((~usable).sum())
    if separated and second:
        found.append(
            f"{counted(separated, 'row')} with outcome zero would be fitted as certain zeros by the Poisson model "
            "(separation); they are left out of it, and the comparison is on common rows first"
        )
    dropped = int((~own).sum())
    if dropped:
        found.append(f"the submission leaves out {counted(dropped, 'row')} with an outcome of zero or below")
    return tuple(found)


def _facts(found: Reestimation, design: Design, focus: tuple[Focus, ...]) -> tuple[Fact, ...]:
    made = found.submitted
    clusters = dict(_arm_clusters(made.design, focus[0])) if focus else {}
    if made.design.clusters is not None and focus:
        place = made.design.names.index(focus[0].term)
        value = effective_clusters(made.fit, made.design.clusters, made.design.cluster_count, place)
        return refit_facts(found, design, {**clusters, "effective": value})
    return refit_facts(found, design, clusters)
