"""Joint comparisons: implied effects by brute force, intervals by refitting, conclusions by their definition."""

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from specifying import amounts, refit, specification, table

from reviewkit.comparison import Cautions, Comparison, Kind, Verdict, agrees, compare, differs
from reviewkit.design_matrix import build_design
from reviewkit.estimators.basis import well_conditioned
from reviewkit.fitting import fit_model, submission_rows
from reviewkit.implied import contrast, effect, effect_influence, exponential_mean, resolve_focus, smeared_mean
from reviewkit.joint import FITTERS, Joint, Side, _coefficient_draws, _counts, _draw, _effect_draws
from reviewkit.reestimation import make_sample
from reviewkit.specification import Estimator
from reviewkit.transforms import transformed

ROBUST = {"kind": "robust"}
CLUSTERED = {"kind": "cluster", "by": ["cluster"]}
MODEL = {"terms": ["treated", "log(size)", "factor(region)"], "focus": ["treated"]}


def joint(s: float, a: float, covariance: Any, df: float = 1e9) -> Joint:
    return Joint(s, a, np.asarray(covariance, dtype=float), df, "robust", 100.0)


def concluded(pair: Joint, **cautions: Any) -> Comparison:
    return compare(pair, Comparison("x", Kind.MODEL, None, "common"), Cautions(**cautions))


# --- implied effects against the definition, row by row against every residual --------------------------------


def brute_force_effect(z: Any, x: Any, changed: tuple[Any, Any], inverse: Any, w: Any) -> float:
    """log of the ratio of sums of mean_j h⁻¹(x'b + e_j), by n × n numbers."""
    b = sm.WLS(z, x, weights=w).fit().params
    e = z - x @ b

    def total(rows: Any) -> float:
        return float(w @ (inverse((rows @ b)[:, None] + e[None, :]) @ w / w.sum()))

    return math.log(total(changed[0]) / total(changed[1]))


@pytest.mark.parametrize(
    ("transform", "forward", "inverse"),
    [
        ({"transform": "log_plus", "constant": 2.5}, lambda y: np.log(y + 2.5), lambda v: np.exp(v) - 2.5),
        ({"transform": "asinh", "scale": 3.0}, lambda y: np.arcsinh(3 * y), lambda v: np.sinh(v) / 3),
        ({"transform": "sqrt"}, np.sqrt, np.square),
    ],
    ids=["log_plus", "asinh", "sqrt"],
)
@pytest.mark.parametrize("weighted", [False, True])
def test_submission_is_taken_at_its_word(transform: Any, forward: Any, inverse: Any, weighted: bool) -> None:
    data = amounts()
    f = data.frame
    w = f["w"].to_numpy() if weighted else np.ones(len(f))
    x = np.column_stack([np.ones(len(f)), f["treated"], np.log(f["size"]), f["treated"] * np.log(f["size"])])
    one, none = x.copy(), x.copy()
    one[:, 1], one[:, 3] = 1, x[:, 2]
    none[:, 1], none[:, 3] = 0, 0
    expected = brute_force_effect(forward(f["y"].to_numpy()), x, (one, none), inverse, w)
    model: dict[str, Any] = {"terms": ["treated*log(size)"], "focus": ["treated"]}
    if weighted:
        model["weights"] = {"column": "w", "kind": "probability"}
    found = refit(data, outcome={"column": "y", **transform}, model=model, errors=ROBUST).comparison[0]
    assert found.scale == "log_ratio_of_means"
    assert found.submitted == pytest.approx(expected, rel=1e-10)


