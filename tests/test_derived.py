"""Facts that follow from others, against figures worked out by hand or by an independent way."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from rule_examples import SUBJECT, case

from reviewkit.derived import DERIVATIONS, derive, needs
from reviewkit.facts import NOT_STATED, Fact, Source, SourceKind, Standing
from reviewkit.printed import read_printed

P = read_printed


def derived(name, **values):
    facts = derive(case({key.replace("__", "."): value for key, value in values.items()}))
    fact = facts.known(name, SUBJECT["claim"])
    return None if fact is None else fact.value


def test_percent_of_a_coefficient():
    assert derived("claim.percent_of_coefficient", claim__coefficient=P("0.38")) == pytest.approx(38)
    assert derived("claim.percent_exact", claim__coefficient=P("0.38")) == pytest.approx(46.2284589, abs=1e-6)
    assert derived("claim.percent_exact", claim__coefficient=P("-0.38")) == pytest.approx(-31.6138591, abs=1e-6)
    assert derived("claim.percent_exact", claim__coefficient=P("0")) == 0


@pytest.mark.parametrize(
    ("coefficient", "percent", "read_off", "exact"),
    [
        ("0.38", "38", "yes", "no"),
        ("0.38", "46", "no", "yes"),
        ("0.38", "46.2", "no", "yes"),  # 0.375 to 0.385 gives 45.5 to 47.0
        ("0.380", "47", "no", "no"),  # 0.3795 to 0.3805 gives 46.15 to 46.30
        ("0.05", "5", "yes", "yes"),
        ("0.10", "10", "yes", "yes"),
        ("0.100", "10.0", "yes", "no"),  # 10.4 to 10.6
        ("-0.38", "38", "yes", "no"),  # a fall, printed without its sign
        ("-0.38", "-38", "yes", "no"),
        ("-0.38", "32", "no", "yes"),
        ("0.38", "-38", "no", "no"),
        ("0.4", "35", "yes", "no"),  # 0.35 to 0.45, edges touch
        ("0.4", "34", "no", "no"),
        ("12", "1200", "yes", "no"),
    ],
)
def test_a_stated_percent_against_both_readings(coefficient, percent, read_off, exact):
    given = {"claim__coefficient": P(coefficient), "claim__percent": P(percent)}
    assert derived("claim.percent_is_coefficient", **given) == read_off
    assert derived("claim.percent_is_exact", **given) == exact


@given(st.floats(-3, 3), st.integers(1, 4), st.integers(0, 2))
def test_a_percent_that_was_worked_out_rightly_is_always_recognised(b, digits, percent_digits):
    printed = {
        "claim__coefficient": P(f"{b:.{digits}f}"),
        "claim__percent": P(f"{100 * math.expm1(b):.{percent_digits}f}"),
    }
    assert derived("claim.percent_is_exact", **printed) == "yes"
    printed["claim__percent"] = P(f"{100 * b:.{percent_digits}f}")
    assert derived("claim.percent_is_coefficient", **printed) == "yes"


@pytest.mark.parametrize(
    ("percent", "low", "high", "inside"),
    [
        ("46", 4.0, 41.0, "no"),
        ("41", 4.0, 41.0, "yes"),
        ("41", 4.0, 40.6, "yes"),  # 40.5 to 41.5 rounds to 41
        ("41.0", 4.0, 40.6, "no"),
        ("3", 4.0, 41.0, "no"),
        ("4", 4.4, 41.0, "yes"),
        ("20", -5.0, 41.0, "yes"),
        ("-20", -5.0, 41.0, "no"),
    ],
)
def test_a_claimed_percent_and_the_alternatives_interval(percent, low, high, inside):
    given = {
        "claim__percent": P(percent),
        "refit__alternative_percent_low": low,
        "refit__alternative_percent_high": high,
    }
    assert derived("claim.inside_alternative", **given) == inside


def test_without_a_percent_the_printed_coefficients_reading_counts():
    assert derived("claim.inside_alternative", refit__printed_reading_inside="no") == "no"
    assert derived("claim.inside_alternative") is None
    assert derived("claim.inside_alternative", refit__printed_reading_inside=NOT_STATED) is NOT_STATED


def test_a_fall_printed_without_its_sign_is_held_against_a_negative_interval():
    given = {
        "refit__alternative_percent_low": -40.0,
        "refit__alternative_percent_high": -10.0,
        "claim__percent": P("32"),
    }
    assert derived("claim.inside_alternative", claim__coefficient=P("-0.38"), **given) == "yes"
    assert derived("claim.inside_alternative", claim__coefficient=P("0.38"), **given) == "no"


@pytest.mark.parametrize(
    ("given", "zeros"),
    [
        ({"outcome__zero_share": 0.0}, "no"),
        ({"outcome__zero_share": 1e-6}, "yes"),
        ({"outcome__zero_share": 0.3, "outcome__zeros": "none present"}, "yes"),
        ({"outcome__zeros": "none present"}, "no"),
        ({"outcome__zeros": "dropped"}, "yes"),
        ({"outcome__zeros": "constant added"}, None),  # many add a constant to what has no zeros
        ({"outcome__zeros": "kept"}, None),
        ({"outcome__zeros": NOT_STATED}, None),
        ({"outcome__zeros": NOT_STATED, "outcome__zero_share": NOT_STATED}, NOT_STATED),
        ({}, None),
    ],
)
def test_whether_the_outcome_has_zeros(given, zeros):
    assert derived("outcome.has_zeros", **given) == zeros


def test_the_smaller_arm_counts_the_side_with_fewer_clusters():
    assert derived("clusters.smaller_arm", refit__treated_clusters=30.0, refit__untreated_clusters=4.0) == 4
    assert derived("clusters.smaller_arm", refit__treated_clusters=30.0) is None


def test_agreement_on_the_data_lets_the_log_model_stand():
    assert derived("spread.steady", refit__conclusion="agrees") == "yes"
    assert derived("spread.steady", refit__conclusion="unsettled") is None


def test_scales_are_said_in_words():
    assert derived("refit.scale_in_words", refit__scale="log_ratio_of_means") == "log ratio of means"


def test_a_derived_fact_weighs_as_much_as_the_weakest_it_rests_on():
    weak = Fact(
        "claim.percent", P("38"), Standing.STATED, Source(SourceKind.MANUSCRIPT), "claim:example", confirmed=False
    )
    facts = derive(case({"claim.coefficient": P("0.38")}).adding((weak,)))
    fact = facts.known("claim.percent_is_coefficient", "claim:example")
    assert (fact.standing, fact.confirmed) == (Standing.STATED, False)
    assert fact.source == Source(SourceKind.DERIVED, "claim.coefficient, claim.percent")


def test_what_the_referee_settled_is_not_derived_anew():
    facts = case({"outcome.has_zeros": "no"})
    data = Fact("outcome.zero_share", 0.2, Standing.DONE, Source(SourceKind.EXHIBIT), "model:example")
    assert derive(facts.adding((data,))).known("outcome.has_zeros", "model:example").value == "no"


def test_data_outweigh_what_the_text_states():
    stated = case({"outcome.has_zeros": "no"}, Standing.STATED)
    data = Fact("outcome.zero_share", 0.2, Standing.DONE, Source(SourceKind.EXHIBIT), "model:example")
    assert derive(stated.adding((data,))).known("outcome.has_zeros", "model:example").value == "yes"


def test_deriving_twice_adds_nothing():
    once = derive(case({"claim.coefficient": P("0.38"), "claim.percent": P("38"), "outcome.zero_share": 0.2}))
    assert derive(once) == once


def test_each_derivation_says_what_it_needs_and_where_it_comes_from():
    for derivation in DERIVATIONS:
        assert needs(derivation.name) == derivation.needs
        assert derivation.work_out.__doc__
    assert needs("outcome.transform") == ()


def test_the_interval_of_a_percent_comes_from_the_printed_error():
    given = {"claim__coefficient": P("-0.342"), "claim__std_error": P("0.052")}
    assert derived("claim.percent_low", **given) == pytest.approx(100 * math.expm1(-0.342 - 1.959964 * 0.052))
    assert derived("claim.percent_high", **given) == pytest.approx(100 * math.expm1(-0.342 + 1.959964 * 0.052))
    assert derived("claim.percent_interval", **given) == "21 to 36 %"  # the sentence says that it is a fall
    given["claim__std_error"] = P("0.300")
    assert derived("claim.percent_interval", **given) == "-61 to 28 %"
    assert derived("claim.percent_low", claim__coefficient=P("-0.342"), claim__std_error=NOT_STATED) is NOT_STATED


def test_a_difference_is_told_by_size_direction_and_interval():
    given = {"refit__relative_percent": -70.0, "refit__relative_smallest": 52.0, "refit__relative_largest": 94.0}
    given |= {"refit__scale": "log_ratio_of_means", "refit__difference_excludes_zero": "yes", "refit__sign_turns": "no"}
    words = "about 70 % smaller than the first, compared in logs, with a 95 % interval of 52 to 94 %"
    assert derived("refit.relative_in_words", **given) == words
    assert "larger" in derived("refit.relative_in_words", **{**given, "refit__relative_percent": 70.0})
    without = {**given, "refit__relative_smallest": NOT_STATED}
    assert "interval" not in derived("refit.relative_in_words", **without)
    for other in ({"refit__sign_turns": "yes"}, {"refit__relative_percent": -130.0}):
        assert derived("refit.relative_in_words", **{**given, **other}) is None
    assert derived("refit.relative_in_words", **{**given, "refit__difference_excludes_zero": "no"}) is None


@pytest.mark.parametrize(
    ("coefficient", "percent", "words"),
    [("0.5", "51", "a rise of 51 %"), ("-0.34", "34", "a fall of 34 %"), ("-0.34", "-34", "a fall of 34 %")],
)
def test_a_stated_percent_has_a_direction(coefficient, percent, words):
    assert derived("claim.percent_in_words", claim__coefficient=P(coefficient), claim__percent=P(percent)) == words


def test_the_alternatives_interval_leaves_the_direction_of_a_fall_to_the_sentence():
    def told(low, high):
        given = {"refit__alternative_percent_low": low, "refit__alternative_percent_high": high}
        return derived("refit.alternative_percent_interval", **given)

    assert (told(3.0, 33.0), told(-33.0, -3.0), told(-33.0, 3.0)) == ("3 to 33 %", "3 to 33 %", "-33 to 3 %")


def test_signs_of_both_estimates_are_told_as_one_sentence():
    same = {"refit__submitted": 0.5, "refit__alternative": 0.2}
    turned = {**same, "refit__alternative": -0.2}
    assert derived("refit.direction_holds", **same) == "both estimates are positive"
    assert derived("refit.signs_differ", **turned) == "the first is positive, the second negative"
    assert derived("refit.signs_differ", **same) is None
    assert derived("refit.direction_holds", **turned) is None
    assert derived("refit.direction_holds", **{**same, "refit__alternative": 0.0}) is None


def test_a_percent_is_named_a_hundred_times_the_coefficient_only_where_it_can_be_nothing_else():
    assert derived("claim.percent_reading", claim__coefficient=P("0.506"), claim__percent=P("51"))
    assert derived("claim.percent_reading", claim__coefficient=P("0.05"), claim__percent=P("5")) is None
    assert derived("claim.percent_reading", claim__coefficient=P("0.506"), claim__percent=P("66")) is None


def test_tests_of_both_forms_are_told_alike_and_a_lottery_keeps_the_ratio() -> None:
    both = {"form__alternative_p": 0.0004, "form__submitted_p": 0.4}
    told = derived("form.in_words", **both)
    assert told == (
        "a test speaks against the form of the model of the mean (p < 0.001) and does not speak against that of the "
        "submitted model (p = 0.40)"
    )
    assert "lottery" in derived("form.in_words", **both, assignment__random="yes")
    quiet = {**both, "form__alternative_p": 0.3, "assignment__random": "yes"}
    assert derived("form.in_words", **quiet).count("does not speak") == 2
    assert "lottery" not in derived("form.in_words", **quiet)
    assert derived("form.in_words", form__alternative_p=0.3) is None


def test_every_step_clearly_off_zero_is_told_and_the_rest_said_to_be_left_out() -> None:
    steps = {"step__weighting": 0.01, "step__zeros": -0.35, "step__amounts": -0.01, "step__constant": 0.006}
    off = {"step__weighting_off_zero": "no", "step__zeros_off_zero": "yes", "step__amounts_off_zero": "no"}
    told = derived("step.in_words", **steps, **off, step__constant_off_zero="yes")
    assert told == (
        "-0.350 from observations with a zero outcome and 0.00600 from what was added to the outcome; the other parts "
        "are not clearly off zero"
    )
    assert (
        derived("step.in_words", **steps, **{**off, "step__zeros_off_zero": "no"}, step__constant_off_zero="no") is None
    )
