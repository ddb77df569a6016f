"""What a coefficient means in percent: identities, limits, and the unbiasedness that one reading claims."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import special

from reviewkit.arithmetic import minimum_variance_ratio, no_percent, percent_readings
from reviewkit.refusals import Refusal

coefficients = st.floats(-3, 3)
errors = st.floats(0.001, 1)


@given(coefficients, errors)
def test_the_plain_reading_is_exp_b_less_one_and_its_interval_is_transformed(b: float, se: float) -> None:
    found = percent_readings(b, se)
    assert found.percent == pytest.approx(100 * (math.exp(b) - 1), abs=1e-9)
    assert found.interval is not None
    low, high = (math.log1p(end / 100) for end in found.interval)
    assert (low + high) / 2 == pytest.approx(b, abs=1e-8)
    assert (high - low) / 2 == pytest.approx(1.959963984540054 * se, rel=1e-7)
    assert found.coefficient_times_100 == 100 * b
    assert found.minimum_variance_percent is None


@given(coefficients, errors)
def test_the_half_variance_reading_lies_below_the_plain_one(b: float, se: float) -> None:
    found = percent_readings(b, se)
    assert found.kennedy_percent == pytest.approx(100 * (math.exp(b - se**2 / 2) - 1), abs=1e-9)
    assert found.percent is not None
    assert found.kennedy_percent is not None
    assert found.kennedy_percent < found.percent


def test_degrees_of_freedom_bring_in_t() -> None:
    found = percent_readings(0.2, 0.1, df=10)
    assert found.interval is not None
    assert math.log1p(found.interval[1] / 100) == pytest.approx(0.2 + 2.2281388519649385 * 0.1, rel=1e-9)


@given(st.floats(1, 200), st.floats(1e-6, 0.8))
def test_the_series_is_the_confluent_limit_function(df: float, variance: float) -> None:
    """Where a library's own function still works."""
    expected = special.hyp0f1(df / 2, -df * variance / 4)
    assert minimum_variance_ratio(0.0, variance, df) == pytest.approx(float(expected), rel=1e-9, abs=1e-13)


@pytest.mark.parametrize("df", [1e3, 1e4, 1e5, 1e6])
@pytest.mark.parametrize("variance", [0.001, 0.1, 1.0])
def test_the_series_tends_to_the_half_variance_correction(df: float, variance: float) -> None:
    """0F1(m; -mV/2) = exp(-V/2) · (1 - V²/(8m) + O(m⁻²)), from the logarithm of its terms."""
    m = df / 2
    expected = math.exp(-variance / 2) * (1 - variance**2 / (8 * m))
    assert minimum_variance_ratio(0.0, variance, df) == pytest.approx(expected, rel=2 / m**2 + 1e-12)


def test_the_minimum_variance_reading_is_unbiased_in_normal_samples_and_the_half_variance_one_nearly() -> None:
    """20 degrees of freedom, true variance of b 0.5, effect exp(0.25) - 1: means of 200,000 draws."""
    random = np.random.default_rng(7)
    df, variance, b, draws = 20, 0.5, 0.25, 200_000
    drawn = b + math.sqrt(variance) * random.normal(size=draws)
    estimated = variance * random.chisquare(df, draws) / df
    ratios = np.exp(drawn) * special.hyp0f1(df / 2, -df * estimated / 4)
    ours = [minimum_variance_ratio(drawn[row], estimated[row], df) for row in range(300)]
    assert ours == pytest.approx(ratios[:300], rel=1e-10)
    target, error = math.exp(b), float(ratios.std() / math.sqrt(draws))
    assert abs(ratios.mean() - target) < 3 * error
    plain = np.exp(drawn)
    assert plain.mean() - target > 20 * error


def test_the_mean_of_the_series_is_exactly_the_factor_that_it_corrects() -> None:
    """E[0F1(m; -mV̂/2)] = exp(-V/2) for V̂ = V·χ²/ν, by quadrature: .7788 for V = .5, from any ν."""
    for df in (4, 20, 60):
        nodes, weights = special.roots_genlaguerre(60, df / 2 - 1)
        values = [minimum_variance_ratio(0.0, 0.5 * 2 * node / df, df) for node in nodes]
        mean = float(np.dot(weights, values) / weights.sum())
        assert mean == pytest.approx(math.exp(-0.25), rel=1e-9)
        assert round(mean, 4) == 0.7788


def test_no_percent_keeps_the_coefficient_and_the_reason() -> None:
    found = no_percent(0.4, "constant added")
    assert (found.percent, found.interval, found.kennedy_percent, found.minimum_variance_percent) == (None,) * 4
    assert (found.coefficient_times_100, found.percent_why_not) == (40.0, "constant added")


@pytest.mark.parametrize(
    ("figures", "where"),
    [
        ((math.nan, 0.1, None), "coefficient"),
        ((math.inf, 0.1, None), "coefficient"),
        ((101.0, 0.1, None), "coefficient"),
        ((0.1, 0.0, None), "standard error"),
        ((0.1, -0.1, None), "standard error"),
        ((0.1, math.inf, None), "standard error"),
        ((0.1, 0.1, 0.5), "degrees of freedom"),
        ((0.1, 0.1, math.nan), "degrees of freedom"),
    ],
)
def test_impossible_figures_are_refused_by_name(figures: tuple[float, float, float | None], where: str) -> None:
    with pytest.raises(Refusal) as refused:
        percent_readings(*figures)
    assert refused.value.where == where


@given(st.floats(-100, 100), st.floats(0, 100, exclude_min=True), st.none() | st.floats(1, 1e6))
def test_all_figures_that_are_let_in_give_readings(b: float, se: float, df: float | None) -> None:
    found = percent_readings(b, se, df)
    assert found.percent is not None
    assert found.kennedy_percent is not None
    assert found.interval is not None
    assert -100 <= found.kennedy_percent <= found.percent
    assert -100 <= found.interval[0] <= found.percent <= found.interval[1]
    assert found.minimum_variance_percent is None or math.isfinite(found.minimum_variance_percent)


def test_a_minimum_variance_reading_that_has_no_digits_left_is_not_given() -> None:
    """The terms of the series reach exp(V/2): beyond that they cancel to nothing but rounding."""
    assert percent_readings(0.1, 3.0, 1000).minimum_variance_percent is not None
    assert percent_readings(0.1, 30.0, 1000).minimum_variance_percent is None