def test_elasticity_is_the_relative_change_of_all_means_for_a_relative_change_of_all_sizes() -> None:
    """By a small common step of the covariate, for both models."""
    data = amounts()
    f = data.frame
    y, size, treated = (f[name].to_numpy() for name in ("y", "size", "treated"))
    step = 1e-5

    def design(s: Any) -> Any:
        return np.column_stack([np.ones(len(f)), treated, np.log(s), treated * np.log(s)])

    b = sm.OLS(np.log(y + 1), design(size)).fit()
    g = sm.GLM(y, design(size), family=sm.families.Poisson()).fit(tol=1e-14)

    def smeared(s: Any) -> float:
        return float((np.exp((design(s) @ b.params)[:, None] + b.resid[None, :]) - 1).mean())

    def poisson(s: Any) -> float:
        return float(np.exp(design(s) @ g.params).mean())

    expected = [math.log(m(size * (1 + step)) / m(size * (1 - step))) / (2 * step) for m in (smeared, poisson)]
    found = refit(
        data,
        outcome={"column": "y", "transform": "log_plus"},
        model={"terms": ["treated*log(size)"], "focus": ["log(size)"]},
        errors=ROBUST,
    ).comparison[0]
    assert found.scale == "elasticity"
    assert [found.submitted, found.alternative] == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize("estimator", ["ols", "poisson"])
@pytest.mark.parametrize("transform", ["log_plus", "asinh", "sqrt", "none"])
@pytest.mark.parametrize("term", ["treated", "size", "log(size)", "factor(region)[north]"])
def test_influence_of_a_row_on_an_implied_effect_is_its_derivative(estimator: str, transform: str, term: str) -> None:
    """A row's weight lowered by a little and everything computed again: coefficients, smearing, averages."""
    size = "log(size)" if term == "log(size)" else "size"
    spec = specification(
        outcome={"column": "y", "transform": transform, "per_exposure": "before_constant"},
        model={"terms": [f"treated*{size}", "factor(region)"], "focus": [term.split("[")[0]], "exposure": "days"},
    )
    design = build_design(spec, amounts(rows=90, clusters=9, seed=8).frame)
    focus = next(each for each in resolve_focus(spec, design) if each.term == term)
    of = contrast(design, focus, focus.scale(in_levels=transform == "none"))
    model = exponential_mean(design) if estimator == "poisson" else smeared_mean(spec.outcome, design)
    y = design.y if estimator == "poisson" else transformed(spec.outcome, design.y, design.exposure)
    sample = make_sample(design, well_conditioned(design.x), y, design.offset if estimator == "poisson" else 0 * y)
    value, rows = effect_influence(model, of, FITTERS[estimator](sample, None), jackknifed=False)
    step = 1e-4
    for row in (0, 17, 62):
        weights = np.ones(90)
        weights[row] -= step
        less = FITTERS[estimator](replace(sample, multiplicity=weights), None)
        change = value - effect(model, of, less.coefficients, less.residuals, weights)
        assert change / step == pytest.approx(rows[row], rel=2e-3, abs=1e-8)


def test_jackknifed_influence_comes_close_to_leaving_out_each_row() -> None:
    data = amounts(rows=400, clusters=400, seed=8)
    tables: dict[str, Any] = {"outcome": {"column": "y", "transform": "log_plus"}, "model": MODEL}
    whole = refit(data, **tables, errors=ROBUST).comparison[0]
    one_by_one = refit(data, **tables, errors=CLUSTERED).comparison[0]
    assert (whole.method, one_by_one.method) == ("robust", "leave-one-cluster-out")
    assert whole.std_error == pytest.approx(one_by_one.std_error, rel=0.03)
    assert whole.difference == pytest.approx(one_by_one.difference, rel=1e-9)


def test_leaving_out_each_cluster_is_refitting_without_it() -> None:
    data = amounts(rows=300, clusters=12)
    f = data.frame
    tables: dict[str, Any] = {
        "outcome": {"column": "y", "transform": "log_plus"},
        "model": {
            "terms": ["treated", "log(size)"],
            "focus": ["treated"],
            "weights": {"column": "w", "kind": "probability"},
        },
    }
    found = refit(data, **tables, errors=CLUSTERED).comparison[0]
    gaps = []
    for cluster in range(12):
        part = replace(data, frame=f[f["cluster"] != cluster])
        less = refit(part, **tables, errors=CLUSTERED).comparison[0]
        assert less.difference is not None
        gaps.append(less.difference)
    assert found.difference is not None
    error = math.sqrt(11 / 12 * sum((gap - found.difference) ** 2 for gap in gaps))
    assert found.std_error == pytest.approx(error, rel=1e-7)
    assert found.interval is not None
    half = stats.t.ppf(0.975, 11) * error
    assert found.interval == pytest.approx((found.difference - half, found.difference + half), rel=1e-7)


