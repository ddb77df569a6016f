"""A rule file that cannot be used gives one message in the file's own terms; house folders add, replace and silence."""

import re
import time
from pathlib import Path

import pytest
from rule_examples import BOOK, RULES

from reviewkit.decisions import ending
from reviewkit.refusals import Refusal
from reviewkit.rulefiles import read_rule_book
from reviewkit.rules import Importance, State

GOOD = """
title = "A house rule"
subject = "model"
importance = "minor"
applies = "outcome.transform != 'none'"
when = "outcome.zero_share > 0.5"
says = "Most values of the outcome are zero."
why = "A log then keeps few of them."
best_case = "Zeros may be rare in the part that matters."
request = "We ask for the share of zeros."
short = "Most values are zero."
clear = "Most values are above zero."
basis = "common practice, no source"

[[facts]]
name = "house.fact"
about = "model"
kind = "yes or no"
question = "Is this a fact of the house?"
found_in = "script"
explains = "It is."

[usual]
outcome.transform = "log"

[[examples]]
state = "raised"
facts = { outcome.zero_share = 0.6 }
"""


def house(tmp_path: Path, text: str, name: str = "mean/house-rule.toml") -> Path:
    path = tmp_path / name
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(text, encoding="utf-8")
    return tmp_path


def read(tmp_path, text, name="mean/house-rule.toml"):
    return read_rule_book(RULES, (house(tmp_path, text, name),))


def test_a_house_rule_joins_its_topic_and_may_bring_facts(tmp_path):
    book = read(tmp_path, GOOD)
    rule = book.rule("house-rule")
    assert (rule.topic, rule.importance) == ("mean", Importance.MINOR)
    assert "house.fact" in book.vocabulary
    assert ending(rule, rule.examples[0], book) == (State.RAISED, Importance.MINOR)
    assert len(book.rules) == len(BOOK.rules) + 1


def test_a_house_rule_of_the_same_name_replaces(tmp_path):
    book = read(tmp_path, GOOD, "inference/few-clusters.toml")
    assert book.rule("few-clusters").title == "A house rule"
    assert len(book.rules) == len(BOOK.rules)


def test_a_house_can_silence_a_rule(tmp_path):
    book = read(tmp_path, "silenced = true\n", "inference/few-clusters.toml")
    assert "few-clusters" not in {rule.name for rule in book.rules}


def test_a_house_can_set_thresholds(tmp_path):
    text = '[few_clusters]\nvalue = 30\nunit = "clusters"\norigin = "common practice, no source"\n'
    book = read(tmp_path, text, "settings.toml")
    assert book.settings["few_clusters"].value == 30
    rule = book.rule("few-clusters")
    known = {"errors.clusters": 35.0, "clusters.smaller_arm": 12.0, "errors.correction": "none"}
    assert rule.when.decide(known.get) is False
    assert BOOK.rule("few-clusters").when.decide(known.get) is True


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ('title = "A house rule"\n', "", "`title` is missing"),
        ("why =", "wy =", "there is no key `wy`. Allowed: title"),
        ('importance = "minor"', 'importance = "grave"', "`grave` is no importance. Allowed: major, minor"),
        ('subject = "model"', 'subject = "modell"', "`modell` is no subject. Allowed: study, data, model, claim"),
        ("outcome.zero_share > 0.5", "outcome.zeros > 0.5", ", when: in `outcome.zeros > 0.5`"),
        ("!= 'none'", "!= 'non'", ", applies: in `outcome.transform != 'non'`: 'non' is no option"),
        ("outcome.transform !=", "outcome.transfrom !=", "The closest are: outcome.transform"),
        ("Most values of", "{outcome.zero_share|share} of", ", says: {outcome.zero_share} stands outside"),
        ("Most values of", "[[{outcome.zero_share|shre}]] of", "there is no formatter `shre`"),
        ('basis = "common practice, no source"', "", "a rule rests on works or on common practice"),
        ('basis = "common practice, no source"', 'basis = "I say so"', "a rule rests on works or on common practice"),
        (
            'basis = "common practice, no source"',
            '[[references]]\nid = "nobody2020"',
            "`nobody2020` is not in references",
        ),
        ('state = "raised"', 'state = "lifted"', "example 1: `lifted` is no state. Allowed: raised, clear, open"),
        ("zero_share = 0.6", "zero_shar = 0.6", "example 1: there is no fact outcome.zero_shar"),
        (
            "zero_share = 0.6",
            "zero_share = 1.6",
            "example 1: `1.6` is no value of outcome.zero_share. Allowed: a number from 0",
        ),
        ("zero_share = 0.6", 'zero_share = "many"', "example 1: `many` is not a number"),
        (
            'outcome.transform = "log"\n',
            'outcome.transform = "lg"\n',
            "example 1: `lg` is no value of outcome.transform",
        ),
        ('kind = "yes or no"', 'kind = "maybe"', "fact house.fact: `maybe` is no kind. Allowed: one of, some of"),
        (
            'found_in = "script"',
            'found_in = "attic"',
            "fact house.fact: `attic` is no found_in. Allowed: methods section",
        ),
        ('found_in = "script"', "", "fact house.fact: a question needs a place"),
        ('about = "model"', 'about = "house"', "fact house.fact: `house` is no subject"),
        ('explains = "It is."', 'explanation = "It is."', "fact house.fact: there is no key `explanation`"),
        ('title = "A house rule"', "title = 3", "`title` is not a text"),
        ('title = "A house rule"', "title = A house rule", "this is not TOML: "),
        ("[[facts]]", "[facts]", "`facts` is not a list of tables. Allowed: [[facts]]"),
        ('importance = "minor"', 'importance = "minor"\ncovered_by = ["few-clster"]', "there is no rule `few-clster`"),
        ('importance = "minor"', 'importance = "minor"\ncovered_by = "few-clusters"', "is not a list of names"),
        ("[[examples]]", "[examples]", "`examples` is not a list of tables"),
        ("outcome.zero_share > 0.5", "outcome.zero_share > setting.half", "there is no setting of that name"),
        ("outcome.zero_share > 0.5", "(" * 30 + "outcome.zero_share" + ")" * 30 + " > 0.5", "nested too deeply"),
        ("Most values of the outcome", "Most \x00", "this is not TOML"),
    ],
)
def test_a_bad_rule_file_gives_one_message_in_its_own_terms(tmp_path, old, new, said):
    assert old in GOOD
    with pytest.raises(Refusal, match=re.escape(said)) as refused:
        read(tmp_path, GOOD.replace(old, new, 1))
    assert refused.value.message().startswith("mean/house-rule.toml")
    assert "\n" not in refused.value.message()
    assert str(tmp_path) not in refused.value.message()


