"""Where a referee starts: least squares on the untransformed outcome, and its two pictures.

Residual against fitted: the spread and the bend that a transform is said to answer. Added variable: what is left of
the outcome and of the focal covariate after the others (Cook and Weisberg 1982; Velleman and Welsch 1981).
Rows are shown in bins only.
"""

from dataclasses import replace

import numpy as np
import numpy.typing as npt

from reviewkit.design_matrix import Design
from reviewkit.estimators.basis import well_conditioned
from reviewkit.estimators.covariance import infer
from reviewkit.estimators.fit import Sample
from reviewkit.estimators.least_squares import fit_least_squares
from reviewkit.exhibit import Bin, BinnedFigure, Cell, Exhibit
from reviewkit.specification import Errors
from reviewkit.wording import estimate, estimate_with_error

Array = npt.NDArray[np.float64]

MOST_BINS = 20
PARTS = 5
"""Classes in the table; the picture has more."""
FEWEST_IN_BIN = 10
"""Rows that a bin has at least."""


def baseline_exhibit(sample: Sample, design: Design, place: int, errors: Errors, label: str) -> Exhibit:
    """Least squares on the outcome itself; `place` is the focal column, `label` names the outcome with its unit."""
    fit = fit_least_squares(sample)
    residual_bins = binned(fit.mean, fit.residuals, MOST_BINS)
    x_left, y_left = _added_variable(sample, design, place)
    slope = float(fit.coefficients[place])
    error = float(infer(fit, errors).std_errors[place])
    parts = binned(fit.mean, fit.residuals, PARTS)
    added_bins = binned(x_left, y_left, MOST_BINS)
    name = design.names[place]
    return Exhibit(
        "baseline-diagnostics",
        "Least squares on the untransformed outcome: residuals, and the focal term after the others",
        ("picture", "fitted, middle of part", "mean", "10 % point", "90 % point", "rows"),
        _rows("residual against fitted", parts),
        _sentence(parts, name, estimate_with_error(slope, error)),
        (
            BinnedFigure(f"fitted {label}", f"residual of {label}", residual_bins, (0.0, 0.0)),
            BinnedFigure(f"{name}, given the other terms", f"{label}, given the other terms", added_bins, (0.0, slope)),
        ),
    )


def _added_variable(sample: Sample, design: Design, place: int) -> tuple[Array, Array]:
    """The focal column and the outcome, each less its fit on the other columns; (n,) both."""
    others = well_conditioned(np.delete(design.x, place, axis=1))
    rest = replace(sample, basis=others)
    focal = replace(rest, y=design.x[:, place], offset=np.zeros(design.rows))
    return fit_least_squares(focal).residuals, fit_least_squares(rest).residuals


def binned(x: Array, y: Array, most: int) -> tuple[Bin, ...]:
    """Means and 10 to 90 % ranges of y in at most `most` classes of x of about equal size; ties stay together."""
    count = min(most, len(x) // FEWEST_IN_BIN)
    if count < 1:
        return ()
    edges = np.unique(np.quantile(x, np.linspace(0, 1, count + 1)[1:-1]))
    codes = np.searchsorted(edges, x, side="left")
    found: list[tuple[Array, Array]] = []
    for code in range(len(edges) + 1):
        rows = codes == code
        if found and len(found[-1][0]) < FEWEST_IN_BIN:
            found[-1] = (np.append(found[-1][0], x[rows]), np.append(found[-1][1], y[rows]))
        elif rows.any():
            found.append((x[rows], y[rows]))
    if len(found) > 1 and len(found[-1][0]) < FEWEST_IN_BIN:
        last_x, last_y = found.pop()
        found[-1] = (np.append(found[-1][0], last_x), np.append(found[-1][1], last_y))
    return tuple(_bin(*each) for each in found)


def _bin(x: Array, y: Array) -> Bin:
    low, high = np.quantile(y, (0.1, 0.9))
    return Bin(float(x.mean()), float(y.mean()), float(low), float(high), len(x))


def _rows(picture: str, bins: tuple[Bin, ...]) -> tuple[tuple[Cell, ...], ...]:
    return tuple((picture, each.x, each.middle, each.low, each.high, each.rows) for each in bins)


def _sentence(bins: tuple[Bin, ...], name: str, slope: str) -> str:
    told = f"Least squares on the untransformed outcome gives {slope} for {name}, in the outcome's unit."
    if len(bins) < 3:
        return f"{told} There are too few rows to draw residuals."
    first, last = bins[0], bins[-1]
    middle = float(np.mean([each.middle for each in bins[1:-1]]))
    return (
        f"{told} From the lowest to the highest fifth of fitted values, the 10 to 90 % range of the residuals "
        f"goes from {estimate(first.high - first.low)} to {estimate(last.high - last.low)}; their mean is "
        f"{estimate(first.middle)} at the low end, {estimate(middle)} between, {estimate(last.middle)} at the high end."
    )
