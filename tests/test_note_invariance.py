"""What must not change a note does not change it, and what must turn its words does."""

import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from specifying import refit

from reviewkit import casefolder, drafting, review, unattended
from reviewkit.casefolder import Input
from reviewkit.readers.tables import Table

ANSWERS = """
[specification.outcome]
column = "{y}"
transform = "log"

[specification.model]
terms = ["{d}", "log({x})", "factor({c})"]
focus = ["{d}"]

[specification.errors]
kind = "{errors}"
{by}

[specification.printed]
terms.{d} = {{ estimate = "{printed}" }}

[study]
assignment.random = "no"
data.available = "yes"

[model.main]
outcome.kind = "positive amount"
transform.reason = "not stated"
mean.form = "multiplicative"
checks.shown = []
errors.cluster_level = ["{g}"]

[claim.main]
claim.scale = "percent"
claim.target = "arithmetic mean"
claim.retransformed = "no"
claim.covariate = "two-valued"
"""
NAMES = {"y": "haul", "d": "lantern", "x": "depth", "c": "shore", "g": "crew"}


def catches(flip: bool = False) -> pd.DataFrame:
    """An invented haul per trip: lanterns are given by crew, and the spread of hauls grows with them."""
    random = np.random.default_rng(20)
    crew = np.repeat(np.arange(48), 20)
    lantern = (crew % 2).astype(float)
    depth = random.lognormal(2, 0.4, crew.size)
    haul = np.exp(1 + 0.2 * lantern + 0.1 * np.log(depth) + (0.5 + 0.5 * lantern) * random.normal(size=crew.size))
    columns = (haul, 1 - lantern if flip else lantern, depth, random.choice(["east", "west"], crew.size), crew)
    return pd.DataFrame(dict(zip(NAMES.values(), columns, strict=True)))


def notes(folder: Path, frame: pd.DataFrame, names: dict[str, str], errors: str = "cluster") -> dict[str, str]:
    """Both notes of the case, as text, without the checksum of the data."""
    folder.mkdir()
    frame.to_csv(folder / "trips.csv", index=False)
    b = np.linalg.lstsq(
        np.column_stack(
            [
                np.ones(len(frame)),
                frame[names["d"]],
                np.log(frame[names["x"]]),
                (frame[names["c"]] == "west").astype(float),
            ]
        ),
        np.log(frame[names["y"]]),
        rcond=None,
    )[0][1]
    by = f'by = ["{names["g"]}"]' if errors == "cluster" else ""
    text = ANSWERS.format(**names, errors=errors, by=by, printed=f"{b:.3f}")
    (folder / "answers.toml").write_text(text, encoding="utf-8")
    case, _ = review.begin(folder / "case", {Input.DATA: folder / "trips.csv"})
    case, _ = review.read_inputs(case)
    with casefolder.working_in(case):
        unattended.take_answers(case, folder / "answers.toml", print)
        review.refit(case)
    drafting.draft(case.path, ("txt",))
    found = {stem: (case.path / f"{stem}.txt").read_text("utf-8") for stem in ("to-authors", "to-editor")}
    return {stem: re.sub(r"[0-9a-f]{64}", "CHECKSUM", text) for stem, text in found.items()}


@pytest.fixture(scope="module")
def usual(tmp_path_factory: pytest.TempPathFactory) -> dict[str, str]:
    return notes(tmp_path_factory.mktemp("usual") / "work", catches(), NAMES)


def test_the_case_says_something(usual: dict[str, str]) -> None:
    assert "model of the mean" in usual["to-authors"]
    assert "positive" in usual["to-authors"]


def test_row_order_does_not_change_resamples() -> None:
    """Few rows carry the error, so that rows are resampled: the same observations are drawn in any order of rows."""
    random = np.random.default_rng(2)
    rows = pd.DataFrame({"y": random.lognormal(0, 1.5, 80), "group": np.tile([0.0, 1.0], 40)})
    found = []
    for frame in (rows, rows.sample(frac=1, random_state=1)):
        data = Table("data.csv", frame, "0" * 64, {})
        tables = {"outcome": {"column": "y", "transform": "log"}, "model": {"terms": ["group"]}}
        found.append(refit(data, **tables, errors={"kind": "robust"}).comparison[0])
    assert found[0].method == found[1].method == "bootstrap-t"
    assert found[0].interval == pytest.approx(found[1].interval, rel=1e-9)


@pytest.mark.parametrize("errors", ["cluster", "robust"])
def test_row_order_does_not_change_a_note(tmp_path: Path, errors: str) -> None:
    rows = catches()
    shuffled = rows.sample(frac=1, random_state=3)
    assert notes(tmp_path / "a", rows, NAMES, errors) == notes(tmp_path / "b", shuffled, NAMES, errors)


def test_column_names_do_not_change_a_note(tmp_path: Path, usual: dict[str, str]) -> None:
    """Other names of the same length and order in the alphabet, so that lines break and tables sort alike."""
    other = {"y": "rent", "d": "balcony", "x": "acres", "c": "tower", "g": "firm"}
    renamed = catches().rename(columns={NAMES[key]: other[key] for key in NAMES})
    found = notes(tmp_path / "c", renamed, other)
    for stem, text in found.items():
        for key, name in other.items():
            text = re.sub(rf"\b{name}\b", NAMES[key], text)
        assert text == usual[stem]


@pytest.mark.parametrize("unit", [1e-6, 1000.0])
def test_the_unit_of_the_outcome_changes_no_word_and_no_compared_number(
    tmp_path: Path, usual: dict[str, str], unit: float
) -> None:
    """With a log and no constant: all but the exhibits that are in the outcome's own unit."""
    rows = catches()
    rows["haul"] *= unit
    found = notes(tmp_path / "d", rows, NAMES)
    assert found["to-editor"] == usual["to-editor"]
    for part in ("Requests", "Exhibit 3."):
        assert section(found["to-authors"], part) == section(usual["to-authors"], part)


def section(text: str, start: str) -> str:
    """From a heading to the next exhibit, or to the exhibits."""
    rest = text[text.index(start) :]
    return re.split(r"\nExhibits\n|\nExhibit 4\.", rest)[0]


def test_a_turned_focal_covariate_turns_the_words_for_direction(tmp_path: Path, usual: dict[str, str]) -> None:
    turned = notes(tmp_path / "e", catches(flip=True), NAMES)["to-authors"]
    assert "negative" in turned
    assert "negative" not in usual["to-authors"]
    assert "effect in your model is positive" not in turned
