"""What facts there are: names, kinds, the question that asks for one, and where its answer is found."""

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace
from enum import StrEnum

from reviewkit.facts import NOT_STATED, NotStated, Value
from reviewkit.printed import Printed, read_printed
from reviewkit.refusals import Refusal


class Kind(StrEnum):
    """What the values of a fact look like."""

    ONE = "one of"  # str, one of the options
    SOME = "some of"  # tuple of options
    NAMES = "names"  # tuple of free names
    NUMBER = "number"  # float
    PRINTED = "printed number"  # Printed
    TEXT = "text"  # str
    ANSWER = "yes or no"  # str: yes, no and, where the definition lists it, partly


class Place(StrEnum):
    """Where an answer is found, in the order in which a referee turns the pages."""

    METHODS = "methods section"
    TABLE = "table and its notes"
    DATA_SECTION = "data section"
    ABSTRACT = "abstract"
    SCRIPT = "script"
    DATA = "data file"
    REFEREE = "your own judgement"
    NOWHERE = "worked out"  # by re-estimation or from other facts: never asked


PLACES = tuple(Place)
NONE = "none"
"""What is typed where several may be named and there is none."""


@dataclass(frozen=True, slots=True)
class FactDefinition:
    """One kind of fact; `explains` says in at most two sentences what the words of the question mean."""

    name: str
    about: str
    """The kind of subject it belongs to: study, data, model or claim."""
    kind: Kind
    question: str = ""
    """Empty for facts that are only worked out."""
    options: tuple[str, ...] = ()
    found_in: Place = Place.NOWHERE
    explains: str = ""
    unit: str = ""
    """Of a number: `share` (0 to 1), `percent`, `rows`, or words."""
    label: str = ""
    """The fact in a few words, for lists: `share of zeros in the outcome`."""
    low: float | None = None
    high: float | None = None

    @property
    def asked(self) -> bool:
        """Whether there is a question for it."""
        return bool(self.question)

    @property
    def options_in_words(self) -> str:
        """What is allowed, for messages."""
        match self.kind:
            case Kind.ONE | Kind.SOME | Kind.ANSWER:
                return ", ".join(self.options)
            case Kind.NUMBER:
                return f"a number{_range(self.low, self.high)}"
            case Kind.PRINTED:
                return "a figure as printed, such as 0.38"
            case Kind.NAMES:
                return "names separated by commas"
            case Kind.TEXT:
                return "words"

    def read(self, text: str, where: str = "") -> Value:
        """The value that a typed or stored text stands for; refuses one that the definition does not allow."""
        where, plain = where or self.name, text.strip()
        if plain == str(NOT_STATED):
            return NOT_STATED
        match self.kind:
            case Kind.NUMBER:
                hundred = 100 if self.unit == "share" and "%" in plain else 1
                return self.checked(read_printed(plain, where).value / hundred, where)
            case Kind.PRINTED:
                return read_printed(plain, where)
            case Kind.SOME | Kind.NAMES:
                parts = () if plain == NONE else tuple(part.strip() for part in plain.split(",") if part.strip())
                return self.checked(parts, where)
            case Kind.ONE | Kind.ANSWER | Kind.TEXT:
                return self.checked(plain, where)

    def checked(self, value: Value, where: str = "") -> Value:
        """The value itself, refused where it is none of this definition's."""
        if not self.allows(value):
            raise Refusal(where or self.name, f"`{_shown(value)}` is no value of {self.name}", self.options_in_words)
        return value

    def allows(self, value: Value) -> bool:
        """Whether the value is of this kind, among the options and in range."""
        if isinstance(value, NotStated):
            return True
        match self.kind:
            case Kind.ONE | Kind.ANSWER:
                return isinstance(value, str) and value in self.options
            case Kind.SOME:
                return isinstance(value, tuple) and set(value) <= set(self.options)
            case Kind.NAMES:
                return isinstance(value, tuple)
            case Kind.NUMBER:
                return isinstance(value, (int, float)) and not isinstance(value, bool) and self._in_range(value)
            case Kind.PRINTED:
                return isinstance(value, Printed)
            case Kind.TEXT:
                return isinstance(value, str)

    def _in_range(self, number: float) -> bool:
        above = self.low is None or number >= self.low
        return math.isfinite(number) and above and (self.high is None or number <= self.high)


@dataclass(frozen=True, slots=True)
class Vocabulary:
    """All definitions, by name, in the order of the files."""

    definitions: tuple[FactDefinition, ...] = ()
    _by_name: dict[str, FactDefinition] = field(init=False, repr=False, compare=False, default_factory=dict)

    def __post_init__(self) -> None:
        self._by_name.update({definition.name: definition for definition in self.definitions})

    def __iter__(self) -> Iterator[FactDefinition]:
        return iter(self.definitions)

    def __contains__(self, name: str) -> bool:
        return name in self._by_name

    def get(self, name: str) -> FactDefinition | None:
        """The definition of that name, if there is one."""
        return self._by_name.get(name)

    def __getitem__(self, name: str) -> FactDefinition:
        if name not in self._by_name:
            raise Refusal(name, "there is no fact of that name", remedy=closest(name, self._by_name))
        return self._by_name[name]

    def adding(self, more: Iterable[FactDefinition]) -> "Vocabulary":
        """These definitions and `more`; a name that exists already is replaced."""
        merged = {**self._by_name, **{each.name: each for each in more}}
        return replace(self, definitions=tuple(merged.values()))


def closest(name: str, names: Iterable[str]) -> str:
    """Up to three similar names, as a remedy for a misspelt one."""
    from difflib import get_close_matches

    close = get_close_matches(name, list(names), n=3, cutoff=0.5)
    return f"The closest are: {', '.join(close)}" if close else ""


def _range(low: float | None, high: float | None) -> str:
    match low, high:
        case None, None:
            return ""
        case _, None:
            return f" of at least {low:g}"
        case None, _:
            return f" of at most {high:g}"
        case _:
            return f" from {low:g} to {high:g}"


def _shown(value: Value) -> str:
    return ", ".join(value) if isinstance(value, tuple) else str(value)
