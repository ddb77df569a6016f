"""Traps that estimation engines hold: in each, what comes out here is right, whatever others do."""

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from specifying import amounts, refit, table

from reviewkit.refusals import NotEstimable

POISSON = {"terms": ["treated", "log(size)", "factor(region)"], "focus": ["treated"], "estimator": "poisson"}
LOGGED = {"terms": ["treated", "log(size)", "factor(region)"], "focus": ["treated"]}


@pytest.mark.parametrize("errors", [{"kind": "robust", "type": "HC1"}, {"kind": "classical"}], ids=lambda e: e["kind"])
@pytest.mark.parametrize("unit", [1e-9, 1e-4, 1e6, 1e12])
def test_a_poisson_table_does_not_move_with_the_unit_of_the_outcome(unit: float, errors: dict[str, str]) -> None:
    data = amounts()
    scaled = table(**data.frame.assign(y=data.frame["y"] * unit))
    one, other = (
        refit(each, outcome={"column": "y"}, model=POISSON, errors=errors).submitted for each in (data, scaled)
    )
    for name in one.design.names[1:]:
        before, after = one.term(name), other.term(name)
        assert before is not None
        assert after is not None
        assert after.estimate == pytest.approx(before.estimate, rel=1e-9)
        factor = 1.0 if errors["kind"] == "robust" else unit**-0.5  # a likelihood's own errors know the unit of a count
        assert after.std_error == pytest.approx(before.std_error * factor, rel=1e-7)


@pytest.mark.parametrize("unit", [1e-9, 1e12])
def test_a_log_comparison_does_not_move_with_the_unit_of_the_outcome(unit: float) -> None:
    """From the log submission to the alternative and its interval, rows and clusters alike."""
    data = amounts()
    scaled = table(**data.frame.assign(y=data.frame["y"] * unit))
    for errors in ({"kind": "robust"}, {"kind": "cluster", "by": ["cluster"]}):
        tables: dict[str, Any] = {"outcome": {"column": "y", "transform": "log", "zeros": "dropped"}, "model": LOGGED}
        first, second = (refit(each, **tables, errors=errors).comparison[0] for each in (data, scaled))
        assert second.conclusion == first.conclusion
        assert second.difference == pytest.approx(first.difference, rel=1e-7)
        assert second.interval == pytest.approx(first.interval, rel=1e-6)


def test_a_log_of_y_plus_a_constant_moves_with_the_unit_unless_the_constant_does() -> None:
    data = amounts()
    scaled = table(**data.frame.assign(y=data.frame["y"] * 1000))

    def estimate(each: Any, constant: float) -> float:
        outcome = {"column": "y", "transform": "log_plus", "constant": constant}
        row = refit(each, outcome=outcome, model=LOGGED).submitted.term("treated")
        assert row is not None
        return row.estimate

    assert estimate(scaled, 1000) == pytest.approx(estimate(data, 1), rel=1e-9)
    assert abs(estimate(scaled, 1) / estimate(data, 1) - 1) > 0.05


def test_hc1_of_poisson_has_its_factor_in_the_table_too() -> None:
    def tabled(type_: str) -> Any:
        return refit(
            amounts(), outcome={"column": "y"}, model=POISSON, errors={"kind": "robust", "type": type_}
        ).submitted

    plain, corrected = tabled("HC0"), tabled("HC1")
    assert (plain.factor, corrected.factor) == (1.0, pytest.approx(400 / 395, rel=1e-14))
    for before, after in zip(plain.terms, corrected.terms, strict=True):
        assert (after.std_error / before.std_error) ** 2 == pytest.approx(400 / 395, rel=1e-9)


def test_a_dummy_without_any_positive_outcome_is_said_and_gets_no_estimate() -> None:
    """Not a large negative coefficient with a made-up error."""
    data = amounts()
    wet = (np.arange(400) % 8 == 0).astype(float)
    frame = data.frame.assign(wet=wet, y=data.frame["y"] * (1 - wet))
    model = {"terms": ["treated", "wet"], "focus": ["treated"]}
    found = refit(table(**frame), outcome={"column": "y", "transform": "log_plus"}, model=model)
    assert any("50 rows with outcome zero would be fitted as certain zeros" in each for each in found.warnings)
    assert found.alternative is not None
    assert found.alternative.term("wet") is None
    without = refit(table(**frame[wet == 0]), outcome={"column": "y"}, model={**model, "terms": ["treated"]})
    one, other = found.alternative.term("treated"), without.alternative and without.alternative.term("treated")
    assert one is not None
    assert other
    assert one.estimate == pytest.approx(other.estimate, rel=1e-9)
    assert {each.name: each.value for each in found.facts}["refit.separated_rows"] == 50.0


