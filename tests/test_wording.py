"""Values in words: digits, nouns, lists; never a word that a reader would stumble over."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from reviewkit.facts import NOT_STATED
from reviewkit.printed import read_printed
from reviewkit.wording import (
    FORMATTERS,
    clean,
    counted,
    estimate_with_error,
    interval,
    joined,
    p_value,
    sentence,
    signed_percent,
)


@pytest.mark.parametrize(
    ("formatter", "value", "words"),
    [
        ("percent", 21.3, "21 %"),
        ("percent", 4.24, "4.2 %"),
        ("percent", 9.96, "10 %"),
        ("percent", -0.04, "-0.040 %"),
        ("percent", 0.0, "0 %"),
        ("percent", read_printed("46 %"), "46 %"),
        ("percent", read_printed("46.0"), "46.0 %"),
        ("signed_percent", 21.3, "+21 %"),
        ("signed_percent", -4.2, "-4.2 %"),
        ("signed_percent", 0.0, "0 %"),
        ("size_percent", -4.2, "4.2 %"),
        ("share", 0.31, "31 %"),
        ("share", 0.004, "0.40 %"),
        ("count", 3412.0, "3,412"),
        ("rows", 1.0, "1 row"),
        ("rows", 3412.0, "3,412 rows"),
        ("clusters", 88.0, "88 clusters"),
        ("p", 0.0004, "p < 0.001"),
        ("p", 0.0324, "p = 0.032"),
        ("p", 0.324, "p = 0.32"),
        ("p", 0.999, "p > 0.99"),
        ("std_error", 0.1134, "0.11"),
        ("estimate", 0.3834, "0.383"),
        ("estimate", 1.2e-9, "1.20e-9"),
        ("estimate", 12345.6, "12,346"),
        ("direction", -0.2, "lower"),
        ("direction", 0.2, "higher"),
        ("sign", -0.2, "negative"),
        ("text", ("a", "b", "c"), "a, b and c"),
        ("text", "least squares", "least squares"),
        ("text", read_printed("0.10"), "0.10"),
    ],
)
def test_a_value_is_put_into_the_expected_words(formatter, value, words):
    assert FORMATTERS[formatter](value) == words


@pytest.mark.parametrize("name", list(FORMATTERS))
def test_what_is_not_stated_is_said_to_be_not_stated(name):
    assert FORMATTERS[name](NOT_STATED) == "not stated"


@pytest.mark.parametrize("name", list(FORMATTERS))
@given(value=st.one_of(st.floats(), st.integers().map(float), st.text(), st.tuples(st.text(), st.text())))
def test_no_formatter_fails_or_says_nan_or_negative_zero(name, value):
    words = FORMATTERS[name](value)
    if not isinstance(value, float):
        return
    assert "nan" not in words and "inf" not in words
    assert words not in {"-0", "-0.0", "-0.00", "-0 %", "-0.0 %", "1 rows", "1 clusters", "1 values"}


def test_the_error_sets_the_digits_of_the_estimate():
    assert estimate_with_error(0.3812, 0.1134) == "0.38 (0.11)"
    assert estimate_with_error(-0.0001, 0.1) == "0.00 (0.10)"
    assert estimate_with_error(1234.5, 220.0) == "1,234 (220)"
    assert estimate_with_error(2.0, float("nan")) == "2.00 (not available)"


def test_an_interval_has_the_same_digits_at_both_ends():
    assert interval(0.1634, 0.5966) == "0.16 to 0.60"
    assert interval(4.1, 41.2, "%") == "4 to 41 %"
    assert interval(-0.2, 0.9, "%") == "-0.2 to 0.9 %"
    assert interval(None, 3.0) == "not available"


def test_nouns_agree_with_their_number():
    assert [counted(n, "row") for n in (0, 1, 2)] == ["0 rows", "1 row", "2 rows"]
    assert counted(2, "study", "studies") == "2 studies"


def test_lists_and_sentences_read_as_english():
    assert joined(()) == "" and joined(("a",)) == "a" and joined(("a", "b"), "or") == "a or b"
    assert sentence("it holds") == "It holds." and sentence("Why?") == "Why?" and sentence("") == ""


def test_text_loses_control_characters_and_direction_marks_but_no_letters():
    assert clean("a\x00b\x1b[31m\u202ec\nd\tÄ–é") == "ab[31mc d Ä–é"


@given(st.floats(min_value=-1e6, max_value=1e6))
def test_a_signed_percent_shows_the_sign_of_what_it_shows(value):
    shown = signed_percent(value)
    assert shown.startswith("+") == (value > 0)


def test_a_p_value_never_rounds_to_zero_or_one():
    assert {p_value(0.0), p_value(1e-300)} == {"p < 0.001"}
    assert p_value(1.0) == "p > 0.99"
