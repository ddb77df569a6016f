"""The specification file: what it holds, what it refuses, and that what is written is read the same again."""

import re
from contextlib import suppress
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from reviewkit.refusals import Refusal
from reviewkit.specification import (
    ErrorKind,
    Errors,
    Estimator,
    PerExposure,
    Specification,
    Transform,
    WeightKind,
    Zeros,
    read_specification,
    specification_from,
    specification_text,
)

EVERY_KEY = """
format = 1
name = "orchards"
data = "plots.csv"

[outcome]
column = "fruit"
transform = "log_plus"
constant = 0.5
zeros = "kept"
per_exposure = "before_constant"

[model]
estimator = "ols"
terms = ["graft", "log(trees)", 'factor(slope, base="north")', "graft:dry", "age", "age^2", "`leaf area`*wet"]
absorb = ["plot", "year"]
focus = ["graft"]
exposure = "days"
where = "year >= 2015 and slope != 'north'"
weights = { column = "w", kind = "probability" }

[errors]
kind = "cluster"
type = "CR0"
by = ["village"]
small_sample = "G/(G-1)"

[alternative]
estimator = "poisson"

[printed]
n = 3412

[printed.terms]
graft = { estimate = "0.38", std_error = "0.11" }
"factor(slope)[south]" = { estimate = "−.20" }
"""


