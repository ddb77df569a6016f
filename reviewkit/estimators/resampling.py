"""One fit made again on many resamples of its rows at once, and what a coefficient of each and its influence rows are.

All resamples take their Newton steps together, from the estimate of the whole sample until each has come to rest.
"""

from dataclasses import replace

import numpy as np
import numpy.typing as npt

from reviewkit.estimators.fit import Fit, Sample, weighted_gram

Array = npt.NDArray[np.float64]

_MOST_STEPS = 20
_SMALL_STEP = 1e-5  # in index units; the last step is still taken, so what is left is about its square
_NEAR_SINGULAR = 1e-10


def coefficient_draws(fit: Fit, place: int, counts: Array) -> tuple[Array, Array]:
    """One coefficient in each resample, (B,), and the influence of each row's observations on it, (B, n), as in HC3.

    `counts` (B, n) says how often each row stands in a resample. Where a resample cannot be fitted so, all is nan.
    """
    z, sample = fit.sample.basis.z, fit.sample
    weights = counts * sample.weights
    on_basis = resampled_estimates(fit, counts)
    mean = _mean(fit, on_basis)
    curvature = np.ones_like(mean) if fit.estimator == "ols" else mean
    bread = np.full((len(counts), *fit.bread.shape), np.nan)
    settled = np.isfinite(on_basis).all(axis=1)
    bread[settled] = np.linalg.inv(_grams(z, (weights * curvature)[settled]))
    left = _forms(z, bread)
    left *= -sample.weights * curvature
    left += 1
    psi = (bread @ fit.sample.basis.map[place]) @ z.T
    psi *= sample.weights
    psi *= sample.y - mean
    psi /= np.maximum(left, 1e-10, out=left)
    return on_basis @ sample.basis.map[place], psi


def resampled_estimates(fit: Fit, counts: Array) -> Array:
    """Coefficients on the basis in each resample, (B, k); nan where it cannot be fitted so."""
    weights = counts * fit.sample.weights
    with np.errstate(over="ignore", invalid="ignore"):  # a resample that runs away is nan in the end
        return _solved(fit.sample.basis.z, weights, fit.sample) if fit.estimator == "ols" else _settled(fit, weights)


def fit_at(fit: Fit, on_basis: Array, counts: Array) -> Fit:
    """The fit of one resample, whose estimate (k,) is known."""
    sample = replace(fit.sample, multiplicity=counts, clusters=None)
    mean = _mean(fit, on_basis)
    curvature = np.ones_like(mean) if fit.estimator == "ols" else mean
    return replace(
        fit,
        sample=sample,
        coefficients=sample.basis.map @ on_basis,
        on_basis=on_basis,
        index=sample.basis.z @ on_basis,
        mean=mean,
        curvature=curvature,
        bread=np.asarray(
            np.linalg.inv(weighted_gram(sample.basis.z, counts * sample.weights * curvature)), dtype=float
        ),
    )


def _solved(z: Array, weights: Array, sample: Sample) -> Array:
    """Least squares with each set of weights (B, n), (B, k); nan where the columns are collinear."""
    grams = _grams(z, weights)
    on_basis, regular = np.full((len(weights), z.shape[1]), np.nan), _regular(grams)
    on_basis[regular] = _steps(grams[regular], (weights @ ((sample.y - sample.offset)[:, None] * z))[regular])
    return on_basis


def _settled(fit: Fit, weights: Array) -> Array:
    """Poisson coefficients on the basis for each set of weights (B, n), (B, k); nan where they do not come to rest."""
    z = fit.sample.basis.z
    reach, totals = np.abs(z).max(axis=0), weights @ (fit.sample.y[:, None] * z)
    on_basis = np.full(totals.shape, np.nan)
    moving, beta = np.arange(len(weights)), np.tile(fit.on_basis, (len(weights), 1))
    for _ in range(_MOST_STEPS):
        mean = _mean(fit, beta)
        mean *= weights[moving] if len(moving) < len(weights) else weights
        grams = _grams(z, mean)
        regular = _regular(grams)
        step = _steps(grams[regular], (totals[moving] - mean @ z)[regular])
        moving, beta = moving[regular], beta[regular] + step
        rest = np.abs(step) @ reach < _SMALL_STEP
        on_basis[moving[rest]] = beta[rest]
        moving, beta = moving[~rest], beta[~rest]
        if not len(moving):
            break
    return on_basis


def _mean(fit: Fit, on_basis: Array) -> Array:
    """Fitted means at coefficients (k,) or many of them (B, k): (n,) or (B, n)."""
    index = on_basis @ fit.sample.basis.z.T
    index += fit.sample.offset
    return index if fit.estimator == "ols" else np.asarray(np.exp(index, out=index))


def _regular(grams: Array) -> npt.NDArray[np.bool_]:
    """Which cross-products can be inverted, (B,)."""
    finite = np.asarray(np.isfinite(grams).all(axis=(1, 2)))
    sizes = np.linalg.eigvalsh(np.where(finite[:, None, None], grams, 0.0))
    return np.asarray(finite & (sizes[:, 0] > _NEAR_SINGULAR * sizes[:, -1]))


def _steps(grams: Array, scores: Array) -> Array:
    return np.asarray(np.linalg.solve(grams, scores[:, :, None])[:, :, 0])


def _grams(z: Array, weights: Array) -> Array:
    """Sum over rows of weights · zz' for each set of weights (B, n), (B, k, k)."""
    return np.stack([weights @ (column[:, None] * z) for column in z.T], axis=1)


def _forms(z: Array, bread: Array) -> Array:
    """z'·bread·z of each row under each of many matrices (B, k, k), (B, n)."""
    return np.asarray(sum((bread[:, place] @ z.T) * column for place, column in enumerate(z.T)))
