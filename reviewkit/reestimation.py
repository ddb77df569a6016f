"""From a specification and a table to both models, their comparison, the exhibits, and the facts they yield."""

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Protocol

import numpy as np
import numpy.typing as npt

from reviewkit.comparison import LEVEL, Comparison, Kind
from reviewkit.design_matrix import Design, build_design
from reviewkit.evidence.baseline import baseline_exhibit
from reviewkit.evidence.comparison import comparison_exhibit
from reviewkit.evidence.constant import constant_exhibits
from reviewkit.evidence.mean_form import mean_form_exhibit
from reviewkit.evidence.models import models_exhibit
from reviewkit.evidence.percents import percent_exhibit
from reviewkit.evidence.sample import sample_exhibit
from reviewkit.evidence.step_account import step_account_exhibit
from reviewkit.exhibit import Exhibit
from reviewkit.facts import Fact
from reviewkit.fitting import FittedModel, check_focus, fit_alternative, fit_model, make_sample, submission_rows
from reviewkit.implied import Focus, resolve_focus
from reviewkit.joint import Progress, effective_clusters
from reviewkit.model_table import Agreement, ModelTable, agreements, model_table, named_prints, reproduced
from reviewkit.pairing import Task, arm_clusters, comparisons
from reviewkit.refit_facts import refit_facts
from reviewkit.refusals import NotEstimable, Refusal
from reviewkit.specification import ErrorKind, Errors, Estimator, Specification, Transform
from reviewkit.steps_between import why_no_account
from reviewkit.wording import counted

if TYPE_CHECKING:
    import pandas

Mask = npt.NDArray[np.bool_]


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
    if spec.estimator is Estimator.POISSON and spec.outcome.transform is not Transform.NONE:
        raise Refusal(
            "outcome.transform",
            f"a Poisson model has no outcome in {spec.outcome.transform}: it is of the mean of the outcome itself",
            "none",
            'Set transform = "none", or estimator = "ols"',
        )
    progress("building the design")
    design = build_design(spec, table.frame)
    own = submission_rows(spec, design)
    progress("fitting the submitted model")
    submitted = fit_model(spec, spec.estimator, design, own)
    focus = resolve_focus(spec, design)
    check_focus(focus, submitted)
    spec = replace(spec, printed_terms=named_prints(spec, submitted.design.names))
    first = _model_table(spec, spec.estimator, submitted)
    progress("fitting the alternative")
    usable, alternative, why_not = fit_alternative(spec, design)
    second = _alternative_table(spec, alternative) if alternative else None
    agreement = agreements(spec, first)
    task = Task(spec, design, _reproduced(spec, agreement, first), progress)
    compared = comparisons(task, own, usable, focus) if alternative else _not_compared(focus, why_not)
    found = Reestimation(
        name=spec.name,
        specification=spec,
        data_name=table.name,
        data_sha256=table.sha256,
        data_rows=len(table.frame),
        submitted=first,
        alternative=second,
        alternative_why_not=why_not,
        agreement=agreement,
        comparison=compared,
        exhibits=(),
        facts=(),
        warnings=_warnings(first, second, own, usable),
    )
    label = table.labels.get(spec.outcome.column) or spec.outcome.column
    exhibits = _exhibits(found, design, submitted, focus[0], label)
    facts = (*_facts(found, design, focus), *(fact for each in exhibits for fact in each.facts))
    return replace(found, exhibits=exhibits, facts=facts)


def _model_table(spec: Specification, estimator: Estimator, made: FittedModel) -> ModelTable:
    return model_table(spec, estimator, made.fit, made.design, made.left_out)


def _alternative_table(spec: Specification, made: FittedModel) -> ModelTable:
    """Quasi-likelihood needs robust errors, also beside a submission with classical ones."""
    errors = Errors() if spec.errors.kind is ErrorKind.CLASSICAL else spec.errors
    return _model_table(replace(spec, errors=errors), Estimator.POISSON, made)