def test_own_rows_leave_out_clusters_of_both_samples() -> None:
    """Zeros dropped by the submission only: each side without a cluster is refitted on its own rows."""
    data = amounts(rows=300, clusters=12)
    f = data.frame
    tables: dict[str, Any] = {
        "outcome": {"column": "y", "transform": "log", "zeros": "dropped"},
        "model": {"terms": ["treated", "log(size)"], "focus": ["treated"]},
    }
    common, own = refit(data, **tables, errors=CLUSTERED).comparison
    assert (common.rows, own.rows) == ("common", "own")
    gaps = []
    for cluster in range(12):
        part = f[f["cluster"] != cluster]
        x = np.column_stack([np.ones(len(part)), part["treated"], np.log(part["size"])])
        y = part["y"].to_numpy()
        b = sm.OLS(np.log(y[y > 0]), x[y > 0]).fit().params[1]
        gaps.append(sm.GLM(y, x, family=sm.families.Poisson()).fit(tol=1e-14).params[1] - b)
    assert own.difference is not None
    error = math.sqrt(11 / 12 * sum((gap - own.difference) ** 2 for gap in gaps))
    assert own.std_error == pytest.approx(error, rel=1e-6)


def test_errors_of_single_coefficients_are_hc3() -> None:
    data = amounts(rows=2000, clusters=50)
    found = refit(data, outcome={"column": "y", "transform": "log", "zeros": "dropped"}, model=MODEL, errors=ROBUST)
    first = found.comparison[0]
    assert first.method == "robust"
    assert first.submitted_interval is not None
    table_hc3 = refit(
        data,
        outcome={"column": "y", "transform": "log", "zeros": "dropped"},
        model=MODEL,
        errors={"kind": "robust", "type": "HC3"},
    ).submitted.term("treated")
    assert table_hc3 is not None
    assert first.submitted_interval == pytest.approx(table_hc3.interval, rel=1e-9)


# --- identities in two groups -----------------------------------------------------------------------------------


@settings(max_examples=10)
@given(st.integers(0, 10_000))
def test_two_groups_give_the_log_ratio_of_means_and_the_difference_of_mean_log_deviations(seed: int) -> None:
    random = np.random.default_rng(seed)
    group = np.repeat([0.0, 1.0], [90, 110])
    y = random.lognormal(random.normal(), random.uniform(0.1, 0.4), 200)
    found = refit(
        table(y=y, group=group), outcome={"column": "y", "transform": "log"}, model={"terms": ["group"]}, errors=ROBUST
    ).comparison[0]
    one, none = y[group == 1], y[group == 0]
    deviation = [math.log(part.mean()) - np.log(part).mean() for part in (one, none)]
    assert found.alternative == pytest.approx(math.log(one.mean() / none.mean()), abs=1e-10)
    assert found.difference == pytest.approx(deviation[0] - deviation[1], abs=1e-10)


def test_untransformed_outcome_of_two_groups_is_the_same_by_construction() -> None:
    data = amounts()
    found = refit(data, outcome={"column": "y"}, model={"terms": ["treated"]}, errors=ROBUST).comparison[0]
    assert found.conclusion is None
    assert found.why == "both models give the same number by construction"
    assert found.scale == "level_units"


# --- conclusions ------------------------------------------------------------------------------------------------


def test_a_gap_clearly_beyond_the_share_differs() -> None:
    found = concluded(joint(1.0, 1.2, [[0.0004, 0], [0, 0.0004]]))
    assert found.conclusion is Verdict.DIFFERS
    least, most = fieller(1.0, 1.2, 0.0004, 0.0004, 1.959964)[0], fieller(1.0, 1.2, 0.0004, 0.0004, 1.644854)[1]
    assert found.differ_by_at_least_percent == pytest.approx(100 * least, rel=1e-4)
    assert found.agree_within_percent == pytest.approx(100 * most, rel=1e-4)


def fieller(s: float, a: float, v_s: float, v_a: float, z: float) -> tuple[float, float]:
    """Ends of a / s - 1 for independent numbers, by the roots of (a - r s)² = z² (v_a + r² v_s)."""
    roots = np.roots([s * s - z * z * v_s, -2 * a * s, a * a - z * z * v_a])
    return float(min(roots) - 1), float(max(roots) - 1)


