"""The interview's steps without a screen: how replies are read, what comes next, what the answers make."""

import random
import time
import tomllib
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from reviewkit.answers import SPECIFYING, Act, Entry, latest_answers, settled_facts, standing_entries
from reviewkit.facts import NOT_STATED, Fact, Facts, Source, SourceKind, Standing
from reviewkit.interview import CONFIRM, Interview, entries_for, facts_of, next_prompt, proposals, undoing
from reviewkit.printed import read_printed
from reviewkit.prompts import Answered, Choice, Command, Commanded, Form, Matches, Prompt, Unclear, read_reply
from reviewkit.review import rule_book
from reviewkit.rules import State
from reviewkit.specification import Transform, specification_from, specification_text
from reviewkit.specification_parts import DataColumn, Specifying, Trace, specification_values
from reviewkit.specified import ERROR_WORDS, ESTIMATOR_WORDS, TRANSFORM_WORDS, covariate_fact, specification_facts
from reviewkit.specifying import next_step, problem_with
from reviewkit.vocabulary import FactDefinition, Kind

BOOK = rule_book()
LINKED = Facts().linked("claim:main", "model:main").linked("model:main", "data:main")
COLUMNS = (
    DataColumn("sales", "number, 31 % zeros"),
    DataColumn("staff"),
    DataColumn("stall"),
    DataColumn("region", "text", True, False),
    DataColumn("open days"),
    DataColumn("n"),
)


def without_specification(**more) -> Interview:
    return Interview(LINKED, BOOK, specified=True, **more)


# --- replies ---------------------------------------------------------------------------------------------------------

TRANSFORM = Prompt("t", "?", Form.ONE, choices=tuple(map(Choice, ("none", "log", "log plus", "asinh", "square root"))))
YES_NO = Prompt(
    "y",
    "?",
    Form.ONE,
    choices=tuple(map(Choice, ("yes", "partly", "no"))),
    definition=BOOK.vocabulary["data.available"],
)
SHARE = Prompt("z", "?", Form.NUMBER, definition=FactDefinition("z", "model", Kind.NUMBER, unit="share", low=0, high=1))
PRINTED = Prompt("p", "?", Form.PRINTED, definition=BOOK.vocabulary["claim.coefficient"])
COLUMN = Prompt("c", "?", Form.COLUMN, choices=tuple(Choice(each.name) for each in COLUMNS))
TERMS = replace(COLUMN, form=Form.TERMS)


@pytest.mark.parametrize(
    ("prompt", "typed", "value"),
    [
        (TRANSFORM, "2", "log"),
        (TRANSFORM, "log", "log"),
        (TRANSFORM, "LOG", "log"),
        (TRANSFORM, "as", "asinh"),
        (TRANSFORM, " root ", "square root"),
        (YES_NO, "y", "yes"),
        (YES_NO, "no", "no"),
        (YES_NO, "ns", NOT_STATED),
        (YES_NO, "not stated", NOT_STATED),
        (SHARE, "0,38", 0.38),
        (SHARE, "31 %", 0.31),
        (SHARE, ".31", 0.31),
        (SHARE, "n", NOT_STATED),
        (PRINTED, "0,38", read_printed("0,38")),
        (PRINTED, "−0.380***", read_printed("−0.380***")),
        (COLUMN, "reg", "region"),
        (COLUMN, "6", "n"),
        (COLUMN, "days", "open days"),
        (TERMS, "2 reg log(sales)", ("staff", "region", "log(sales)")),
        (
            TERMS,
            "staff, staff, `open days`^2 factor(region, base='a b')",
            ("staff", "`open days`^2", "factor(region, base='a b')"),
        ),
        (TERMS, "staff:region", ("staff:region",)),
        (replace(TRANSFORM, form=Form.SEVERAL), "1 3", ("none", "log plus")),
        (replace(TRANSFORM, form=Form.SEVERAL), "2, asinh", ("log", "asinh")),
        (replace(TRANSFORM, form=Form.SEVERAL), "none", ()),
        (replace(TRANSFORM, form=Form.TEXT), "two words", "two words"),
        (replace(YES_NO, form=Form.NAMES), "harbour, year", ("harbour", "year")),
        (replace(TRANSFORM, default="log"), "", "log"),
    ],
)
def test_a_reply_is_read_as_it_was_meant(prompt, typed, value):
    assert read_reply(prompt, typed) == Answered(value)


