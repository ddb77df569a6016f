"""Weighted least squares by Cholesky on a well-conditioned basis, refined once."""

import numpy as np
from scipy.linalg import cho_factor, cho_solve

from reviewkit.estimators.fit import Fit, Sample, weighted_gram


def fit_least_squares(sample: Sample) -> Fit:
    """Least squares of y - offset on x; one step of refinement gives the digits of an orthogonal factorisation."""
    z, w = sample.basis.z, sample.weights * sample.multiplicity
    gram = weighted_gram(z, w)
    factor = cho_factor(gram)
    target = sample.y - sample.offset
    on_basis = np.zeros(z.shape[1])
    for _ in range(2):
        on_basis += cho_solve(factor, z.T @ (w * (target - z @ on_basis)))
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
