"""Covariance of the coefficients under the conventions that prints follow.

Robust types: White (1980), doi 10.2307/1912934; MacKinnon and White (1985), doi 10.1016/0304-4076(85)90158-7.
HC1 multiplies by n/(n-k) for every estimator; CR1 by G/(G-1)·(n-1)/(n-k). Other factors are named by the specification.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from reviewkit.estimators.fit import Fit, cluster_sums, leverage, scores, weighted_gram
from reviewkit.refusals import NotEstimable
from reviewkit.specification import ErrorKind, Errors

Array = npt.NDArray[np.float64]


_ROUNDING = 1e-10  # share of the largest variance that a class with a single row may miss zero by


@dataclass(frozen=True, slots=True)
class Inference:
    """Errors of a model's own table, by its stated convention."""

    std_errors: Array
    """(k,)"""
    degrees_of_freedom: float | None
    """Of the t distribution; None for the normal."""
    factor: float
    """What multiplies the covariance besides bread and meat."""
    type: str


def infer(fit: Fit, errors: Errors) -> Inference:
    """Standard errors of a fit under a convention; least squares with t, quasi-likelihood with the normal.

    Raises:
        NotEstimable: Fewer than two clusters, or no degrees of freedom.
    """
    n, k = fit.sample.observations, len(fit.coefficients)
    if n <= k:
        raise NotEstimable("standard errors", f"{n:,.0f} observations for {k} coefficients leave none", f"over {k}")
    if errors.kind is ErrorKind.CLASSICAL:
        covariance, factor, df = _classical(fit), 1.0, n - k
    elif errors.kind is ErrorKind.ROBUST:
        factor, df = _robust_factor(errors, n, k), n - k
        covariance = factor * _sandwich(fit, _robust_meat(fit, errors.type))
    else:
        groups = fit.sample.cluster_count
        if groups < 2:
            raise NotEstimable("clustered errors", "there is one cluster only", "two or more clusters")
        factor, df = _cluster_factor(errors, n, k, groups), groups - 1.0
        covariance = factor * _sandwich(fit, _cluster_meat(fit))
    on_x = fit.sample.basis.map @ covariance @ fit.sample.basis.map.T
    variances = np.diag(on_x)
    if not (variances >= -_ROUNDING * variances.max()).all():
        raise NotEstimable("standard errors", "some variances come out negative: the covariates are nearly collinear")
    normal = fit.estimator != "ols"
    return Inference(np.sqrt(np.maximum(variances, 0)), None if normal else df, factor, errors.type or "classical")


def _classical(fit: Fit) -> Array:
    """Error variance times bread for least squares; the inverse information for a likelihood."""
    if fit.estimator != "ols":
        return fit.bread
    spread = float((fit.sample.weights * fit.sample.multiplicity) @ fit.residuals**2) / fit.degrees_of_freedom
    return spread * fit.bread


def _robust_factor(errors: Errors, n: float, k: int) -> float:
    if errors.small_sample == "n/(n-1)":
        return n / (n - 1)
    return n / (n - k) if errors.type == "HC1" and errors.small_sample == "default" else 1.0


def _cluster_factor(errors: Errors, n: float, k: int, groups: int) -> float:
    if errors.small_sample == "G/(G-1)":
        return groups / (groups - 1)
    whole = groups / (groups - 1) * (n - 1) / (n - k)
    return whole if errors.type == "CR1" and errors.small_sample == "default" else 1.0


def _robust_meat(fit: Fit, type_: str) -> Array:
    squares = scores(fit) ** 2 * fit.sample.multiplicity
    if type_ in ("HC2", "HC3"):
        left = 1 - leverage(fit)
        if (left < 1e-10).any():
            raise NotEstimable(
                f"{type_} errors",
                f"{int((left < 1e-10).sum()):,} rows decide their own fitted value (leverage one)",
                remedy="Use HC1, or leave out the classes with a single row",
            )
        squares = squares / left ** (1 if type_ == "HC2" else 2)
    return weighted_gram(fit.sample.basis.z, squares)


def _cluster_meat(fit: Fit) -> Array:
    assert fit.sample.clusters is not None  # noqa: S101
    rows = (scores(fit) * fit.sample.multiplicity)[:, None] * fit.sample.basis.z
    sums = cluster_sums(rows, fit.sample.clusters, fit.sample.cluster_count)
    return np.asarray(sums.T @ sums)


def _sandwich(fit: Fit, meat: Array) -> Array:
    return np.asarray(fit.bread @ meat @ fit.bread)