@pytest.mark.parametrize(
    ("typed", "command", "text"),
    [
        ("?", Command.HELP, ""),
        ("b", Command.BACK, ""),
        ("s", Command.SKIP, ""),
        ("q", Command.QUIT, ""),
        ("r odd c", Command.REMARK, "odd c"),
    ],
)
def test_commands_work_at_every_form(typed, command, text):
    for form in Form:
        assert read_reply(replace(TRANSFORM, form=form), typed) == Commanded(command, text)


@pytest.mark.parametrize(
    ("prompt", "typed", "words"),
    [
        (TRANSFORM, "", "number from the list"),
        (TRANSFORM, "9", "1 to 5"),
        (TRANSFORM, "cube", "none of the choices"),
        (YES_NO, "n", "`ns`"),
        (SHARE, "31", "0 to 1"),
        (SHARE, "many", "not a number"),
        (PRINTED, "0.3.8", "not a number"),
        (TERMS, "wages", "No column"),
        (TRANSFORM, "ns", "not about what the paper says"),
    ],
)
def test_an_unclear_reply_is_answered_in_one_sentence(prompt, typed, words):
    reply = read_reply(prompt, typed)
    assert isinstance(reply, Unclear)
    assert words in reply.message
    assert "\n" not in reply.message


def test_a_part_that_several_names_share_lists_them_with_their_numbers():
    reply = read_reply(COLUMN, "sta")
    assert isinstance(reply, Matches)
    assert [(number, each.value) for number, each in reply.found] == [(2, "staff"), (3, "stall")]


def test_a_place_in_the_paper_may_follow_an_answer():
    assert read_reply(YES_NO, "no @ p. 11") == Answered("no", "p. 11")
    assert read_reply(PRINTED, "0.38 @ Table 3") == Answered(read_printed("0.38"), "Table 3")


@given(typed=st.text(max_size=40))
def test_no_reply_breaks_any_prompt(typed):
    for prompt in (TRANSFORM, YES_NO, SHARE, PRINTED, COLUMN, TERMS):
        for form in Form:
            read_reply(replace(prompt, form=form), typed)


# --- answers and undoing ---------------------------------------------------------------------------------------------

NAMES = st.sampled_from(["a", "b", "c", "d"])
ANSWERS = st.builds(
    Entry, st.sampled_from([Act.ANSWER, Act.ANSWER, Act.SKIP, Act.REMARK, Act.UNDO]), NAMES, value=st.floats(0, 9)
)


@given(
    entries=st.lists(ANSWERS, max_size=30),
    more=st.lists(st.builds(Entry, st.just(Act.ANSWER), NAMES, value=st.floats(0, 9)), max_size=8),
)
def test_what_is_answered_and_undone_leaves_no_trace(entries, more):
    undone = [*entries, *more, *[Entry(Act.UNDO)] * len(more)]
    assert settled_facts(undone) == settled_facts(entries)


@given(values=st.dictionaries(NAMES, st.floats(0, 9)), seed=st.integers())
def test_the_order_of_answers_never_changes_the_facts(values, seed):
    entries = [Entry(Act.ANSWER, name, value=value) for name, value in values.items()]
    shuffled = random.Random(seed).sample(entries, len(entries))
    assert settled_facts(entries) == settled_facts(shuffled)


@given(entries=st.lists(ANSWERS, max_size=30), cut=st.integers(0, 30))
def test_leaving_and_resuming_never_changes_the_facts(entries, cut):
    first, rest = entries[:cut], entries[cut:]
    resumed = replace(without_specification(), entries=tuple(first), start=len(first))
    resumed = replace(resumed, entries=(*resumed.entries, *rest))
    assert facts_of(resumed) == facts_of(replace(without_specification(), entries=tuple(entries)))