def test_a_work_whose_text_was_not_read_cannot_show_anything(tmp_path):
    text = GOOD.replace(
        'basis = "common practice, no source"', '[[references]]\nid = "duan1983smearing"\nuse = "shows"'
    )
    with pytest.raises(Refusal, match="was not read, so it cannot be said to show anything"):
        read(tmp_path, text)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("few_clusters = 30", "setting few_clusters has no number"),
        ('[few_clusters]\nvalue = "30"', "setting few_clusters has no number"),
        ('[few_clusters]\nvalue = 30\nunit = "clusters"', "does not say where it comes from"),
        ('[few_clusters]\nvalue = 30\nsource = "x"', "there is no key `source`"),
    ],
)
def test_a_bad_setting_is_named(tmp_path, text, said):
    with pytest.raises(Refusal, match=said):
        read(tmp_path, text, "settings.toml")


@pytest.mark.parametrize(
    "text", ["{", "[1]", '{"id": "x"}', '[{"id": "x"}]', '[{"id": "x", "title": "T", "author": [{}]}]']
)
def test_a_bad_list_of_works_is_named(tmp_path, text):
    with pytest.raises(Refusal, match=r"references\.json: ") as refused:
        read(tmp_path, text, "references.json")
    assert "\n" not in refused.value.message()


def test_bytes_that_are_no_text_are_refused(tmp_path):
    folder = house(tmp_path, GOOD)
    (folder / "mean/house-rule.toml").write_bytes(b"title = '\xff\xfe'")
    with pytest.raises(Refusal, match="this is not TOML"):
        read_rule_book(RULES, (folder,))


def test_reading_without_examples_gives_the_same_rules():
    short = read_rule_book(RULES, examples=False)
    assert not any(rule.examples for rule in short.rules)
    assert [(rule.name, rule.when, rule.says, rule.references) for rule in short.rules] == [
        (rule.name, rule.when, rule.says, rule.references) for rule in BOOK.rules
    ]
    assert short.vocabulary == BOOK.vocabulary


def test_examples_stand_last(tmp_path):
    last = '\n[[references]]\nid = "duan1983smearing"\n'
    with pytest.raises(Refusal, match="examples stand at the end"):
        read(tmp_path, GOOD.replace('basis = "common practice, no source"', "") + last)


def test_the_whole_book_is_read_at_once():
    best = min(_seconds(lambda: read_rule_book(RULES, examples=False)) for _ in range(5))
    assert best < 0.15


def _seconds(work):
    start = time.process_time()
    work()
    return time.process_time() - start
