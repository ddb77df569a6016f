"""The submitted coefficient led to the alternative in steps that sum exactly.

Least squares of log t on x gives theta_0. Poisson quasi-likelihood of t gives gamma, with mean m and r = t / m. Least
squares of log t weighted by m gives theta_1. Poisson of the outcome itself gives beta. Then

    beta - theta_0 = (theta_1 - theta_0) + (gamma - theta_1) + (beta - gamma): weighting, spread, constant,

and the spread is the sum over rows of A⁻¹ x m g with g = r - 1 - log r ≥ 0 and A the sum of m xx', so that it splits
exactly into what rows with outcome zero bring (zeros) and what the others bring (amounts).
"""

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from reviewkit.design_matrix import Design
from reviewkit.estimators.fit import Codes, Fit, Sample, influence, leverage, pull
from reviewkit.estimators.least_squares import fit_least_squares
from reviewkit.estimators.poisson import fit_poisson
from reviewkit.joint import coefficients_without
from reviewkit.specification import Outcome, PerExposure, Transform, Zeros

Array = npt.NDArray[np.float64]

STEPS = ("weighting", "zeros", "amounts", "constant")


@dataclass(frozen=True, slots=True)
class Fits:
    """The four fits of an account, all on one basis."""

    theta_0: Fit
    gamma: Fit
    theta_1: Fit
    beta: Fit
    zero: npt.NDArray[np.bool_]
    """Rows whose outcome is zero, (n,)."""


def why_no_account(outcome: Outcome, exposed: bool) -> str | None:
    """Why the steps do not exist for an outcome; None where they do."""
    if outcome.transform not in (Transform.LOG, Transform.LOG_PLUS, Transform.ASINH):
        return f"the steps are defined for logs and the inverse hyperbolic sine, not for `{outcome.transform}`"
    if exposed and outcome.per_exposure is PerExposure.NO:
        return "the submitted outcome is not divided by the exposure, so the two models differ by more than the log"
    return None


def shifted(outcome: Outcome, design: Design) -> Array:
    """t, whose log the submission regresses (but for a constant shift of the intercept), (n,)."""
    y = design.y
    exposure = np.ones(design.rows) if design.exposure is None else design.exposure
    per = outcome.per_exposure
    amount = y / exposure if per is PerExposure.BEFORE_CONSTANT else y
    if outcome.zeros is Zeros.REPLACED and outcome.replacement is not None:
        amount = np.maximum(amount, outcome.replacement)
    if outcome.transform is Transform.LOG_PLUS:
        amount = amount + outcome.constant
    if outcome.transform is Transform.ASINH:
        amount = (amount + np.sqrt(amount**2 + outcome.scale**-2)) / 2
    return amount / exposure if per is PerExposure.AFTER_CONSTANT else amount


def four_fits(sample: Sample, t: Array, y: Array, exposure: Array) -> Fits:
    """The fits behind an account; `y` is the outcome per unit of exposure, which weighs the Poisson fits."""
    plain = replace(sample, y=np.log(t), offset=np.zeros(len(t)))
    weighed = sample.weights * exposure
    gamma = fit_poisson(replace(plain, y=t, weights=weighed))
    beta = fit_poisson(replace(plain, y=y, weights=weighed))
    theta_1 = fit_least_squares(replace(plain, weights=weighed * gamma.mean))
    return Fits(fit_least_squares(plain), gamma, theta_1, beta, y == 0)


def amounts_of(fits: Fits, place: int) -> Array:
    """Weighting, zeros, amounts and constant for the coefficient at `place`, (4,)."""
    whole = tuple(each.on_basis for each in (fits.theta_0, fits.gamma, fits.beta))
    return _amounts(fits, place, whole, np.ones(len(fits.zero)))


def amounts_without(fits: Fits, place: int, codes: Codes, groups: int) -> Array:
    """The four steps without each cluster, (G, 4)."""
    apart = [coefficients_without(each, codes, groups) for each in (fits.theta_0, fits.gamma, fits.beta)]
    found = [
        _amounts(fits, place, tuple(each[group] for each in apart), (codes != group).astype(float))
        for group in range(groups)
    ]
    return np.array(found)


