"""From a specification and a table to arrays: coding of factors, rows left out and why, and what is refused."""

import re
from typing import Any

import numpy as np
import pandas as pd
import patsy
import pytest
from specifying import amounts, refit, specification, table

from reviewkit.design_matrix import Design, build_design
from reviewkit.refusals import NotEstimable, Refusal

FRAME = pd.DataFrame(
    {
        "y": [3.0, 0, 5, 2, 8, 1, 4, 9, 6, 7, 2, 3],
        "size": [1.5, 2, 3, 1, 4, 2.5, 5, 1, 2, 3, 6, 7],
        "soil": ["clay", "sand", "silt"] * 4,
        "side": ["left", "left", "right", "right"] * 3,
        "year": [2001, 2002, 2003, 2001, 2001, 2003] * 2,
        "w": [1.0, 2, 1, 3, 1, 1, 2, 1, 1, 1, 2, 1],
    }
)


def design(frame: pd.DataFrame = FRAME, **tables: Any) -> Design:
    return build_design(specification(**({"outcome": {"column": "y"}} | tables)), frame)


def with_terms(*terms: str, frame: pd.DataFrame = FRAME, **model: Any) -> Design:
    return design(frame, model={"terms": list(terms), **model})


@pytest.mark.parametrize(
    ("terms", "formula"),
    [
        (["size", "factor(soil)"], "size + C(soil)"),
        (['factor(soil, base="silt")'], "C(soil, Treatment('silt'))"),
        (["factor(year)"], "C(year)"),
        (["factor(soil)*factor(side)"], "C(soil)*C(side)"),
        (["factor(soil)", "factor(soil):size"], "C(soil) + C(soil):size"),
        (["size", "factor(soil):size"], "size + C(soil):size"),
        (["factor(soil):factor(side)"], "C(soil):C(side)"),
        (["factor(side)", "factor(soil):factor(side)"], "C(side) + C(soil):C(side)"),
        (["log(size)", "size^2", "log(size):factor(side)"], "np.log(size) + I(size**2) + np.log(size):C(side)"),
    ],
)
def test_terms_span_what_another_library_s_model_matrix_spans(terms: list[str], formula: str) -> None:
    """Same rank, and each matrix a combination of the other's columns."""
    ours = with_terms(*terms).x
    theirs = np.asarray(patsy.dmatrix(formula, FRAME))
    rank = np.linalg.matrix_rank(theirs)
    assert np.linalg.matrix_rank(ours) == rank == np.linalg.matrix_rank(np.column_stack([ours, theirs]))


@pytest.mark.parametrize("terms", [["factor(soil)*factor(side)"], ["factor(soil)*size"], ["factor(year)", "size"]])
def test_with_all_margins_the_columns_are_the_very_same(terms: list[str]) -> None:
    ours = with_terms(*terms)
    formula = " + ".join(re.sub(r"factor\((\w+)\)", r"C(\1)", each) for each in terms)
    theirs = np.asarray(patsy.dmatrix(formula, FRAME))
    assert ours.x.shape == theirs.shape
    assert {tuple(column) for column in ours.x.T} == {tuple(column) for column in theirs.T}


def test_names_of_classes_are_the_terms_text() -> None:
    made = with_terms("factor(year)", 'factor(soil, base="sand"):size', "size")
    assert made.names == (
        "(constant)",
        "factor(year)[2002]",
        "factor(year)[2003]",
        "factor(soil)[clay]:size",
        "factor(soil)[silt]:size",
        "size",
    )


def test_a_first_term_that_names_its_base_is_the_focus_where_none_is_said() -> None:
    found = refit(amounts(), outcome={"column": "y"}, model={"terms": ['factor(region, base="west")']})
    assert [each.term for each in found.comparison] == ["factor(region)[east]", "factor(region)[north]"]


def test_arithmetic_of_columns_can_be_a_term_and_the_focus() -> None:
    found = refit(amounts(), outcome={"column": "y"}, model={"terms": ["(size / 1000)", "treated"]}).submitted
    plain = refit(amounts(), outcome={"column": "y"}, model={"terms": ["size", "treated"]}).submitted
    thousands, whole = found.term("(size / 1000)"), plain.term("size")
    assert thousands is not None
    assert whole is not None
    assert thousands.estimate == pytest.approx(1000 * whole.estimate, rel=1e-9)


def test_an_unknown_base_is_refused_with_the_classes() -> None:
    with pytest.raises(Refusal, match=r"not among the classes in use\. Allowed: clay, sand, silt"):
        with_terms('factor(soil, base="loam")')


def test_the_table_is_left_as_it_was() -> None:
    before = FRAME.copy(deep=True)
    with_terms("log(size)", "factor(soil)", where="year > 2001")
    pd.testing.assert_frame_equal(FRAME, before)


