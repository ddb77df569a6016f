"""What a coefficient of a log or quasi-likelihood model means in percent.

Sources: Halvorsen and Palmquist (1980), AER 70; Kennedy (1981), AER 71; van Garderen and Shah (2002),
doi 10.1111/1368-423X.00080, whose estimator is the minimum-variance unbiased one under normal log errors of constant
variance with the classical variance. Neither correction turns a ratio of geometric means into one of arithmetic means.
"""

import math
from dataclasses import dataclass

from reviewkit.refusals import Refusal

GEOMETRIC = (
    "The two corrections, made for normal log errors, remove the bias of exp(b); neither turns a geometric into an "
    "arithmetic mean."
)
_TERMS = 2000
_LARGEST_TERM = 1e7
_LARGEST_EXPONENT = 700.0


@dataclass(frozen=True, slots=True)
class PercentReadings:
    """The readings of one coefficient, all in percent."""

    percent: float | None
    interval: tuple[float, float] | None
    kennedy_percent: float | None
    minimum_variance_percent: float | None
    coefficient_times_100: float
    percent_why_not: str | None = None


def percent_readings(b: float, se: float, df: float | None = None, level: float = 0.95) -> PercentReadings:
    """Read the coefficient b with standard error se as a percent change; `df` gives t and the minimum-variance reading.

    Raises:
        Refusal: A figure is not finite, the error is not above zero, or there are no degrees of freedom.
    """
    _check(b, se, df)
    half = _critical(level, df) * se
    return PercentReadings(
        percent=_percent(b),
        interval=(_percent(b - half), _percent(b + half)),
        kennedy_percent=_percent(b - se * se / 2),
        minimum_variance_percent=None if df is None else _minimum_variance_percent(b, se * se, df),
        coefficient_times_100=100 * b,
    )


def no_percent(b: float, why: str) -> PercentReadings:
    """A coefficient that has no reading in percent, with the reason."""
    return PercentReadings(None, None, None, None, 100 * b, why)


def minimum_variance_ratio(b: float, variance: float, df: float) -> float:
    """exp(b) · 0F1(; df/2; -df · variance/4), summed as a series; nan where its terms cancel beyond nine digits."""
    total = term = largest = 1.0
    for step in range(1, _TERMS):
        term *= (-df * variance / 4) / (step * (df / 2 + step - 1))
        total += term
        largest = max(largest, abs(term))
        if largest > _LARGEST_TERM:
            return math.nan
        if abs(term) < 1e-17 * abs(total):
            break
    return math.exp(b) * total


def _minimum_variance_percent(b: float, variance: float, df: float) -> float | None:
    ratio = minimum_variance_ratio(b, variance, df)
    return 100 * (ratio - 1) if math.isfinite(ratio) else None


def _percent(b: float) -> float:
    return 100 * math.expm1(b) if b < _LARGEST_EXPONENT else math.inf


def _critical(level: float, df: float | None) -> float:
    from scipy import stats

    return float(stats.norm.ppf(0.5 + level / 2) if df is None else stats.t.ppf(0.5 + level / 2, df))


def _check(b: float, se: float, df: float | None) -> None:
    if not (math.isfinite(b) and abs(b) <= 100):
        raise Refusal("coefficient", f"{b} cannot be read in percent", "a number between -100 and 100")
    if not (math.isfinite(se) and 0 < se <= 100):
        raise Refusal("standard error", f"{se} is not possible", "a number above 0, at most 100")
    if df is not None and not (math.isfinite(df) and df >= 1):
        raise Refusal("degrees of freedom", f"{df} is not possible", "a number of 1 or more")
