"""The effect on the mean of the outcome that a fitted model implies, with the influence of each row on it.

Definitions: for a two-valued covariate the log of the ratio of the sums of fitted means with everyone at one value
and everyone at the other; for a continuous one the average slope over the average mean; in levels the difference or
the average slope itself. Averages run over the rows of the fit, and each row's own share in them is in its influence.
"""

from dataclasses import dataclass
from enum import StrEnum

import numpy as np
import numpy.typing as npt

from reviewkit.design_matrix import Design, DesignColumn, Level, factor_levels, two_valued
from reviewkit.estimators.fit import Fit, influence, leverage
from reviewkit.expressions import Apply, Column, Factor, Term, columns_of, read_terms
from reviewkit.refusals import NotEstimable, Refusal
from reviewkit.specification import Outcome, PerExposure, Specification
from reviewkit.transforms import MeanPiece, mean_pieces
from reviewkit.wording import counted

Array = npt.NDArray[np.float64]


class Scale(StrEnum):
    """What a compared number is."""

    COEFFICIENT = "coefficient"
    LOG_RATIO = "log_ratio_of_means"
    SEMI_ELASTICITY = "average_semi_elasticity"
    ELASTICITY = "elasticity"
    LEVEL = "level_units"


@dataclass(frozen=True, slots=True)
class Focus:
    """A term that the claim rests on, as the data have it."""

    term: str
    place: int
    """Its column in the design matrix."""
    column: str | None
    """The column of the data that it moves; None for products and powers, which have no effect of their own."""
    values: tuple[float | str, float | str] | None
    """The two values compared, the base first; None where the covariate is continuous."""
    logged: bool
    alone: bool
    """Whether no other term holds the column."""
    per_unit: bool
    """Whether, alone in an exponential mean, its coefficient is its effect on its scale."""

    def scale(self, in_levels: bool) -> Scale:
        """The scale on which its implied effect is told."""
        if in_levels:
            return Scale.LEVEL
        if self.values is not None:
            return Scale.LOG_RATIO
        return Scale.ELASTICITY if self.logged else Scale.SEMI_ELASTICITY


@dataclass(frozen=True, slots=True)
class MeanModel:
    """How a fit's index becomes the mean of the outcome in its own unit."""

    pieces: tuple[MeanPiece, ...]
    smeared: bool
    """Whether the pieces carry averages over residuals, as a transformed outcome needs; else they are one."""
    index_offset: Array
    factor: Array
    """What the mean is multiplied by, row by row: the exposure where the outcome was divided by it; (n,)."""


@dataclass(frozen=True, slots=True)
class Contrast:
    """Two sets of design rows whose averages make an effect; (n, k) each."""

    scale: Scale
    first: Array
    """The design with everyone at the higher value, or the design as it is."""
    second: Array
    """The design with everyone at the base, or the derivative of the design by the covariate."""
    continuous: bool


def resolve_focus(spec: Specification, design: Design) -> tuple[Focus, ...]:
    """The focal terms of a specification; the first term where none is named.

    Raises:
        Refusal: A focal term is not in the model.
    """
    named = spec.focus or (str(spec.terms[0]),) if spec.terms else ()
    found: list[Focus] = []
    for text in named:
        found += _resolved(read_terms(text, "model.focus")[0], text, spec, design)
    return tuple(found)


def _resolved(term: Term, text: str, spec: Specification, design: Design) -> list[Focus]:
    part = term.parts[0]
    if len(term.parts) == 1 and isinstance(part, Factor):
        places = [place for place, piece in enumerate(design.columns_of_x) if _is_class(piece, part.column)]
        found = [_class_focus(design, place, spec) for place in places]
    else:
        place = design.names.index(text) if text in design.names else None
        found = [] if place is None else [_numeric_focus(term, text, place, (spec, design))]
    if not found:
        raise Refusal("model.focus", f"`{text}` is not among the terms in use", ", ".join(map(str, spec.terms)))
    return found


def _is_class(piece: DesignColumn, column: str) -> bool:
    part = piece.parts[0] if len(piece.parts) == 1 else None
    return isinstance(part, Level) and part.column == column


def _class_focus(design: Design, place: int, spec: Specification) -> Focus:
    piece = design.columns_of_x[place]
    level = piece.parts[0]
    assert isinstance(level, Level)  # noqa: S101
    base = _base_level(design, level.column, spec)
    return Focus(piece.name, place, level.column, (base, level.value), False, _alone(level.column, spec), True)