# --- rows left out ---------------------------------------------------------------------------------------------


def test_each_row_left_out_is_counted_once_by_its_reason() -> None:
    frame = FRAME.assign(
        y=FRAME["y"].where(FRAME.index != 0),
        size=FRAME["size"].where(~FRAME.index.isin([0, 1])).mask(FRAME.index == 2, np.inf).mask(FRAME.index == 3, -1.0),
        soil=FRAME["soil"].where(FRAME.index != 4),
    )
    made = with_terms("log(size)", "factor(soil)", frame=frame, where="year < 2003 or size > 0")
    assert dict(made.dropped) == {
        "outside the sample condition": 1,  # row 2: infinite, so without a value, and of 2003
        "missing y": 1,
        "missing size": 1,
        "missing soil": 1,
        "log(size) not defined": 1,
    }
    assert made.rows == 12 - 5
    assert made.table_rows == 12


def test_unused_columns_leave_nothing_out() -> None:
    assert with_terms("size", frame=FRAME.assign(soil=None, w=np.nan)).rows == 12


@pytest.mark.parametrize(
    ("condition", "rows"),
    [
        ("size > 2", 7),
        ("size > 2 or side == 'left'", 10),
        ("not size > 2", 5),
        ("soil in ('clay', 'silt')", 8),
        ("soil not in ('clay', 'silt')", 4),
        ("soil != 'clay'", 8),
        ("soil >= 'sand'", 8),
        ("year in (2001, 2002)", 8),
        ("year == 2001 and size * 2 <= 3", 2),
        ("log(size) >= log(3)", 6),
        ("'clay' == soil", 4),
    ],
)
def test_conditions_choose_rows(condition: str, rows: int) -> None:
    made = with_terms("size", where=condition)
    assert made.rows == rows
    assert dict(made.dropped).get("outside the sample condition", 0) == 12 - rows


@pytest.mark.parametrize(
    "condition",
    ["gap > 0", "not gap > 2", "gap != 5", "text < 'm'", "text != 'z'", "text not in ('z')", "not text == 'z'"],
)
def test_a_missing_value_makes_a_condition_false(condition: str) -> None:
    frame = FRAME.assign(gap=FRAME["size"].where(FRAME.index > 5), text=FRAME["side"].where(FRAME.index > 5))
    made = with_terms("size", frame=frame, where=condition)
    assert set(made.y) <= set(FRAME["y"][6:])


@pytest.mark.parametrize(
    ("condition", "said"),
    [
        ("soil > 2", "holds text and is compared with something else"),
        ("size == 'a'", "holds numbers and is compared with something else"),
        ("log(soil) > 1", "it holds text where numbers are needed"),
        ("size", "is not a condition"),
        ("size > (soil == 'a')", "is a condition where a number belongs"),
        ("hight > 2", "the data have no such column"),
    ],
)
def test_a_condition_that_does_not_fit_the_data_is_one_message(condition: str, said: str) -> None:
    with pytest.raises(Refusal, match=said) as refused:
        with_terms("size", where=condition)
    assert refused.value.status == 2


def test_no_row_left_says_what_took_them() -> None:
    with pytest.raises(NotEstimable, match=r"no rows are left \(outside the sample condition: 12\)"):
        with_terms("size", where="size < 0")


# --- columns that are refused, and what cannot be estimated -----------------------------------------------------


def test_a_model_without_terms_is_refused() -> None:
    with pytest.raises(Refusal, match="no term is given"):
        refit(amounts(), outcome={"column": "y"})


def test_an_unknown_column_is_refused_with_near_names() -> None:
    with pytest.raises(Refusal, match=r"column `sise`.*Allowed: size, side"):
        with_terms("sise")


@pytest.mark.parametrize(
    "tables",
    [
        {"model": {"terms": ["soil"]}},
        {"model": {"terms": ["log(soil)"]}},
        {"outcome": {"column": "soil"}, "model": {"terms": ["size"]}},
        {"model": {"terms": ["size"], "exposure": "soil", "estimator": "poisson"}},
        {"model": {"terms": ["size"], "weights": {"column": "soil", "kind": "analytic"}}},
    ],
)
def test_text_where_numbers_are_needed_is_refused(tables: dict[str, Any]) -> None:
    with pytest.raises(Refusal, match="it holds text where numbers are needed"):
        design(**tables)


