"""The clauses that conditions are made of, decided true, false or unknown.

The three values follow Kleene's strong logic: what is decided stays decided when missing facts are filled in.
"""

import math
import operator
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

from reviewkit.facts import NotStated, Value
from reviewkit.printed import Printed
from reviewkit.vocabulary import FactDefinition

Lookup = Callable[[str], Value | None]
"""Gives the value of a fact, NOT_STATED, or None where nothing is known."""

Known = float | str | tuple[str, ...]
"""What an expression comes to once its facts are known."""


@dataclass(frozen=True, slots=True)
class Name:
    """A fact."""

    definition: FactDefinition

    @property
    def name(self) -> str:
        """Its name in the vocabulary."""
        return self.definition.name


@dataclass(frozen=True, slots=True)
class Literal:
    """A number, a text, or a list of either; `setting` where it is one."""

    value: float | str | tuple[float | str, ...]
    setting: str = ""


@dataclass(frozen=True, slots=True)
class Calculation:
    """One of `+ - * /` or a function of numbers."""

    function: str
    arguments: tuple["Expression", ...]


@dataclass(frozen=True, slots=True)
class Comparison:
    """Two expressions and one of `== != < <= > >= in not in`."""

    sign: str
    left: "Expression"
    right: "Expression"

    @property
    def names(self) -> tuple[str, ...]:
        """The facts it compares."""
        return (*_names_in(self.left), *_names_in(self.right))


@dataclass(frozen=True, slots=True)
class Stated:
    """Whether a fact was looked for and found; known also where the answer is `not stated`."""

    fact: Name


@dataclass(frozen=True, slots=True)
class Not:
    """The opposite."""

    part: "Clause"


@dataclass(frozen=True, slots=True)
class And:
    """`and`."""

    parts: tuple["Clause", ...]


@dataclass(frozen=True, slots=True)
class Or:
    """`or`."""

    parts: tuple["Clause", ...]


Expression = Name | Literal | Calculation
Clause = bool | Comparison | Stated | Not | And | Or

SIGNS: Mapping[str, Callable[..., bool]] = {
    "==": operator.eq,
    "!=": operator.ne,
    "<": operator.lt,
    "<=": operator.le,
    ">": operator.gt,
    ">=": operator.ge,
    "in": lambda left, right: operator.contains(right, left),
    "not in": lambda left, right: not operator.contains(right, left),
}
CALCULATIONS: Mapping[str, Callable[..., float]] = {
    "+": operator.add,
    "-": operator.sub,
    "*": operator.mul,
    "/": operator.truediv,
    "negative": operator.neg,
    "abs": abs,
    "exp": math.exp,
    "log": math.log,
    "min": min,
    "max": max,
}
ARGUMENTS: Mapping[str, tuple[int, int]] = {"abs": (1, 1), "exp": (1, 1), "log": (1, 1), "min": (2, 9), "max": (2, 9)}


def decide(clause: Clause, lookup: Lookup) -> bool | None:
    """True, false, or None where it is unknown."""
    match clause:
        case bool():
            return clause
        case Comparison(sign, left, right):
            first, second = _known(left, lookup), _known(right, lookup)
            return None if first is None or second is None else SIGNS[sign](first, second)
        case Stated(fact):
            value = lookup(fact.name)
            return None if value is None else not isinstance(value, NotStated)
        case Not(part):
            decided = decide(part, lookup)
            return None if decided is None else not decided
        case And(parts):
            return _until(False, parts, lookup)
        case Or(parts):
            return _until(True, parts, lookup)


def _until(decisive: bool, parts: tuple[Clause, ...], lookup: Lookup) -> bool | None:
    """`decisive` if one part is, unknown if else one is unknown, otherwise its opposite."""
    unknown = False
    for part in parts:
        decided = decide(part, lookup)
        if decided is decisive:
            return decisive
        unknown = unknown or decided is None
    return None if unknown else not decisive


def _known(expression: Expression, lookup: Lookup) -> Known | tuple[float | str, ...] | None:
    match expression:
        case Name():
            return plain(lookup(expression.name))
        case Literal(value):
            return value
        case Calculation(function, arguments):
            return _calculated(function, [_known(argument, lookup) for argument in arguments])


def _calculated(function: str, numbers: list[Known | tuple[float | str, ...] | None]) -> float | None:
    """The number, or None where one is unknown or there is no finite result (division by zero, overflow)."""
    if any(number is None for number in numbers):
        return None
    try:
        result = float(CALCULATIONS[function](*numbers))
    except (ArithmeticError, ValueError):
        return None
    return result if math.isfinite(result) else None


def plain(value: Value | None) -> Known | None:
    """The value to compare: a printed figure by its number; None where missing, not stated or not finite."""
    if value is None or isinstance(value, NotStated):
        return None
    if isinstance(value, Printed):
        return value.value
    return None if isinstance(value, float) and not math.isfinite(value) else value


def missing(clause: Clause, lookup: Lookup) -> Iterator[str]:
    """All facts that can still decide it; a comparison with one that is not stated waits on that one only."""
    if decide(clause, lookup) is not None:
        return
    match clause:
        case Not(part):
            yield from missing(part, lookup)
        case And(parts) | Or(parts):
            for part in parts:
                yield from missing(part, lookup)
        case _:
            unknown = [name for name in names_of(clause) if plain(lookup(name)) is None]
            yield from [name for name in unknown if lookup(name) is not None] or unknown


def first_missing(clause: Clause, lookup: Lookup) -> tuple[str, ...]:
    """The facts of the first undecided part that an answer can decide: later parts may not matter."""
    if decide(clause, lookup) is not None:
        return ()
    match clause:
        case Not(part):
            return first_missing(part, lookup)
        case And(parts) | Or(parts):
            return next((found for part in parts if (found := first_missing(part, lookup))), ())
        case _:
            return tuple(name for name in missing(clause, lookup) if lookup(name) is None)


def parts_of(clause: Clause) -> Iterator[Clause]:
    """The clause and all clauses within it."""
    yield clause
    match clause:
        case Not(part):
            yield from parts_of(part)
        case And(parts) | Or(parts):
            for part in parts:
                yield from parts_of(part)


def names_of(clause: Clause) -> Iterator[str]:
    """The facts that a clause names, settings left out."""
    for part in parts_of(clause):
        match part:
            case Comparison():
                yield from part.names
            case Stated(fact):
                yield fact.name


def _names_in(expression: Expression) -> Iterator[str]:
    match expression:
        case Name():
            yield expression.name
        case Calculation(_, arguments):
            for argument in arguments:
                yield from _names_in(argument)