def test_undoing_an_answer_brings_its_question_back():
    interview = without_specification()
    first = next_prompt(interview)
    answered = replace(interview, entries=(Entry(Act.ANSWER, first.name, first.subject, NOT_STATED),))
    assert next_prompt(answered).name != first.name
    undone = replace(answered, entries=(*answered.entries, *undoing(answered.entries)))
    assert next_prompt(undone) == first


def test_there_is_nothing_to_undo_at_the_beginning():
    assert undoing(()) == ()
    assert undoing((Entry(Act.REMARK, text="x"),)) == ()


# --- the rules' questions --------------------------------------------------------------------------------------------


def replaced(interview: Interview, prompt: Prompt, value) -> Interview:
    """The interview after that answer."""
    return replace(interview, entries=(*interview.entries, *entries_for(prompt, value, "", interview)))


def answered_by(interview: Interview, choose) -> Interview:
    while (prompt := next_prompt(interview)) is not None:
        assert len(interview.entries) < 80
        interview = replaced(interview, prompt, choose(prompt))
    return interview


def some_answer(chance: random.Random):
    def choose(prompt: Prompt):
        match prompt.form:
            case Form.ONE:
                return chance.choice([*(each.value for each in prompt.choices), NOT_STATED])
            case Form.CHECKLIST:
                return tuple(str(number) for number in range(1, len(prompt.choices) + 1) if chance.random() < 0.3)
            case Form.SEVERAL:
                return tuple(each.value for each in prompt.choices if chance.random() < 0.3)
            case Form.NUMBER:
                low, high = prompt.definition.low or 0, prompt.definition.high or 50
                return float(round(chance.uniform(low, high), 2))
            case Form.PRINTED:
                return read_printed(f"{chance.uniform(0.01, 2):.2f}")
            case Form.NAMES:
                return ("village",)
            case _:
                return "words"

    return choose


@pytest.mark.parametrize("seed", range(8))
def test_an_interview_ends_and_asks_no_fact_twice(seed):
    done = answered_by(without_specification(), some_answer(random.Random(seed)))
    names = [(each.subject, each.name) for each in done.entries]
    assert len(names) == len(set(names))


def test_what_is_skipped_is_asked_again_in_the_next_session_only():
    interview = without_specification()
    first = next_prompt(interview)
    skipped = replace(interview, entries=(Entry(Act.SKIP, first.name, first.subject),))
    assert next_prompt(skipped).name != first.name
    assert next_prompt(replace(skipped, start=1)) == first


def test_a_skipped_fact_stays_open_and_is_never_fine():
    from reviewkit.decisions import decide

    interview = without_specification()
    while (prompt := next_prompt(interview)) is not None:
        interview = replace(interview, entries=(*interview.entries, Entry(Act.SKIP, prompt.name, prompt.subject)))
    states = {each.state for each in decide(facts_of(interview), BOOK) if each.rule.subject != "data"}
    assert states <= {State.OPEN, State.NOT_APPLICABLE}


def test_only_major_points_are_asked_for_when_minutes_are_short():
    def asked(interview):
        return len(answered_by(interview, lambda prompt: NOT_STATED).entries)

    assert asked(without_specification(only_major=True)) < asked(without_specification())


def test_a_topic_can_be_asked_anew_with_the_old_answer_as_default():
    old = Entry(Act.ANSWER, "errors.kind", "model:main", "robust")
    interview = without_specification(entries=(old,), start=1, again=("errors.kind",))
    prompt = next_prompt(interview)
    assert (prompt.name, prompt.default) == ("errors.kind", "robust")
    changed = replace(interview, entries=(old, Entry(Act.ANSWER, "errors.kind", "model:main", "classical")))
    assert facts_of(changed).known("errors.kind", "model:main").value == "classical"
    assert next_prompt(changed).name != "errors.kind"


