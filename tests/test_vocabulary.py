"""Values of facts are read and checked against what a definition allows."""

import math

import pytest

from reviewkit.facts import NOT_STATED
from reviewkit.printed import read_printed
from reviewkit.refusals import Refusal
from reviewkit.vocabulary import FactDefinition, Kind, Vocabulary

ONE = FactDefinition("one", "model", Kind.ONE, options=("log", "none"))
SOME = FactDefinition("some", "model", Kind.SOME, options=("habit", "theory"))
NAMES = FactDefinition("names", "model", Kind.NAMES)
SHARE = FactDefinition("share", "model", Kind.NUMBER, unit="share", low=0, high=1)
COUNT = FactDefinition("count", "model", Kind.NUMBER, low=0)
PRINTED = FactDefinition("printed", "claim", Kind.PRINTED)
ANSWER = FactDefinition("answer", "study", Kind.ANSWER, options=("yes", "partly", "no"))


@pytest.mark.parametrize(
    ("definition", "text", "value"),
    [
        (ONE, "log", "log"),
        (ONE, "none", "none"),
        (SOME, "habit, theory", ("habit", "theory")),
        (SOME, "none", ()),
        (SOME, "", ()),
        (NAMES, "village , year", ("village", "year")),
        (SHARE, "0.31", 0.31),
        (SHARE, "31 %", 0.31),
        (SHARE, "0,31", 0.31),
        (COUNT, "1,234", 1234.0),
        (PRINTED, "0.380", read_printed("0.380")),
        (ANSWER, "partly", "partly"),
        *((each, "not stated", NOT_STATED) for each in (ONE, SOME, NAMES, SHARE, PRINTED, ANSWER)),
    ],
)
def test_a_text_becomes_a_value(definition, text, value):
    assert definition.read(text) == value


@pytest.mark.parametrize(
    ("definition", "text", "allowed"),
    [
        (ONE, "logg", "log, none"),
        (SOME, "habit, taste", "habit, theory"),
        (SHARE, "31", "a number from 0 to 1"),
        (SHARE, "many", "digits"),
        (COUNT, "-1", "a number of at least 0"),
        (ANSWER, "perhaps", "yes, partly, no"),
    ],
)
def test_what_is_not_allowed_is_refused_with_what_is(definition, text, allowed):
    with pytest.raises(Refusal, match=f"line 3: .*Allowed: {allowed}"):
        definition.read(text, "line 3")


@pytest.mark.parametrize("value", [math.nan, math.inf, "1", True, read_printed("1")])
def test_a_number_is_a_finite_number(value):
    assert not COUNT.allows(value)


def test_an_unknown_name_is_refused_with_its_neighbours():
    with pytest.raises(Refusal, match="The closest are: share"):
        Vocabulary((SHARE, COUNT))["shares"]


def test_a_later_definition_replaces_an_earlier_one_in_its_place():
    other = FactDefinition("share", "claim", Kind.TEXT)
    assert tuple(Vocabulary((SHARE, COUNT)).adding((other,))) == (other, COUNT)
