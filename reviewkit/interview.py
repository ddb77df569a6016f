"""Which question comes next, and what an answer adds; pure steps that neither read nor print."""

from collections.abc import Iterable
from dataclasses import dataclass, replace
from textwrap import shorten

from reviewkit.answers import SPECIFYING, Act, Entry, latest_answers, rejected, settled_facts, standing_entries
from reviewkit.decisions import Question, decide, next_question
from reviewkit.facts import Fact, Facts, NotStated, Standing, Value
from reviewkit.printed import Printed
from reviewkit.prompts import Choice, Form, Prompt
from reviewkit.records import Json
from reviewkit.rules import Importance, Rule, RuleBook, State
from reviewkit.specification_parts import DataColumn, Specifying
from reviewkit.specifying import next_step
from reviewkit.vocabulary import FactDefinition, Kind
from reviewkit.wording import percent, share, text

CONFIRM = "confirm"
"""Name of the prompt that shows many machine readings at once."""
CHECKLIST = "checklist"
"""Name of the prompt that asks several yes-or-no questions at once."""
TOGETHER = "answered together"
"""Begins the text of entries that one screen made, and that are undone at once."""
FEWEST_TOGETHER = 2
"""Yes-or-no questions that make a list."""
LONGEST_QUOTE = 90
MOST_AT_ONCE = 12
"""Readings on one screen."""

_FORMS = {
    Kind.ONE: Form.ONE,
    Kind.ANSWER: Form.ONE,
    Kind.SOME: Form.SEVERAL,
    Kind.NAMES: Form.NAMES,
    Kind.NUMBER: Form.NUMBER,
    Kind.PRINTED: Form.PRINTED,
    Kind.TEXT: Form.TEXT,
}


@dataclass(frozen=True, slots=True)
class Interview:
    """All that the choice of the next question rests on."""

    given: Facts
    """What machines found, linked; the answers come on top."""
    book: RuleBook
    entries: tuple[Entry, ...] = ()
    start: int = 0
    """Entries of earlier sessions; what was skipped in those is asked again."""
    columns: tuple[DataColumn, ...] = ()
    files: tuple[str, ...] = ()
    only_major: bool = False
    again: tuple[str, ...] = ()
    """Facts to ask for anew although they are known."""
    specified: bool = False
    """Whether a specification stands already, written by hand or in an earlier session."""


def facts_of(interview: Interview) -> Facts:
    """What is known: machine readings that nobody rejected, and the answers."""
    wrong = rejected(interview.entries)
    kept = tuple(each for each in interview.given if not _is_rejected(each, wrong))
    return replace(interview.given, facts=kept).adding(settled_facts(interview.entries))


def next_prompt(interview: Interview) -> Prompt | None:
    """What to ask now; None where nothing can change any more, or all that is left was skipped."""
    return (
        _specification_prompt(interview)
        or _again_prompt(interview)
        or _confirmation(interview)
        or _rule_prompt(interview)
    )


def entries_for(prompt: Prompt, value: Value, place: str, interview: Interview) -> tuple[Entry, ...]:
    """What an answer adds to the log; for a screen of readings, or a list of questions, one entry each."""
    if prompt.name == CHECKLIST:
        return _checked(prompt, value, place, interview)
    if prompt.name != CONFIRM:
        return (Entry(Act.ANSWER, prompt.name, prompt.subject, value, place),)
    wrong = value if isinstance(value, tuple) else ()
    shown = dict(zip((each.value for each in prompt.choices), proposals(interview), strict=False))
    return tuple(_judged(each, number in wrong) for number, each in shown.items())


def undoing(entries: Iterable[Entry]) -> tuple[Entry, ...]:
    """The entries that take back the last step; a screen that was confirmed goes back whole."""
    held = [each for each in standing_entries(entries) if each.act is not Act.REMARK]
    count = 1 if held else 0
    together = held[-1].text if held and held[-1].text.startswith(TOGETHER) else None
    while count < len(held) and held[-1 - count].text == together:
        count += 1
    return tuple(Entry(Act.UNDO) for _ in range(count))


