"""What `refit --json` and `percent --json` give holds to their schemas, whatever exists and whatever does not."""

import json
from pathlib import Path
from typing import Any

import jsonschema
import numpy as np
import pytest
from specifying import amounts, refit, table

from reviewkit.percent_reading import as_object, read
from reviewkit.writers.refit_json import refit_object

SCHEMAS = Path(__file__).parent / "schemas"
ROBUST = {"kind": "robust"}
CLUSTERED = {"kind": "cluster", "by": ["cluster"]}


def check(name: str, content: Any) -> Any:
    """The content as another program reads it, found valid; not-a-number and infinity are no JSON."""
    schema = json.loads((SCHEMAS / f"{name}.json").read_text("utf-8"))
    jsonschema.Draft202012Validator.check_schema(schema)
    back = json.loads(json.dumps(content, allow_nan=False))
    jsonschema.validate(back, schema, cls=jsonschema.Draft202012Validator)
    return back


def model_of(data: Any = None, **tables: Any) -> Any:
    found = check("refit", refit_object([refit(data or amounts(), **tables)], ()))
    return found["models"][0]


@pytest.mark.parametrize("errors", [ROBUST, CLUSTERED, {"kind": "classical"}], ids=lambda each: each["kind"])
@pytest.mark.parametrize("transform", ["none", "log", "log_plus", "asinh", "sqrt"])
def test_every_transform_and_kind_of_error_is_valid(transform: str, errors: dict[str, Any]) -> None:
    outcome = {"column": "y", "transform": transform, "zeros": "dropped" if transform == "log" else "kept"}
    model = {"terms": ["treated", "factor(region)"], "focus": ["treated"]}
    found = model_of(outcome=outcome, model=model, errors=errors)
    assert found["alternative"]["estimator"] == "poisson"
    assert found["submitted"]["errors"]["clusters"] == (25 if errors is CLUSTERED else None)
    assert [each["name"] for each in found["exhibits"]] == [
        "sample",
        "models",
        "comparison",
        "percent-readings",
        "baseline-diagnostics",
        "mean-form",
        *(["step-account"] if transform in ("log", "log_plus", "asinh") else []),
        *(["constant-curve", "local-slope"] if transform in ("log_plus", "asinh") else []),
    ]


def test_numbers_are_those_of_the_re_estimation() -> None:
    tables: dict[str, Any] = {
        "outcome": {"column": "y", "transform": "log_plus"},
        "model": {"terms": ["treated", "log(size)"], "focus": ["treated"]},
        "printed": {"terms": {"treated": {"estimate": "0.45", "std_error": "0.09"}}},
    }
    made, found = refit(amounts(), **tables), model_of(**tables)
    row = made.submitted.term("treated")
    assert row is not None
    told = found["submitted"]["terms"][1]
    assert (told["estimate"], told["std_error"], told["p"]) == (row.estimate, row.std_error, row.p)
    assert found["submitted"]["printed"]["treated"]["estimate_agrees"] is True
    first = made.comparison[0]
    assert found["comparison"][0]["difference"] == first.difference
    assert found["comparison"][0]["agree_within_percent"] == first.agree_within_percent


def test_a_percent_that_does_not_exist_is_null_with_its_reason() -> None:
    found = model_of(outcome={"column": "y", "transform": "log_plus"}, model={"terms": ["treated*log(size)"]})
    for row in found["submitted"]["terms"]:
        assert row["percent"] is None
        assert row["percent_why_not"] == "constant added, 19 % zeros"
    reasons = {row["name"]: row["percent_why_not"] for row in found["alternative"]["terms"]}
    assert reasons == {
        "(constant)": "the constant has no change to read",
        "treated": "treated also stands in treated:log(size)",
        "log(size)": "the covariate is in logs: the coefficient is an elasticity",
        "treated:log(size)": "not a covariate by itself",
    }


