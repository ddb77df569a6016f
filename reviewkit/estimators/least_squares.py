"""Weighted least squares by Cholesky on a well-conditioned basis, refined once."""

import numpy as np
import numpy.typing as npt
from scipy.linalg import cho_factor, cho_solve

from reviewkit.estimators.fit import Fit, Sample, weighted_gram

Array = npt.NDArray[np.float64]


def fit_least_squares(sample: Sample, start: Array | None = None) -> Fit:
    """Least squares of y - offset on x; one step of refinement gives the digits of an orthogonal factorisation.

    From a start near the solution it gains a digit or two; the result does not depend on it.
    """
    z, w = sample.basis.z, sample.weights * sample.multiplicity
    gram = weighted_gram(z, w)
    factor = cho_factor(gram)
    target = sample.y - sample.offset
    on_basis = np.zeros(z.shape[1]) if start is None else start
    for _ in range(2):
        on_basis = on_basis + cho_solve(factor, z.T @ (w * (target - z @ on_basis)))
    index = z @ on_basis
    return Fit(
        estimator="ols",
        sample=sample,
        coefficients=sample.basis.map @ on_basis,
        on_basis=on_basis,
        index=index,
        mean=index + sample.offset,
        curvature=np.ones(len(index)),
        bread=cho_solve(factor, np.eye(len(gram))),
    )