def test_the_next_question_comes_within_a_tenth_of_a_second():
    interview, chance, slowest = without_specification(), some_answer(random.Random(1)), 0.0
    while True:
        start = time.perf_counter()
        prompt = next_prompt(interview)
        slowest = max(slowest, time.perf_counter() - start)
        if prompt is None:
            break
        interview = replaced(interview, prompt, chance(prompt))
    assert slowest < 0.1


# --- several yes-or-no questions at once ------------------------------------------------------------------------------


def first_checklist() -> tuple[Interview, Prompt]:
    interview = without_specification()
    while (prompt := next_prompt(interview)).form is not Form.CHECKLIST:
        interview = replaced(interview, prompt, some_answer(random.Random(0))(prompt))
    return interview, prompt


def test_yes_or_no_questions_from_one_place_are_asked_at_once():
    interview, prompt = first_checklist()
    asked = [BOOK.vocabulary[each.value] for each in prompt.choices]
    assert len(asked) > 1
    assert len({each.found_in for each in asked}) == 1
    assert {each.kind for each in asked} == {Kind.ANSWER}
    after = facts_of(replaced(interview, prompt, ("2",)))
    values = [after.known(each.name, f"{each.about}:main".replace("study:main", "study")).value for each in asked]
    assert values == ["no", "yes", *["no"] * (len(asked) - 2)]


def test_a_list_is_undone_whole_and_skipping_it_asks_one_by_one():
    interview, prompt = first_checklist()
    after = replaced(interview, prompt, ())
    undone = replace(after, entries=(*after.entries, *undoing(after.entries)))
    assert next_prompt(undone) == prompt
    skipped = replace(interview, entries=(*interview.entries, Entry(Act.SKIP, prompt.name, prompt.subject)))
    assert next_prompt(skipped).name in [each.value for each in prompt.choices]


LIST = Prompt("checklist", "?", Form.CHECKLIST, choices=(Choice("a"), Choice("b")), partly=("b",))


@pytest.mark.parametrize(("typed", "value"), [("1", ("1",)), ("1, 2p", ("1", "2p")), ("none", ()), ("2 2", ("2",))])
def test_a_list_takes_numbers_and_parts(typed, value):
    assert read_reply(LIST, typed) == Answered(value)
    assert read_reply(LIST, f"{typed} @ p. 4") == Answered(value, "p. 4")


@pytest.mark.parametrize("typed", ["3", "0", "1p", "yes", "", "²"])
def test_a_list_takes_nothing_else_and_never_an_empty_reply(typed):
    assert isinstance(read_reply(LIST, typed), Unclear)


# --- proposals -------------------------------------------------------------------------------------------------------


def reading(name: str, value, place="paragraph 12") -> Fact:
    return Fact(
        name, value, Standing.STATED, Source(SourceKind.MANUSCRIPT, place, "as quoted"), "model:main", confirmed=False
    )


READ = LINKED.adding(
    [reading("outcome.transform", "log"), reading("errors.kind", "clustered"), reading("estimator", "least squares")]
)


def test_readings_are_confirmed_on_one_screen_and_then_count_as_the_referees_word():
    interview = Interview(READ, BOOK, specified=True)
    prompt = next_prompt(interview)
    assert (prompt.name, len(prompt.choices)) == (CONFIRM, 3)
    assert "paragraph 12" in prompt.choices[0].detail
    entries = entries_for(prompt, (), "", interview)
    known = facts_of(replace(interview, entries=entries)).known("errors.kind", "model:main")
    assert (known.standing, known.source.place, known.source.quote) == (Standing.SETTLED, "paragraph 12", "as quoted")


def test_a_reading_that_is_called_wrong_is_asked_for_and_no_longer_known():
    interview = Interview(READ, BOOK, specified=True)
    entries = entries_for(next_prompt(interview), ("2",), "", interview)
    after = replace(interview, entries=entries)
    assert facts_of(after).known("errors.kind", "model:main") is None
    assert facts_of(after).known("outcome.transform", "model:main").value == "log"
    assert proposals(after) == ()


