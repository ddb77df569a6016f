"""What can be asked, and how a typed reply is understood; nothing here reads or prints."""

import re
from dataclasses import dataclass
from enum import StrEnum
from typing import assert_never

from reviewkit.facts import NOT_STATED, STUDY, Value
from reviewkit.printed import read_printed
from reviewkit.refusals import Refusal
from reviewkit.vocabulary import FactDefinition


class Form(StrEnum):
    """What a reply looks like."""

    ONE = "one"  # one of the choices
    SEVERAL = "several"  # some of the choices
    NUMBER = "number"
    PRINTED = "printed"
    NAMES = "names"
    TEXT = "text"
    COLUMN = "column"  # one of many choices, searched by a part of the name
    TERMS = "terms"  # columns, or terms in their grammar
    CHECKLIST = "checklist"  # the numbers of what holds; 2p for partly
    CONFIRM = "confirm"  # all right, or the numbers of those that are wrong


@dataclass(frozen=True, slots=True)
class Choice:
    """One numbered choice; `detail` stands behind it on the screen."""

    value: str
    label: str = ""
    detail: str = ""

    @property
    def shown(self) -> str:
        """The words on the screen."""
        return self.label or self.value


@dataclass(frozen=True, slots=True)
class Prompt:
    """One question, with all that the screen can tell about it."""

    name: str
    question: str
    form: Form
    subject: str = STUDY
    choices: tuple[Choice, ...] = ()
    default: Value | None = None
    """Taken where only Enter is pressed; an empty text or tuple means that nothing need be given."""
    default_why: str = ""
    found_in: str = ""
    explains: str = ""
    waiting: tuple[str, ...] = ()
    """What waits on the answer, in words."""
    hint: str = ""
    """What may be typed, in a few words."""
    partly: tuple[str, ...] = ()
    """Values of those choices of a checklist that may hold in part."""
    definition: FactDefinition | None = None
    """Of a fact that rules ask for; such a fact may be `not stated`."""


class Command(StrEnum):
    """What may be typed at any question instead of an answer."""

    HELP = "?"
    BACK = "b"
    SKIP = "s"
    QUIT = "q"
    REMARK = "r"
    ALL = "all"  # show every choice of a long list


_SPELLED = {"?": Command.HELP, "help": Command.HELP, "b": Command.BACK, "back": Command.BACK, "s": Command.SKIP}
_SPELLED |= {"skip": Command.SKIP, "q": Command.QUIT, "quit": Command.QUIT, "all": Command.ALL}
_NOT_STATED = ("ns", "not stated")


@dataclass(frozen=True, slots=True)
class Answered:
    """The reply is an answer; `place` is where in the paper it was seen, typed as `… @ p. 11`."""

    value: Value
    place: str = ""


@dataclass(frozen=True, slots=True)
class Commanded:
    """The reply is a command; `text` is a remark's."""

    command: Command
    text: str = ""


@dataclass(frozen=True, slots=True)
class Matches:
    """Several choices fit what was typed; each with its number."""

    typed: str
    found: tuple[tuple[int, Choice], ...]


@dataclass(frozen=True, slots=True)
class Unclear:
    """The reply cannot be used; one sentence says why and what can."""

    message: str


Reply = Answered | Commanded | Matches | Unclear


def read_reply(prompt: Prompt, typed: str) -> Reply:
    """What was meant: an answer, a command, or a list of what fits."""
    text = typed.strip()
    if text.casefold() in _SPELLED:
        return Commanded(_SPELLED[text.casefold()])
    if re.match(r"r\s+\S", text):
        return Commanded(Command.REMARK, text[1:].strip())
    if not text:
        return _of_enter(prompt)
    answer, place = _with_place(prompt, text)
    if answer.casefold() in (*_NOT_STATED, "n"):
        return _of_not_stated(prompt, answer, place)
    reply = _of_form(prompt, answer)
    return Answered(reply.value, place) if isinstance(reply, Answered) else reply


def _of_enter(prompt: Prompt) -> Reply:
    if prompt.default is None:
        return Unclear(f"Please give {_wanted(prompt)}; `s` leaves it open, `?` tells more.")
    return Answered(prompt.default)


def _with_place(prompt: Prompt, text: str) -> tuple[str, str]:
    if prompt.definition is None and prompt.form is not Form.CHECKLIST:
        return text, ""
    answer, _, place = text.partition(" @")
    return answer.strip(), place.strip()


def _of_not_stated(prompt: Prompt, typed: str, place: str) -> Reply:
    if typed.casefold() == "n" and any(each.value == "no" for each in prompt.choices):
        return Unclear("Type `no` for no, or `ns` if the paper does not say.")
    if prompt.definition is None:
        return Unclear("This is not about what the paper says; `s` leaves it open.")
    return Answered(NOT_STATED, place)