def proposals(interview: Interview) -> tuple[Fact, ...]:
    """Machine readings that nobody has confirmed, rejected or answered, as they would count."""
    facts, vocabulary = facts_of(interview), interview.book.vocabulary
    seen: dict[tuple[str, str], Fact] = {}
    for fact in facts:
        known = facts.known(fact.name, fact.subject)
        if known is fact and not fact.confirmed and fact.standing is not Standing.SETTLED and fact.name in vocabulary:
            seen[fact.subject, fact.name] = fact
    return tuple(seen.values())[:MOST_AT_ONCE]


def open_points(interview: Interview) -> int:
    """How many rules wait for facts."""
    return sum(each.state is State.OPEN for each in decide(facts_of(interview), interview.book))


def specifying(interview: Interview) -> Specifying:
    """How far the specification has come."""
    named = [each for each in latest_answers(interview.entries) if each.name.startswith(SPECIFYING)]
    answers = {each.name.removeprefix(SPECIFYING): each.value for each in named if each.value is not None}
    understood: Json = next((each.understood for each in named if each.understood), {})
    return Specifying(answers, understood, interview.columns, interview.files)


def shown_value(definition: FactDefinition | None, value: Value) -> str:
    """A value in words: shares in percent, printed figures with their digits."""
    if isinstance(value, NotStated):
        return "not stated"
    if isinstance(value, Printed):
        return value.text
    if value == ():
        return "none"
    if definition is not None and definition.unit == "share" and isinstance(value, float):
        return share(value)
    if definition is not None and definition.unit == "percent" and isinstance(value, float):
        return percent(value)
    return text(value)


# --- the four kinds of prompts ------------------------------------------------------------------------------------


def _specification_prompt(interview: Interview) -> Prompt | None:
    if interview.specified:
        return None
    prompt = next_step(specifying(interview))
    return None if prompt is None or (prompt.name, prompt.subject) in _skipped(interview) else prompt


def _again_prompt(interview: Interview) -> Prompt | None:
    held = standing_entries(interview.entries[interview.start :])
    done = {each.name for each in held if each.act is not Act.REMARK}
    for name in interview.again:
        definition = interview.book.vocabulary.get(name)
        if definition is not None and definition.asked and name not in done:
            return _of_question(Question(definition, _subject(definition), ()), interview)
    return None


def _confirmation(interview: Interview) -> Prompt | None:
    found = proposals(interview)
    if not found or (CONFIRM, "study") in _skipped(interview):
        return None
    return Prompt(
        CONFIRM,
        "These were read by machine. Are they right?",
        Form.CONFIRM,
        choices=tuple(_reading(str(number), each, interview) for number, each in enumerate(found, start=1)),
        default=(),
        default_why="all are right",
        hint="or the numbers of those that are wrong, with blanks between",
        explains="What you confirm counts as your own word; what you call wrong is asked for instead.",
    )


def _rule_prompt(interview: Interview) -> Prompt | None:
    question = next_question(facts_of(interview), _asking_book(interview))
    if question is None:
        return None
    together = _asked_together(question, interview)
    return _of_question(question, interview) if len(together) < FEWEST_TOGETHER else _checklist(together)


def _asked_together(question: Question, interview: Interview) -> tuple[FactDefinition, ...]:
    """Unknown yes-or-no facts that open rules wait on, answered from the same place as the question."""
    first = question.definition
    if first.kind is not Kind.ANSWER or (CHECKLIST, "study") in _skipped(interview):
        return ()
    book, facts = _asking_book(interview), facts_of(interview)
    missing = {name for each in decide(facts, book) for name in each.missing}
    same = (each for each in book.vocabulary if each.kind is Kind.ANSWER and each.found_in is first.found_in)
    return tuple(
        each for each in same if each.asked and each.name in missing and facts.known(each.name, _subject(each)) is None
    )


def _checklist(definitions: tuple[FactDefinition, ...]) -> Prompt:
    place = definitions[0].found_in.value
    explained = " ".join(f"{number}: {each.explains}" for number, each in enumerate(definitions, start=1))
    partly = tuple(each.name for each in definitions if "partly" in each.options)
    example = next((str(number) for number, each in enumerate(definitions, start=1) if each.name in partly), "")
    return Prompt(
        CHECKLIST,
        f"Look at the {place}. To which of these is the answer yes?",
        Form.CHECKLIST,
        choices=tuple(Choice(each.name, each.question) for each in definitions),
        hint="numbers with blanks between"
        + (f", `{example}p` for partly" if example else "")
        + "; those left out count as no; `none`; `s` asks one by one",
        explains=explained,
        partly=partly,
    )