def test_a_confirmed_screen_is_undone_whole():
    interview = Interview(READ, BOOK, specified=True)
    entries = entries_for(next_prompt(interview), ("2",), "", interview)
    before = (Entry(Act.ANSWER, "software.stated", value="no"),)
    undone = (*before, *entries, *undoing((*before, *entries)))
    assert standing_entries(undone) == before


def test_an_answer_outweighs_a_reading():
    interview = Interview(READ, BOOK, (Entry(Act.ANSWER, "errors.kind", "model:main", "classical"),), specified=True)
    assert facts_of(interview).known("errors.kind", "model:main").value == "classical"
    assert len(facts_of(interview).every("errors.kind", "model:main")) == 2
    assert [each.name for each in proposals(interview)] == ["outcome.transform", "estimator"]


# --- building a specification ----------------------------------------------------------------------------------------


def specified_with(answers: dict, understood=None, columns=COLUMNS):
    """Answer the steps from `answers`; the names asked in their order, and the finished state."""
    state, asked = Specifying({}, {}, columns), []
    while (prompt := next_step(state)) is not None:
        name = prompt.name.removeprefix(SPECIFYING)
        asked.append(name)
        assert len(asked) < 30
        value = answers.get(name, prompt.default)
        assert value is not None, name
        state = replace(
            state,
            answers={**state.answers, name: value},
            understood=understood or {} if name == "line" else state.understood,
        )
        assert problem_with(state) == ""
    return asked, state


def test_lists_alone_make_a_whole_specification():
    answers = {"data": "shops.csv", "outcome": "sales", "transform": "log_plus", "constant": 1.0}
    answers |= {"terms": ("staff", "region", "open days", "log(n)"), "focus": ("staff",), "where": "staff > 0"}
    answers |= {
        "errors": "cluster",
        "by": "region",
        "estimate": read_printed("0,38"),
        "std_error": read_printed("0.11"),
        "n": read_printed("3,412"),
    }
    asked, state = specified_with(answers)
    spec = specification_from(specification_values(state), "test")
    assert [str(each) for each in spec.terms] == ["staff", "factor(region)", "`open days`", "log(n)"]
    assert (spec.outcome.column, spec.outcome.transform, spec.outcome.constant) == ("sales", Transform.LOG_PLUS, 1.0)
    assert (spec.errors.kind, spec.errors.by, spec.printed_n.text) == ("cluster", ("region",), "3,412")
    assert spec.printed_terms[0][1].std_error.text == "0.11"
    assert asked[:3] == ["data", "line", "outcome"]
    assert specification_from(tomllib.loads(specification_text(spec)), "again") == spec


def test_a_pasted_line_leaves_only_the_rest_to_ask():
    understood = {
        "outcome": {"column": "sales", "transform": "log_plus", "constant": 1},
        "model": {"estimator": "ols", "terms": ["staff", "factor(region)"]},
        "errors": {"kind": "cluster", "by": ["region"]},
    }
    asked, state = specified_with({"data": "shops.csv", "line": "…", "focus": ("staff",)}, understood)
    assert asked == ["data", "line", "focus", "estimate", "std_error", "n"]
    assert specification_from(specification_values(state), "test").focus == ("staff",)


def test_a_logged_column_in_the_line_is_traced_to_what_it_was_taken_of():
    understood = {
        "outcome": {"column": "lnsales", "transform": "none"},
        "model": {"terms": ["staff"]},
        "errors": {"kind": "robust", "type": "HC1"},
    }
    columns = (*COLUMNS, DataColumn("lnsales", "equals log(sales + 1)"))
    answers = {"data": "shops.csv", "line": "…", "outcome": "sales", "transform": "log", "zeros": "dropped"}
    asked, state = specified_with(answers, understood, columns)
    assert asked[:5] == ["data", "line", "outcome", "transform", "zeros"]
    spec = specification_from(specification_values(state), "test")
    assert (spec.outcome.column, spec.outcome.transform, spec.outcome.zeros) == ("sales", "log", "dropped")


