"""Poisson quasi-maximum likelihood: consistent for a right exponential mean, whatever the distribution.

Source: Gourieroux, Monfort and Trognon (1984), doi 10.2307/1913471. Newton steps by Cholesky on a well-conditioned
basis, the outcome measured in units of its mean, steps halved while they do not raise the quasi-likelihood, stopped
where a step hardly moves any index. Each look at the data goes through them once, block by block, in cache.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.linalg import LinAlgError, cho_factor, cho_solve

from reviewkit.estimators.basis import BLOCK
from reviewkit.estimators.fit import Fit, Sample, root_gram
from reviewkit.refusals import NotEstimable

Array = npt.NDArray[np.float64]

_MOST_STEPS = 100
_MOST_HALVINGS = 30
_SMALL_STEP = 1e-7  # in index units; the last step is still taken, so what is left is about its square


def fit_poisson(sample: Sample, start: Array | None = None) -> Fit:
    """Fit an exponential mean by Poisson quasi-maximum likelihood, from coefficients on the basis if there are any.

    Raises:
        NotEstimable: The outcome is negative or all zero, or the steps do not come to rest.
    """
    _check(sample.y)
    z, w = sample.basis.z, sample.weights * sample.multiplicity
    unit = float(w @ sample.y / (w @ np.exp(sample.offset)))
    shift = np.linalg.solve(sample.basis.map, np.eye(z.shape[1])[0] * np.log(unit))
    rows = _Rows(z, sample.y / unit, w, sample.offset)
    on_basis, gram, steps = _newton(rows, _start(rows) if start is None else start - shift)
    coefficients = sample.basis.map @ on_basis
    coefficients[0] += np.log(unit)
    index = z @ on_basis + np.log(unit)
    mean = np.exp(index + sample.offset)
    return Fit(
        estimator="poisson",
        sample=sample,
        coefficients=coefficients,
        on_basis=on_basis + shift,
        index=index,
        mean=mean,
        curvature=mean,
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


@dataclass(frozen=True, slots=True)
class _Rows:
    """The data; y has mean one per unit of exposure."""

    z: Array
    y: Array
    w: Array
    offset: Array


@dataclass(frozen=True, slots=True)
class _Look:
    """The quasi-likelihood at some coefficients, up to a constant, with its slope and minus its curvature."""

    height: float
    score: Array
    gram: Array


def _newton(rows: _Rows, beta: Array) -> tuple[Array, Array, int]:
    """Coefficients on z, minus the curvature there, and the number of steps."""
    reach = np.maximum(rows.z.max(axis=0), -rows.z.min(axis=0))
    at = _look(rows, beta)
    for step_number in range(1, _MOST_STEPS + 1):
        step = _solve(at.gram, at.score)
        share, at = _halved(rows, beta, step, at.height)
        beta = beta + share * step
        if np.abs(step) @ reach < _SMALL_STEP:
            return beta, at.gram, step_number
    raise NotEstimable(
        "Poisson model",
        f"the estimate has not come to rest after {_MOST_STEPS} steps",
        remedy="Look for covariates that fit a group of zeros exactly, or of very different size",
    )


def _start(rows: _Rows) -> Array:
    """A weighted least-squares step from means halfway between the outcome and its average."""
    k = rows.z.shape[1]
    gram, right = np.zeros((k, k)), np.zeros(k)
    for here in _blocks(len(rows.y)):
        z, y = rows.z[here], rows.y[here]
        mean = (y + np.exp(rows.offset[here])) / 2
        weight = rows.w[here] * mean
        gram += root_gram(z, weight)
        right += (weight * (np.log(mean) - rows.offset[here]) + rows.w[here] * (y - mean)) @ z
    return _solve(gram, right)


def _halved(rows: _Rows, beta: Array, step: Array, height: float) -> tuple[float, _Look]:
    """The step's share, halved until the quasi-likelihood does not fall by more than rounding, and what is there."""
    slack = 1e-12 * (abs(height) + float(rows.w.sum()))
    share = 1.0
    for _ in range(_MOST_HALVINGS):
        at = _look(rows, beta + share * step)
        if np.isfinite(at.height) and at.height >= height - slack:
            break
        share /= 2
    return share, at


def _look(rows: _Rows, beta: Array) -> _Look:
    k = len(beta)
    height, score, gram = 0.0, np.zeros(k), np.zeros((k, k))
    with np.errstate(over="ignore", invalid="ignore"):  # a step that goes too far is halved
        for here in _blocks(len(rows.y)):
            z, y, w = rows.z[here], rows.y[here], rows.w[here]
            index = z @ beta + rows.offset[here]
            mean = w * np.exp(index)
            y = w * y
            height += float(y @ index - mean.sum())
            score += (y - mean) @ z
            gram += root_gram(z, mean)
    return _Look(height, score, gram)


def _blocks(n: int) -> Iterator[slice]:
    return (slice(start, start + BLOCK) for start in range(0, n, BLOCK))


def _solve(gram: Array, right: Array) -> Array:
    try:
        return np.asarray(cho_solve(cho_factor(gram), right))
    except (LinAlgError, ValueError) as error:
        raise NotEstimable(
            "Poisson model",
            "its information matrix cannot be inverted",
            remedy="Some covariates tell the fitted zeros apart from the rest; leave them out",
        ) from error
