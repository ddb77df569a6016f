"""How the submitted coefficient moves with the constant that was added, or with the unit of a sine transform.

With an effect on whether the outcome is above zero, the curve has no end as the constant goes to zero: its slope in
log(1/c) tends to that effect. So not the whole range is told but the exact slope at the paper's own constant, which is
the least-squares coefficient of c / (y + c) on the same terms, and a few constants around it. For the inverse
hyperbolic sine of k·y the slope in log k is that of k·y / √(1 + k²y²). Bands are pointwise.
"""

import math
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from reviewkit.design_matrix import Design
from reviewkit.estimators.basis import well_conditioned
from reviewkit.estimators.covariance import infer
from reviewkit.estimators.fit import Sample
from reviewkit.estimators.least_squares import fit_least_squares
from reviewkit.exhibit import Cell, Exhibit, Interval, IntervalFigure
from reviewkit.facts import Fact, Source, SourceKind, Standing
from reviewkit.fitting import make_sample
from reviewkit.implied import Focus
from reviewkit.specification import Outcome, PerExposure, Specification, Transform
from reviewkit.transforms import transformed
from reviewkit.wording import estimate, interval, number

Array = npt.NDArray[np.float64]

_DOUBLED = ("constant.doubled", "constant.doubled_low", "constant.doubled_high")
FACTORS = (0.1, 0.5, 1.0, 2.0, 10.0)
"""Constants told, as multiples of the paper's; common practice, no source."""


def constant_exhibits(spec: Specification, design: Design, focus: Focus) -> tuple[Exhibit, ...]:
    """The curve over a few constants, and the slope at the paper's own; none for other transforms.

    `design` holds the rows of the submission.
    """
    if spec.outcome.transform not in (Transform.LOG_PLUS, Transform.ASINH):
        return ()
    place = design.names.index(focus.term)
    sample = make_sample(design, well_conditioned(design.x), design.y, np.zeros(design.rows))
    return _curve(spec, design, sample, place), _slope(spec, design, sample, place)


def _fitted(spec: Specification, sample: Sample, y: Array, place: int) -> tuple[float, float, float]:
    """A least-squares coefficient and its error under the specification's convention, with the critical value."""
    from scipy.special import stdtrit

    fit = fit_least_squares(replace(sample, y=y))
    found = infer(fit, spec.errors)
    critical = float(stdtrit(found.degrees_of_freedom or np.inf, 0.975))
    return float(fit.coefficients[place]), float(found.std_errors[place]), critical


def _curve(spec: Specification, design: Design, sample: Sample, place: int) -> Exhibit:
    sine = spec.outcome.transform is Transform.ASINH
    rows: list[tuple[Cell, ...]] = []
    for factor in FACTORS:
        outcome = _moved(spec.outcome, factor)
        b, error, critical = _fitted(spec, sample, transformed(outcome, design.y, design.exposure), place)
        value = outcome.scale if sine else outcome.constant
        rows.append((value, b, b - critical * error, b + critical * error))
    name = "scale of the sine transform" if sine else "constant"
    low, high = (pick(row[1] for row in rows if isinstance(row[1], float)) for pick in (min, max))
    sentence = f"Over these values of the {name} the coefficient goes from {estimate(low)} to {estimate(high)}."
    return Exhibit(
        "constant-curve",
        f"The coefficient of {design.names[place]} over several values of the {name}",
        (name, "estimate", "low", "high"),
        tuple(rows),
        sentence,
        (IntervalFigure(f"coefficient of {design.names[place]}", tuple(_interval(name, row) for row in rows), None),),
    )


def _interval(name: str, row: tuple[Cell, ...]) -> Interval:
    value, b, low, high = (float(cell) if isinstance(cell, float) else math.nan for cell in row)
    return Interval(f"{name} {number(value)}", b, low, high)


def _moved(outcome: Outcome, factor: float) -> Outcome:
    if outcome.transform is Transform.ASINH:
        return replace(outcome, scale=outcome.scale * factor)
    return replace(outcome, constant=outcome.constant * factor)


def _slope(spec: Specification, design: Design, sample: Sample, place: int) -> Exhibit:
    b, error, critical = _fitted(spec, sample, _derivative(spec.outcome, design), place)
    above, above_error, _ = _fitted(spec, sample, (design.y > 0).astype(float), place)
    parameter = "log of the scale" if spec.outcome.transform is Transform.ASINH else "log of the constant"
    ends = (b - critical * error, b + critical * error)
    rows: tuple[tuple[Cell, ...], ...] = (
        (parameter, b, error, *ends),
        ("effect on the share above zero", above, above_error, above - critical * above_error,
         above + critical * above_error),
    )  # fmt: skip
    doubled = [math.log(2) * each for each in (b, *ends)]
    what = "scale" if spec.outcome.transform is Transform.ASINH else "constant"
    return Exhibit(
        "local-slope",
        f"How fast the coefficient of {design.names[place]} moves with the {what}",
        ("transform parameter", "slope", "std_error", "low", "high"),
        rows,
        f"Doubling the {what} moves the coefficient by {estimate(doubled[0])} ({interval(doubled[1], doubled[2])}), "
        f"near the paper's own {what}.",
        facts=tuple(_fact(spec.name, name, value) for name, value in zip(_DOUBLED, doubled, strict=True)),
    )


def _fact(model: str, name: str, value: float) -> Fact:
    return Fact(name, value, Standing.DONE, Source(SourceKind.EXHIBIT, "local-slope"), f"model:{model}")


def _derivative(outcome: Outcome, design: Design) -> Array:
    """Of the transformed outcome by the log of the constant, or of the scale, (n,)."""
    before = outcome.per_exposure is PerExposure.BEFORE_CONSTANT and design.exposure is not None
    amount = design.y / design.exposure if before and design.exposure is not None else design.y
    if outcome.transform is Transform.ASINH:
        scaled = outcome.scale * amount
        return np.asarray(scaled / np.sqrt(1 + scaled**2))
    return np.asarray(outcome.constant / (amount + outcome.constant))
