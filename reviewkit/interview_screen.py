"""Asks one question at a time: what a reply leads to, and what is written down before the next question."""

import re
from dataclasses import dataclass, replace
from pathlib import Path

from reviewkit import casefolder, data_columns, review
from reviewkit.answers import SPECIFYING, Act, Entry, standing_entries
from reviewkit.casefolder import CaseFolder, Input
from reviewkit.decisions import agree, decide
from reviewkit.facts import NOT_STATED, Standing, Value
from reviewkit.interview import (
    Interview,
    entries_for,
    facts_of,
    next_prompt,
    open_points,
    shown_value,
    specifying,
    undoing,
    where_from,
)
from reviewkit.prompts import Answered, Choice, Command, Commanded, Form, Matches, Prompt, Reply, Unclear, read_reply
from reviewkit.records import Json
from reviewkit.refusals import Refusal
from reviewkit.rules import Importance, State
from reviewkit.screen import (
    COMMANDS,
    LIST_AT_ONCE,
    Screen,
    explain,
    show_choice,
    show_choices,
    show_prompt,
    telling,
)
from reviewkit.specifying import next_step, problem_with
from reviewkit.wording import counted

TRIAGE_AFTER = 5
"""Answers after which it is said once how things stand."""
SHOW_AGAIN_AFTER = 2
"""Replies in a row that were of no use, after which the choices are shown again."""


class Left(Exception):
    """The referee leaves; everything answered is kept."""


@dataclass(frozen=True, slots=True)
class Session:
    """An interview under way, with where it is written down and shown."""

    case: CaseFolder
    interview: Interview
    screen: Screen

    def recording(self, *entries: Entry) -> "Session":
        """The session after these entries; each is on the disk when this returns."""
        for entry in entries:
            casefolder.record(self.case, entry)
        return replace(self, interview=replace(self.interview, entries=(*self.interview.entries, *entries)))

    @property
    def answered(self) -> int:
        """How many of the rules' questions were answered since it began."""
        new = standing_entries(self.interview.entries[self.interview.start :])
        return sum(each.act is Act.ANSWER and not each.name.startswith(SPECIFYING) for each in new)


@dataclass(frozen=True, slots=True)
class Held:
    """What an interview came to."""

    interview: Interview
    left: bool
    """Whether it was left before nothing remained."""


def hold(case: CaseFolder, interview: Interview, screen: Screen) -> Held:
    """Ask until nothing can change any more or the referee leaves."""
    session = Session(case, interview, screen)
    for line in COMMANDS:
        screen.quiet(line)
    try:
        while (prompt := next_prompt(session.interview)) is not None:
            session = _step(session, prompt)
    except (Left, EOFError, KeyboardInterrupt):
        screen.write("")
        return Held(session.interview, True)
    return Held(session.interview, False)


def closing(held: Held, screen: Screen) -> None:
    """What is left, in one or two lines."""
    left = open_points(held.interview)
    points = "1 point is" if left == 1 else f"{left} points are"
    if held.left:
        screen.say(f"Left; every answer is kept. {points} still open.")
    elif left:
        screen.say(f"Nothing more to ask. {points} left open; the note will call them open, never fine.")
    else:
        screen.say("Nothing is open any more.")


# --- policy -----------------------------------------------------------------------------------------------------

_POLICY_CHOICES = (Choice("yes"), Choice("no"), Choice("not stated", "the policy does not say"))


def ask_policy(case: CaseFolder, screen: Screen) -> CaseFolder:
    """Ask what the journal's policy says, each answer written down at once; leaving early leaves the rest open."""
    asked = [each for each in review.POLICY_QUESTIONS if each not in case.settings.policy]
    if asked:
        screen.write("First, the journal's policy. `q` leaves the rest of these questions open.")
    try:
        for policy in asked:
            hint = "a number, or the beginning of a word"
            question = review.POLICY_QUESTIONS[policy]
            answer = _policy_answer(
                Prompt(policy.value, question, Form.ONE, choices=_POLICY_CHOICES, hint=hint), screen
            )
            case = review.settle_policy(case, policy, answer) if answer else case
    except (Left, EOFError, KeyboardInterrupt):
        screen.write("")
    return case


def _policy_answer(prompt: Prompt, screen: Screen) -> str:
    show_prompt(prompt, screen)
    while True:
        match read_reply(prompt, screen.read("> ")):
            case Answered(value):
                return str(value)
            case Commanded(Command.QUIT):
                raise Left
            case Commanded(Command.SKIP):
                return ""
            case _:
                screen.say("Type yes, no, or 3 where the policy does not say; `s` leaves it open.", "  ")


