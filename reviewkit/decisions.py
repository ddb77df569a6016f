"""Derives, decides every rule for every subject, finds disagreements, and picks the next question."""

from dataclasses import dataclass

from reviewkit.facts import Fact, Facts
from reviewkit.rules import Finding, RuleBook
from reviewkit.vocabulary import FactDefinition


@dataclass(frozen=True, slots=True)
class Disagreement:
    """Facts of one name and subject that say different things, weightiest last."""

    name: str
    subject: str
    facts: tuple[Fact, ...]


@dataclass(frozen=True, slots=True)
class Question:
    """A fact worth asking for, and the rules that wait on it."""

    definition: FactDefinition
    subject: str
    waiting: tuple[str, ...]
    """Names of the rules whose state the answer can still change."""


def decide(facts: Facts, book: RuleBook) -> tuple[Finding, ...]:
    """Every rule's finding for every subject of its kind, facts derived first."""
    raise NotImplementedError


def disagreements(facts: Facts) -> tuple[Disagreement, ...]:
    """Where stated, done and settled facts differ."""
    raise NotImplementedError


def next_question(facts: Facts, book: RuleBook) -> Question | None:
    """The fact to ask for next, or None where no answer can change a state any more."""
    raise NotImplementedError
