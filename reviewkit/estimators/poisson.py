"""Poisson quasi-maximum likelihood: consistent for a right exponential mean, whatever the distribution.

Source: Gourieroux, Monfort and Trognon (1984), doi 10.2307/1913471. Newton steps by Cholesky on a well-conditioned
basis, the outcome measured in units of its mean, steps halved while they do not raise the quasi-likelihood, stopped
where a step no longer moves any index by a rounding's worth.
"""

import numpy as np
import numpy.typing as npt
from scipy.linalg import LinAlgError, cho_factor, cho_solve

from reviewkit.estimators.fit import Fit, Sample, weighted_gram
from reviewkit.refusals import NotEstimable

Array = npt.NDArray[np.float64]

_MOST_STEPS = 100
_MOST_HALVINGS = 30
_SMALL_STEP = 1e-8  # in index units; the last step is still taken, so what is left is about its square


def fit_poisson(sample: Sample, start: Array | None = None) -> Fit:
    """Fit an exponential mean by Poisson quasi-maximum likelihood, from coefficients on the basis if there are any.

    Raises:
        NotEstimable: The outcome is negative or all zero, or the steps do not come to rest.
    """
    _check(sample.y)
    w = sample.weights * sample.multiplicity
    unit = float(w @ sample.y / (w @ np.exp(sample.offset)))
    shift = np.linalg.solve(sample.basis.map, np.eye(sample.basis.z.shape[1])[0] * np.log(unit))
    begin = None if start is None else start - shift
    on_basis, mean, gram, steps = _newton(sample.basis.z, sample.y / unit, (w, sample.offset), begin)
    coefficients = sample.basis.map @ on_basis
    coefficients[0] += np.log(unit)
    return Fit(
        estimator="poisson",
        sample=sample,
        coefficients=coefficients,
        on_basis=on_basis + shift,
        index=sample.basis.z @ on_basis + np.log(unit),
        mean=mean * unit,
        curvature=mean * unit,
        bread=cho_solve(cho_factor(gram), np.eye(len(gram))) / unit,
        iterations=steps,
    )


def _check(y: Array) -> None:
    if (y < 0).any():
        raise NotEstimable(
            "Poisson model",
            f"the outcome is negative in {int((y < 0).sum()):,} of {y.size:,} rows",
            "outcomes of 0 or more",
            "A mean that may be negative is no exponential mean",
        )
    if not y.any():
        raise NotEstimable("Poisson model", "the outcome is zero in every row", "some outcome above 0")


def _newton(z: Array, y: Array, rest: tuple[Array, Array], start: Array | None) -> tuple[Array, Array, Array, int]:
    """Coefficients on z, mean, Hessian at the end, and the number of steps; y has mean one per unit of exposure."""
    w, offset = rest
    beta = _start(z, y, w, offset) if start is None else start
    index = z @ beta + offset
    mean = _mean(index)
    height = _height(index, mean, y, w)
    for step_number in range(1, _MOST_STEPS + 1):
        gram = weighted_gram(z, w * mean)
        step = _solve(gram, z.T @ (w * (y - mean)))
        move = z @ step
        share, index, mean, height = _halved(index, move, (y, w, height))
        beta = beta + share * step
        if np.abs(move).max() < _SMALL_STEP:
            return beta, mean, gram, step_number
    raise NotEstimable(
        "Poisson model",
        f"the estimate has not come to rest after {_MOST_STEPS} steps",
        remedy="Look for covariates that fit a group of zeros exactly, or of very different size",
    )


def _start(z: Array, y: Array, w: Array, offset: Array) -> Array:
    """A weighted least-squares step from means halfway between the outcome and its average."""
    mean = (y + np.exp(offset)) / 2
    target = np.log(mean) - offset + (y - mean) / mean
    return _solve(weighted_gram(z, w * mean), z.T @ (w * mean * target))


def _halved(index: Array, move: Array, state: tuple[Array, Array, float]) -> tuple[float, Array, Array, float]:
    """The step, halved until the quasi-likelihood does not fall by more than rounding."""
    y, w, height = state
    slack = 1e-12 * (abs(height) + float(w.sum()))
    share = 1.0
    for _ in range(_MOST_HALVINGS):
        moved = index + share * move
        mean = _mean(moved)
        new = _height(moved, mean, y, w)
        if np.isfinite(new) and new >= height - slack:
            break
        share /= 2
    return share, moved, mean, new


def _mean(index: Array) -> Array:
    with np.errstate(over="ignore"):
        return np.asarray(np.exp(index))


def _height(index: Array, mean: Array, y: Array, w: Array) -> float:
    """The Poisson quasi-likelihood up to a constant."""
    return float(w @ (y * index - mean))


def _solve(gram: Array, right: Array) -> Array:
    try:
        return np.asarray(cho_solve(cho_factor(gram), right))
    except (LinAlgError, ValueError) as error:
        raise NotEstimable(
            "Poisson model",
            "its information matrix cannot be inverted",
            remedy="Some covariates tell the fitted zeros apart from the rest; leave them out",
        ) from error