def _not_compared(focus: tuple[Focus, ...], why: str | None) -> tuple[Comparison, ...]:
    return tuple(Comparison(each.term, Kind.MODEL, None, "common", why=why) for each in focus)


def _reproduced(spec: Specification, agreement: tuple[Agreement, ...], table: ModelTable) -> bool:
    """Whether a conclusion may be drawn: all that was printed is met, or else the estimates and n are."""
    state = reproduced(spec, agreement, table)
    estimates = [each.estimate for each in agreement if each.estimate is not None]
    n_met = spec.printed_n is None or spec.printed_n.agrees(table.observations)
    return state in (None, "yes") or bool(estimates and all(estimates) and n_met)


def _exhibits(found: Reestimation, design: Design, made: FittedModel, focus: Focus, label: str) -> tuple[Exhibit, ...]:
    names = tuple(dict.fromkeys(each.term for each in found.comparison))
    tables = (found.submitted, found.alternative)
    linear = make_sample(made.design, made.fit.sample.basis, made.design.y, np.zeros(made.design.rows))
    place = made.design.names.index(names[0])
    return (
        sample_exhibit(design, tables, label, focus),
        models_exhibit(*tables, found.agreement, names, found.specification.printed_n),
        comparison_exhibit(found.comparison, LEVEL),
        percent_exhibit(*tables, names),
        baseline_exhibit(linear, made.design, place, found.specification.errors, label),
        mean_form_exhibit(
            found.name,
            found.submitted.fit,
            found.alternative.fit if found.alternative else None,
            found.submitted.outcome,
        ),
        *_step_account(found, made.design, focus),
        *_constant(found, made.design, focus),
    )


def _constant(found: Reestimation, design: Design, focus: Focus) -> tuple[Exhibit, ...]:
    """How the coefficient moves with a constant, where least squares added one."""
    if found.submitted.estimator is not Estimator.OLS:
        return ()
    return constant_exhibits(found.specification, design, focus)


def _step_account(found: Reestimation, design: Design, focus: Focus) -> tuple[Exhibit, ...]:
    """The account on the rows of the submission, where its steps are defined."""
    spec = found.specification
    if found.alternative is None or why_no_account(spec.outcome, spec.exposure is not None) is not None:
        return ()
    try:
        return (step_account_exhibit(spec, design, focus, LEVEL),)
    except (NotEstimable, np.linalg.LinAlgError):
        return ()


def _warnings(first: ModelTable, second: ModelTable | None, own: Mask, usable: Mask) -> tuple[str, ...]:
    found = [f"left out of the submitted model: {each}" for each in first.collinear]
    found += [f"left out of the alternative: {each}" for each in second.collinear] if second else []
    separated = int((~usable).sum())
    if separated and second:
        found.append(
            f"{counted(separated, 'row')} with outcome zero would be fitted as certain zeros by the Poisson model "
            "(separation); they are left out of it, and the comparison is on the rows of both models first"
        )
    dropped = int((~own).sum())
    if dropped and first.estimator is Estimator.POISSON:
        found.append(
            f"{counted(dropped, 'row')} with outcome zero left out: dropped, or fitted as certain zeros (separation)"
        )
    elif dropped:
        found.append(f"the submission leaves out {counted(dropped, 'row')} with an outcome of zero or below")
    return tuple(found)


def _facts(found: Reestimation, design: Design, focus: tuple[Focus, ...]) -> tuple[Fact, ...]:
    made = found.submitted
    clusters = dict(arm_clusters(made.design, focus[0])) if focus else {}
    if made.design.clusters is not None and focus:
        place = made.design.names.index(focus[0].term)
        value = effective_clusters(made.fit, made.design.clusters, made.design.cluster_count, place)
        return refit_facts(found, design, {**clusters, "effective": value})
    return refit_facts(found, design, clusters)
