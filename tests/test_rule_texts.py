"""The texts of rules are neutral, plain, and whole at any facts."""

import re
import tomllib
from functools import partial

import pytest
from rule_examples import BOOK, RULES, case

from reviewkit.facts import NOT_STATED
from reviewkit.placeholders import placeholders, render, sentences
from reviewkit.printed import read_printed
from reviewkit.references import Use
from reviewkit.vocabulary import Kind, Place

TEXTS = ("title", "says", "why", "best_case", "request", "way", "short", "stands", "clear")
EVERY_TEXT = pytest.mark.parametrize(
    ("rule", "key"),
    [(rule, key) for rule in BOOK.rules for key in TEXTS if getattr(rule, key)],
    ids=lambda each: each if isinstance(each, str) else each.name,
)

# Words that accuse, order, mock, or guess at motives and persons.
BARRED = re.compile(
    r"\b(fail(ed|s|ure)?|wrong(ly)?|mistake\w*|should|must|ought|have to|neglect\w*|ignor\w+|overlook\w*|obvious\w*"
    r"|clearly|of course|simply|merely|unfortunate\w*|flaw\w*|invalid|careless\w*|mislead\w*|hid(e|den|es)?|conceal\w*"
    r"|inappropriate\w*|incorrect\w*|bad(ly)?|poor(ly)?|naive\w*|sloppy|problematic|suspicious\w*|manipulat\w*|cherry\w*"
    r"|claimed to|pretend\w*|admit\w*|refus\w+|violat\w*|the authors?|you|please|cannot be trusted|unacceptable"
    r"|reject the paper|he|she|his|her)\b",
    re.IGNORECASE,
)
ORDERS = re.compile(
    r"^(use|report|show|add|give|provide|state|explain|replace|include|consider|justify|clarify|correct|revise|drop|test"
    r"|estimate|do|avoid|remove|rewrite|repeat|check|note)\b",
    re.IGNORECASE,
)
BADLY_SHOWN = re.compile(
    r"\bnan\b|\binf\b|\b1 (rows|clusters|values)\b|(?<![\d.])-0(\.0*)?(?![.\d])|[{}]|\[\[|\]\]|\|\||  | [.,;:]"
)
NUMBERS = (0.0, -0.0, 1.0, -1.0, 1e-12, -1e-9, -0.0004, 0.5, 1e12, -1e12, 1e300, float("nan"), float("inf"))


@EVERY_TEXT
def test_no_text_accuses_orders_or_guesses_motives(rule, key):
    words = getattr(rule, key)
    assert not BARRED.search(words), BARRED.search(words)
    for part in re.split(r"\[\[|\|\||\]\]|(?<=[.?!:])\s", words):
        assert not ORDERS.match(part.strip()), part


@EVERY_TEXT
def test_sentences_are_short_enough_for_a_reader_in_a_second_language(rule, key):
    for sentence in sentences(shown(rule, key, plain_value)):
        assert len(sentence.split()) <= 40, sentence


@EVERY_TEXT
def test_texts_end_as_sentences_and_titles_do_not(rule, key):
    text = shown(rule, key, plain_value)
    assert text[0].isupper()
    assert text.endswith(".") is (key != "title")


@EVERY_TEXT
def test_a_text_is_whole_at_extreme_facts(rule, key):
    for number in NUMBERS:
        text = shown(rule, key, partial(extreme_value, number=number))
        assert not BADLY_SHOWN.search(text), text


@EVERY_TEXT
def test_a_text_is_whole_where_facts_are_unknown(rule, key):
    names = placeholders(getattr(rule, key))
    for unknown in (None, NOT_STATED):
        for gap in (names, *((name,) for name in names)):
            text = shown(rule, key, plain_value, dict.fromkeys(gap, unknown))
            assert text
            assert not BADLY_SHOWN.search(text), text
            assert text[0].isupper()


@pytest.mark.parametrize("rule", BOOK.rules, ids=lambda rule: rule.name)
def test_a_raised_example_is_told_whole(rule):
    for example in rule.examples:
        lookup = BOOK.lookup(case(example.facts), f"{rule.subject}:example" if rule.subject != "study" else "study")
        for key in TEXTS:
            assert not BADLY_SHOWN.search(render(getattr(rule, key), lookup))