def test_a_gap_clearly_within_the_share_agrees() -> None:
    found = concluded(joint(1.0, 1.01, [[0.0001, 0.00009], [0.00009, 0.0001]]))
    assert found.conclusion is Verdict.AGREES
    assert found.agree_within_percent is not None
    assert found.agree_within_percent < 5


def test_a_gap_that_is_off_zero_but_not_beyond_the_share_is_unsettled() -> None:
    found = concluded(joint(1.0, 1.06, [[0.0001, 0], [0, 0.0001]]))
    assert found.conclusion is Verdict.UNSETTLED
    assert found.excludes_zero is True
    assert found.differ_by_at_least_percent is not None
    assert 0 < found.differ_by_at_least_percent < 5


@given(
    st.floats(-3, 3).filter(lambda s: abs(s) > 0.05),
    st.floats(-3, 3),
    st.floats(0.01, 0.5),
    st.floats(0.01, 0.5),
    st.floats(-0.9, 0.9),
)
def test_bounds_are_where_the_conclusions_turn(s: float, a: float, e_s: float, e_a: float, rho: float) -> None:
    pair = joint(s, a, [[e_s**2, rho * e_s * e_a], [rho * e_s * e_a, e_a**2]])
    found = concluded(pair)
    if found.agree_within_percent is not None and found.agree_within_percent > 0.1:
        edge = found.agree_within_percent / 100
        assert agrees(pair, edge * 1.0001)
        assert not agrees(pair, edge * 0.999)
    if found.differ_by_at_least_percent is not None and 0.1 < found.differ_by_at_least_percent < 999:
        edge = found.differ_by_at_least_percent / 100
        assert differs(pair, edge * 0.999)
        assert not differs(pair, edge * 1.0001)
    assert not (differs(pair, 0.05) and agrees(pair, 0.05))


def test_sign_of_the_submitted_number_does_not_matter() -> None:
    up, down = concluded(joint(1.0, 1.2, np.eye(2) * 4e-4)), concluded(joint(-1.0, -1.2, np.eye(2) * 4e-4))
    assert down.conclusion == up.conclusion
    assert down.agree_within_percent == pytest.approx(up.agree_within_percent)
    assert down.relative_percent == pytest.approx(up.relative_percent)


def test_no_conclusion_without_reproduction_and_none_beyond_unsettled_with_few_clusters() -> None:
    clear = joint(1.0, 2.0, np.eye(2) * 1e-4)
    assert concluded(clear, reproduced=False).conclusion is None
    few = concluded(clear, few_clusters="3 treated clusters only")
    assert (few.conclusion, few.why) == (Verdict.UNSETTLED, "3 treated clusters only")


def test_relative_difference_is_absent_where_the_submitted_number_may_be_zero() -> None:
    assert concluded(joint(0.05, 0.5, np.eye(2) * 0.01)).relative_percent is None


def test_few_treated_clusters_are_counted_and_cap_the_conclusion() -> None:
    random = np.random.default_rng(2)
    cluster = np.repeat(np.arange(30), 20)
    treated = (cluster < 4).astype(float)
    y = random.lognormal(0.3 * treated, 0.3 + 0.8 * treated)
    found = refit(
        table(y=y, treated=treated, cluster=cluster),
        outcome={"column": "y", "transform": "log"},
        model={"terms": ["treated"]},
        errors=CLUSTERED,
    )
    assert found.comparison[0].conclusion is Verdict.UNSETTLED
    assert found.comparison[0].why == "4 treated clusters only"
    assert {each.name: each.value for each in found.facts}["refit.treated_clusters"] == 4.0


def test_few_effective_rows_bring_in_the_bootstrap() -> None:
    """One row carries most of the error: t gives way to the bootstrap-t, and the conclusion is marked weak."""
    random = np.random.default_rng(2)
    y = random.lognormal(0, 1, 80)
    y[0] = 400.0
    group = np.tile([0.0, 1.0], 40)
    data = table(y=y, group=group)
    found = refit(data, outcome={"column": "y", "transform": "log"}, model={"terms": ["group"]}, errors=ROBUST)
    first = found.comparison[0]
    assert first.method == "bootstrap-t"
    assert first.effective is not None
    assert first.effective < 10
    assert first.weak is not None
    again = refit(data, outcome={"column": "y", "transform": "log"}, model={"terms": ["group"]}, errors=ROBUST)
    assert again.comparison[0] == first