def _base_level(design: Design, column: str, spec: Specification) -> float | str:
    parts = [part for term in spec.terms for part in term.parts if isinstance(part, Factor) and part.column == column]
    return factor_levels(parts[0], design.columns)[0]


def _numeric_focus(term: Term, text: str, place: int, owner: tuple[Specification, Design]) -> Focus:
    spec, design = owner
    part = term.parts[0]
    names = columns_of(term)
    plain = len(term.parts) == 1 and len(names) == 1 and isinstance(part, Column | Apply)
    column = names[0] if plain else None
    values = two_valued(design.columns[column]) if column is not None and isinstance(part, Column) else None
    logged = isinstance(part, Apply) and part.function == "log" and isinstance(part.argument, Column)
    per_unit = logged or (plain and isinstance(part, Column) and (values is None or values[1] - values[0] == 1))
    return Focus(text, place, column, values, logged, column is not None and _alone(column, spec), per_unit)


def _alone(column: str, spec: Specification) -> bool:
    return sum(column in columns_of(term) for term in spec.terms) == 1


def contrast(design: Design, focus: Focus, scale: Scale) -> Contrast:
    """The design rows that the effect of a focal column averages over.

    Raises:
        NotEstimable: The term has no effect of its own, being a product, a power or arithmetic, or no finite slope.
    """
    if focus.column is None:
        raise NotEstimable(
            f"term `{focus.term}`", "a product, power or arithmetic has no effect of its own on the mean"
        )
    if focus.values is not None:
        base, high = focus.values
        return Contrast(scale, design.with_column(focus.column, high), design.with_column(focus.column, base), False)
    slope = design.derivative_by(focus.column)
    if scale is Scale.ELASTICITY:
        slope = slope * design.columns[focus.column][:, None]
    if not np.isfinite(slope).all():
        steep = int((~np.isfinite(slope)).any(axis=1).sum())
        raise NotEstimable(f"term `{focus.term}`", f"it has no finite slope in {counted(steep, 'row')}")
    return Contrast(scale, design.x, slope, True)


def exponential_mean(design: Design) -> MeanModel:
    """The mean model of Poisson quasi-likelihood: exp(index + log exposure)."""
    piece = MeanPiece(np.exp, np.exp, np.exp, np.ones_like, np.zeros_like)
    return MeanModel((piece,), False, design.offset, np.ones(design.rows))


def smeared_mean(outcome: Outcome, design: Design) -> MeanModel:
    """The mean model of least squares on a transform, taken at its word."""
    after = outcome.per_exposure is PerExposure.AFTER_CONSTANT and design.exposure is not None
    before = outcome.per_exposure is PerExposure.BEFORE_CONSTANT and design.exposure is not None
    factor = design.exposure if before and design.exposure is not None else np.ones(design.rows)
    return MeanModel(mean_pieces(outcome), True, design.offset if after else np.zeros(design.rows), factor)


@dataclass(frozen=True, slots=True)
class _Average:
    """A weighted average over rows of a model's mean or slope."""

    value: float
    rows: Array
    """What is averaged, (n,)."""
    by_index: tuple[tuple[Array, Array], ...]
    """Derivative by the coefficients: sums over rows of (n,) times design rows (n, k)."""
    by_smear: tuple[float, ...]
    """Derivative by each piece's average over residuals."""


def effect(model: MeanModel, of: Contrast, beta: Array, residuals: Array, weights: Array) -> float:
    """The implied effect at coefficients beta (k,), averaged with weights (n,) that may be zero."""
    smear = _smear(model, residuals, weights)
    first, second = _averages(model, of, beta, smear, weights)
    return _combine(of, first.value, second.value)[0]


def effect_influence(model: MeanModel, of: Contrast, fit: Fit, jackknifed: bool) -> tuple[float, Array]:
    """The implied effect of a fit, and the influence of each observation on it, (n,).

    With `jackknifed` a row's score is divided by one minus its leverage, as in HC3.
    """
    sample = fit.sample
    weights = sample.weights * sample.multiplicity
    smear = _smear(model, fit.residuals, weights)
    averages = _averages(model, of, fit.coefficients, smear, weights)
    value, shares = _combine(of, averages[0].value, averages[1].value)
    total = weights.sum()
    own, gradient = np.zeros(len(sample.y)), np.zeros(len(fit.coefficients))
    by_smear = np.zeros(len(model.pieces))
    for average, share in zip(averages, shares, strict=True):
        own += share * sample.weights * (average.rows - average.value) / total
        gradient += share * sum((weights * each) @ rows for each, rows in average.by_index) / total
        by_smear += share * np.array(average.by_smear)
    if model.smeared:
        own, gradient = _add_smearing(model, fit, (own, gradient), by_smear, smear)
    return value, own + influence(fit, gradient, _jackknife_scale(fit) if jackknifed else None)


