"""Rows that a Poisson model would fit with a mean of zero: found before the fit, so that no made-up estimate is shown.

A row with outcome zero is separated if some combination of the covariates is zero wherever the outcome is positive,
never positive where it is zero, and negative in that row; the likelihood then has no maximum. If the covariates have
full rank on the positive rows, no such combination exists: that is the certificate for nearly every data set.
Source: Santos Silva and Tenreyro (2010), doi 10.1016/j.econlet.2010.02.020; Correia, Guimarães and Zylkin (2019).
"""

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]

_ROUNDING = 1e-9


def separated_rows(z: Array, y: Array) -> Mask:
    """Which rows of a well-conditioned design z (n, k) are separated, (n,).

    Each round solves one small linear programme over the directions that vanish on the positive rows, and takes out
    what it finds; it ends when a round finds nothing.
    """
    separated = np.zeros(len(y), dtype=bool)
    null = _null_space(z[y > 0])
    if null.shape[1] == 0:
        return separated
    zero = np.flatnonzero(y == 0)
    moves = z[zero] @ null
    moves[np.abs(moves) < _ROUNDING] = 0.0
    open_rows = np.ones(len(zero), dtype=bool)
    while open_rows.any():
        found = _found(moves[open_rows])
        if not found.any():
            break
        places = np.flatnonzero(open_rows)[found]
        open_rows[places] = False
    separated[zero[~open_rows]] = True
    return separated


def _null_space(z: Array) -> Array:
    """Directions in which every positive row stands still, (k, m)."""
    if len(z) == 0:
        return np.eye(z.shape[1])
    _, sizes, right = np.linalg.svd(np.linalg.qr(z, mode="r") if len(z) > z.shape[1] else z)
    rank = int((sizes > _ROUNDING * max(sizes[0], 1.0)).sum())
    return np.asarray(right[rank:].T)


def _found(moves: Array) -> Mask:
    """The rows that one best direction moves down while none moves up."""
    from scipy.optimize import linprog

    distinct, back = np.unique(moves, axis=0, return_inverse=True)
    moving = np.abs(distinct).max(axis=1) > 0
    if not moving.any():
        return np.zeros(len(moves), dtype=bool)
    found = linprog(
        c=distinct.sum(axis=0),
        A_ub=np.vstack([distinct, -distinct]),
        b_ub=np.concatenate([np.zeros(len(distinct)), np.ones(len(distinct))]),
        bounds=[(None, None)] * distinct.shape[1],
        method="highs",
    )
    if found.x is None:
        return np.zeros(len(moves), dtype=bool)
    return np.asarray((distinct @ found.x < -1e-7)[back.reshape(-1)])
