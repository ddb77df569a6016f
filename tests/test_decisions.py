"""What is not looked at is open, never fine; only questions that matter are asked; disagreements are kept."""

import itertools
import random
import time
from dataclasses import replace

import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st
from rule_examples import BOOK, SUBJECT, case

from reviewkit.decisions import agree, decide, disagreements, next_question, state_of
from reviewkit.derived import derive, needs
from reviewkit.facts import NOT_STATED, STUDY, Fact, Facts, NotStated, Source, SourceKind, Standing
from reviewkit.printed import read_printed
from reviewkit.rules import Importance, State
from reviewkit.vocabulary import Kind

WORDS = st.sampled_from(["euros", "visits"])


def values_of(definition):
    match definition.kind:
        case Kind.ONE | Kind.ANSWER:
            return st.sampled_from(definition.options)
        case Kind.SOME:
            return st.lists(st.sampled_from(definition.options), unique=True, max_size=2).map(tuple)
        case Kind.NAMES:
            return st.just(("village",))
        case Kind.PRINTED:
            return st.sampled_from(["0.05", "0.38", "-0.38", "38", "46"]).map(read_printed)
        case Kind.NUMBER:
            numbers = st.sampled_from([0.0, 0.005, 0.03, 0.31, 1.0, 2.0, 3.0, 7.0, 12.0, 45.0, 90.0, 400.0])
            return numbers.filter(definition.allows)
        case Kind.TEXT:
            return WORDS


def facts_by_name():
    """Some facts, each known, not stated or missing."""
    return st.fixed_dictionaries(
        {}, optional={each.name: values_of(each) | st.just(NOT_STATED) for each in BOOK.vocabulary}
    )


# --- states -----------------------------------------------------------------------------------------------------


def test_where_nothing_is_known_every_rule_is_open_and_says_what_it_waits_on():
    for finding in decide(case({}), BOOK):
        assert finding.state is State.OPEN
        assert finding.missing
        assert finding.reason.startswith("Waits on: ")
        assert finding.reason.count("a re-estimation") <= 1


@settings(max_examples=60, deadline=None)
@given(facts_by_name())
def test_each_missing_fact_is_listed_as_open_and_never_as_fine(values):
    facts = derive(case(values))
    for finding in decide(case(values), BOOK):
        lookup = BOOK.lookup(facts, finding.subject)
        assert state_of(finding.rule, lookup) is finding.state
        unknown = {name for name in finding.missing if lookup(name) is None or isinstance(lookup(name), NotStated)}
        assert unknown == set(finding.missing)
        assert bool(finding.missing) <= (finding.state is State.OPEN)
        if finding.state is State.CLEAR:
            assert finding.reason
        assert {fact.name for fact in finding.facts}.isdisjoint(set(finding.missing) - set(values))


@settings(max_examples=60, deadline=None)
@given(facts_by_name(), st.randoms())
def test_the_order_of_facts_changes_nothing(values, shuffle):
    names = list(values)
    shuffle.shuffle(names)
    one, other = case(values), case({name: values[name] for name in names})
    assert [(each.rule.name, each.state, each.importance, each.missing, each.reason) for each in decide(one, BOOK)] == [
        (each.rule.name, each.state, each.importance, each.missing, each.reason) for each in decide(other, BOOK)
    ]
    assert (next_question(one, BOOK) is None) is (next_question(other, BOOK) is None)


def test_a_rule_is_decided_for_every_subject_of_its_kind():
    facts = case({"outcome.transform": "log"}).linked("claim:second", "model:second")
    found = [each.subject for each in decide(facts, BOOK) if each.rule.name == "reason-not-given"]
    assert found == ["model:example", "model:second"]


def test_a_claim_sees_the_facts_of_its_model():
    values = {"claim.scale": "percent", "claim.percent": read_printed("38"), "claim.coefficient": read_printed("0.38")}
    facts = case({**values, "outcome.transform": "log", "claim.covariate": "two-valued"})
    finding = next(each for each in decide(facts, BOOK) if each.rule.name == "percent-read-off-the-coefficient")
    assert finding.state is State.RAISED
    assert {"model:example", "claim:example"} <= {fact.subject for fact in finding.facts}


def test_the_referees_word_wins_over_the_data():
    data = Fact("errors.kind", "classical", Standing.DONE, Source(SourceKind.EXHIBIT), "model:example")
    word = case({"errors.kind": "robust", "estimator": "least squares"})
    for facts in (word.adding((data,)), replace(word, facts=(data, *word.facts))):
        found = next(each for each in decide(facts, BOOK) if each.rule.name == "classical-errors")
        assert found.state is State.CLEAR