@pytest.mark.parametrize("rule", BOOK.rules, ids=lambda rule: rule.name)
def test_requests_ask_and_clear_rules_say_what_was_seen(rule):
    assert re.search(r"\bwe ask\b|^No change is asked", rule.request, re.IGNORECASE)
    assert rule.clear
    assert bool(rule.stands) is (rule.stands_when is not None)
    assert rule.title[0].isupper()
    assert len(rule.title.split()) <= 12
    assert len(rule.short.split()) <= 45


@pytest.mark.parametrize("rule", BOOK.rules, ids=lambda rule: rule.name)
def test_a_rule_rests_on_works_that_exist_or_says_common_practice(rule):
    assert bool(rule.references) is not bool(rule.basis)
    for each in rule.references:
        assert each.id in BOOK.references
        assert each.use is Use.SEE or BOOK.references[each.id].text_seen


def test_no_work_is_kept_that_nothing_cites():
    used = {each.id for rule in BOOK.rules for each in rule.references} | {
        each.origin for each in BOOK.settings.values()
    }
    assert set(BOOK.references) <= used


def test_every_setting_has_an_origin_and_a_use():
    texts = " ".join(condition.text for rule in BOOK.rules for condition in rule.conditions)
    texts += " ".join(getattr(rule, key) for rule in BOOK.rules for key in TEXTS)
    for setting in BOOK.settings.values():
        assert setting.unit
        assert setting.origin in {*BOOK.references, "common practice, no source"}
        assert f"setting.{setting.name}" in texts


def test_every_question_says_what_it_means_and_where_to_look():
    for definition in BOOK.vocabulary:
        assert definition.label
        if definition.asked:
            assert definition.question.endswith("?")
            assert definition.found_in is not Place.NOWHERE
            assert definition.explains
            assert len(list(sentences(definition.explains))) <= 2
            assert len(definition.question.split()) <= 25


def test_rule_files_carry_no_code_names_and_their_stem_is_a_slug():
    for path in RULES.glob("*/*.toml"):
        assert re.fullmatch(r"[a-z]+(-[a-z]+)*", path.stem)
        assert "code" not in tomllib.loads(path.read_text(encoding="utf-8"))


def test_a_difference_is_told_in_the_words_that_its_bounds_allow():
    rule = BOOK.rule("difference-not-settled")
    bounds = {"refit.agree_within_percent": 12.0, "refit.scale_in_words": "log ratio of means"}
    apart = {
        **bounds,
        "refit.relative_in_words": "about 4 % larger than the first, with a 95 % interval of 1.0 to 12 %",
    }
    assert render(rule.says, apart.get) == (
        "Your model and a model of the mean differ: taking the two in this order, the second is about 4 % larger than "
        "the first, with a 95 % interval of 1.0 to 12 %."
    )
    nothing = {**bounds, "refit.no_difference_found": "no sign of a difference"}
    assert "no sign of a difference" in render(rule.says, nothing.get)
    assert "no sign" not in render(rule.says, bounds.get)
    assert render(rule.clear, bounds.get).endswith("the data bound it at 12 %.")
    assert (
        render(rule.says, {}.get)
        == "The data say little about a difference between your model and a model of the mean."
    )


def shown(rule, key, value_of, instead=None):
    """The text with a value for each fact it names."""
    names = [name for name in placeholders(getattr(rule, key)) if not name.startswith("setting.")]
    values = {name: value_of(BOOK.vocabulary[name]) for name in names} | (instead or {})
    settings = {f"setting.{name}": setting.value for name, setting in BOOK.settings.items()}
    return render(getattr(rule, key), {**settings, **values}.get)


def plain_value(definition):
    return extreme_value(definition, 0.31)


def extreme_value(definition, number):
    match definition.kind:
        case Kind.NUMBER:
            return number if definition.low is None else max(number, float(definition.low))
        case Kind.PRINTED:
            return read_printed(f"{number:.2f}" if abs(number) < 1e9 else "0.00")
        case Kind.SOME:
            return definition.options[:2]
        case Kind.NAMES:
            return ("village", "year")
        case Kind.ONE | Kind.ANSWER:
            return definition.options[-1]
        case Kind.TEXT:
            return "euros"