def test_without_an_alternative_all_of_it_is_null_and_says_why() -> None:
    frame = amounts().frame.assign(y=lambda f: f["y"] - 5)
    found = model_of(table(**frame), outcome={"column": "y"}, model={"terms": ["treated"]})
    assert found["alternative"] is None
    assert "negative" in found["alternative_why_not"]
    only = found["comparison"][0]
    assert (only["submitted"], only["difference"], only["interval"], only["conclusion"]) == (None,) * 4
    assert only["why"] == found["alternative_why_not"]


def test_a_poisson_submission_has_no_second_model() -> None:
    found = model_of(outcome={"column": "y"}, model={"terms": ["treated"], "estimator": "poisson"})
    assert found["submitted"]["estimator"] == "poisson"
    assert found["alternative_why_not"] == "the submission is itself a Poisson model of the mean"


def test_a_perfect_fit_is_valid_too() -> None:
    x = np.arange(1.0, 21.0)
    found = model_of(table(y=2 * x, x=x), outcome={"column": "y"}, model={"terms": ["x"]}, errors=ROBUST)
    assert found["submitted"]["terms"][1]["estimate"] == pytest.approx(2.0)


def test_an_outcome_with_quotes_and_blanks_in_its_name_is_valid() -> None:
    frame = amounts().frame.rename(columns={"y": 'the "sum", größe'})
    found = model_of(
        table(**frame), outcome={"column": 'the "sum", größe', "transform": "sqrt"}, model={"terms": ["treated"]}
    )
    assert found["submitted"]["outcome"] == 'sqrt(`the "sum", größe`)'


@pytest.mark.parametrize(
    ("arguments", "missing"),
    [
        (("0.38", "0.11", None, 0.0, False), {"minimum_variance_percent"}),
        (("0.38", "0.11", 40.0, 0.0, False), set()),
        (("0.38", None, None, 0.0, False), {"interval", "kennedy_percent", "minimum_variance_percent"}),
        (("0.38", "0.11", 40.0, 1.0, False), {"percent", "interval", "kennedy_percent", "minimum_variance_percent"}),
        (("0.38", "0.11", 40.0, 1.0, True), {"percent", "interval", "kennedy_percent", "minimum_variance_percent"}),
        (("0.38", "99", 1.0, 0.0, False), {"minimum_variance_percent"}),
    ],
)
def test_percent_is_valid_and_null_where_it_does_not_exist(arguments: Any, missing: set[str]) -> None:
    found = check("percent", as_object(read(*arguments)))
    assert {name for name, value in found.items() if value is None} - {"percent_why_not"} == missing
    assert (found["percent"] is None) == (found["percent_why_not"] is not None)
    assert found["coefficient_times_100"] == 38.0


def test_the_schema_refuses_a_null_without_its_reason() -> None:
    content = refit_object(
        [refit(amounts(), outcome={"column": "y", "transform": "sqrt"}, model={"terms": ["treated"]})], ()
    )
    content["models"][0]["submitted"]["terms"][0]["percent_why_not"] = None
    with pytest.raises(jsonschema.ValidationError):
        check("refit", content)


def test_the_alternative_has_robust_errors_beside_classical_ones() -> None:
    outcome, terms = {"column": "y", "transform": "log_plus"}, {"terms": ["treated"]}
    classical = model_of(outcome=outcome, model=terms, errors={"kind": "classical"})
    robust = model_of(outcome=outcome, model=terms, errors={"kind": "robust", "type": "HC1"})
    assert classical["submitted"]["errors"]["kind"] == "classical"
    assert classical["submitted"]["terms"] != robust["submitted"]["terms"]
    assert classical["alternative"]["terms"] == robust["alternative"]["terms"]
    models = next(each for each in classical["exhibits"] if each["name"] == "models")
    assert "errors classical, those of the alternative heteroskedasticity-robust (HC1)" in models["sentence"]


def test_a_printed_number_of_observations_that_is_not_met_is_named() -> None:
    found = model_of(
        outcome={"column": "y", "transform": "log_plus"}, model={"terms": ["treated"]}, printed={"n": "17", "terms": {}}
    )
    models = next(each for each in found["exhibits"] if each["name"] == "models")
    assert "Not met to the printed digits: number of observations (printed 17)" in models["sentence"]
