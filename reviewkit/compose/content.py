"""What a note is made from, and what the referee wishes of it."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Any

from reviewkit.exhibit import Exhibit
from reviewkit.facts import Facts
from reviewkit.refusals import Refusal
from reviewkit.rules import Finding, RuleBook


class Voice(StrEnum):
    """How the referee speaks."""

    I = "I"  # noqa: E741 – it is the word
    WE = "we"


@dataclass(frozen=True, slots=True)
class NoteWishes:
    """The referee's hand in a note, as `note.toml` keeps it; rules are named by their file's stem."""

    order: tuple[str, ...] = ()
    """Rules whose points come first, in this order."""
    dropped: Mapping[str, str] = field(default_factory=dict)
    """Rules whose points are left out, each with the reason (kept for the referee, in no note)."""
    own_points: tuple[str, ...] = ()
    """Points in the referee's own words, for the authors."""
    own_words: Mapping[str, str] = field(default_factory=dict)
    """By place: `opening`, `closing`, `editor` (to the editor only), or a rule's name for a line under its point."""
    voice: Voice = Voice.WE


@dataclass(frozen=True, slots=True)
class Repeat:
    """What someone needs to compute a model's numbers again."""

    model: str
    specification: str
    """The specification file's text."""
    data_name: str = ""
    sha256: str = ""


@dataclass(frozen=True, slots=True)
class CaseContent:
    """All that a note may be made from."""

    title: str
    facts: Facts
    findings: tuple[Finding, ...]
    book: RuleBook
    exhibits: tuple[Exhibit, ...] = ()
    wishes: NoteWishes = NoteWishes()
    repeats: tuple[Repeat, ...] = ()


_KEYS = ("format", "order", "dropped", "own_points", "own_words", "voice")


def wishes_from(values: Mapping[str, Any], where: str = "note.toml") -> NoteWishes:
    """The wishes in the tables of a `note.toml`; refuses what it does not know."""
    unknown = [key for key in values if key not in _KEYS]
    if unknown:
        raise Refusal(where, f"unknown key `{unknown[0]}`", ", ".join(_KEYS))
    voice = values.get("voice", Voice.WE)
    if voice not in tuple(Voice):
        raise Refusal(where, f"voice is `{voice}`", ", ".join(Voice))
    return NoteWishes(
        order=_texts(values, "order", where),
        dropped=_table(values, "dropped", where),
        own_points=_texts(values, "own_points", where),
        own_words=_table(values, "own_words", where),
        voice=Voice(voice),
    )


def _texts(values: Mapping[str, Any], key: str, where: str) -> tuple[str, ...]:
    found = values.get(key, [])
    if not isinstance(found, list) or not all(isinstance(one, str) for one in found):
        raise Refusal(f"{where}, {key}", "this is no list of texts", 'a list such as ["first", "second"]')
    return tuple(found)


def _table(values: Mapping[str, Any], key: str, where: str) -> Mapping[str, str]:
    found = values.get(key, {})
    if not isinstance(found, dict) or not all(isinstance(one, str) for one in found.values()):
        raise Refusal(
            f"{where}, {key}", "this is no table of texts", f'lines such as rule-name = "words" under [{key}]'
        )
    return dict(found)
