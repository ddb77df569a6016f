"""Coefficients and errors against libraries that we did not write, and the traps that such libraries hold."""

from typing import Any

import numpy as np
import pytest
import statsmodels.api as sm
from specifying import specification

from reviewkit.estimators.basis import well_conditioned
from reviewkit.estimators.covariance import infer
from reviewkit.estimators.fit import Sample, influence_rows
from reviewkit.estimators.least_squares import fit_least_squares
from reviewkit.estimators.poisson import fit_poisson
from reviewkit.estimators.separation import separated_rows
from reviewkit.refusals import NotEstimable, Refusal
from reviewkit.specification import ErrorKind, Errors


def sample(x: Any, y: Any, **arrays: Any) -> Sample:
    ones = np.ones(len(y))
    weights = arrays.get("weights", ones)
    return Sample(
        well_conditioned(x),
        np.asarray(y, dtype=float),
        weights / weights.mean(),
        arrays.get("multiplicity", ones),
        arrays.get("offset", np.zeros(len(y))),
        arrays.get("clusters"),
    )


@pytest.fixture(scope="module")
def data() -> dict[str, Any]:
    random = np.random.default_rng(11)
    n = 700
    x = np.column_stack([np.ones(n), random.normal(size=n), random.lognormal(size=n), random.integers(0, 2, n)])
    y = random.gamma(0.8, np.exp(0.4 + x[:, 1:] @ [0.3, -0.1, 0.5]))
    y[random.random(n) < 0.2] = 0
    return {
        "x": x,
        "y": y,
        "w": random.uniform(0.2, 3, n),
        "f": random.integers(1, 5, n).astype(float),
        "offset": np.log(random.uniform(1, 9, n)),
        "clusters": random.integers(0, 37, n),
    }


def close(ours: Any, theirs: Any, errors: Any) -> bool:
    """Coefficients within 1e-8 · (|b| + se)."""
    return bool((np.abs(ours - theirs) <= 1e-8 * (np.abs(theirs) + errors)).all())


ROBUST = [Errors(ErrorKind.ROBUST, each) for each in ("HC0", "HC1", "HC2", "HC3")]


@pytest.mark.parametrize("errors", ROBUST, ids=lambda each: each.type)
def test_least_squares_meets_another_library(data: dict[str, Any], errors: Errors) -> None:
    other = sm.OLS(np.log(data["y"] + 1), data["x"]).fit(cov_type=errors.type)
    fit = fit_least_squares(sample(data["x"], np.log(data["y"] + 1)))
    assert close(fit.coefficients, other.params, other.bse)
    assert infer(fit, errors).std_errors == pytest.approx(other.bse, rel=1e-6)


def test_classical_errors_and_analytic_weights_meet_another_library(data: dict[str, Any]) -> None:
    for weights in (np.ones(700), data["w"]):
        other = sm.WLS(data["y"], data["x"], weights=weights).fit()
        fit = fit_least_squares(sample(data["x"], data["y"], weights=weights))
        assert close(fit.coefficients, other.params, other.bse)
        assert infer(fit, Errors(ErrorKind.CLASSICAL, "")).std_errors == pytest.approx(other.bse, rel=1e-6)
        robust = other.get_robustcov_results("HC1")
        assert infer(fit, Errors(ErrorKind.ROBUST, "HC1")).std_errors == pytest.approx(robust.bse, rel=1e-6)


def test_clustered_least_squares_meets_another_library(data: dict[str, Any]) -> None:
    other = sm.OLS(data["y"], data["x"]).fit(cov_type="cluster", cov_kwds={"groups": data["clusters"]})
    fit = fit_least_squares(sample(data["x"], data["y"], clusters=data["clusters"]))
    found = infer(fit, Errors(ErrorKind.CLUSTER, "CR1", ("g",)))
    assert found.std_errors == pytest.approx(other.bse, rel=1e-6)
    assert found.degrees_of_freedom == 36


def test_poisson_meets_another_library(data: dict[str, Any]) -> None:
    other = sm.GLM(data["y"], data["x"], family=sm.families.Poisson(), offset=data["offset"]).fit(
        tol=1e-14, maxiter=200, cov_type="HC0"
    )
    fit = fit_poisson(sample(data["x"], data["y"], offset=data["offset"]))
    assert close(fit.coefficients, other.params, other.bse)
    assert infer(fit, Errors(ErrorKind.ROBUST, "HC0")).std_errors == pytest.approx(other.bse, rel=1e-6)


def test_hc1_of_poisson_is_hc0_times_its_factor(data: dict[str, Any]) -> None:
    """A general library returns HC0 when asked for HC1 here; ours multiplies by n / (n - k)."""
    fit = fit_poisson(sample(data["x"], data["y"]))
    plain, corrected = (infer(fit, Errors(ErrorKind.ROBUST, each)).std_errors for each in ("HC0", "HC1"))
    assert corrected / plain == pytest.approx(np.sqrt(700 / 696), rel=1e-12)