def test_a_clear_rule_says_why_it_stands():
    values = {"estimator": "least squares", "errors.kind": "classical", "variance.equal_argued": "yes"}
    found = next(each for each in decide(case(values), BOOK) if each.rule.name == "classical-errors")
    assert found.reason == "Standard errors are classical, and the paper shows that the variance is steady."
    found = next(each for each in decide(case({**values, "errors.kind": "robust"}), BOOK) if each.rule is found.rule)
    assert found.reason == "Standard errors do not assume equal variance: they are robust."


def test_what_is_not_covered_stays_open_and_is_said():
    found = next(
        each for each in decide(case({"design.special": "mixed model"}), BOOK) if each.rule.name == "design-not-covered"
    )
    assert found.state is State.OPEN
    assert "by other means" in found.reason


# --- questions --------------------------------------------------------------------------------------------------


def answered(facts: Facts, question, value) -> Facts:
    fact = Fact(question.definition.name, value, Standing.SETTLED, Source(SourceKind.ANSWER), question.subject)
    return facts.adding((fact,))


@settings(max_examples=40, deadline=None)
@given(facts_by_name(), st.data())
def test_no_question_is_asked_whose_answer_could_change_no_state(values, data):
    facts = case(values)
    question = next_question(facts, BOOK)
    if question is None:
        return
    assert facts.known(question.definition.name, question.subject) is None
    for name in question.waiting:
        assert can_matter(BOOK.rule(name), facts, question), (name, question.definition.name)


def can_matter(rule, facts, question) -> bool:
    """Whether some answer, with some values of all else that is missing, gives another state than some other answer."""
    subject = SUBJECT[rule.subject]
    lookup = BOOK.lookup(derive(facts), subject)
    named = dict.fromkeys(name for condition in rule.conditions for name in condition.names)
    inner = dict.fromkeys(each for name in named for each in (name, *needs(name)) if lookup(each) is None)
    others = [name for name in inner if name != question.definition.name]
    random_source = random.Random(0)
    answers = some_values(question.definition)
    for _ in range(400):
        rest = {name: random_source.choice(some_values(BOOK.vocabulary[name])) for name in others}
        base = facts.adding(
            Fact(name, value, Standing.SETTLED, Source(SourceKind.ANSWER), SUBJECT[BOOK.vocabulary[name].about])
            for name, value in rest.items()
        )
        ends = {state_of(rule, BOOK.lookup(derive(answered(base, question, each)), subject)) for each in answers}
        if len(ends) > 1:
            return True
    return False


def some_values(definition):
    match definition.kind:
        case Kind.ONE | Kind.ANSWER:
            return [*definition.options, NOT_STATED]
        case Kind.SOME:
            return [(), *((each,) for each in definition.options), NOT_STATED]
        case Kind.PRINTED:
            return [read_printed(each) for each in ("0.05", "0.38", "-0.38", "38", "46", "5")] + [NOT_STATED]
        case Kind.NUMBER:
            every = [0.0, 0.005, 0.03, 0.31, 1.0, 2.0, 3.0, 7.0, 12.0, 45.0, 90.0, 400.0]
            return [each for each in every if definition.allows(each)] + [NOT_STATED]
        case _:
            return [("village",) if definition.kind is Kind.NAMES else "words", NOT_STATED]


@settings(max_examples=10, deadline=None, phases=(Phase.explicit, Phase.generate))
@given(st.data())
def test_an_interview_ends_and_leaves_open_only_what_nobody_can_answer(data):
    facts = case({})
    asked = []
    while (question := next_question(facts, BOOK)) is not None:
        asked.append((question.definition.name, question.subject))
        facts = answered(facts, question, data.draw(values_of(question.definition) | st.just(NOT_STATED)))
    assert len(set(asked)) == len(asked)
    for finding in decide(facts, BOOK):
        lookup = BOOK.lookup(derive(facts), finding.subject)
        silent = [name for name in finding.missing if isinstance(lookup(name), NotStated)]
        worked_out = [name for name in finding.missing if not BOOK.vocabulary[name].asked]
        assert silent or worked_out or not finding.missing, (finding.rule.name, finding.missing)


def test_general_questions_come_before_those_that_may_turn_out_idle():
    facts, asked = case({}), []
    while (question := next_question(facts, BOOK)) is not None:
        asked.append(question.definition.name)
        value = {"outcome.transform": "none", "estimator": "Poisson"}.get(question.definition.name, NOT_STATED)
        facts = answered(facts, question, value)
    assert "outcome.constant" not in asked
    assert "transform.reason" not in asked
    assert "variance.equal_argued" not in asked


def test_within_a_topic_questions_follow_the_pages():
    question = next_question(case({}), BOOK)
    topics = [rule.topic for rule in BOOK.rules if rule.name in question.waiting]
    assert topics
    assert question.definition.asked


