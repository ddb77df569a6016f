"""Transforms of an outcome, and the mean of the outcome that least squares on a transform implies.

The mean that a submission implies, taken at its word, is smeared: mu(x) = mean over j of h⁻¹(x'b + e_j).
For each transform here this separates into a short sum f_r(x'b) · mean(g_r(e)), so no n × n work is needed.
Source of the smearing mean: Duan (1983), doi 10.1080/01621459.1983.10478017.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from reviewkit.refusals import NotEstimable, Refusal
from reviewkit.specification import Outcome, PerExposure, Transform, Zeros

Array = npt.NDArray[np.float64]
Curve = Callable[[Array], Array]


@dataclass(frozen=True, slots=True)
class MeanPiece:
    """One addend f(index) · mean(g(residual)) of a smeared mean, with the derivatives that influence rows need."""

    f: Curve
    f_slope: Curve
    f_curvature: Curve
    g: Curve
    g_slope: Curve


def _ones(v: Array) -> Array:
    return np.ones_like(v)


def _zeros(v: Array) -> Array:
    return np.zeros_like(v)


def _minus_exp_minus(v: Array) -> Array:
    return -np.exp(-v)


_EXPONENTIAL = MeanPiece(np.exp, np.exp, np.exp, np.exp, np.exp)


def transformed(outcome: Outcome, y: Array, exposure: Array | None) -> Array:
    """The outcome as the submission regresses it, (n,).

    Raises:
        NotEstimable: A value has no transform, with the number of such rows.
        Refusal: The transform is not estimated in this version.
    """
    amount = _amount(outcome, y, exposure)
    _check_domain(outcome, amount)
    match outcome.transform:
        case Transform.NONE:
            z = amount
        case Transform.LOG | Transform.LOG_PLUS:
            z = np.log(amount)
        case Transform.ASINH:
            z = np.arcsinh(outcome.scale * amount)
        case Transform.SQRT:
            z = np.sqrt(amount)
        case _:
            raise Refusal(
                "outcome.transform",
                f"`{outcome.transform}` is not estimated in this version",
                "none, log, log_plus, asinh, sqrt",
            )
    if outcome.per_exposure is PerExposure.AFTER_CONSTANT and exposure is not None:
        z = z - np.log(exposure)
    return z


def _amount(outcome: Outcome, y: Array, exposure: Array | None) -> Array:
    """What goes into the transform's function: divided, shifted or replaced as the specification says."""
    per = outcome.per_exposure
    if per is PerExposure.AFTER_CONSTANT and outcome.transform not in (Transform.LOG, Transform.LOG_PLUS):
        raise Refusal("outcome.per_exposure", "`after_constant` goes with a log only", "no, before_constant")
    amount = y / exposure if per is PerExposure.BEFORE_CONSTANT and exposure is not None else y
    if outcome.zeros is Zeros.REPLACED and outcome.replacement is not None:
        amount = np.maximum(amount, outcome.replacement)
    return amount + outcome.constant if outcome.transform is Transform.LOG_PLUS else amount


def _check_domain(outcome: Outcome, amount: Array) -> None:
    if outcome.transform in (Transform.LOG, Transform.LOG_PLUS):
        bad, rule = amount <= 0, "values above 0 inside the log"
    elif outcome.transform is Transform.SQRT:
        bad, rule = amount < 0, "values of 0 or more"
    else:
        return
    if bad.any():
        raise NotEstimable(
            f"outcome `{outcome.column}`",
            f"there is no {outcome.transform} of it in {int(bad.sum()):,} of {bad.size:,} rows",
            rule,
            'Say what the submission did with them: zeros = "dropped", "replaced", or another transform or constant',
        )


def mean_pieces(outcome: Outcome) -> tuple[MeanPiece, ...]:
    """The addends of the smeared mean of the outcome for a transform."""
    match outcome.transform:
        case Transform.NONE:
            return (
                MeanPiece(lambda v: v, _ones, _zeros, _ones, _zeros),
                MeanPiece(_ones, _zeros, _zeros, lambda e: e, _ones),
            )
        case Transform.LOG:
            return (_EXPONENTIAL,)
        case Transform.LOG_PLUS:
            shift = -outcome.constant
            return (_EXPONENTIAL, MeanPiece(lambda v: np.full_like(v, shift), _zeros, _zeros, _ones, _zeros))
        case Transform.ASINH:
            half = 0.5 / outcome.scale
            return (
                MeanPiece(*(3 * (lambda v: half * np.exp(v),)), np.exp, np.exp),
                MeanPiece(
                    lambda v: -half * np.exp(-v),
                    lambda v: half * np.exp(-v),
                    lambda v: -half * np.exp(-v),
                    lambda e: np.exp(-e),
                    _minus_exp_minus,
                ),
            )
        case Transform.SQRT:
            return (
                MeanPiece(np.square, lambda v: 2 * v, lambda v: np.full_like(v, 2.0), _ones, _zeros),
                MeanPiece(lambda v: 2 * v, lambda v: np.full_like(v, 2.0), _zeros, lambda e: e, _ones),
                MeanPiece(_ones, _zeros, _zeros, np.square, lambda e: 2 * e),
            )
    raise Refusal("outcome.transform", f"`{outcome.transform}` has no implied mean in this version")