# --- one step ---------------------------------------------------------------------------------------------------


def _step(session: Session, prompt: Prompt) -> Session:
    """Ask one question until something is written down."""
    show_prompt(prompt, session.screen)
    unclear = 0
    while True:
        typed = session.screen.read("> ")
        reply = read_reply(prompt, typed)
        unclear = unclear + 1 if isinstance(reply, Unclear) else 0
        if unclear == SHOW_AGAIN_AFTER:
            show_choices(prompt.choices, session.screen, LIST_AT_ONCE)
            unclear = 0
        try:
            done = _pasted(session, prompt, typed, reply) or _taken(session, prompt, reply)
        except Refusal as refusal:
            session.screen.say(refusal.message(), "  ")
            continue
        if done is not None:
            return done


def _pasted(session: Session, prompt: Prompt, typed: str, reply: Reply) -> Session | None:
    """A line that fits a model is taken at any question about the model, not only where it is asked for."""
    name = prompt.name.removeprefix(SPECIFYING)
    if name in (prompt.name, "line") or not _is_model_line(typed) or Path(typed.strip()).exists():
        return None
    if prompt.form is not Form.TEXT and isinstance(reply, Answered) and not re.search("[,~]", typed):
        return None  # names of columns
    session.screen.faint("A line that fits a model:", "  ")
    return _specified(session, replace(prompt, name=f"{SPECIFYING}line"), typed.strip())


def _is_model_line(typed: str) -> bool:
    """Whether a reply names estimator, outcome and terms, as only a regression line does."""
    if not re.search(r"\w[\s(].*\w", typed):
        return False
    from reviewkit.readers.model_lines import read_model_line

    try:
        understood = read_model_line(typed).understood
    except Refusal:
        return False
    model = understood.get("model", {})
    named = understood.get("outcome", {}).get("column") and model.get("terms")
    return bool(named and ("estimator" in model or "~" in typed))


def _taken(session: Session, prompt: Prompt, reply: Reply) -> Session | None:
    """What a reply leads to; None where the same question stands."""
    match reply:
        case Answered():
            return _answered(session, prompt, reply)
        case Commanded(command, text):
            return _commanded(session, prompt, command, text)
        case Matches(typed, found):
            session.screen.say(f"Several fit `{typed}`:", "  ")
            for number, choice in found[: 2 * LIST_AT_ONCE]:
                show_choice(number, choice, session.screen)
        case Unclear(message):
            session.screen.say(message, "  ")
    return None


def _answered(session: Session, prompt: Prompt, reply: Answered) -> Session | None:
    if prompt.form in (Form.ONE, Form.SEVERAL, Form.COLUMN, Form.TERMS) and reply.value:
        labels = {each.value: each.shown for each in prompt.choices}
        shown = labels.get(reply.value) if isinstance(reply.value, str) else None
        session.screen.faint(f"= {shown or shown_value(prompt.definition, reply.value)}", "  ")
    if prompt.form is Form.CHECKLIST and isinstance(reply.value, tuple):
        session.screen.faint(f"= yes or partly: {', '.join(reply.value) or 'none'}; no: the others", "  ")
    if prompt.name.startswith(SPECIFYING):
        return _specified(session, prompt, reply.value)
    _say_what_differs(session, prompt, reply.value)
    after = session.recording(*entries_for(prompt, reply.value, reply.place, session.interview))
    if after.answered == TRIAGE_AFTER:
        _say_how_it_stands(after)
    return after


def _say_what_differs(session: Session, prompt: Prompt, value: Value) -> None:
    """Where paper, script or data say something else: said at once, and kept beside the answer."""
    for fact in facts_of(session.interview).every(prompt.name, prompt.subject):
        said = fact.value
        if fact.standing is not Standing.SETTLED and NOT_STATED not in (said, value) and not agree(said, value):
            shown = shown_value(prompt.definition, said)
            session.screen.say(f"But {where_from(fact)}: {shown}. Your answer counts; both are kept.", "  ")


def _say_how_it_stands(session: Session) -> None:
    findings = decide(facts_of(session.interview), session.interview.book)
    raised = sum(each.state is State.RAISED for each in findings)
    waiting = [each for each in findings if each.state is State.OPEN]
    major = sum(each.importance is Importance.MAJOR for each in waiting)
    session.screen.write("")
    points = counted(raised, "point")
    session.screen.say(f"So far {points} raised; {len(waiting)} open, {major} of them major if raised.")


