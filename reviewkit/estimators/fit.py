"""What an estimator returns, and what follows from it: influence, leverage, sums by cluster."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from reviewkit.estimators.basis import BLOCK, Basis

Array = npt.NDArray[np.float64]
Codes = npt.NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Sample:
    """The arrays of one estimation; all (n,) but the basis."""

    basis: Basis
    y: Array
    """The outcome as regressed."""
    weights: Array
    """Analytic or probability weights, with mean one over observations; ones without."""
    multiplicity: Array
    """Observations that a row stands for; ones without frequency weights."""
    offset: Array
    clusters: Codes | None = None

    @property
    def observations(self) -> float:
        """n."""
        return float(self.multiplicity.sum())

    @property
    def cluster_count(self) -> int:
        """G; 0 without clusters."""
        return 0 if self.clusters is None else int(self.clusters.max(initial=-1)) + 1


@dataclass(frozen=True, slots=True)
class Fit:
    """A fitted model. An estimator solves sum of weight · (y - mean) · z = 0; all else follows from these arrays."""

    estimator: str
    sample: Sample
    coefficients: Array
    """On the kept columns of x, (k,)."""
    on_basis: Array
    """The same on the columns of z, (k,)."""
    index: Array
    """x'b without the offset, (n,)."""
    mean: Array
    """Fitted mean of the outcome as regressed, (n,)."""
    curvature: Array
    """Derivative of the mean by the index, (n,): one for least squares, the mean for Poisson."""
    bread: Array
    """Inverse of the sum of weight · curvature · zz', (k, k), in the basis."""
    iterations: int = 1

    @property
    def residuals(self) -> Array:
        """y - mean, (n,)."""
        return self.sample.y - self.mean

    @property
    def degrees_of_freedom(self) -> float:
        """n - k."""
        return self.sample.observations - len(self.coefficients)


def scores(fit: Fit) -> Array:
    """Weight · residual of each observation, (n,): its score is this times z."""
    return fit.sample.weights * fit.residuals


def leverage(fit: Fit) -> Array:
    """The hat value of each observation, (n,)."""
    root = np.linalg.cholesky(fit.bread)
    h = np.empty(len(fit.index))
    for start in range(0, len(h), BLOCK):
        rows = slice(start, start + BLOCK)
        half = fit.sample.basis.z[rows] @ root
        h[rows] = np.einsum("ij,ij->i", half, half)
    return h * fit.sample.weights * fit.curvature


def influence(fit: Fit, gradient: Array, scale: Array | None = None) -> Array:
    """Influence of each observation on gradient'b, (n,); `scale` (n,) multiplies its score."""
    rows = scores(fit) * pull(fit, gradient)
    return rows if scale is None else rows * scale


def pull(fit: Fit, gradient: Array) -> Array:
    """What a unit of score in each row adds to gradient'b, (n,)."""
    return np.asarray(fit.sample.basis.z @ (fit.bread @ (fit.sample.basis.map.T @ gradient)))


def influence_rows(fit: Fit) -> Array:
    """Influence of each observation on every coefficient, (n, k): b - truth is about their sum."""
    return (scores(fit)[:, None] * fit.sample.basis.z) @ (fit.bread @ fit.sample.basis.map.T)


def cluster_sums(rows: Array, codes: Codes, count: int) -> Array:
    """Sums by cluster of rows (n,) or (n, k): (G,) or (G, k)."""
    if rows.ndim == 1:
        return np.asarray(np.bincount(codes, rows, minlength=count), dtype=float)
    return np.stack([cluster_sums(column, codes, count) for column in rows.T], axis=1)


def weighted_gram(z: Array, weights: Array) -> Array:
    """Sum over rows of weights · zz', (k, k), block by block; weights are not below zero."""
    gram = np.zeros((z.shape[1], z.shape[1]))
    for start in range(0, len(z), BLOCK):
        rows = slice(start, start + BLOCK)
        gram += root_gram(z[rows], weights[rows])
    return gram


def root_gram(z: Array, weights: Array) -> Array:
    """The same for one block, by the root of weights not below zero: a product with itself takes half the work."""
    half = z * np.sqrt(weights)[:, None]
    return np.asarray(half.T @ half)
