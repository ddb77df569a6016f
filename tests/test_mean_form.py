"""Score tests of the mean's form: against an auxiliary regression, invariance, and how often they reject."""

from typing import Any

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats

from reviewkit.estimators.basis import well_conditioned
from reviewkit.estimators.fit import Fit, Sample
from reviewkit.estimators.least_squares import fit_least_squares
from reviewkit.estimators.poisson import fit_poisson
from reviewkit.evidence.mean_form import holm, mean_form_exhibit, score_test


def fitted(estimator: str, x: Any, y: Any, clusters: Any = None) -> Fit:
    ones = np.ones(len(y))
    sample = Sample(well_conditioned(x), y, ones, ones, 0 * ones, clusters)
    return fit_poisson(sample) if estimator == "poisson" else fit_least_squares(sample)


def drawn(seed: int, n: int = 300, bend: float = 0.0) -> tuple[Any, Any]:
    random = np.random.default_rng(seed)
    x = np.column_stack([np.ones(n), random.normal(size=n), random.integers(0, 2, n)])
    index = 0.5 * x[:, 1] + 0.3 * x[:, 2]
    return x, random.gamma(1.5, np.exp(index + bend * index**2))


@pytest.mark.parametrize("powers", [(2,), (2, 3)])
@pytest.mark.parametrize("estimator", ["ols", "poisson"])
def test_statistic_is_that_of_the_auxiliary_regression_of_one(estimator: str, powers: tuple[int, ...]) -> None:
    """n less the sum of squares of a regression of 1 on residual times what is left of each power, by other code."""
    x, y = drawn(1)
    y = y if estimator == "poisson" else np.log(y)
    fit = fitted(estimator, x, y)
    index = x @ fit.coefficients
    weights = np.exp(index) if estimator == "poisson" else np.ones(300)
    residual = y - (np.exp(index) if estimator == "poisson" else index)
    left = [sm.WLS(index**power, x, weights=weights).fit().resid for power in powers]
    auxiliary = sm.OLS(np.ones(300), residual[:, None] * np.column_stack(left)).fit()
    statistic, df, p = score_test(fit, powers) or (0.0, 0, 1.0)
    assert statistic == pytest.approx(300 - auxiliary.ssr, rel=1e-6)
    assert df == len(powers)
    assert p == pytest.approx(stats.chi2.sf(statistic, df), rel=1e-9)


def test_each_row_its_own_cluster_changes_nothing() -> None:
    x, y = drawn(2)
    assert score_test(fitted("poisson", x, y), (2, 3)) == pytest.approx(
        score_test(fitted("poisson", x, y, np.arange(300)), (2, 3)), rel=1e-9
    )


def test_powers_that_the_terms_hold_are_nothing_to_test() -> None:
    x, y = drawn(3)
    fit = fitted("poisson", x[:, [0, 2]], y)
    assert score_test(fit, (2, 3)) is None
    exhibit = mean_form_exhibit("main", fit, None, "y")
    assert "nothing to test" in exhibit.sentence
    assert [row[4] for row in exhibit.rows] == [None, None]
    assert exhibit.facts == ()


def test_too_few_clusters_are_not_tested_with() -> None:
    x, y = drawn(3)
    assert score_test(fitted("poisson", x, y, np.arange(300) % 4), (2, 3)) is None
    assert score_test(fitted("poisson", x, y, np.arange(300) % 30), (2, 3)) is not None


def test_the_unit_of_the_outcome_does_not_matter() -> None:
    x, y = drawn(4)
    plain, scaled = (score_test(fitted("poisson", x, unit * y), (2, 3)) for unit in (1.0, 1e9))
    assert scaled == pytest.approx(plain, rel=1e-6)


@pytest.mark.parametrize("estimator", ["ols", "poisson"])
def test_a_right_mean_is_rejected_about_as_often_as_it_should_be(estimator: str) -> None:
    """300 draws of 300 rows; the full study would be finer: 3 to 8 % asked, here with its own sampling error."""
    rejected = 0
    for seed in range(300):
        x, y = drawn(1000 + seed)
        tested = score_test(fitted(estimator, x, y if estimator == "poisson" else np.log(y)), (2, 3))
        assert tested is not None
        rejected += tested[2] < 0.05
    assert 0.01 <= rejected / 300 <= 0.09


def test_a_wrong_mean_is_found() -> None:
    x, y = drawn(5, n=3000, bend=0.5)
    assert (score_test(fitted("poisson", x, y), (2, 3)) or (0, 0, 1))[2] < 0.001


def test_holm_is_stepwise() -> None:
    assert holm([0.01, 0.04, 0.03]) == pytest.approx([0.03, 0.06, 0.06])
    assert holm([0.5, 0.9]) == [1.0, 1.0]


def test_both_models_are_told_alike() -> None:
    x, y = drawn(6)
    exhibit = mean_form_exhibit("main", fitted("ols", x, np.log(y)), fitted("poisson", x, y), "log(y)")
    assert exhibit.columns == ("model", "test", "statistic", "df", "p", "p_adjusted")
    assert [row[0] for row in exhibit.rows].count("Poisson, mean of the outcome") == 2
    assert exhibit.sentence.count("this form of the mean") == 2
    assert {fact.name for fact in exhibit.facts} == {"form.submitted_p", "form.alternative_p"}