def two_sides(data: Any, **model: Any) -> tuple[Side, Side]:
    """Both models of log y with zeros dropped: the submission stands on fewer rows than the alternative."""
    tables = {"outcome": {"column": "y", "transform": "log", "zeros": "dropped"}, "model": model}
    spec = specification(**tables, errors=ROBUST)
    design = build_design(spec, data.frame)
    made = (
        fit_model(spec, Estimator.OLS, design, submission_rows(spec, design)),
        fit_model(spec, Estimator.POISSON, design, np.ones(design.rows, dtype=bool)),
    )
    return tuple(Side(each.fit, each.rows, None, 1) for each in made)  # type: ignore[return-value]


@pytest.mark.parametrize("weights", [{}, {"weights": {"column": "w", "kind": "probability"}}])
def test_resamples_fitted_together_are_those_fitted_one_by_one(weights: Any) -> None:
    sides = two_sides(amounts(rows=120), terms=["treated", "log(size)", "factor(region)"], **weights)
    random = np.random.default_rng(3)
    counts = _counts(random, np.arange(120), (60, 120))
    together = _coefficient_draws(sides, counts)
    assert together == pytest.approx(np.array([_draw(sides, each) for each in counts]), rel=1e-6)


@pytest.mark.parametrize("term", ["treated", "log(size)"])
def test_effects_in_resamples_fitted_together_are_those_fitted_one_by_one(term: str) -> None:
    spec = specification(
        outcome={"column": "y", "transform": "log_plus", "per_exposure": "before_constant"},
        model={"terms": ["treated*log(size)"], "focus": [term], "exposure": "days"},
        errors=ROBUST,
    )
    design = build_design(spec, amounts(rows=120).frame)
    (focus,) = resolve_focus(spec, design)
    of, every = contrast(design, focus, focus.scale(in_levels=False)), np.ones(120, dtype=bool)
    fits = [fit_model(spec, each, design, every).fit for each in (Estimator.OLS, Estimator.POISSON)]
    models = (smeared_mean(spec.outcome, design), exponential_mean(design))
    submitted, alternative = (
        Side(fit, np.arange(120), None, None, model, of) for fit, model in zip(fits, models, strict=True)
    )
    counts = _counts(np.random.default_rng(3), np.arange(120), (30, 120))
    together = _effect_draws((submitted, alternative), counts)
    expected = np.array([_draw((submitted, alternative), each) for each in counts])
    assert together == pytest.approx(expected, rel=1e-6)


def test_a_resample_without_one_group_is_left_to_the_search_that_refuses_it() -> None:
    sides = two_sides(amounts(rows=60), terms=["treated"])
    treated = sides[1].fit.sample.basis.z[:, 1] > 0
    zero = sides[1].fit.sample.y == 0
    counts = np.array([~treated, ~(treated & ~zero), np.ones(60)], dtype=float)
    found = _coefficient_draws(sides, counts)
    assert np.isfinite(found).all(axis=1).tolist() == [False, False, True]


def test_frequency_weights_in_the_bootstrap_are_duplicated_rows() -> None:
    random = np.random.default_rng(2)
    y = random.lognormal(0, 1, 40)
    y[0] = 400.0
    group, w = np.tile([0.0, 1.0], 20), np.tile([1.0, 1.0, 2.0, 2.0], 10)
    tables: dict[str, Any] = {"outcome": {"column": "y", "transform": "log"}, "errors": ROBUST}
    counted = refit(
        table(y=y, group=group, w=w),
        **tables,
        model={"terms": ["group"], "weights": {"column": "w", "kind": "frequency"}},
    ).comparison[0]
    rows = np.repeat(np.arange(40), w.astype(int))
    written_out = refit(table(y=y[rows], group=group[rows]), **tables, model={"terms": ["group"]}).comparison[0]
    assert counted.method == written_out.method == "bootstrap-t"
    assert counted.interval == pytest.approx(written_out.interval, rel=1e-6)