def _checked(prompt: Prompt, value: Value, place: str, interview: Interview) -> tuple[Entry, ...]:
    """An entry for each question of the list: yes, partly where marked, else no."""
    chosen = value if isinstance(value, tuple) else ()
    marked = {each.rstrip("p"): "partly" if each.endswith("p") else "yes" for each in chosen}
    together = f"{TOGETHER}: {prompt.choices[0].value}"
    return tuple(
        Entry(Act.ANSWER, each.value, _subject(interview.book.vocabulary[each.value]), said, place, text=together)
        for number, each in enumerate(prompt.choices, start=1)
        for said in (marked.get(str(number), "no"),)
    )


def _of_question(question: Question, interview: Interview) -> Prompt:
    definition = question.definition
    known = facts_of(interview).known(definition.name, question.subject)
    return Prompt(
        definition.name,
        definition.question,
        _FORMS[definition.kind],
        question.subject,
        choices=tuple(Choice(each) for each in definition.options),
        default=None if known is None else known.value,
        default_why="" if known is None else where_from(known),
        found_in=definition.found_in.value,
        explains=definition.explains,
        waiting=tuple(interview.book.rule(name).title for name in question.waiting),
        hint=_hint(definition),
        definition=definition,
    )


def _hint(definition: FactDefinition) -> str:
    match definition.kind:
        case Kind.ONE | Kind.ANSWER:
            return "a number, or the beginning of a word"
        case Kind.SOME:
            return "numbers with blanks between; `none` for none"
        case Kind.NUMBER if definition.unit == "share":
            return "a share such as 0.31, or 31 %"
        case Kind.NUMBER:
            return "a number"
        case _:
            return definition.options_in_words


def where_from(fact: Fact) -> str:
    """Where a fact comes from, in a few words."""
    place = f", {fact.source.place}" if fact.source.place else ""
    words = {"manuscript": "the paper says", "script": "the script has", "column": "the data show"}
    words |= {
        "exhibit": "the re-estimation shows",
        "specification": "as specified",
        "answer": "your answer",
        "derived": "worked out",
    }
    return words[fact.source.kind.value] + place


# --- parts ------------------------------------------------------------------------------------------------------


def _is_rejected(fact: Fact, wrong: frozenset[tuple[str, str, str]]) -> bool:
    return fact.standing is not Standing.SETTLED and (fact.subject, fact.name, str(fact.value)) in wrong


def _judged(fact: Fact, is_wrong: bool) -> Entry:
    act = Act.REJECT if is_wrong else Act.ANSWER
    return Entry(act, fact.name, fact.subject, fact.value, fact.source.place, fact.source.quote, TOGETHER)


def _reading(number: str, fact: Fact, interview: Interview) -> Choice:
    definition = interview.book.vocabulary.get(fact.name)
    label = definition.label if definition is not None and definition.label else fact.name
    quote = f": “{shorten(fact.source.quote, LONGEST_QUOTE, placeholder=' …')}”" if fact.source.quote else ""
    return Choice(number, f"{label}: {shown_value(definition, fact.value)}", where_from(fact) + quote)


def _skipped(interview: Interview) -> frozenset[tuple[str, str]]:
    held = standing_entries(interview.entries[interview.start :])
    return frozenset((each.name, each.subject) for each in held if each.act is Act.SKIP)


def _asking_book(interview: Interview) -> RuleBook:
    """The book as this session asks from it: nothing that was skipped, and major points alone if so wished."""
    skipped = {name for name, _ in _skipped(interview)}
    silent = [replace(each, question="") for each in interview.book.vocabulary if each.name in skipped]
    rules = tuple(each for each in interview.book.rules if _can_be_major(each) or not interview.only_major)
    return replace(interview.book, rules=rules, vocabulary=interview.book.vocabulary.adding(silent))


def _can_be_major(rule: Rule) -> bool:
    return rule.importance is Importance.MAJOR or rule.major_when is not None


def _subject(definition: FactDefinition) -> str:
    return definition.about if definition.about == "study" else f"{definition.about}:main"