@pytest.mark.parametrize(
    ("columns", "said"),
    [
        ({"y": [2.0, 2, 2, 2], "x": [1.0, 2, 3, 5]}, "one value only in the 4 rows used"),
        ({"y": [2.0, 3], "x": [1.0, 2]}, "2 observations for 2 coefficients"),
        ({"y": [2.0, 3, 5, 6], "x": [1.0, 1, 1, 1]}, r"cannot be told from that of \(constant\)"),
        ({"y": [], "x": []}, "no rows are left"),
    ],
)
def test_what_the_data_cannot_answer_is_said(columns: dict[str, list[float]], said: str) -> None:
    data = table(**{name: np.array(values, dtype=float) for name, values in columns.items()})
    with pytest.raises(NotEstimable, match=said) as refused:
        refit(data, outcome={"column": "y"}, model={"terms": ["x"]})
    assert refused.value.status == 3


def test_one_cluster_and_clusters_in_two_ways_are_refused() -> None:
    data = amounts().frame.assign(one=1)
    tables: dict[str, Any] = {"outcome": {"column": "y"}, "model": {"terms": ["treated"]}}
    with pytest.raises(NotEstimable, match="one cluster only"):
        refit(table(**data), **tables, errors={"kind": "cluster", "by": ["one"]})
    with pytest.raises(Refusal, match="two ways are not estimated"):
        refit(table(**data), **tables, errors={"kind": "cluster", "by": ["cluster", "region"]})


# --- weights and exposure --------------------------------------------------------------------------------------


def weighted(values: list[float], kind: str, where: str | None = None) -> Design:
    frame = FRAME.assign(w=values + [1.0] * (12 - len(values)))
    more = {"where": where} if where else {}
    return with_terms("size", frame=frame, weights={"column": "w", "kind": kind}, **more)


@pytest.mark.parametrize("kind", ["frequency", "analytic", "probability"])
def test_a_negative_weight_is_refused_and_a_zero_one_left_out(kind: str) -> None:
    with pytest.raises(Refusal, match="a weight is negative"):
        weighted([-1.0], kind)
    assert weighted([0.0, 0.0], kind).dropped == (("weight of zero", 2),)


def test_only_a_frequency_weight_must_be_whole() -> None:
    with pytest.raises(Refusal, match="not a whole number"):
        weighted([1.5], "frequency")
    assert weighted([1.5], "analytic").rows == 12


def test_frequency_weights_count_observations_and_others_do_not() -> None:
    assert weighted([3.0, 2.0], "frequency").observations == 15
    assert weighted([3.0, 2.0], "probability").observations == 12


@pytest.mark.parametrize("kind", ["frequency", "analytic", "probability"])
def test_a_missing_weight_leaves_the_row_out_also_where_a_condition_lets_it_in(kind: str) -> None:
    made = weighted([np.nan, 2.0], kind, where="w > 0 or size > 0")
    assert made.dropped == (("missing w", 1),)


def test_an_exposure_of_zero_is_left_out_and_counted() -> None:
    frame = FRAME.assign(days=[0.0, -1.0, *range(1, 11)])
    made = with_terms("size", frame=frame, exposure="days", estimator="poisson")
    assert made.dropped == (("days not above 0", 2),)
    assert made.offset == pytest.approx(np.log(np.arange(1, 11)))


# --- columns changed and moved -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "term",
    [
        "size",
        "log(size)",
        "size^2",
        "size^-1",
        "sqrt(size)",
        "exp(size)",
        "asinh(size)",
        "abs(size - 2.2)",
        "log(size + 3)",
        "log(size / (year - 2000))",
        "size:factor(soil)",
        "size:w",
        "log(size):size^2:factor(side)",
        "exp(-size * 2)",
    ],
)
def test_derivatives_are_numeric_differences(term: str) -> None:
    made, step = with_terms("w", term), 1e-6
    up, down = (with_terms("w", term, frame=FRAME.assign(size=FRAME["size"] + by)).x for by in (step, -step))
    assert made.derivative_by("size") == pytest.approx((up - down) / (2 * step), rel=1e-6, abs=1e-6)


def test_a_column_can_be_set_in_every_row() -> None:
    made = with_terms("size*factor(soil)", "size^2", "factor(year)")
    for column, value in (("size", 4.0), ("soil", "sand"), ("year", 2003.0)):
        changed = FRAME.assign(**{column: value})
        kept = pd.concat([changed, FRAME])  # so that all classes stay in use
        expected = with_terms("size*factor(soil)", "size^2", "factor(year)", frame=kept).x[:12]
        assert np.array_equal(made.with_column(column, value), expected)
    assert np.array_equal(made.x, with_terms("size*factor(soil)", "size^2", "factor(year)").x)


def test_a_lag_is_refused_with_its_reason() -> None:
    with pytest.raises(Refusal, match=r"`L\.size`: lags and leads need the data's order"):
        with_terms("L.size")