def _amounts(fits: Fits, place: int, on_basis: tuple[Array, ...], kept: Array) -> Array:
    """The steps at given coefficients on the basis (theta_0, gamma, beta) over the rows kept (n,) of ones and zeros."""
    theta_0, gamma, beta = on_basis
    sample = fits.gamma.sample
    z, to_x = sample.basis.z, sample.basis.map[place]
    index = z @ gamma
    weights = kept * sample.weights * sample.multiplicity * np.exp(index)
    log_r = fits.theta_0.sample.y - index
    gram = (z * weights[:, None]).T @ z
    spread = weights * (np.expm1(log_r) - log_r)
    sums = np.stack([z.T @ (weights * fits.theta_0.sample.y), z.T @ (spread * fits.zero), z.T @ (spread * ~fits.zero)])
    theta_1, zeros, rest = to_x @ np.linalg.solve(gram, sums.T)
    return np.array([theta_1 - to_x @ theta_0, zeros, rest, to_x @ (beta - gamma)])


def influence_of(fits: Fits, place: int, jackknifed: bool) -> Array:
    """Each observation's influence on the four steps, (4, n)."""
    unit = _unit(fits, place)
    weighted = 1 / np.maximum(1 - leverage(fits.gamma), 1e-10) if jackknifed else np.ones(len(fits.zero))
    plain = 1 / np.maximum(1 - leverage(fits.theta_0), 1e-10) if jackknifed else np.ones(len(fits.zero))
    theta_0 = influence(fits.theta_0, unit, plain)
    theta_1 = _theta_1_influence(fits, unit) * weighted
    zeros = _spread_influence(fits, unit, fits.zero) * weighted
    rest = _spread_influence(fits, unit, ~fits.zero) * weighted
    constant = (influence(fits.beta, unit) - influence(fits.gamma, unit)) * weighted
    return np.stack([theta_1 - theta_0, zeros, rest, constant])


def _unit(fits: Fits, place: int) -> Array:
    unit = np.zeros(len(fits.gamma.coefficients))
    unit[place] = 1.0
    return unit


def _log_ratio(fits: Fits) -> Array:
    """log r = log t - log m, (n,)."""
    return fits.theta_0.sample.y - fits.gamma.index


def _spread_scores(fits: Fits) -> Array:
    """weight · m · g, (n,)."""
    log_r = _log_ratio(fits)
    return fits.gamma.sample.weights * fits.gamma.mean * (np.expm1(log_r) - log_r)


def _theta_1_influence(fits: Fits, unit: Array) -> Array:
    """Of the weighted least-squares coefficient, counting that its weights are estimated, (n,)."""
    gamma, theta_1 = fits.gamma, fits.theta_1
    scores = gamma.sample.weights * gamma.mean * theta_1.residuals
    return scores * pull(gamma, unit) + _through_weights(gamma, unit, scores)


def _spread_influence(fits: Fits, unit: Array, rows: npt.NDArray[np.bool_]) -> Array:
    """Of the part of the spread that `rows` bring, (n,)."""
    gamma = fits.gamma
    z, weights = gamma.sample.basis.z, gamma.sample.weights * gamma.mean
    scores = _spread_scores(fits) * rows
    part = z @ (gamma.bread @ (z.T @ (gamma.sample.multiplicity * scores)))
    own = (scores - weights * part) * pull(gamma, unit)
    return own + _through_weights(gamma, unit, weights * (-(_log_ratio(fits) * rows) - part))


def _through_weights(gamma: Fit, unit: Array, scores: Array) -> Array:
    """What comes through gamma where a sum over rows has the derivative scores · zz', (n,)."""
    z = gamma.sample.basis.z
    inner = (z * (gamma.sample.multiplicity * scores)[:, None]).T @ z
    direction = gamma.bread @ (inner @ (gamma.bread @ (gamma.sample.basis.map.T @ unit)))
    return np.asarray(gamma.sample.weights * gamma.residuals * (z @ direction))