def written(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "study.toml"
    path.write_text(text, "utf-8")
    return path


def from_tables(**tables: Any) -> Specification:
    whole = {"data": "d.csv", "outcome": {"column": "y"}, "model": {"terms": ["x"]}}
    return specification_from({**whole, **tables}, "study.toml")


def test_every_documented_key_is_read(tmp_path: Path) -> None:
    spec = read_specification(written(tmp_path, EVERY_KEY))
    assert (spec.name, spec.data) == ("orchards", "plots.csv")
    assert (spec.outcome.column, spec.outcome.transform, spec.outcome.constant) == ("fruit", Transform.LOG_PLUS, 0.5)
    assert (spec.outcome.zeros, spec.outcome.per_exposure) == (Zeros.KEPT, PerExposure.BEFORE_CONSTANT)
    assert [str(term) for term in spec.terms[:4]] == ["graft", "log(trees)", 'factor(slope, base="north")', "graft:dry"]
    assert [str(term) for term in spec.terms[6:]] == ["`leaf area`", "wet", "`leaf area`:wet"]
    assert (spec.absorb, spec.focus, spec.exposure) == (("plot", "year"), ("graft",), "days")
    assert str(spec.where) == "year >= 2015 and slope != 'north'"
    assert spec.weights is not None
    assert (spec.weights.column, spec.weights.kind) == ("w", WeightKind.PROBABILITY)
    assert spec.errors == Errors(ErrorKind.CLUSTER, "CR0", ("village",), "G/(G-1)")
    assert spec.alternative is Estimator.POISSON
    assert spec.printed_n is not None
    assert spec.printed_n.value == 3412
    printed = dict(spec.printed_terms)
    assert printed["graft"].std_error is not None
    assert printed["graft"].std_error.text == "0.11"
    assert printed["factor(slope)[south]"].estimate is not None
    assert printed["factor(slope)[south]"].estimate.value == -0.20


def test_what_is_written_is_read_the_same_again(tmp_path: Path) -> None:
    spec = read_specification(written(tmp_path, EVERY_KEY))
    assert read_specification(written(tmp_path, specification_text(spec))) == spec


def test_defaults_are_least_squares_with_robust_errors() -> None:
    spec = from_tables()
    assert (spec.name, spec.estimator, spec.errors) == ("main", Estimator.OLS, Errors(ErrorKind.ROBUST, "HC1"))
    assert (spec.outcome.transform, spec.outcome.zeros, spec.alternative) == (Transform.NONE, Zeros.KEPT, None)
    assert from_tables(errors={"kind": "cluster", "by": "village"}).errors.type == "CR1"


def test_a_byte_order_mark_does_no_harm(tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    path.write_text(EVERY_KEY, "utf-8-sig")
    assert read_specification(path).name == "orchards"


names = st.text("abc_ \"'\\é.-", min_size=1, max_size=8).filter(lambda text: text.strip() and "`" not in text)


@given(
    names,
    names,
    st.sampled_from(["none", "log", "log_plus", "asinh", "sqrt"]),
    st.floats(1e-9, 1e9),
    st.sampled_from([("classical", "", []), ("robust", "HC3", []), ("cluster", "CR1", ["g"])]),
    st.sampled_from(["kept", "dropped", "replaced"]),
)
def test_any_specification_is_read_the_same_again(
    data: str, column: str, transform: str, number: float, errors: tuple[str, str, list[str]], zeros: str
) -> None:
    import tomllib

    kind, type_, by = errors
    outcome: dict[str, Any] = {"column": column, "transform": transform, "zeros": zeros}
    outcome |= {"log_plus": {"constant": number}, "asinh": {"scale": number}}.get(transform, {})
    outcome |= {"replacement": number} if zeros == "replaced" else {}
    tables: dict[str, Any] = {"kind": kind, "by": by} | ({"type": type_} if type_ else {})
    spec = from_tables(data=data, outcome=outcome, model={"terms": [f"`{column}`", "z"]}, errors=tables)
    assert specification_from(tomllib.loads(specification_text(spec)), "again") == spec


@pytest.mark.parametrize(
    ("tables", "place", "said"),
    [
        ({"extra": 1}, "extra", "this key is not known"),
        ({"outcome": {"column": "y", "tranform": "log"}}, "outcome.tranform", "this key is not known"),
        ({"model": {"terms": ["x"], "weights": {"columns": "w"}}}, "model.weights.columns", "this key is not known"),
        ({"printed": {"terms": {"x": {"se": "1"}}}}, "printed.terms.x.se", "this key is not known"),
        ({"format": 2}, "study.toml", "format 2 is not known"),
        ({"data": 3}, "data", "is not a text"),
        ({"outcome": {}}, "outcome.column", "this is missing"),
        ({"outcome": "y"}, "outcome", "a single value stands where a table belongs"),
        ({"outcome": {"column": "y", "transform": "ln"}}, "outcome.transform", "`ln` is not known"),
        ({"outcome": {"column": "y", "constant": 0}}, "outcome.constant", "`0` is not possible here"),
        ({"outcome": {"column": "y", "constant": True}}, "outcome.constant", "`True` is not possible here"),
        ({"outcome": {"column": "y", "scale": float("inf")}}, "outcome.scale", "`inf` is not possible here"),
        ({"outcome": {"column": "y", "constant": 10**400}}, "outcome.constant", "is not possible here"),
        ({"outcome": {"column": "y", "replacement": 1}}, "outcome.replacement", 'goes with zeros = "replaced"'),
        ({"outcome": {"column": "y", "zeros": "replaced"}}, "outcome.replacement", 'goes with zeros = "replaced"'),
        (
            {"outcome": {"column": "y", "per_exposure": "before_constant"}},
            "outcome.per_exposure",
            "no exposure is named",
        ),
        ({"model": {"terms": [1]}}, "model.terms", "not a list of texts"),
        ({"model": {"terms": ["lag(x)"]}}, "model.terms", "lags need the data's order"),
        ({"model": {"terms": ["x"], "where": "x ="}}, "model.where", "unexpected"),
        ({"model": {"terms": ["x"], "focus": ["x*z"]}}, "model.focus", "stands for several terms"),
        ({"model": {"terms": ["x"], "estimator": "magic"}}, "model.estimator", "`magic` is not known"),
        ({"model": {"terms": ["x"], "weights": {"column": "w"}}}, "model.weights.kind", "this is missing"),
        ({"errors": {"kind": "robust", "type": "CR1"}}, "errors.type", "does not go with robust errors"),
        ({"errors": {"kind": "cluster"}}, "errors.by", "both or neither"),
        ({"errors": {"kind": "robust", "by": ["g"]}}, "errors.by", "both or neither"),
        ({"errors": {"small_sample": "n/(n-9)"}}, "errors.small_sample", "does not go with"),
        ({"alternative": {"estimator": "x"}}, "alternative.estimator", "`x` is not known"),
        ({"printed": {"terms": {"x": {"estimate": "many"}}}}, "printed.terms.x.estimate", "`many` is not a number"),
    ],
)
def test_what_is_not_allowed_is_said_with_its_place(tables: dict[str, Any], place: str, said: str) -> None:
    with pytest.raises(Refusal, match=re.escape(said)) as refused:
        from_tables(**tables)
    assert place in refused.value.where
    assert refused.value.status == 2


@pytest.mark.parametrize("transform", ["none", "log"])
def test_with_an_exposure_least_squares_must_say_what_was_divided(transform: str) -> None:
    model = {"terms": ["x"], "exposure": "days"}
    with pytest.raises(Refusal, match="no, before_constant, after_constant"):
        from_tables(outcome={"column": "y", "transform": transform}, model=model)
    assert from_tables(outcome={"column": "y"}, model={**model, "estimator": "poisson"}).exposure == "days"


@pytest.mark.parametrize(
    "text", ["a = ", "[[[[", "a = " + "9" * 5000, "a = " + "[" * 3000, "\x00", "[outcome]\ncolumn = 1979-05-27"]
)
def test_a_file_that_is_no_specification_is_one_message(tmp_path: Path, text: str) -> None:
    with pytest.raises(Refusal, match=r"study\.toml"):
        read_specification(written(tmp_path, text))


def test_a_file_that_is_no_text_or_is_not_there_is_one_message(tmp_path: Path) -> None:
    (tmp_path / "study.toml").write_bytes(b"\xff\xfe\x00")
    for path in (tmp_path / "study.toml", tmp_path / "none.toml", tmp_path):
        with pytest.raises(Refusal, match="cannot be read as text"):
            read_specification(path)


values = st.recursive(
    st.none()
    | st.booleans()
    | st.integers()
    | st.floats()
    | st.text(max_size=5)
    | st.sampled_from(["log", "x", "HC1"]),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner, max_size=3),
    max_leaves=5,
)
KEYS = ["format", "name", "data", "outcome", "model", "errors", "alternative", "printed", "column", "transform", "kind"]
KEYS += [
    "constant",
    "scale",
    "zeros",
    "replacement",
    "terms",
    "focus",
    "where",
    "weights",
    "exposure",
    "type",
    "by",
    "n",
]


@given(
    st.dictionaries(
        st.sampled_from(KEYS), values | st.dictionaries(st.sampled_from(KEYS), values, max_size=4), max_size=6
    )
)
def test_no_content_does_more_than_be_read_or_refused(content: dict[str, Any]) -> None:
    with suppress(Refusal):
        specification_from({"data": "d", "outcome": {"column": "y"}, "model": {"terms": ["x"]}} | content, "study.toml")