def _of_form(prompt: Prompt, text: str) -> Reply:
    match prompt.form:
        case Form.ONE | Form.COLUMN:
            return _of_one(prompt, text)
        case Form.SEVERAL | Form.CONFIRM:
            return _of_several(prompt, text)
        case Form.CHECKLIST:
            return _of_checklist(prompt, text)
        case Form.TERMS:
            return _of_terms(prompt, text)
        case Form.NUMBER:
            return _of_number(prompt, text)
        case Form.PRINTED:
            return _of_printed(text)
        case Form.NAMES:
            return Answered(tuple(part.strip() for part in text.split(",") if part.strip()))
        case Form.TEXT:
            return Answered(text)
        case _:
            assert_never(prompt.form)


def _of_one(prompt: Prompt, text: str) -> Reply:
    found = _fitting(prompt.choices, text)
    if isinstance(found, Matches):
        return found if found.found else Unclear(f"`{text[:40]}` fits none of the choices. {_numbers(prompt)}")
    return Answered(found.value)


def _of_several(prompt: Prompt, text: str) -> Reply:
    if text.casefold() == "none":
        return Answered(())
    tokens = (
        text.replace(",", " ").split() if re.fullmatch(r"[\d\s,]+", text) else re.split(r"\s*,\s*", text.strip(", "))
    )
    chosen = [_fitting(prompt.choices, token) for token in tokens]
    for token, found in zip(tokens, chosen, strict=True):
        if isinstance(found, Matches):
            return found if found.found else Unclear(f"`{token[:40]}` fits none of the choices. {_numbers(prompt)}")
    return Answered(tuple(dict.fromkeys(each.value for each in chosen if isinstance(each, Choice))))


def _of_checklist(prompt: Prompt, text: str) -> Reply:
    """Numbers of what holds, `p` behind those that hold in part: `1 3p` is ("1", "3p")."""
    if text.casefold() == "none":
        return Answered(())
    tokens = text.casefold().replace(",", " ").split()
    for token in tokens:
        number, partly = token.rstrip("p"), token.endswith("p")
        if not number.isdecimal() or not 1 <= int(number) <= len(prompt.choices):
            return Unclear(f"`{token[:40]}` is no number of the list. Type such as `1 3`, `2p` for partly, or `none`.")
        if partly and prompt.choices[int(number) - 1].value not in prompt.partly:
            return Unclear(f"{number} is yes or no: type `{number}`, or leave it out.")
    return Answered(tuple(dict.fromkeys(tokens)))


_TERM = re.compile(r"(?:`[^`]*`|\([^()]*(?:\([^()]*\)[^()]*)*\)|[^\s,(`])+")
_GRAMMAR = re.compile(r"[(:*^`]")


def _of_terms(prompt: Prompt, text: str) -> Reply:
    terms: list[str] = []
    for token in _TERM.findall(text):
        if _GRAMMAR.search(token):
            terms.append(token)
            continue
        found = _fitting(prompt.choices, token)
        if isinstance(found, Matches):
            return (
                found
                if found.found
                else Unclear(f"No column has `{token[:40]}` in its name; `all` shows every column.")
            )
        terms.append(found.value)
    return Answered(tuple(dict.fromkeys(terms))) if terms else Unclear("No column was named.")


def _of_number(prompt: Prompt, text: str) -> Reply:
    definition, percent = prompt.definition, text.endswith("%")
    try:
        number = read_printed(text, "This").value
        number = number / 100 if percent and definition is not None and definition.unit == "share" else number
        return Answered(number if definition is None else definition.checked(number, "This"))
    except Refusal as refusal:
        return Unclear(refusal.message())


def _of_printed(text: str) -> Reply:
    try:
        return Answered(read_printed(text, "This"))
    except Refusal as refusal:
        return Unclear(refusal.message())


def _fitting(choices: tuple[Choice, ...], typed: str) -> Choice | Matches:
    """The one choice that a number, a name, its beginning or a part of it names; else all that fit."""
    if typed.isdecimal() and 1 <= int(typed) <= len(choices):
        return choices[int(typed) - 1]
    wanted = typed.casefold()
    numbered = tuple(enumerate(choices, start=1))
    tests = (
        lambda each: wanted == each.shown.casefold(),
        lambda each: each.shown.casefold().startswith(wanted),
        lambda each: wanted == each.value.casefold(),
        lambda each: each.value.casefold().startswith(wanted),
        lambda each: wanted in f"{each.value} {each.shown} {each.detail}".casefold(),
    )
    for test in tests:
        found = tuple((number, each) for number, each in numbered if test(each))
        if len(found) == 1:
            return found[0][1]
        if found:
            return Matches(typed, found)
    return Matches(typed, ())


def _wanted(prompt: Prompt) -> str:
    match prompt.form:
        case Form.NUMBER:
            return "a number"
        case Form.PRINTED:
            return "the figure as printed, such as 0.38"
        case Form.TEXT | Form.NAMES:
            return "a few words"
        case Form.CHECKLIST:
            return "the numbers of those that hold, or `none`"
        case _:
            return "a number from the list"


def _numbers(prompt: Prompt) -> str:
    return f"Type a number from 1 to {len(prompt.choices)}." if len(prompt.choices) > 1 else "Type 1."
