"""Rules, the states they end in, and the book that holds them."""

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum

from reviewkit.clauses import Lookup
from reviewkit.conditions import Condition
from reviewkit.facts import STUDY, Fact, Facts, Value
from reviewkit.references import Citation, Work
from reviewkit.refusals import Refusal
from reviewkit.vocabulary import Vocabulary

TOPICS = ("claim", "outcome", "mean", "inference", "panel", "refit", "reporting", "not-covered")
"""The order in which topics are shown; a house may add its own after these."""


class State(StrEnum):
    """How a rule ends for one subject."""

    RAISED = "raised"
    CLEAR = "clear"
    OPEN = "open"  # facts missing: not looked at, or not stated
    NOT_APPLICABLE = "not applicable"


class Importance(StrEnum):
    """How much a raised point weighs."""

    MAJOR = "major"
    MINOR = "minor"


@dataclass(frozen=True, slots=True)
class Setting:
    """A threshold with its unit and where it comes from: a reference id, or `common practice, no source`."""

    name: str
    value: float
    unit: str
    origin: str


@dataclass(frozen=True, slots=True)
class Example:
    """Facts under which a rule must end in `state`."""

    facts: tuple[tuple[str, Value], ...]
    state: State
    importance: Importance | None = None


@dataclass(frozen=True, slots=True)
class Rule:
    """One point that may be raised; its texts are templates for `placeholders.render`."""

    name: str
    topic: str
    title: str
    subject: str
    importance: Importance
    applies: Condition
    when: Condition
    says: str
    """What was done, or what was found."""
    why: str
    """Why it may matter."""
    best_case: str
    """The case for the authors' choice."""
    request: str
    """What the authors are asked, as a neutral sentence."""
    short: str
    """The point in one line, for margins and lists."""
    way: str = ""
    """One way to do it."""
    stands_when: Condition | None = None
    stands: str = ""
    """Why the choice stands where `stands_when` is true: one sentence for what was looked at and not raised."""
    clear: str = ""
    """What was seen where the rule is clear because `when` is false."""
    major_when: Condition | None = None
    references: tuple[Citation, ...] = ()
    basis: str = ""
    """`common practice, no source` where no work is cited."""
    covered_by: tuple[str, ...] = ()
    """Names of rules that say as much: a note does not tell this one where one of them is raised about the same."""
    examples: tuple[Example, ...] = ()

    @property
    def conditions(self) -> tuple[Condition, ...]:
        """All its conditions."""
        every = (self.applies, self.when, self.stands_when, self.major_when)
        return tuple(condition for condition in every if condition is not None)


@dataclass(frozen=True, slots=True)
class Finding:
    """How a rule ended for a subject, what it rests on, and what it waits for."""

    rule: Rule
    subject: str
    state: State
    importance: Importance
    facts: tuple[Fact, ...] = ()
    """The known facts that its conditions name."""
    missing: tuple[str, ...] = ()
    """Names of facts that can still change the state: not known, or looked for and not stated."""
    reason: str = ""
    """Of a clear state: a finished sentence that says why; of an open one: what it waits for."""


@dataclass(frozen=True, slots=True)
class RuleBook:
    """All rules with what they need; rules stand in the order of topics, then names."""

    rules: tuple[Rule, ...]
    vocabulary: Vocabulary
    settings: Mapping[str, Setting]
    references: Mapping[str, Work]

    def rule(self, name: str) -> Rule:
        """The rule of that name."""
        for rule in self.rules:
            if rule.name == name:
                return rule
        raise Refusal(name, "there is no rule of that name")

    def lookup(self, facts: Facts, subject: str = STUDY) -> Lookup:
        """What conditions and texts look names up with: the facts that `subject` sees, and `setting.…`."""

        def find(name: str) -> Value | None:
            if name.startswith("setting."):
                return self.settings[name.removeprefix("setting.")].value
            fact = facts.known(name, subject)
            return None if fact is None else fact.value

        return find