def test_a_line_that_names_columns_the_file_lacks_asks_for_the_terms():
    understood = {
        "outcome": {"column": "sales", "transform": "log"},
        "model": {"terms": ["lnstaff"]},
        "errors": {"kind": "classical"},
    }
    state = Specifying({"data": "x.csv", "line": "…", "zeros": "dropped"}, understood, COLUMNS)
    prompt = next_step(state)
    assert prompt.name == SPECIFYING + "terms"
    assert "lnstaff" in prompt.question


def test_without_data_nothing_of_the_model_is_asked_in_columns():
    assert next_step(Specifying({"data": ""}, {}, ())) is None


@pytest.mark.parametrize(("name", "value"), [("where", "1 +"), ("terms", ("lag(staff)",)), ("terms", ("a:(",))])
def test_an_answer_that_makes_no_specification_is_said_at_once(name, value):
    answers = {"data": "x.csv", "line": "", "outcome": "sales", "transform": "none", "terms": ("staff",), name: value}
    problem = problem_with(Specifying(answers, {}, COLUMNS))
    assert problem
    assert "\n" not in problem


def test_latest_answers_do_not_depend_on_skips():
    entries = (Entry(Act.ANSWER, "a", value="1"), Entry(Act.SKIP, "a"))
    assert [each.value for each in latest_answers(entries)] == ["1"]


# --- what a specification settles ------------------------------------------------------------------------------------

SPECIFIED = {
    "data": "shops.csv",
    "outcome": {"column": "sales", "transform": "log_plus", "constant": 1},
    "model": {"estimator": "ols", "terms": ["staff", "open"], "focus": ["staff"]},
    "errors": {"kind": "cluster", "by": ["village"]},
    "printed": {"n": "3,412", "terms": {"staff": {"estimate": "0.38", "std_error": "0.11"}}},
}


def settled_by(**changed):
    spec = specification_from({**SPECIFIED, **changed}, "test")
    return {
        (each.subject, each.name): each.value
        for each in specification_facts(spec, "model:main", "claim:main")
        if (each.standing, each.source.kind) == (Standing.SETTLED, SourceKind.SPECIFICATION)
    }


def test_a_specification_settles_what_it_says():
    found = settled_by()
    assert found["model:main", "outcome.transform"] == "log of y plus a constant"
    assert found["model:main", "outcome.constant"] == 1
    assert found["model:main", "estimator"] == "least squares"
    assert found["model:main", "errors.kind"] == "clustered"
    assert found["model:main", "errors.cluster_level"] == ("village",)
    assert found["model:main", "effects.unit"] == "no"
    assert found["model:main", "n.printed"].text == "3,412"
    assert found["claim:main", "claim.coefficient"].text == "0.38"
    assert found["claim:main", "claim.std_error"].text == "0.11"


def test_zeros_that_are_kept_are_left_to_the_data():
    assert ("model:main", "outcome.zeros") not in settled_by()
    dropped = settled_by(outcome={"column": "sales", "transform": "log", "zeros": "dropped"})
    assert dropped["model:main", "outcome.zeros"] == "dropped"
    assert ("model:main", "outcome.constant") not in dropped


def test_effects_are_what_is_absorbed_and_classes_beside_the_focus():
    model = {"estimator": "ols", "terms": ["factor(plan)", "factor(year)", "age"], "focus": ["factor(plan)"]}
    found = settled_by(model={**model, "absorb": ["shop"]}, printed={"terms": {"factor(plan)": {"estimate": "0.2"}}})
    assert found["model:main", "effects.absorbed"] == ("shop", "year")
    assert ("model:main", "effects.unit") not in found
    assert found["claim:main", "claim.coefficient"].text == "0.2"


