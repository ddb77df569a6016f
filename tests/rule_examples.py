"""The rule book of the checkout, and cases made from the examples that its rules carry."""

from pathlib import Path

from reviewkit.conditions import Condition
from reviewkit.decisions import ending
from reviewkit.facts import STUDY, Fact, Facts, Source, SourceKind, Standing
from reviewkit.rulefiles import read_rule_book
from reviewkit.rules import Example, Rule

RULES = Path(__file__).parent.parent / "rules"
BOOK = read_rule_book(RULES)
SUBJECT = {"study": STUDY, "data": "data:example", "model": "model:example", "claim": "claim:example"}


def case(values, standing=Standing.SETTLED) -> Facts:
    """Facts by name, each about a subject of its kind; a claim sees its model, a model its data."""
    facts = Facts().linked("claim:example", "model:example").linked("model:example", "data:example")
    return facts.adding(
        Fact(name, value, standing, Source(SourceKind.ANSWER), SUBJECT[BOOK.vocabulary[name].about])
        for name, value in dict(values).items()
    )


def as_expected(rule: Rule, example: Example) -> bool:
    state, importance = ending(rule, example, BOOK)
    return state is example.state and example.importance in (None, importance)


def conditions_by_key(rule: Rule) -> dict[str, Condition]:
    keys = ("applies", "when", "stands_when", "major_when")
    return {key: condition for key in keys if (condition := getattr(rule, key)) is not None}