@pytest.mark.parametrize("type_", ["HC2", "HC3"])
def test_poisson_leverage_errors_follow_their_definition(data: dict[str, Any], type_: str) -> None:
    """By dense matrices: meat of squared residuals over (1 - h) or its square, h of the weighted hat matrix."""
    x, y = data["x"], data["y"]
    fit = fit_poisson(sample(x, y))
    mean = np.exp(x @ fit.coefficients)
    bread = np.linalg.inv(x.T @ (x * mean[:, None]))
    hat = mean * np.einsum("ij,jk,ik->i", x, bread, x)
    meat = x.T @ (x * ((y - mean) ** 2 / (1 - hat) ** (1 if type_ == "HC2" else 2))[:, None])
    expected = np.sqrt(np.diag(bread @ meat @ bread))
    assert infer(fit, Errors(ErrorKind.ROBUST, type_)).std_errors == pytest.approx(expected, rel=1e-9)


def test_clustered_poisson_states_its_factor(data: dict[str, Any]) -> None:
    other = sm.GLM(data["y"], data["x"], family=sm.families.Poisson()).fit(
        tol=1e-14, cov_type="cluster", cov_kwds={"groups": data["clusters"], "use_correction": False}
    )
    fit = fit_poisson(sample(data["x"], data["y"], clusters=data["clusters"]))
    bare = infer(fit, Errors(ErrorKind.CLUSTER, "CR0", ("g",)))
    assert bare.std_errors == pytest.approx(other.bse, rel=1e-6)
    groups, n, k = 37, 700, 4
    whole = infer(fit, Errors(ErrorKind.CLUSTER, "CR1", ("g",)))
    assert whole.std_errors / bare.std_errors == pytest.approx(np.sqrt(groups / (groups - 1) * (n - 1) / (n - k)))
    half = infer(fit, Errors(ErrorKind.CLUSTER, "CR1", ("g",), "G/(G-1)"))
    assert half.std_errors / bare.std_errors == pytest.approx(np.sqrt(groups / (groups - 1)))


@pytest.mark.parametrize("fitter", [fit_least_squares, fit_poisson])
@pytest.mark.parametrize("errors", [*ROBUST, Errors(ErrorKind.CLASSICAL, "")], ids=lambda each: each.type)
def test_frequency_weights_are_duplicated_rows(data: dict[str, Any], fitter: Any, errors: Errors) -> None:
    times = data["f"].astype(int)
    once = fitter(sample(data["x"], data["y"], multiplicity=data["f"]), None)
    again = fitter(sample(np.repeat(data["x"], times, axis=0), np.repeat(data["y"], times)), None)
    assert once.coefficients == pytest.approx(again.coefficients, rel=1e-10)
    assert infer(once, errors).std_errors == pytest.approx(infer(again, errors).std_errors, rel=1e-9)


@pytest.mark.parametrize("fitter", [fit_least_squares, fit_poisson])
def test_probability_weights_are_not_duplicated_rows(data: dict[str, Any], fitter: Any) -> None:
    errors = Errors(ErrorKind.ROBUST, "HC0")
    weighted = fitter(sample(data["x"], data["y"], weights=data["f"]), None)
    repeated = fitter(sample(data["x"], data["y"], multiplicity=data["f"]), None)
    assert weighted.coefficients == pytest.approx(repeated.coefficients, rel=1e-10)
    assert np.abs(infer(weighted, errors).std_errors / infer(repeated, errors).std_errors - 1).min() > 0.05


@pytest.mark.parametrize("fitter", [fit_least_squares, fit_poisson])
def test_row_order_does_not_matter_and_input_is_untouched(data: dict[str, Any], fitter: Any) -> None:
    x, y = data["x"].copy(), data["y"].copy()
    fit = fitter(sample(x, y), None)
    order = np.random.default_rng(3).permutation(len(y))
    other = fitter(sample(x[order], y[order]), None)
    assert other.coefficients == pytest.approx(fit.coefficients, rel=1e-11)
    assert np.array_equal(x, data["x"])
    assert np.array_equal(y, data["y"])


@pytest.mark.parametrize("unit", [1e-9, 1e-3, 1e6, 1e12])
def test_poisson_does_not_depend_on_the_outcome_s_unit(data: dict[str, Any], unit: float) -> None:
    plain, scaled = (fit_poisson(sample(data["x"], data["y"] * each)) for each in (1.0, unit))
    assert scaled.coefficients[1:] == pytest.approx(plain.coefficients[1:], rel=1e-10)
    assert scaled.coefficients[0] == pytest.approx(plain.coefficients[0] + np.log(unit), rel=1e-9)
    errors = Errors(ErrorKind.ROBUST, "HC1")
    assert infer(scaled, errors).std_errors == pytest.approx(infer(plain, errors).std_errors, rel=1e-8)