def coefficient_influence(fit: Fit, place: int, jackknifed: bool) -> tuple[float, Array]:
    """A coefficient and the influence of each observation on it, (n,)."""
    gradient = np.zeros(len(fit.coefficients))
    gradient[place] = 1.0
    return float(fit.coefficients[place]), influence(fit, gradient, _jackknife_scale(fit) if jackknifed else None)


def _jackknife_scale(fit: Fit) -> Array:
    left = 1 - leverage(fit)
    return 1 / np.maximum(left, 1e-10)


def _smear(model: MeanModel, residuals: Array, weights: Array) -> Array:
    if not model.smeared:
        return np.ones(1)
    total = weights.sum()
    return np.array([weights @ piece.g(residuals) / total for piece in model.pieces])


def _add_smearing(
    model: MeanModel, fit: Fit, state: tuple[Array, Array], by_smear: Array, smear: Array
) -> tuple[Array, Array]:
    """Add what comes through the averages over residuals: each row's own residual, and the coefficients behind them."""
    own, gradient = state
    sample, e = fit.sample, fit.residuals
    weights = sample.weights * sample.multiplicity
    total = weights.sum()
    x = sample.basis.z
    for piece, share, average in zip(model.pieces, by_smear, smear, strict=True):
        own = own + share * sample.weights * (piece.g(e) - average) / total
        on_basis = -x.T @ (weights * piece.g_slope(e)) / total
        gradient = gradient + share * np.linalg.solve(sample.basis.map.T, on_basis)
    return own, gradient


def _averages(model: MeanModel, of: Contrast, beta: Array, smear: Array, weights: Array) -> tuple[_Average, _Average]:
    if of.continuous:
        index = of.first @ beta + model.index_offset
        slopes = of.second @ beta
        return _slope_average(model, of, (index, slopes), smear, weights), _mean_average(
            model, of.first, index, smear, weights
        )
    return (
        _mean_average(model, of.first, of.first @ beta + model.index_offset, smear, weights),
        _mean_average(model, of.second, of.second @ beta + model.index_offset, smear, weights),
    )


def _mean_average(model: MeanModel, x: Array, index: Array, smear: Array, weights: Array) -> _Average:
    values = [model.factor * piece.f(index) for piece in model.pieces]
    rows = sum(part * each for part, each in zip(smear, values, strict=True))
    slope = model.factor * sum(part * piece.f_slope(index) for part, piece in zip(smear, model.pieces, strict=True))
    total = weights.sum()
    return _Average(
        float(weights @ rows / total), rows, ((slope, x),), tuple(float(weights @ each / total) for each in values)
    )


def _slope_average(model: MeanModel, of: Contrast, at: tuple[Array, Array], smear: Array, weights: Array) -> _Average:
    index, slopes = at
    values = [model.factor * piece.f_slope(index) for piece in model.pieces]
    slope = sum(part * each for part, each in zip(smear, values, strict=True))
    bend = model.factor * sum(part * piece.f_curvature(index) for part, piece in zip(smear, model.pieces, strict=True))
    rows, total = slope * slopes, weights.sum()
    return _Average(
        float(weights @ rows / total),
        rows,
        ((bend * slopes, of.first), (slope, of.second)),
        tuple(float(weights @ (each * slopes) / total) for each in values),
    )


def _combine(of: Contrast, first: float, second: float) -> tuple[float, tuple[float, float]]:
    """The effect from two averages, and its derivative by each."""
    if of.scale is Scale.LEVEL:
        return (first, (1.0, 0.0)) if of.continuous else (first - second, (1.0, -1.0))
    if second <= 0 or (first <= 0 and not of.continuous):
        raise NotEstimable("implied effect", "the model taken at its word implies a mean that is not above zero")
    if of.continuous:
        return first / second, (1 / second, -first / second**2)
    return float(np.log(first / second)), (1 / first, -1 / second)
