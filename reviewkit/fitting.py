"""A model of a specification fitted on some of its rows, with what was left out and why."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from reviewkit.design_matrix import Design
from reviewkit.estimators.basis import Basis, well_conditioned
from reviewkit.estimators.fit import Fit, Sample
from reviewkit.estimators.separation import separated_rows
from reviewkit.implied import Focus
from reviewkit.joint import FITTERS
from reviewkit.refusals import NotEstimable
from reviewkit.specification import Estimator, Specification, Transform, Zeros
from reviewkit.transforms import transformed
from reviewkit.wording import counted, some_of

Array = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class FittedModel:
    """A fit with what it was made from."""

    fit: Fit
    design: Design
    rows: npt.NDArray[np.int64]
    """Places of its rows among all usable rows."""
    collinear: tuple[tuple[str, tuple[str, ...]], ...]
    """Columns left out of the design, each with those that it is a combination of."""

    @property
    def left_out(self) -> tuple[str, ...]:
        """The collinear columns in words."""
        return tuple(f"{name} (a combination of {some_of(others)})" for name, others in self.collinear)


def submission_rows(spec: Specification, design: Design) -> Mask:
    """The rows that the submission uses: all, or where zeros were dropped, those left that have its transform.

    A submitted Poisson model also leaves out the rows that it could only fit as certain zeros.
    """
    rows = np.ones(design.rows, dtype=bool)
    if spec.outcome.zeros is Zeros.DROPPED:
        rows = design.y > 0 if spec.outcome.transform in (Transform.LOG, Transform.SQRT) else design.y != 0
    if spec.estimator is Estimator.POISSON:
        rows = rows & ~separated_rows(well_conditioned(design.x).z, design.y)
    return rows


def fit_model(spec: Specification, estimator: Estimator, design: Design, rows: Mask) -> FittedModel:
    """Fit one model on some of the usable rows."""
    part = design.where(rows, "outcome zero or negative" if estimator is Estimator.OLS else "fitted as a certain zero")
    y = part.y if estimator is not Estimator.OLS else transformed(spec.outcome, part.y, part.exposure)
    _check_outcome(spec, y, part)
    basis = well_conditioned(part.x)
    collinear = tuple(
        (part.names[place], tuple(part.names[other] for other in others)) for place, others in basis.collinear
    )
    part = part.keeping(basis.kept)
    sample = make_sample(part, basis, y, part.offset if estimator is not Estimator.OLS else np.zeros(part.rows))
    return FittedModel(FITTERS[estimator](sample, None), part, np.flatnonzero(rows), collinear)


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


def check_focus(focus: tuple[Focus, ...], made: FittedModel) -> None:
    """Refuse a focal term whose effect cannot be told from that of others.

    Raises:
        NotEstimable: It was left out as collinear, or a column was left out that is a combination with it.
    """
    for each in focus:
        for name, others in made.collinear:
            if each.term == name or each.term in others:
                rest = [other for other in (name, *others) if other != each.term]
                raise NotEstimable(f"term `{each.term}`", f"its effect cannot be told from that of {some_of(rest)}")


def fit_alternative(spec: Specification, design: Design) -> tuple[Mask, FittedModel | None, str | None]:
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
        return rows, fit_model(spec, Estimator.POISSON, design, rows), None
    except NotEstimable as refusal:
        return rows, None, refusal.message()
