"""The coefficient over constants, and its slope: against refits with another constant."""

import math
from typing import Any

import pytest
from specifying import amounts, refit, specification

from reviewkit.design_matrix import build_design
from reviewkit.evidence.constant import FACTORS, constant_exhibits
from reviewkit.exhibit import Exhibit
from reviewkit.implied import resolve_focus

MODEL: dict[str, Any] = {"terms": ["treated", "log(size)"], "focus": ["treated"], "exposure": "days"}
CLUSTERED = {"kind": "cluster", "by": ["cluster"]}


def exhibits(outcome: dict[str, Any]) -> tuple[Exhibit, ...]:
    spec = specification(
        outcome={"column": "y", "per_exposure": "before_constant", **outcome}, model=MODEL, errors=CLUSTERED
    )
    design = build_design(spec, amounts().frame)
    return constant_exhibits(spec, design, resolve_focus(spec, design)[0])


def coefficient(outcome: dict[str, Any]) -> tuple[float, tuple[float, float]]:
    found = refit(
        amounts(), outcome={"column": "y", "per_exposure": "before_constant", **outcome}, model=MODEL, errors=CLUSTERED
    ).submitted.term("treated")
    assert found is not None
    return found.estimate, found.interval


@pytest.mark.parametrize(
    ("transform", "parameter"), [("log_plus", "constant"), ("asinh", "scale")], ids=["log_plus", "asinh"]
)
def test_curve_and_slope_are_those_of_refits(transform: str, parameter: str) -> None:
    curve, slope = exhibits({"transform": transform, parameter: 0.7})
    assert [row[0] for row in curve.rows] == pytest.approx([0.7 * factor for factor in FACTORS])
    for row in curve.rows:
        b, ends = coefficient({"transform": transform, parameter: row[0]})
        assert row[1:] == pytest.approx((b, *ends), rel=1e-9)
    step = 1e-4
    up, down = (coefficient({"transform": transform, parameter: 0.7 * math.exp(s)})[0] for s in (step, -step))
    assert slope.rows[0][1] == pytest.approx((up - down) / (2 * step), rel=1e-5)
    assert slope.rows[0][3] < slope.rows[0][1] < slope.rows[0][4]
    facts = {fact.name: fact.value for fact in slope.facts}
    assert facts["constant.doubled"] == pytest.approx(math.log(2) * slope.rows[0][1])
    assert facts["constant.doubled_low"] < facts["constant.doubled"] < facts["constant.doubled_high"]


def test_slope_tends_to_minus_the_effect_on_being_above_zero() -> None:
    _, slope = exhibits({"transform": "log_plus", "constant": 1e-9})
    assert slope.rows[0][1] == pytest.approx(-float(slope.rows[1][1] or 0), rel=1e-4)


def test_other_transforms_have_no_constant() -> None:
    assert exhibits({"transform": "sqrt"}) == ()
