"""A note as data: valid, complete, with the very numbers that are drawn, and nothing that is no JSON."""

import json
import math
import os
from pathlib import Path

import jsonschema
import pytest
from finished_notes import case_with
from hypothesis import given, settings
from hypothesis import strategies as st
from test_writers import BINS, FIGURES, INTERVALS, SMALL, of_text

from reviewkit.compose import compose
from reviewkit.exhibit import Bin, BinnedFigure, Interval, IntervalFigure
from reviewkit.note import Audience, Figure, Note, Section
from reviewkit.wording import clean
from reviewkit.writers.note_json import note_object, write_json

HERE = Path(__file__).parent
SCHEMA = json.loads((HERE / "schemas" / "note.json").read_text("utf-8"))


def check(note):
    """The note as another program reads it, found valid."""
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    back = json.loads(json.dumps(note_object(note), allow_nan=False))
    jsonschema.validate(back, SCHEMA, cls=jsonschema.Draft202012Validator)
    return back


def of_figure(figure):
    note = Note("T", Audience.EDITOR, (Section("", (Figure("Caption.", "Alternative.", figure),)),))
    return check(note)["sections"][0]["blocks"][0]["figure"]


def test_a_small_note_reads_as_it_did(tmp_path):
    write_json(SMALL, tmp_path / "small.json")
    made = (tmp_path / "small.json").read_text(encoding="utf-8")
    if os.environ.get("REVIEWKIT_WRITE_GOLDEN") == "yes":
        (HERE / "golden" / "small.json").write_text(made, encoding="utf-8", newline="\n")
    assert made == (HERE / "golden" / "small.json").read_text(encoding="utf-8")


@pytest.mark.parametrize("audience", list(Audience))
def test_both_notes_are_valid_and_whole(audience):
    note = compose(case_with(), audience)
    found = check(note)
    assert found["audience"] == str(audience)
    assert [(each["title"], each["level"]) for each in found["sections"]] == [
        (section.title, section.level) for section in note.sections
    ]
    assert [len(each["blocks"]) for each in found["sections"]] == [len(section.blocks) for section in note.sections]


@pytest.mark.parametrize("figure", FIGURES, ids=lambda one: type(one).__name__)
def test_every_kind_of_figure_is_valid(figure):
    assert of_figure(figure)["kind"] in ("intervals", "bins", "bars")


def test_numbers_are_those_that_are_drawn():
    rows = of_figure(INTERVALS)["rows"]
    assert [(row["estimate"], row["low"], row["high"]) for row in rows] == [(0.41, 0.22, 0.6), (0.18, None, None)]
    bins = of_figure(BINS)["bins"]
    assert [(one["x"], one["middle"], one["low"], one["high"], one["rows"]) for one in bins] == [
        (1, 0.5, -1, 2, 80),
        (3, -0.5, -2, 1, 80),
    ]
    assert of_figure(BINS)["line"] == {"intercept": 0, "slope": 0}


def test_a_number_that_does_not_exist_is_null():
    rows = of_figure(IntervalFigure("x", (Interval("a", math.nan, -math.inf, math.inf),), None))
    assert rows["reference"] is None
    assert rows["rows"] == [{"label": "a", "estimate": None, "low": None, "high": None}]
    bins = of_figure(BinnedFigure("x", "y", (Bin(math.nan, 1.0, 0.0, 2.0, 30),)))
    assert (bins["bins"][0]["x"], bins["line"]) == (None, None)


@settings(max_examples=30)
@given(st.text(max_size=60))
def test_any_text_stays_text(text):
    note = of_text(text)
    assert check(note)["title"] == clean(text)
