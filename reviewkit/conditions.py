"""Conditions and texts of rules: a closed one-line grammar over facts, decided true, false or unknown."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Protocol

from reviewkit.facts import Value

Lookup = Callable[[str], Value | None]
"""Gives the value of a fact, NOT_STATED, or None where nothing is known."""


class Described(Protocol):
    """What a condition must know of a fact to check its types; `vocabulary.FactDefinition` is one."""

    @property
    def kind(self) -> str: ...
    @property
    def options(self) -> tuple[str, ...]: ...


class Names(Protocol):
    """Where facts are described; `vocabulary.Vocabulary` is one."""

    def get(self, name: str) -> Described | None: ...


@dataclass(frozen=True, slots=True)
class Condition:
    """A condition that was read and type-checked."""

    text: str
    names: tuple[str, ...]

    def decide(self, lookup: Lookup) -> bool | None:
        """True, false, or None where it is unknown."""
        raise NotImplementedError


def read_condition(
    text: str, vocabulary: Names, settings: Mapping[str, float] | None = None, where: str = "condition"
) -> Condition:
    """Read a condition and check its types; a refusal names `where`, the clause, and what is allowed."""
    raise NotImplementedError


def render(template: str, lookup: Lookup) -> str:
    """The text with `{fact|formatter}` filled in; parts in `[[ … ]]` vanish where one of their facts is unknown."""
    raise NotImplementedError