def test_a_separated_poisson_submission_is_not_given_a_made_up_number() -> None:
    data = amounts()
    wet = (np.arange(400) % 8 == 0).astype(float)
    frame = data.frame.assign(wet=wet, y=data.frame["y"] * (1 - wet))
    model = {"terms": ["treated", "wet"], "estimator": "poisson"}
    found = refit(table(**frame), outcome={"column": "y"}, model=model)
    assert found.submitted.term("wet") is None
    assert found.submitted.design.rows == 350
    assert any("wet" in each for each in found.warnings)
    assert any("50 rows" in each and "separation" in each for each in found.warnings)
    with pytest.raises(NotEstimable, match="wet"):
        refit(table(**frame), outcome={"column": "y"}, model={**model, "focus": ["wet"]})


def test_a_negative_outcome_is_refused_for_poisson_and_leaves_the_submission_its_table() -> None:
    data = amounts()
    frame = data.frame.assign(y=data.frame["y"].where(data.frame.index != 3, -2.0))
    with pytest.raises(NotEstimable, match="the outcome is negative in 1 of 400 rows"):
        refit(table(**frame), outcome={"column": "y"}, model=POISSON)
    found = refit(table(**frame), outcome={"column": "y", "transform": "asinh"}, model=LOGGED)
    assert found.alternative is None
    assert found.alternative_why_not is not None
    assert "negative in 1 row" in found.alternative_why_not
    assert found.comparison[0].why == found.alternative_why_not


def test_collinear_columns_are_named_in_the_warnings_of_both_models() -> None:
    frame = amounts().frame.assign(acres=lambda f: 2.47 * f["size"])
    found = refit(
        table(**frame), outcome={"column": "y", "transform": "log_plus"}, model={"terms": ["treated", "size", "acres"]}
    )
    assert found.submitted.collinear == ("acres (a combination of size)",)
    assert [each for each in found.warnings if "acres (a combination of size)" in each] == list(found.warnings)
    assert len(found.warnings) == 2


def test_scales_of_covariates_twelve_orders_apart_lose_no_digits() -> None:
    data = amounts()
    far = table(**data.frame.assign(size=data.frame["size"] * 1e-7, days=data.frame["days"] * 1e6))
    model = {"terms": ["treated", "size", "days"]}
    one, other = (refit(each, outcome={"column": "y"}, model=model) for each in (data, far))
    for pair in ((one.submitted, other.submitted), (one.alternative, other.alternative)):
        tables = [each for each in pair if each is not None]
        assert len(tables) == 2
        for name, factor in (("size", 1e-7), ("days", 1e6), ("treated", 1.0)):
            before, after = (each.term(name) for each in tables)
            assert before is not None
            assert after is not None
            assert after.estimate * factor == pytest.approx(before.estimate, rel=1e-8)
            assert after.std_error * factor == pytest.approx(before.std_error, rel=1e-7)


PRINTS_ALL = """
import json
from reviewkit.writers.refit_json import refit_object
from specifying import amounts, refit
found = refit(amounts(), outcome={"column": "y", "transform": "log_plus"},
    model={"terms": ["treated", "factor(region)*log(size)"], "focus": ["treated", "factor(region)"]},
    errors={"kind": "cluster", "by": ["cluster"]})
print(json.dumps(refit_object([found], ())))
"""


def test_all_numbers_are_the_same_under_another_hash_seed() -> None:
    root = Path(__file__).parent.parent
    said = []
    for seed in ("1", "2"):
        environment = os.environ | {"PYTHONHASHSEED": seed, "PYTHONPATH": f"{root}{os.pathsep}{root / 'tests'}"}
        ran = subprocess.run([sys.executable, "-c", PRINTS_ALL], capture_output=True, env=environment, check=True)
        said.append(ran.stdout)
    assert said[0] == said[1]
    assert json.loads(said[0])["models"]


def test_order_of_rows_moves_no_number_beyond_rounding() -> None:
    data = amounts()
    order = np.random.default_rng(9).permutation(400)
    tables: dict[str, Any] = {"outcome": {"column": "y", "transform": "log_plus"}, "model": LOGGED}
    for errors in ({"kind": "robust"}, {"kind": "cluster", "by": ["cluster"]}):
        one = refit(data, **tables, errors=errors).comparison[0]
        other = refit(table(**data.frame.iloc[order]), **tables, errors=errors).comparison[0]
        assert other.conclusion == one.conclusion
        assert other.interval == pytest.approx(one.interval, rel=1e-8)