@pytest.mark.parametrize(
    ("focus", "kind", "said"),
    [
        ("staff", "two-valued", "two-valued"),
        ("staff", "number", "continuous"),
        ("factor(staff)", "two-valued", "two-valued"),
        ("factor(staff)", "whole number", "several classes"),
        ("log(staff)", "number", "continuous, in logs"),
        ("staff:open", "number", None),
        ("staff", "", None),
    ],
)
def test_the_kind_of_covariate_follows_from_term_and_column(focus, kind, said):
    spec = specification_from({**SPECIFIED, "model": {"terms": [focus], "focus": [focus]}}, "test")
    found = covariate_fact(spec, {"staff": kind}, "claim:main")
    assert [each.value for each in found] == ([said] if said else [])


def test_every_word_of_a_specification_is_an_option_of_its_fact():
    for words, name in (
        (TRANSFORM_WORDS, "outcome.transform"),
        (ESTIMATOR_WORDS, "estimator"),
        (ERROR_WORDS, "errors.kind"),
    ):
        assert set(words.values()) <= set(BOOK.vocabulary[name].options)


TRACED = DataColumn(
    "lnsales",
    trace=Trace(
        "equals log(sales + 1)", {"column": "sales", "transform": "log_plus", "constant": 1.0, "zeros": "kept"}
    ),
)
LOGGED = {
    "outcome": {"column": "lnsales", "transform": "none"},
    "model": {"estimator": "ols", "terms": ["staff"]},
    "errors": {"kind": "robust"},
}


def test_what_the_data_show_of_the_outcome_is_one_question():
    asked, state = specified_with({"data": "x.csv", "line": "…"}, LOGGED, (*COLUMNS, TRACED))
    assert asked == ["data", "line", "traced", "focus", "estimate", "std_error", "n"]
    outcome = specification_from(specification_values(state), "test").outcome
    assert (outcome.column, outcome.transform, outcome.constant) == ("sales", Transform.LOG_PLUS, 1.0)


def test_a_trace_may_be_turned_down_and_lists_come_instead():
    answers = {"data": "x.csv", "line": "…", "traced": "no", "outcome": "sales", "transform": "sqrt"}
    asked, state = specified_with(answers, LOGGED, (*COLUMNS, TRACED))
    assert asked[2:5] == ["traced", "outcome", "transform"]
    assert specification_from(specification_values(state), "test").outcome.transform is Transform.SQRT


def test_a_logged_column_chosen_from_the_list_is_traced_too():
    answers = {"data": "x.csv", "line": "", "outcome": "lnsales", "terms": ("staff",), "errors": "classical"}
    asked, state = specified_with(answers, None, (*COLUMNS, TRACED))
    assert asked[2:5] == ["outcome", "traced", "terms"]
    assert specification_values(state)["outcome"]["column"] == "sales"


def test_estimator_and_errors_that_a_line_leaves_open_are_asked_for():
    line = {"outcome": {"column": "sales", "transform": "log"}, "model": {"terms": ["staff"]}}
    asked, state = specified_with({"data": "x.csv", "line": "…", "estimator": "poisson"}, line)
    assert {"estimator", "errors"} <= set(asked)
    assert specification_values(state)["model"]["estimator"] == "poisson"
    prompts = {step.name: step for step in steps_of(line)}
    assert all("does not settle it" in prompts[SPECIFYING + name].question for name in ("estimator", "errors"))
    assert all(prompts[SPECIFYING + name].default_why for name in ("estimator", "errors"))


def steps_of(understood):
    state = Specifying({"data": "x.csv", "line": "…"}, understood, COLUMNS)
    while (prompt := next_step(state)) is not None:
        yield prompt
        state = replace(state, answers={**state.answers, prompt.name.removeprefix(SPECIFYING): prompt.default})


def test_an_untransformed_outcome_from_lists_is_not_taken_for_least_squares():
    answers = {"data": "x.csv", "outcome": "sales", "transform": "none", "terms": ("staff",), "errors": "robust"}
    asked, _ = specified_with(answers)
    assert "estimator" in asked
    assert "estimator" not in specified_with({**answers, "transform": "log"})[0]
