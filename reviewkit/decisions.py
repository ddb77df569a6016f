"""Derives, decides every rule for every subject, finds disagreements, and picks the next question."""

import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass

from reviewkit.clauses import Comparison, Literal, Lookup, Name
from reviewkit.derived import derive, needs
from reviewkit.facts import STUDY, Fact, Facts, NotStated, Source, SourceKind, Standing, Value
from reviewkit.placeholders import render
from reviewkit.printed import Printed
from reviewkit.rules import Example, Finding, Importance, Rule, RuleBook, State
from reviewkit.vocabulary import PLACES, FactDefinition, Kind
from reviewkit.wording import joined, sentence


@dataclass(frozen=True, slots=True)
class Disagreement:
    """Facts of one name and subject that say different things, weightiest last."""

    name: str
    subject: str
    facts: tuple[Fact, ...]

    @property
    def settled(self) -> bool:
        """Whether the referee has had the last word."""
        return self.facts[-1].standing is Standing.SETTLED


@dataclass(frozen=True, slots=True)
class Question:
    """A fact worth asking for, and the rules that wait on it."""

    definition: FactDefinition
    subject: str
    waiting: tuple[str, ...]
    """Names of the rules whose state the answer can still change."""


# --- findings ---------------------------------------------------------------------------------------------------


def decide(facts: Facts, book: RuleBook) -> tuple[Finding, ...]:
    """Every rule's finding for every subject of its kind, facts derived first, in the order of the book."""
    facts = derive(facts)
    return _decided(_sights(facts, book), book)


@dataclass(frozen=True, slots=True)
class _Sight:
    """What one subject sees; each name is looked up once for all rules."""

    subject: str
    lookup: Lookup
    fact: Callable[[str], Fact | None]


def _sights(facts: Facts, book: RuleBook) -> dict[str, tuple[_Sight, ...]]:
    """The sights of all subjects, by kind."""
    kinds = dict.fromkeys(rule.subject for rule in book.rules)
    return {kind: tuple(_sight(subject, facts, book) for subject in facts.subjects(kind)) for kind in kinds}


def _sight(subject: str, facts: Facts, book: RuleBook) -> _Sight:
    seen: dict[str, Fact | None] = {}

    def fact(name: str) -> Fact | None:
        if name not in seen:
            seen[name] = facts.known(name, subject)
        return seen[name]

    return _Sight(subject, remembering(book.lookup(facts, subject)), fact)


def _decided(sights: Mapping[str, Sequence[_Sight]], book: RuleBook) -> tuple[Finding, ...]:
    return tuple(_finding(rule, sight, book) for rule in book.rules for sight in sights[rule.subject])


def _finding(rule: Rule, sight: _Sight, book: RuleBook) -> Finding:
    lookup = sight.lookup
    state = state_of(rule, lookup)
    names = dict.fromkeys(name for condition in rule.conditions for name in condition.names)
    missing = missing_from(rule, lookup) if state is State.OPEN else ()
    return Finding(
        rule=rule,
        subject=sight.subject,
        state=state,
        importance=importance_of(rule, lookup),
        facts=tuple(fact for name in names if (fact := sight.fact(name)) is not None),
        missing=missing,
        reason=_reason(rule, lookup, state, [book.vocabulary[name] for name in missing]),
    )


def remembering(lookup: Lookup) -> Lookup:
    """The same lookup, asking only once for each name."""
    seen: dict[str, Value | None] = {}

    def find(name: str) -> Value | None:
        if name not in seen:
            seen[name] = lookup(name)
        return seen[name]

    return find


def state_of(rule: Rule, lookup: Lookup) -> State:
    """Open where a condition that counts is unknown; the authors' choice may stand although `when` is true."""
    applies = rule.applies.decide(lookup)
    if applies is not True:
        return State.OPEN if applies is None else State.NOT_APPLICABLE
    stands = rule.stands_when.decide(lookup) if rule.stands_when else False
    when = rule.when.decide(lookup)
    if stands or when is False:
        return State.CLEAR
    return State.RAISED if when and stands is False else State.OPEN


def importance_of(rule: Rule, lookup: Lookup) -> Importance:
    """The rule's importance, major where `major_when` is true."""
    return Importance.MAJOR if rule.major_when and rule.major_when.decide(lookup) else rule.importance


def missing_from(rule: Rule, lookup: Lookup) -> tuple[str, ...]:
    """The facts that can still change the state of an open rule; first of all those that tell whether it applies."""
    parts = [rule.when, *([rule.stands_when] if rule.stands_when else [])]
    if rule.applies.decide(lookup) is None:
        parts = [rule.applies]
    return tuple(dict.fromkeys(name for part in parts for name in part.missing(lookup)))


