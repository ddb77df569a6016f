"""The step account: exact sums in every sample, influence by refitting, and errors two ways."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from specifying import amounts, refit, specification, table

from reviewkit.design_matrix import build_design
from reviewkit.estimators.basis import well_conditioned
from reviewkit.evidence.step_account import step_account_exhibit
from reviewkit.fitting import make_sample
from reviewkit.implied import resolve_focus
from reviewkit.steps_between import Fits, amounts_of, amounts_without, four_fits, influence_of, shifted, why_no_account

OUTCOMES = (
    {"transform": "log_plus", "constant": 2.0},
    {"transform": "asinh", "scale": 2.0},
    {"transform": "log", "zeros": "replaced", "replacement": 0.3},
)
MODEL: dict[str, Any] = {"terms": ["treated", "log(size)"], "focus": ["treated"]}
WEIGHTED = {**MODEL, "weights": {"column": "w", "kind": "probability"}}


def fits_of(outcome: dict[str, Any], model: dict[str, Any], rows: int = 150, seed: int = 5) -> Fits:
    spec = specification(outcome={"column": "y", **outcome}, model=model)
    design = build_design(spec, amounts(rows=rows, seed=seed).frame)
    sample = make_sample(design, well_conditioned(design.x), design.y, np.zeros(design.rows))
    return four_fits(sample, shifted(spec.outcome, design), design.y, np.ones(design.rows))


@settings(max_examples=30)
@given(st.integers(0, 10_000), st.sampled_from(OUTCOMES), st.sampled_from([MODEL, WEIGHTED]))
def test_steps_sum_to_the_difference_of_the_coefficients(seed: int, outcome: Any, model: Any) -> None:
    fits = fits_of(outcome, model, seed=seed)
    difference = fits.beta.coefficients[1] - fits.theta_0.coefficients[1]
    assert amounts_of(fits, 1).sum() == pytest.approx(difference, abs=1e-12)


@pytest.mark.parametrize("outcome", OUTCOMES, ids=lambda each: each["transform"])
def test_the_account_starts_and_ends_at_the_two_models(outcome: dict[str, Any]) -> None:
    """theta_0 is the submitted coefficient, beta the alternative one, of the re-estimation itself."""
    fits = fits_of(outcome, WEIGHTED)
    found = refit(amounts(rows=150), outcome={"column": "y", **outcome}, model=WEIGHTED, errors={"kind": "robust"})
    assert found.alternative is not None
    assert fits.theta_0.coefficients[1] == pytest.approx(found.submitted.fit.coefficients[1], rel=1e-10)
    assert fits.beta.coefficients == pytest.approx(found.alternative.fit.coefficients, rel=1e-9)


def test_the_spread_of_two_groups_is_the_difference_of_mean_log_deviations() -> None:
    random = np.random.default_rng(3)
    group = np.repeat([0.0, 1.0], [60, 80])
    y = random.gamma(1 + group, 1.0)
    spec = specification(outcome={"column": "y", "transform": "log"}, model={"terms": ["group"]})
    design = build_design(spec, table(y=y, group=group).frame)
    sample = make_sample(design, well_conditioned(design.x), design.y, np.zeros(design.rows))
    weighting, zeros, spread, constant = amounts_of(four_fits(sample, design.y, design.y, np.ones(140)), 1)
    deviation = [np.log(y[group == g].mean()) - np.log(y[group == g]).mean() for g in (1, 0)]
    assert spread == pytest.approx(deviation[0] - deviation[1], abs=1e-10)
    assert [weighting, zeros, constant] == pytest.approx([0, 0, 0], abs=1e-10)


@pytest.mark.parametrize("outcome", OUTCOMES, ids=lambda each: each["transform"])
def test_influence_of_a_row_on_each_step_is_its_derivative(outcome: dict[str, Any]) -> None:
    fits = fits_of(outcome, WEIGHTED)
    whole, psi, step = amounts_of(fits, 1), influence_of(fits, 1, jackknifed=False), 1e-4
    for row in (0, 5, 77):
        weights = np.ones(150)
        weights[row] -= step
        sample = replace(fits.gamma.sample, multiplicity=weights, weights=fits.theta_0.sample.weights)
        less = four_fits(sample, fits.gamma.sample.y, fits.beta.sample.y, np.ones(150))
        assert (whole - amounts_of(less, 1)) / step == pytest.approx(psi[:, row], rel=1e-3, abs=1e-8)


def test_leaving_out_a_cluster_is_fitting_without_it() -> None:
    fits = fits_of(OUTCOMES[0], WEIGHTED, rows=200)
    codes = np.arange(200) % 10
    found = amounts_without(fits, 1, codes, 10)
    for group in (0, 7):
        kept = codes != group
        old = fits.theta_0.sample
        sample = replace(
            old, basis=replace(old.basis, z=old.basis.z[kept]), weights=old.weights[kept],
            multiplicity=old.multiplicity[kept], offset=old.offset[kept], y=old.y[kept],
        )  # fmt: skip
        less = four_fits(sample, fits.gamma.sample.y[kept], fits.beta.sample.y[kept], np.ones(kept.sum()))
        assert found[group] == pytest.approx(amounts_of(less, 1), rel=1e-7, abs=1e-10)


@pytest.mark.parametrize("errors", [{"kind": "robust"}, {"kind": "cluster", "by": ["cluster"]}])
def test_the_exhibit_adds_up_and_says_what_is_off_zero(errors: dict[str, Any]) -> None:
    spec = specification(outcome={"column": "y", **OUTCOMES[0]}, model=MODEL, errors=errors)
    design = build_design(spec, amounts(rows=1000, clusters=40).frame)
    exhibit = step_account_exhibit(spec, design, resolve_focus(spec, design)[0], 0.95)
    assert [row[0] for row in exhibit.rows] == ["weighting", "zeros", "amounts", "constant", "total"]
    numbers = [[float(cell or 0) for cell in row[1:]] for row in exhibit.rows]
    assert sum(row[0] for row in numbers[:-1]) == pytest.approx(numbers[-1][0], abs=1e-12)
    assert all(low < amount < high for amount, _, low, high in numbers)
    for name, (amount, _, low, high) in zip((row[0] for row in exhibit.rows), numbers, strict=True):
        facts = {fact.name: fact.value for fact in exhibit.facts}
        assert facts[f"step.{name}"] == amount
        assert facts[f"step.{name}_off_zero"] == ("yes" if low > 0 or high < 0 else "no")


def test_errors_by_rows_and_by_leaving_out_each_row_come_close() -> None:
    table_ = amounts(rows=400, clusters=400, seed=8)
    tables = {"outcome": {"column": "y", **OUTCOMES[0]}, "model": MODEL}
    found = []
    for errors in ({"kind": "robust"}, {"kind": "cluster", "by": ["cluster"]}):
        spec = specification(**tables, errors=errors)
        design = build_design(spec, table_.frame)
        exhibit = step_account_exhibit(spec, design, resolve_focus(spec, design)[0], 0.95)
        found.append([float(row[2] or 0) for row in exhibit.rows])
    assert found[0] == pytest.approx(found[1], rel=0.08)


def test_why_there_is_no_account_is_said() -> None:
    root = specification(outcome={"column": "y", "transform": "sqrt"}, model=MODEL).outcome
    assert "not for `sqrt`" in (why_no_account(root, exposed=False) or "")
    plain = specification(outcome={"column": "y", "transform": "log"}, model=MODEL).outcome
    assert why_no_account(plain, exposed=False) is None
    assert "exposure" in (why_no_account(plain, exposed=True) or "")
