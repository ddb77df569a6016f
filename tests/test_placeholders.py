"""A rule's text never shows a placeholder that was not filled in."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from reviewkit.facts import NOT_STATED
from reviewkit.placeholders import check_template, placeholders, render, sentences
from reviewkit.printed import read_printed
from reviewkit.refusals import Refusal
from reviewkit.vocabulary import FactDefinition, Kind, Vocabulary

VOCABULARY = Vocabulary(
    (
        FactDefinition("outcome.zero_share", "model", Kind.NUMBER, unit="share"),
        FactDefinition("claim.percent", "claim", Kind.PRINTED),
        FactDefinition("claim.words", "claim", Kind.TEXT),
    )
)
SHARE = "[[Zeros are {outcome.zero_share|share} of the rows. || The share of zeros is not known.]]"


def rendered(template, **values):
    return render(template, {name.replace("__", "."): value for name, value in values.items()}.get)


def test_a_known_fact_is_filled_in_and_an_unknown_one_gives_way():
    assert rendered(SHARE, outcome__zero_share=0.31) == "Zeros are 31 % of the rows."
    assert rendered(SHARE) == "The share of zeros is not known."


@pytest.mark.parametrize("value", [None, NOT_STATED, math.nan, math.inf, ()])
def test_what_cannot_be_shown_gives_way(value):
    assert rendered(SHARE, outcome__zero_share=value) == "The share of zeros is not known."


def test_a_part_without_alternative_vanishes_with_its_blank():
    assert rendered("Errors are clustered[[ by {claim.words}]].", claim__words=None) == "Errors are clustered."
    assert rendered("One [[ {claim.words} ]] .") == "One."


def test_the_first_alternative_whose_facts_are_known_is_taken():
    template = "[[{a} and {b} || {a} alone || neither]]"
    assert rendered(template, a="x", b="y") == "x and y"
    assert rendered(template, a="x") == "x alone"
    assert rendered(template, b="y") == "neither"


def test_values_are_never_read_as_templates():
    assert (
        rendered("[[{claim.words}]]", claim__words="{claim.percent|percent} [[x]]") == "{claim.percent|percent} [[x]]"
    )


def test_printed_figures_keep_their_digits():
    assert rendered("[[{claim.percent|percent}]]", claim__percent=read_printed("46.0")) == "46.0 %"


@given(st.floats())
def test_no_number_renders_badly(number):
    shown = rendered(SHARE, outcome__zero_share=number)
    assert "nan" not in shown
    assert "-0 %" not in shown
    assert "-0.0" not in shown.replace("-0.00", "")


@pytest.mark.parametrize(
    ("template", "said"),
    [
        ("Zeros: {outcome.zero_share|share}.", r"stands outside of double brackets.*Write \[\["),
        ("[[{outcome.zeroshare|share}]]", "The closest are: outcome.zero_share"),
        ("[[{outcome.zero_share|percents}]]", "there is no formatter `percents`"),
        ("[[{claim.words|percent}]]", "claim.words is not a number"),
        ("[[{outcome.zero_share!r}]]", "misspelt"),
        ("[[{outcome.zero_share.real.__class__}]]", "there is no fact|misspelt"),
        ("[[{0}]]", "there is no fact"),
        ("[[open", "not closed"),
        ("close]]", "not closed"),
        ("{", "not closed"),
        ("[[{setting.many|number}]]", "there is no setting"),
    ],
)
def test_a_text_that_could_show_a_placeholder_is_refused(template, said):
    with pytest.raises(Refusal, match=said):
        check_template(template, VOCABULARY, {"few": 40.0}, "a-rule.toml, says")


def test_settings_may_stand_anywhere():
    assert (
        check_template("Fewer than {setting.few|number}.", VOCABULARY, {"few": 40.0}, "")
        == "Fewer than {setting.few|number}."
    )
    assert render("Fewer than {setting.few|number}.", {"setting.few": 40.0}.get) == "Fewer than 40."


def test_placeholders_are_listed_once():
    assert placeholders("[[{a} {b|share} || {a}]]") == ("a", "b")


def test_sentences_split_at_full_stops_not_at_decimals():
    assert list(sentences("It is 0.5. We ask: why? No more")) == ["It is 0.5.", "We ask: why?", "No more"]