def test_a_topic_that_was_begun_is_finished_before_another():
    facts, topics = case({}), []
    while (question := next_question(facts, BOOK)) is not None:
        topics.append({rule.topic for rule in BOOK.rules if rule.name in question.waiting})
        facts = answered(facts, question, some_values(question.definition)[0])
    changes = sum(not one & other for one, other in itertools.pairwise(topics))
    assert changes <= len({topic for each in topics for topic in each})


def test_a_fact_that_is_worked_out_is_asked_for_by_what_it_needs():
    values = {"claim.scale": "percent", "outcome.transform": "log"}
    facts, names = case(values), set()
    while (question := next_question(facts, BOOK)) is not None:
        names.add(question.definition.name)
        facts = answered(facts, question, NOT_STATED)
    assert {"claim.percent", "claim.coefficient"} <= names
    assert "claim.percent_is_coefficient" not in names


def test_without_a_subject_there_is_nothing_to_ask_about_it():
    question, facts = next_question(Facts(), BOOK), Facts()
    while question is not None:
        assert question.subject == STUDY
        facts = answered(facts, question, NOT_STATED)
        question = next_question(facts, BOOK)


def test_the_next_question_is_there_at_once_with_a_book_three_times_as_long():
    names = itertools.count()
    rules = tuple(replace(rule, name=f"{rule.name}-{next(names)}") for _ in range(4) for rule in BOOK.rules)
    book = replace(BOOK, rules=rules)
    assert len(rules) >= 80
    facts = case({"outcome.transform": "log", "estimator": "least squares"})
    for name in ("second", "third"):
        facts = facts.linked(f"claim:{name}", f"model:{name}")
    best = min(seconds(lambda: next_question(facts, book)) for _ in range(5))
    assert best < 0.05


def seconds(work):
    start = time.process_time()
    work()
    return time.process_time() - start


# --- disagreements ----------------------------------------------------------------------------------------------


def fact(name, value, standing, subject="model:example"):
    return Fact(name, value, standing, Source(SourceKind.MANUSCRIPT), subject)


def test_text_and_data_that_differ_are_shown_weightiest_last():
    done, stated = fact("outcome.transform", "log", Standing.DONE), fact("outcome.transform", "none", Standing.STATED)
    (found,) = disagreements(Facts((done, stated)))
    assert (found.name, found.subject, found.facts) == ("outcome.transform", "model:example", (stated, done))
    assert not found.settled


def test_a_settled_disagreement_still_shows_what_was_overridden():
    facts = [fact("errors.kind", "robust", Standing.SETTLED), fact("errors.kind", "classical", Standing.DONE)]
    (found,) = disagreements(Facts(tuple(facts)))
    assert found.settled
    assert [each.value for each in found.facts] == ["classical", "robust"]


def test_only_the_latest_of_each_standing_counts():
    facts = (
        fact("n.used", 10.0, Standing.DONE),
        fact("n.used", 12.0, Standing.DONE),
        fact("n.used", 12.0, Standing.STATED),
    )
    assert disagreements(Facts(facts)) == ()


def test_other_subjects_and_silence_do_not_disagree():
    facts = (
        fact("errors.kind", "robust", Standing.STATED),
        fact("errors.kind", "classical", Standing.DONE, "model:second"),
        fact("outcome.zeros", NOT_STATED, Standing.STATED),
        fact("outcome.zeros", "kept", Standing.DONE),
    )
    assert disagreements(Facts(facts)) == ()


@pytest.mark.parametrize(
    ("one", "other", "same"),
    [
        (read_printed("0.38"), 0.3849, True),
        (read_printed("0.38"), 0.3851, False),
        (0.375, read_printed("0.38"), True),
        (read_printed("0.38"), read_printed("0.381"), True),
        (read_printed("0.38"), read_printed("0.386"), False),
        (0.1 + 0.2, 0.3, True),
        (1.0, 1.001, False),
        (("village", "year"), ("year", "village"), True),
        (("village",), ("year",), False),
        ("log", "none", False),
    ],
)
def test_numbers_agree_within_the_rounding_of_the_print(one, other, same):
    assert agree(one, other) is same
    assert agree(other, one) is same


def test_importance_without_the_deciding_fact_is_the_lesser_one():
    values = {
        "outcome.transform": "log",
        "outcome.zeros": "dropped",
        "outcome.zero_share": NOT_STATED,
        "zeros.outside": "no",
    }
    found = next(each for each in decide(case(values), BOOK) if each.rule.name == "zeros-dropped")
    assert (found.state, found.importance) == (State.RAISED, Importance.MINOR)
