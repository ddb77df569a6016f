"""Which two numbers are set against each other, on which rows, and when none are."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from specifying import amounts, refit, table

from reviewkit.comparison import Comparison, Kind
from reviewkit.implied import Scale
from reviewkit.readers.tables import Table
from reviewkit.reestimation import Reestimation

LOG_PLUS = {"column": "y", "transform": "log_plus", "constant": 1}
POSITIVE = {"column": "y", "transform": "log", "zeros": "dropped"}
CLUSTERED = {"kind": "cluster", "by": ["cluster"]}


def changed(data: Table, **columns: Any) -> Table:
    return Table(data.name, data.frame.assign(**columns), data.sha256, data.labels)


def one(found: Reestimation, kind: Kind, rows: str = "common") -> Comparison:
    return next(each for each in found.comparison if each.kind is kind and each.rows == rows)


# --- a coefficient as read -----------------------------------------------------------------------------------


def read(term: str, data: Table) -> Comparison:
    found = refit(data, outcome=LOG_PLUS, model={"terms": [term, "factor(region)"], "focus": [term]})
    done = one(found, Kind.READING)
    assert found.alternative is not None
    row = found.alternative.term(term)
    assert row is not None
    assert done.alternative == pytest.approx(row.estimate, rel=1e-9)
    return done


def test_a_reading_does_not_move_with_the_codes_of_a_two_valued_covariate() -> None:
    data = amounts()
    plain = read("treated", data)
    coded = read("code", changed(data, code=2 * data.frame.treated - 1))
    assert plain.scale is Scale.LOG_RATIO
    assert coded.scale is Scale.COEFFICIENT
    assert coded.conclusion is plain.conclusion
    assert coded.agree_within_percent == pytest.approx(plain.agree_within_percent, rel=1e-6)
    assert coded.submitted == pytest.approx(plain.submitted / 2)  # type: ignore[operator]


@pytest.mark.parametrize(
    ("term", "scale"),
    [
        ("size", Scale.SEMI_ELASTICITY),
        ("log(size)", Scale.ELASTICITY),
        ("sqrt(size)", Scale.COEFFICIENT),
        ("log(size + 1)", Scale.COEFFICIENT),
    ],
)
def test_a_reading_sets_a_coefficient_against_the_coefficient_of_the_same_term(term: str, scale: Scale) -> None:
    assert read(term, amounts()).scale is scale


# --- focal terms ---------------------------------------------------------------------------------------------


def test_the_classes_of_a_focal_factor_do_not_take_in_its_products() -> None:
    found = refit(amounts(), outcome=LOG_PLUS, model={"terms": ["factor(region)*treated"], "focus": ["factor(region)"]})
    assert [each.term for each in found.comparison] == ["factor(region)[north]", "factor(region)[west]"]


def test_a_slope_that_is_not_finite_is_told_as_such() -> None:
    data = amounts()
    size = np.where(np.arange(400) % 9 == 0, 0.0, data.frame["size"])
    found = refit(changed(data, size=size), outcome=LOG_PLUS, model={"terms": ["sqrt(size)"], "focus": ["sqrt(size)"]})
    done = one(found, Kind.MODEL)
    assert done.submitted is None
    assert "no finite slope in 45 rows" in (done.why or "")


def test_a_focal_term_that_separation_makes_collinear_is_not_compared() -> None:
    data = amounts()
    early = np.arange(400) < 40
    other = np.where(early, 1 - data.frame.treated, data.frame.treated)
    made = changed(data, other=other, early=early.astype(float), y=np.where(early, 0.0, data.frame.y))
    found = refit(made, outcome=LOG_PLUS, model={"terms": ["treated", "other", "early"], "focus": ["treated"]})
    assert all(each.submitted is None for each in found.comparison)
    assert all("cannot be told from that of other" in (each.why or "") for each in found.comparison)


def test_an_effect_that_rests_on_a_cell_without_rows_is_not_made_up() -> None:
    data = amounts()
    cell = (data.frame.region == "north") & (data.frame.treated == 1)
    data = changed(data, y=np.where(cell, 0.0, data.frame.y))
    found = refit(data, outcome=LOG_PLUS, model={"terms": ["factor(region)*treated"], "focus": ["treated"]})
    assert one(found, Kind.MODEL).submitted is None
    assert "rests on factor(region)[north]:treated" in (one(found, Kind.MODEL).why or "")


def test_a_class_that_is_lost_leaves_the_effects_of_the_others() -> None:
    data = amounts()
    data = changed(data, y=np.where(data.frame.region == "north", 0.0, data.frame.y))
    found = refit(data, outcome=LOG_PLUS, model={"terms": ["factor(region)", "treated"], "focus": ["factor(region)"]})
    north, west = (next(e for e in found.comparison if e.term == f"factor(region)[{c}]") for c in ("north", "west"))
    assert north.submitted is None
    assert "does not vary" in (north.why or "")
    assert west.conclusion is not None


# --- rows ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("empty", [range(8), range(17, 25)], ids=["first", "last"])
def test_clusters_without_a_row_in_either_model_are_not_counted(empty: range) -> None:
    data = amounts()
    made = changed(data, y=np.where(data.frame.cluster.isin(empty), 0.0, data.frame.y))
    few: dict[str, Any] = {"outcome": POSITIVE, "model": {"terms": ["treated"]}, "errors": CLUSTERED}
    whole = refit(made, **few)
    alone = refit(Table("", made.frame[made.frame.y > 0], "", {}), **few)
    assert one(whole, Kind.MODEL).effective == 17
    assert one(whole, Kind.MODEL).std_error == pytest.approx(one(alone, Kind.MODEL).std_error, rel=1e-9)
    assert one(whole, Kind.MODEL, "own").effective == 25


def test_resamples_on_common_rows_draw_those_rows_alone() -> None:
    data = amounts(rows=120, clusters=20)
    model = {"terms": ["treated", "log(size)"], "focus": ["treated"], "weights": {"column": "w", "kind": "frequency"}}
    whole = one(refit(data, outcome=POSITIVE, model=model), Kind.MODEL)
    positive = Table("", data.frame[data.frame.y > 0].reset_index(drop=True), "", {})
    alone = one(refit(positive, outcome=POSITIVE, model=model), Kind.MODEL)
    assert whole.method == "bootstrap-t"
    assert whole.interval == pytest.approx(alone.interval, rel=1e-9)


def test_two_saturated_models_give_the_same_number_however_small_it_is() -> None:
    random = np.random.default_rng(3)
    treated = np.arange(400.0) % 2
    noise = random.normal(size=400)
    noise -= np.array([noise[treated == 0].mean(), noise[treated == 1].mean()])[treated.astype(int)]
    data = table(y=1e6 + noise + 1e-7 * treated, treated=treated)
    done = one(refit(data, outcome={"column": "y"}, model={"terms": ["treated"]}), Kind.MODEL)
    assert done.conclusion is None
    assert done.why == "both models give the same number by construction"


# --- leaving out a cluster ------------------------------------------------------------------------------------


def refitted_without(data: Table, cluster: int, **tables: Any) -> Comparison:
    rest = Table("", data.frame[data.frame.cluster != cluster].reset_index(drop=True), "", {})
    return one(refit(rest, **tables, errors=CLUSTERED), Kind.MODEL)


def assert_error_by_refitting(data: Table, **tables: Any) -> None:
    """Compare the error of the difference with that from refitting all of it without each cluster."""
    whole = one(refit(data, **tables, errors=CLUSTERED), Kind.MODEL)
    clusters = sorted(set(data.frame.cluster))
    apart = np.array([refitted_without(data, each, **tables).difference for each in clusters], dtype=float)
    share = (len(clusters) - 1) / len(clusters)
    assert whole.std_error == pytest.approx((share * ((apart - whole.difference) ** 2).sum()) ** 0.5, rel=1e-6)


def test_dummies_of_the_clusters_do_not_stand_in_the_way() -> None:
    data = amounts(rows=240, clusters=12)
    data = changed(data, treated=np.random.default_rng(2).integers(0, 2, 240).astype(float))
    for outcome in (LOG_PLUS, POSITIVE):
        assert_error_by_refitting(data, outcome=outcome, model={"terms": ["treated", "factor(cluster)"]})


def test_a_cluster_that_outweighs_all_others_can_be_left_out() -> None:
    data, random = amounts(), np.random.default_rng(4)
    large = np.arange(400) < 280
    data = changed(
        data,
        cluster=np.where(large, 0, data.frame.cluster + 1),
        treated=random.integers(0, 2, 400).astype(float),
        y=np.where(large, 50.0, 1.0) * data.frame.y,
    )
    terms = ["treated", "log(size)", "treated:log(size)"]
    assert_error_by_refitting(data, outcome=LOG_PLUS, model={"terms": terms, "focus": ["treated"]})


def test_a_number_that_rests_on_one_cluster_is_refused() -> None:
    data = amounts()
    data = changed(data, treated=((data.frame.cluster == 3) & (np.arange(400) > 200)).astype(float))
    found = refit(data, outcome=LOG_PLUS, model={"terms": ["treated", "log(size)"]}, errors=CLUSTERED)
    assert all("stands on one cluster alone" in (each.why or "") for each in found.comparison)


# --- what a row stands for ------------------------------------------------------------------------------------


def test_the_share_of_zeros_counts_observations_and_not_rows() -> None:
    data = amounts(rows=120, clusters=20)
    again = Table("", data.frame.loc[data.frame.index.repeat(data.frame.w.astype(int))].reset_index(drop=True), "", {})
    model: dict[str, Any] = {"terms": ["treated"]}
    weighted = refit(data, outcome=LOG_PLUS, model={**model, "weights": {"column": "w", "kind": "frequency"}})
    repeated = refit(again, outcome=LOG_PLUS, model=model)
    shares = [next(f.value for f in each.facts if f.name == "outcome.zero_share") for each in (weighted, repeated)]
    whys = [each.submitted.terms[1].readings.percent_why_not for each in (weighted, repeated)]
    assert shares[0] == pytest.approx(shares[1])
    assert whys[0] == whys[1]


def test_a_printed_factor_without_its_class_is_not_mistaken_for_a_product() -> None:
    data = amounts()
    two = changed(data, region=np.where(data.frame.region == "west", "east", data.frame.region))
    printed = {"terms": {"factor(region)": {"estimate": "0.1"}}}
    found = refit(two, outcome=LOG_PLUS, model={"terms": ["factor(region)*treated"]}, printed=printed)
    assert [each.term for each in found.agreement] == ["factor(region)[north]"]


# --- why there is no percent ----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("terms", "term", "why"),
    [
        (["factor(region)*treated"], "factor(region)[north]", "region also stands in factor(region)[north]:treated"),
        (["size", "size^2"], "size", "size also stands in size^2"),
        (["log(size)"], "log(size)", "the covariate is in logs: the coefficient is an elasticity"),
        (["log(size)^2"], "log(size)^2", "not a covariate by itself"),
        (["log(size + 1)"], "log(size + 1)", "not a covariate by itself"),
        (["factor(region)", "treated"], "factor(region)[north]", None),
    ],
)
def test_why_a_term_has_no_percent_names_what_stands_in_the_way(terms: list[str], term: str, why: str | None) -> None:
    row = refit(amounts(), outcome=POSITIVE, model={"terms": terms}).submitted.term(term)
    assert row is not None
    assert row.readings.percent_why_not == why
    assert (row.readings.percent is None) == (why is not None)


@pytest.mark.parametrize(("transform", "kept"), [("asinh", 350), ("none", 350), ("log", 250)])
def test_dropping_zeros_keeps_negative_outcomes_where_the_transform_has_them(transform: str, kept: int) -> None:
    y = np.random.default_rng(1).lognormal(size=400)
    y[:50] = 0
    y[50:150] *= -1
    data = table(y=y, treated=np.arange(400.0) % 2)
    outcome = {"column": "y", "transform": transform, "zeros": "dropped"}
    assert refit(data, outcome=outcome, model={"terms": ["treated"]}).submitted.observations == kept


def test_a_missed_error_alone_leaves_nothing_reproduced() -> None:
    """Only a standard error is printed, and missed: the fact says no, and no conclusion is drawn."""
    printed = {"terms": {"treated": {"std_error": "9.99"}}}
    tables: dict[str, Any] = {"outcome": {"column": "y", "transform": "log_plus"}, "model": {"terms": ["treated"]}}
    found = refit(amounts(), **tables, errors={"kind": "robust"}, printed=printed)
    assert {fact.name: fact.value for fact in found.facts}["refit.reproduced"] == "no"
    assert found.comparison[0].conclusion is None


def test_large_whole_numbers_name_clusters_without_running_together() -> None:
    data = amounts(rows=200, clusters=20)
    names = 2**60 + data.frame["cluster"]
    apart = replace(data, frame=data.frame.assign(cluster=names))
    tables: dict[str, Any] = {"outcome": {"column": "y", "transform": "log_plus"}, "model": {"terms": ["treated"]}}
    errors = {"kind": "cluster", "by": ["cluster"]}
    assert refit(apart, **tables, errors=errors).submitted.clusters == 20


def test_frequency_weights_describe_observations() -> None:
    data = amounts(rows=300)
    times = data.frame["w"].astype(int)
    repeated = replace(data, frame=data.frame.loc[data.frame.index.repeat(times)])
    tables: dict[str, Any] = {"outcome": {"column": "y", "transform": "log_plus"}}
    weighted = refit(
        data, **tables, model={"terms": ["treated"], "weights": {"column": "w", "kind": "frequency"}},
        errors={"kind": "robust"},
    )  # fmt: skip
    plain = refit(repeated, **tables, model={"terms": ["treated"]}, errors={"kind": "robust"})
    described = [{row[0]: row[1] for row in each.exhibits[0].rows} for each in (weighted, plain)]
    for name in ("mean", "zeros, percent", "median", "treated = 1: mean", "treated = 0: rows"):
        assert described[0][name] == pytest.approx(described[1][name])


def test_a_model_too_large_to_resample_concludes_nothing_where_few_rows_carry_the_error() -> None:
    random = np.random.default_rng(2)
    rows = 700
    y = random.lognormal(0, 1, rows)
    y[0] = 900.0
    data = table(y=y, group=np.tile([0.0, 1.0], rows // 2), class_=np.repeat(np.arange(70), 10))
    model = {"terms": ["group", "factor(class_)"], "focus": ["group"]}
    found = refit(data, outcome={"column": "y", "transform": "log"}, model=model, errors={"kind": "robust"})
    first = found.comparison[0]
    assert (first.method, first.conclusion) == ("robust", "unsettled")
    assert "too large to resample" in (first.why or "")


def test_too_many_clusters_and_coefficients_to_leave_out_are_said(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("reviewkit.joint._MOST_CELLS", 99)
    tables: dict[str, Any] = {"outcome": {"column": "y", "transform": "log_plus"}, "model": {"terms": ["treated"]}}
    first = refit(amounts(), **tables, errors={"kind": "cluster", "by": ["cluster"]}).comparison[0]
    assert first.conclusion is None
    assert "too many" in (first.why or "")
