"""Every example of every rule ends as it says, and the examples suffice: no clause can change unnoticed."""

from collections.abc import Iterator
from dataclasses import replace
from functools import cache

import pytest
from rule_examples import BOOK, SUBJECT, as_expected, case, conditions_by_key

from reviewkit.clauses import And, Calculation, Clause, Comparison, Expression, Literal, Not, Or, Stated
from reviewkit.conditions import Condition
from reviewkit.decisions import decide, ending, importance_of, state_of
from reviewkit.derived import derive
from reviewkit.rules import TOPICS, Rule, State

RULES = pytest.mark.parametrize("rule", BOOK.rules, ids=lambda rule: rule.name)

NEIGHBOUR = {"<": "<=", "<=": "<", ">": ">=", ">=": ">", "==": "!=", "!=": "==", "in": "not in", "not in": "in"}


@RULES
def test_every_example_ends_as_it_says(rule):
    for place, example in enumerate(rule.examples, 1):
        assert as_expected(rule, example), f"example {place}: {ending(rule, example, BOOK)}, not {example.state}"


@RULES
def test_each_rule_shows_what_raises_it_and_what_leaves_it_clear_and_open(rule):
    assert {State.RAISED, State.CLEAR, State.OPEN} <= {example.state for example in rule.examples}


@RULES
def test_examples_notice_every_change_of_a_clause(rule):
    assert all(as_expected(rule, example) for example in rule.examples)
    unnoticed = [words for words, mutant in mutants(rule) if not noticed(mutant)]
    assert not unnoticed, "\n".join(unnoticed)


def test_all_topics_have_rules():
    assert {rule.topic for rule in BOOK.rules} == set(TOPICS)


def test_a_name_belongs_to_one_rule():
    names = [rule.name for rule in BOOK.rules]
    assert len(set(names)) == len(names) >= 25


def test_the_decision_of_a_whole_case_is_the_decision_of_each_rule():
    for rule in BOOK.rules:
        for example in rule.examples:
            found = [each for each in decide(case(example.facts), BOOK) if each.rule is rule]
            expected = [] if not case(example.facts).subjects(rule.subject) else [example.state]
            assert [each.state for each in found] == expected


def noticed(mutant: Rule) -> bool:
    for example in mutant.examples:
        lookup = seen_by(example, mutant.subject)
        state, importance = state_of(mutant, lookup), importance_of(mutant, lookup)
        if state is not example.state or example.importance not in (None, importance):
            return True
    return False


@cache
def seen_by(example, kind):
    return BOOK.lookup(derive(case(example.facts)), SUBJECT[kind])


def mutants(rule: Rule) -> Iterator[tuple[str, Rule]]:
    """The rule with one clause of one condition changed."""
    for key, condition in conditions_by_key(rule).items():
        if condition.text == "True":
            continue
        for words, clause in changed(condition.clause):
            yield f"{rule.name}, {key}: {words}", replace(rule, **{key: Condition(condition.text, clause)})


def changed(clause: Clause) -> Iterator[tuple[str, Clause]]:
    match clause:
        case Comparison() | Stated():
            yield f"{clause} always true", True
            yield f"{clause} always false", False
            if isinstance(clause, Comparison):
                yield from ((f"{clause} as {each}", each) for each in neighbours(clause))
        case Not(part):
            yield from ((words, Not(each)) for words, each in changed(part))
            yield f"{clause} without not", part
        case And(parts) | Or(parts):
            for place, part in enumerate(parts):
                for words, each in changed(part):
                    yield words, replace(clause, parts=(*parts[:place], each, *parts[place + 1 :]))


def neighbours(pair: Comparison) -> Iterator[Comparison]:
    yield replace(pair, sign=NEIGHBOUR[pair.sign])
    yield from (replace(pair, left=each) for each in stepped(pair.left))
    yield from (replace(pair, right=each) for each in stepped(pair.right))
    yield from (replace(pair, right=each) for each in shortened(pair.right))


def shortened(expression: Expression) -> Iterator[Expression]:
    """A list without one of its members."""
    if isinstance(expression, Literal) and isinstance(expression.value, tuple) and len(expression.value) > 1:
        for left_out in expression.value:
            yield replace(expression, value=tuple(each for each in expression.value if each != left_out))


def stepped(expression: Expression) -> Iterator[Expression]:
    """The expression with one number a step up or down: 1 for counts, a tenth of the number else."""
    match expression:
        case Literal(float() as number):
            step = 1.0 if number >= 8 and number.is_integer() else abs(number) / 10 or 0.01
            yield from (replace(expression, value=number + each) for each in (-step, step))
        case Calculation(_, arguments):
            for place, argument in enumerate(arguments):
                for each in stepped(argument):
                    yield replace(expression, arguments=(*arguments[:place], each, *arguments[place + 1 :]))