_REFIT = "a re-estimation from the data"


def _reason(rule: Rule, lookup: Lookup, state: State, missing: Sequence[FactDefinition]) -> str:
    if state is State.OPEN:
        waits = joined(dict.fromkeys(_REFIT if each.name.startswith("refit.") else each.label for each in missing))
        return sentence(f"waits on: {waits}") if waits else "What is known does not decide it."
    if state is not State.CLEAR:
        return ""
    stands = rule.stands_when is not None and rule.stands_when.decide(lookup) and rule.when.decide(lookup) is not False
    return render(rule.stands if stands else rule.clear, lookup)


def ending(rule: Rule, example: Example, book: RuleBook) -> tuple[State, Importance]:
    """How a rule ends for one of its examples: what `rules check` and the tests hold against the stated ending."""
    subjects = {"study": STUDY, **{kind: f"{kind}:example" for kind in ("data", "model", "claim")}}
    facts = Facts().linked(subjects["claim"], subjects["model"]).linked(subjects["model"], subjects["data"])
    given = (
        Fact(name, value, Standing.SETTLED, Source(SourceKind.ANSWER), subjects[book.vocabulary[name].about])
        for name, value in example.facts
    )
    lookup = remembering(book.lookup(derive(facts.adding(given)), subjects[rule.subject]))
    return state_of(rule, lookup), importance_of(rule, lookup)


# --- disagreements ----------------------------------------------------------------------------------------------


def disagreements(facts: Facts) -> tuple[Disagreement, ...]:
    """Where the latest stated, done and settled facts of one name and subject differ; derived facts left out."""
    latest: dict[tuple[str, str], dict[Standing, Fact]] = {}
    for fact in facts:
        if fact.source.kind is not SourceKind.DERIVED and not isinstance(fact.value, NotStated):
            latest.setdefault((fact.name, fact.subject), {})[fact.standing] = fact
    return tuple(
        Disagreement(name, subject, tuple(found[standing] for standing in Standing if standing in found))
        for (name, subject), found in latest.items()
        if not _all_agree(tuple(found.values()))
    )


def _all_agree(found: tuple[Fact, ...]) -> bool:
    return all(agree(one.value, other.value) for place, one in enumerate(found) for other in found[place + 1 :])


def agree(one: Value, other: Value) -> bool:
    """Whether two values say the same; a printed figure agrees with every number that rounds to it."""
    match one, other:
        case Printed(), Printed():
            return one.agrees(other.value) or other.agrees(one.value)
        case (Printed() as printed, float(number)) | (float(number), Printed() as printed):
            return printed.agrees(number)
        case float(), float():
            return math.isclose(one, other, rel_tol=1e-9, abs_tol=1e-12)
        case tuple(), tuple():
            return set(one) == set(other)
        case _:
            return one == other


# --- the next question ------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Wait:
    """A rule, open for one subject, that waits on a fact which can be asked for."""

    rule: Rule
    sight: _Sight
    definition: FactDefinition
    subject: str
    """The subject that the fact is about."""
    name: str
    """What the rule's conditions call it: the fact itself, or one that is worked out from it."""


def next_question(facts: Facts, book: RuleBook) -> Question | None:
    """The fact to ask for next, or None where no answer can change a state any more.

    The topic in which most findings are open comes first; within it, questions follow the places where answers are
    found, since looking up costs more than answering.
    """
    facts = derive(facts)
    sights = _sights(facts, book)
    pairs = ((rule, sight) for rule in book.rules for sight in sights[rule.subject])
    waits = [wait for rule, sight in pairs for wait in _waits(rule, sight, facts, book)]
    for topic in _topics(waits, book, facts):
        for group in _questions([wait for wait in waits if wait.rule.topic == topic], book):
            definition, subject = group[0].definition, group[0].subject
            same = [wait for wait in waits if (wait.definition, wait.subject) == (definition, subject)]
            waiting = dict.fromkeys(wait.rule.name for wait in same if _can_change(wait))
            if waiting:
                return Question(definition, subject, tuple(waiting))
    return None


def _waits(rule: Rule, sight: _Sight, facts: Facts, book: RuleBook) -> Iterator[_Wait]:
    """What an open rule should ask for first; a fact that is only worked out stands for what it needs."""
    if state_of(rule, sight.lookup) is not State.OPEN:
        return
    for name in _first_missing(rule, sight.lookup):
        for asked in _askable(name, sight.lookup, book):
            definition = book.vocabulary[asked]
            subject = _subject_of(definition, sight.subject, facts)
            if subject:
                yield _Wait(rule, sight, definition, subject, name)


