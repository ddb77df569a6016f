"""Where the difference of two coefficients comes from: steps from the submitted number to the alternative."""

import math

import numpy as np
import numpy.typing as npt
from scipy import stats

from reviewkit.design_matrix import Design
from reviewkit.estimators.basis import well_conditioned
from reviewkit.exhibit import Cell, Exhibit, Interval, IntervalFigure
from reviewkit.facts import Fact, Source, SourceKind, Standing
from reviewkit.fitting import make_sample
from reviewkit.implied import Focus
from reviewkit.specification import Specification
from reviewkit.steps_between import STEPS, Fits, amounts_of, amounts_without, four_fits, influence_of, shifted
from reviewkit.wording import estimate, joined

Array = npt.NDArray[np.float64]

NAME = "step-account"
COLUMNS = ("step", "amount", "std_error", "low", "high")
MEANINGS = {
    "weighting": "each row counting the same, against counting by size",
    "zeros": "what rows with an outcome of zero bring",
    "amounts": "what the spread of the amounts above zero brings",
    "constant": "the same model of the mean with and without what was added to the outcome",
}


def step_account_exhibit(spec: Specification, design: Design, focus: Focus, level: float) -> Exhibit:
    """The account for the first focal term on the rows of the submission; `design` holds those rows only.

    Raises:
        NotEstimable: A fit behind the account does not exist, or not without some cluster.
    """
    fits, place = _fits(spec, design), design.names.index(focus.term)
    amounts = amounts_of(fits, place)
    covariance, df = _covariance(fits, place, amounts)
    total = np.append(amounts, amounts.sum())
    whole = np.vstack([np.eye(len(STEPS)), np.ones(len(STEPS))])
    errors = np.sqrt(np.maximum(np.einsum("ij,jk,ik->i", whole, covariance, whole), 0))
    half = float(stats.t.ppf(0.5 + level / 2, df)) * errors
    rows: list[tuple[Cell, ...]] = [
        (name, float(amount), float(error), float(amount - reach), float(amount + reach))
        for name, amount, error, reach in zip((*STEPS, "total"), total, errors, half, strict=True)
    ]
    start = float(fits.theta_0.coefficients[place])
    return Exhibit(
        NAME,
        f"From the submitted coefficient of {focus.term} to that of the model of the mean",
        COLUMNS,
        tuple(rows),
        _sentence(rows, start, focus.term),
        (_figure(rows),),
        _facts(spec.name, rows),
    )


def _fits(spec: Specification, design: Design) -> Fits:
    exposure = np.ones(design.rows) if design.exposure is None else design.exposure
    sample = make_sample(design, well_conditioned(design.x), design.y, np.zeros(design.rows))
    return four_fits(sample, shifted(spec.outcome, design), design.y / exposure, exposure)


def _covariance(fits: Fits, place: int, amounts: Array) -> tuple[Array, float]:
    """Of the four steps, (4, 4), and its degrees of freedom: by leaving out clusters, or by rows as in HC3."""
    sample = fits.gamma.sample
    if sample.clusters is not None:
        groups = sample.cluster_count
        apart = amounts_without(fits, place, sample.clusters, groups) - amounts
        return (groups - 1) / groups * apart.T @ apart, groups - 1.0
    psi = influence_of(fits, place, jackknifed=True)
    return (psi * sample.multiplicity) @ psi.T, fits.theta_0.degrees_of_freedom


def _sentence(rows: list[tuple[Cell, ...]], start: float, term: str) -> str:
    clear = [(str(name), amount) for name, amount, _, low, high in rows[:-1] if _off_zero(low, high)]
    total = rows[-1][1]
    assert isinstance(total, float)  # noqa: S101
    told = f"For {term}, the steps lead from {estimate(start)} to {estimate(start + total)}"
    if not clear:
        return f"{told}; none of them is clearly off zero."
    meant = joined([f"{name}, {estimate(amount)} ({MEANINGS[name]})" for name, amount in clear])
    return f"{told}; clearly off zero: {meant}."


def _figure(rows: list[tuple[Cell, ...]]) -> IntervalFigure:
    shown = [(str(name), value, low, high) for name, value, _, low, high in rows]
    intervals = tuple(Interval(name, float(v or 0), _end(low), _end(high)) for name, v, low, high in shown)
    return IntervalFigure("amount added to the coefficient", intervals)


def _end(value: Cell) -> float | None:
    return float(value) if isinstance(value, float) and math.isfinite(value) else None


def _off_zero(low: Cell, high: Cell) -> bool:
    return isinstance(low, float) and isinstance(high, float) and (low > 0 or high < 0)


def _facts(model: str, rows: list[tuple[Cell, ...]]) -> tuple[Fact, ...]:
    """Each step's amount, and whether it is clearly off zero."""
    source = Source(SourceKind.EXHIBIT, NAME)
    found = []
    for name, amount, _, low, high in rows:
        assert isinstance(amount, float)  # noqa: S101
        subject, step = f"model:{model}", f"step.{name}"
        found.append(Fact(step, amount, Standing.DONE, source, subject))
        found.append(Fact(f"{step}_off_zero", "yes" if _off_zero(low, high) else "no", Standing.DONE, source, subject))
    return tuple(found)
