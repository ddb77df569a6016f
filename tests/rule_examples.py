"""Cases made from the examples that rules carry."""

from pathlib import Path

from reviewkit.conditions import Condition
from reviewkit.decisions import importance_of, state_of
from reviewkit.derived import derive
from reviewkit.facts import STUDY, Fact, Facts, Source, SourceKind, Standing
from reviewkit.rulefiles import read_rule_book
from reviewkit.rules import Example, Importance, Rule, RuleBook, State

RULES = Path(__file__).parent.parent / "rules"
BOOK = read_rule_book(RULES)
SUBJECT = {"study": STUDY, "data": "data:example", "model": "model:example", "claim": "claim:example"}


def facts_of(example: Example, book: RuleBook = BOOK) -> Facts:
    """The example's facts, each about a subject of its kind; a claim sees its model, a model its data."""
    facts = Facts().linked("claim:example", "model:example").linked("model:example", "data:example")
    return facts.adding(
        Fact(name, value, Standing.SETTLED, Source(SourceKind.ANSWER), SUBJECT[book.vocabulary[name].about])
        for name, value in example.facts
    )


def outcome(rule: Rule, example: Example, book: RuleBook = BOOK) -> tuple[State, Importance]:
    """How the rule ends for the example."""
    lookup = book.lookup(derive(facts_of(example, book)), SUBJECT[rule.subject])
    return state_of(rule, lookup), importance_of(rule, lookup)


def as_expected(rule: Rule, example: Example, book: RuleBook = BOOK) -> bool:
    state, importance = outcome(rule, example, book)
    return state is example.state and example.importance in (None, importance)


def conditions_by_key(rule: Rule) -> dict[str, Condition]:
    keys = ("applies", "when", "stands_when", "major_when")
    return {key: condition for key in keys if (condition := getattr(rule, key)) is not None}