def _first_missing(rule: Rule, lookup: Lookup) -> tuple[str, ...]:
    """What decides whether the rule applies comes before what it finds, and that before why a choice may stand."""
    if rule.applies.decide(lookup) is None:
        return rule.applies.first_missing(lookup)
    found = rule.when.first_missing(lookup)
    return found or (rule.stands_when.first_missing(lookup) if rule.stands_when else ())


def _askable(name: str, lookup: Lookup, book: RuleBook) -> tuple[str, ...]:
    if book.vocabulary[name].asked:
        return (name,)
    unknown = (need for need in needs(name) if lookup(need) is None)
    return tuple(need for need in unknown if book.vocabulary[need].asked)


def _subject_of(definition: FactDefinition, subject: str, facts: Facts) -> str | None:
    """The nearest subject in sight that the fact can be about."""
    in_sight = (each for level in facts.sight(subject) for each in level)
    return next((each for each in in_sight if each.partition(":")[0] == definition.about), None)


def _topics(waits: Sequence[_Wait], book: RuleBook, facts: Facts) -> list[str]:
    """Topics by the number of rules that wait on an answer, most first; a topic once begun is finished first."""
    begun = _begun(book, facts)
    counted = dict.fromkeys(dict.fromkeys(rule.topic for rule in book.rules), 0)
    for topic, _, _ in {(wait.rule.topic, wait.rule.name, wait.sight.subject) for wait in waits}:
        counted[topic] += 1
    return sorted(
        (topic for topic in counted if counted[topic]), key=lambda topic: (topic not in begun, -counted[topic])
    )


def _begun(book: RuleBook, facts: Facts) -> set[str]:
    """The topics that the latest answer belongs to."""
    answers = [
        fact.name for fact in facts if fact.source.kind is SourceKind.ANSWER and fact.standing is Standing.SETTLED
    ]
    latest = answers[-1] if answers else ""
    return {
        rule.topic
        for rule in book.rules
        for condition in rule.conditions
        for name in condition.names
        if latest == name or latest in needs(name)
    }


def _questions(waits: Sequence[_Wait], book: RuleBook) -> list[list[_Wait]]:
    """Waits on one fact together: by place, then by how many wait, then in the vocabulary's order."""
    order = {definition.name: place for place, definition in enumerate(book.vocabulary)}
    groups: dict[tuple[str, str], list[_Wait]] = {}
    for wait in waits:
        groups.setdefault((wait.definition.name, wait.subject), []).append(wait)
    key: Callable[[list[_Wait]], tuple[int, int, int]] = lambda group: (  # noqa: E731
        PLACES.index(group[0].definition.found_in),
        -len(group),
        order[group[0].definition.name],
    )
    return sorted(groups.values(), key=key)


def _can_change(wait: _Wait) -> bool:
    """Whether some answer changes the rule's state, or what it then waits on; true where that is hard to tell."""
    if wait.name != wait.definition.name or _compared_with_another(wait.rule, wait.name):
        return True
    others = set(missing_from(wait.rule, wait.sight.lookup)) - {wait.name}
    for value in _candidates(wait.definition, wait.rule):
        answered = _answered(wait.sight.lookup, wait.name, value)
        state = state_of(wait.rule, answered)
        if state is not State.OPEN or set(missing_from(wait.rule, answered)) != others:
            return True
    return False


def _answered(lookup: Lookup, name: str, value: Value) -> Lookup:
    return lambda asked: value if asked == name else lookup(asked)


def _compared_with_another(rule: Rule, name: str) -> bool:
    """Whether a comparison holds the fact together with another one, or within a calculation."""
    pairs = [pair for condition in rule.conditions for pair in condition.comparisons()]
    return any(not _simple(pair) and name in pair.names for pair in pairs)


def _simple(pair: Comparison) -> bool:
    return {type(pair.left), type(pair.right)} == {Name, Literal}


def _candidates(definition: FactDefinition, rule: Rule) -> list[Value]:
    """Answers that tell conditions apart: each option; numbers on, below and above each edge."""
    if definition.kind in (Kind.ONE, Kind.ANSWER):
        return list(definition.options)
    pairs = [pair for condition in rule.conditions for pair in condition.comparisons() if definition.name in pair.names]
    literals = [side.value for pair in pairs for side in (pair.left, pair.right) if isinstance(side, Literal)]
    flat = [one for value in literals for one in (value if isinstance(value, tuple) else (value,))]
    edges = {edge for one in flat if isinstance(one, float) for edge in (one - 1e-6, one, one + 1e-6)}
    words = {one for one in flat if isinstance(one, str)}
    if definition.kind in (Kind.SOME, Kind.NAMES):
        return [(), tuple(sorted(words)), *((word,) for word in sorted(words))]
    return [*sorted(edges), *sorted(words), "" if words else 0.0]