def _commanded(session: Session, prompt: Prompt, command: Command, text: str) -> Session | None:
    match command:
        case Command.QUIT:
            raise Left
        case Command.HELP:
            explain(prompt, session.interview, session.screen)
        case Command.ALL:
            show_choices(prompt.choices, session.screen, len(prompt.choices))
        case Command.SKIP:
            session.screen.faint("left open", "  ")
            return session.recording(Entry(Act.SKIP, prompt.name, prompt.subject))
        case Command.REMARK:
            session.screen.faint("noted; `show` lists it, no note holds it", "  ")
            return session.recording(Entry(Act.REMARK, prompt.name, prompt.subject, text=text))
        case Command.BACK:
            back = undoing(session.interview.entries)
            if back:
                return session.recording(*back)
            session.screen.say("This is the first question.", "  ")
    return None


# --- the specification ------------------------------------------------------------------------------------------


def _specified(session: Session, prompt: Prompt, value: Value) -> Session | None:
    """Write down an answer that builds the specification, if the specification can be read with it."""
    name = prompt.name.removeprefix(SPECIFYING)
    understood: Json = None
    if name == "data" and value:
        session, value = _data_given(session, str(value))
    if name == "line" and value:
        understood = _understood(str(value), session.screen)
        if not understood:
            return None
    entry = Entry(Act.ANSWER, prompt.name, prompt.subject, value, understood=understood)
    trial = replace(session.interview, entries=(*session.interview.entries, entry))
    problem = problem_with(specifying(trial))
    if problem:
        session.screen.say(problem, "  ")
        return None
    return _finished(session.recording(entry))


def _data_given(session: Session, typed: str) -> tuple[Session, str]:
    interview, screen = session.interview, session.screen
    path = session.case.beside(typed) if typed in interview.files else Path(typed.strip("'\"")).expanduser()
    screen.faint(f"reading {path.name} …", "  ")
    columns = data_columns.describe(session.case, path)
    screen.faint(f"{len(columns)} columns", "  ")
    for remark in data_columns.remarks(session.case):
        screen.say(remark, "  ")
    case = casefolder.giving(session.case, Input.DATA, path)
    place = casefolder.relative(path, case.path)
    return Session(case, replace(interview, columns=columns, files=(place,)), screen), place


def _understood(line: str, screen: Screen) -> Json:
    """The part of a specification that a pasted line gives, shown as it was understood."""
    from reviewkit.readers.model_lines import read_model_line

    read = read_model_line(line)
    for shown in understood_lines(read.understood):
        screen.say(shown, "  understood: ", "              ")
    for left in read.not_understood:
        screen.say(left, "  not understood: ", "                  ")
    for hint in read.hints:
        screen.say(hint, "  note: ", "        ")
    return read.understood


def understood_lines(understood: Json) -> tuple[str, ...]:
    """What was understood of a line, one part a line."""
    return tuple(f"{table}: {_in_words(values)}" for table, values in understood.items() if values)


def _in_words(values: Json) -> str:
    match values:
        case dict():
            return "; ".join(f"{key} {_in_words(each)}" for key, each in values.items())
        case list() | tuple():
            return ", ".join(map(str, values))
        case _:
            return str(values)


def _finished(session: Session) -> Session:
    """Write the specification and re-estimate once nothing is missing from it."""
    state = specifying(session.interview)
    if state.without_data or next_step(state) is not None:
        return session
    name, screen = session.case.specification().name, session.screen
    written = review.specify(session.case, session.interview)
    kept = "was edited by hand and is kept as it is"
    screen.say(f"{name} {'holds the specification; you may edit it' if written else kept}.", "  ")
    _reestimate(session.case, screen)
    given = review.given_facts(session.case, review.read_results(session.case))
    return replace(session, interview=replace(session.interview, given=given))


def _reestimate(case: CaseFolder, screen: Screen) -> None:
    """Re-estimate between two questions; what cannot be estimated is said, and the questions go on."""
    try:
        review.load_numbers()
        with telling(lambda text: screen.faint(text, "  ")) as tell:
            estimated = review.refit(case, progress=tell)
    except Refusal as refusal:
        screen.say(f"Not re-estimated. {refusal.message()}", "  ")
        return
    for warning in estimated.warnings:
        screen.say(warning, "  ")
    for line in review.beside_print(estimated):
        screen.say(line, "  ")
    screen.say("Re-estimated: what the data show need not be asked.", "  ")


def refresh(case: CaseFolder, screen: Screen) -> None:
    """Re-estimate first where the specification is newer than the results, so that nothing known is asked."""
    if review.is_stale(case):
        screen.say("Specification or data are newer than the results.")
        _reestimate(case, screen)