@pytest.mark.parametrize("fitter", [fit_least_squares, fit_poisson])
def test_influence_rows_give_the_robust_covariance(data: dict[str, Any], fitter: Any) -> None:
    fit = fitter(sample(data["x"], data["y"], weights=data["w"]), None)
    rows = influence_rows(fit)
    expected = infer(fit, Errors(ErrorKind.ROBUST, "HC0")).std_errors
    assert np.sqrt(np.diag(rows.T @ rows)) == pytest.approx(expected, rel=1e-10)


@pytest.mark.parametrize("fitter", [fit_least_squares, fit_poisson])
def test_influence_of_a_row_is_what_leaving_it_out_does(data: dict[str, Any], fitter: Any) -> None:
    """A small weight on one row less: the derivative of the coefficients, by refitting."""
    step = 1e-5
    fit = fitter(sample(data["x"], data["y"]), None)
    rows = influence_rows(fit)
    for row in (0, 10, 333):
        weights = np.ones(700)
        weights[row] -= step
        less = fitter(sample(data["x"], data["y"], multiplicity=weights), None)
        assert (fit.coefficients - less.coefficients) / step == pytest.approx(rows[row], rel=1e-2, abs=1e-7)


def test_a_polynomial_in_years_keeps_its_digits() -> None:
    """Powers of a calendar year are nearly collinear; centring them beforehand gives the same effects."""
    random = np.random.default_rng(4)
    year = random.integers(1990, 2020, 500).astype(float)
    y = random.gamma(2, np.exp(0.02 * (year - 2005) - 0.001 * (year - 2005) ** 2))
    raw = fit_poisson(sample(np.column_stack([np.ones(500), year, year**2]), y))
    t = year - 2005
    centred = fit_poisson(sample(np.column_stack([np.ones(500), t, t**2]), y))
    assert raw.coefficients[2] == pytest.approx(centred.coefficients[2], rel=1e-8)
    assert raw.coefficients[1] + 2 * 2005 * raw.coefficients[2] == pytest.approx(centred.coefficients[1], rel=1e-7)


def test_collinear_columns_are_named_with_their_partners() -> None:
    random = np.random.default_rng(4)
    a, b = random.normal(size=(2, 50))
    basis = well_conditioned(np.column_stack([np.ones(50), a, b, a - 2 * b, np.full(50, 7.0)]))
    assert basis.kept == (0, 1, 2)
    assert basis.collinear == ((3, (1, 2)), (4, (0,)))


def test_separated_rows_are_found_and_others_are_not() -> None:
    """A group without any positive outcome is separated; a group with one is not."""
    random = np.random.default_rng(6)
    group = (np.arange(200) < 30).astype(float)
    y = random.poisson(1.5, 200) * (1 - group)
    x = np.column_stack([np.ones(200), group, random.normal(size=200)])
    found = separated_rows(well_conditioned(x).z, y)
    assert np.array_equal(found, group == 1)
    y[0] = 1.0
    assert not separated_rows(well_conditioned(x).z, y).any()


def test_separation_by_a_combination_of_covariates_is_found() -> None:
    """Positive outcomes lie on a line where x1 = x2; zeros on one side of it only are separated."""
    x1 = np.array([1.0, 2, 3, 4, 1, 2, 3])
    x2 = np.array([1.0, 2, 3, 4, 2, 3, 5])
    y = np.array([1.0, 2, 1, 3, 0, 0, 0])
    x = np.column_stack([np.ones(7), x1, x2])
    assert separated_rows(well_conditioned(x).z, y).tolist() == [False] * 4 + [True] * 3
    x[4, 2] = 0.0  # one zero on the other side: no direction moves all zeros down
    assert not separated_rows(well_conditioned(x).z, y).any()


def test_what_poisson_cannot_fit_is_said() -> None:
    x = np.column_stack([np.ones(4), [0.0, 1, 2, 3]])
    with pytest.raises(NotEstimable, match=r"negative in 1 of 4 rows"):
        fit_poisson(sample(x, [1.0, -2, 3, 4]))
    with pytest.raises(NotEstimable, match="zero in every row"):
        fit_poisson(sample(x, [0.0, 0, 0, 0]))


@pytest.mark.parametrize(
    ("kind", "factor", "allowed"),
    [
        ("cluster", "n/(n-1)", "default, none, G/(G-1)"),
        ("robust", "G/(G-1)", "default, none, n/(n-1)"),
        ("classical", "none", "default"),
    ],
)
def test_a_factor_that_the_kind_of_errors_does_not_use_is_refused_and_not_ignored(
    kind: str, factor: str, allowed: str
) -> None:
    by = {"by": ["village"]} if kind == "cluster" else {}
    errors = {"kind": kind, "small_sample": factor, **by}
    with pytest.raises(Refusal) as told:
        specification(outcome={"column": "y"}, model={"terms": ["x"]}, errors=errors)
    assert allowed in told.value.message()
