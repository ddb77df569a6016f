"""The fixed phrases of a note, read from templates/note.toml and filled in by name."""

import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from types import MappingProxyType
from typing import Any

from reviewkit.compose.content import Voice
from reviewkit.refusals import Refusal
from reviewkit.shipped import templates_folder

_NAME = re.compile(r"\{(\w+)\}")
_WE = re.compile(r"\b(we are|we were|we have|we|our|us)\b", re.IGNORECASE)
_AS_ONE = {"we are": "I am", "we were": "I was", "we have": "I have", "we": "I", "our": "my", "us": "me"}


@dataclass(frozen=True, slots=True)
class Phrases:
    """Phrases by `table.key`, in the referee's voice."""

    tables: Mapping[str, Mapping[str, Any]]
    voice: Mapping[str, str]

    def say(self, phrase: str, /, **values: str) -> str:
        """The phrase of that name with `{…}` replaced; each must be given."""
        table, _, key = phrase.partition(".")
        known = {**self.voice, **values}
        return _NAME.sub(lambda found: known[found[1]], self.tables[table][key])

    def spoken(self, words: str) -> str:
        """Words of a rule, which says `we`, in the referee's voice."""
        return words if self.voice["we"] == "we" else _WE.sub(lambda found: _AS_ONE[found[0].lower()], words)

    def has(self, name: str) -> bool:
        """Whether there is a phrase of that name."""
        table, _, key = name.partition(".")
        return key in self.tables.get(table, {})

    def limit(self, name: str) -> int:
        """A limit on words or points."""
        return int(self.tables["limits"][name])

    @property
    def order(self) -> tuple[str, ...]:
        """The parts of the authors' note in their order."""
        return tuple(self.tables["order"]["authors"])


def phrases_for(voice: Voice, folder: Path | None = None) -> Phrases:
    """The phrases shipped with the program (or those in `folder`) in that voice."""
    tables = _tables((folder or templates_folder()) / "note.toml")
    spoken = dict(tables["voice"][voice])
    capitals = {key.capitalize(): text[:1].upper() + text[1:] for key, text in spoken.items()}
    return Phrases(tables, MappingProxyType({**spoken, **capitals}))


@cache
def _tables(path: Path) -> Mapping[str, Any]:
    try:
        return MappingProxyType(tomllib.loads(path.read_text(encoding="utf-8")))
    except (OSError, ValueError) as problem:
        raise Refusal(path.name, f"the wording of notes cannot be read ({problem})") from problem
