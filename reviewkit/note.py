"""A note as sections of blocks; knows no format. Writers match on `Block` and end in `assert_never`."""

from dataclasses import dataclass
from enum import StrEnum

from reviewkit.exhibit import FigureData


class Audience(StrEnum):
    """Whom a note is for; what is for one never reaches the other."""

    AUTHORS = "authors"
    EDITOR = "editor"


@dataclass(frozen=True, slots=True)
class Paragraph:
    """Running text, with an optional lead-in that is set off (`What was done.`)."""

    text: str
    lead: str = ""


@dataclass(frozen=True, slots=True)
class Points:
    """A list of short points."""

    items: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Table:
    """A table of finished texts; `note` stands below it."""

    caption: str
    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    note: str = ""


@dataclass(frozen=True, slots=True)
class Figure:
    """A picture: its data, its caption, and an alternative text that says what it shows."""

    caption: str
    alt: str
    data: FigureData


@dataclass(frozen=True, slots=True)
class Excerpt:
    """Words quoted from the manuscript or a script, with their place."""

    text: str
    place: str


@dataclass(frozen=True, slots=True)
class ReferenceList:
    """Works cited, each a finished entry."""

    entries: tuple[str, ...]


Block = Paragraph | Points | Table | Figure | Excerpt | ReferenceList


@dataclass(frozen=True, slots=True)
class Section:
    """A heading with its blocks; level 1 stands below the note's title."""

    title: str
    blocks: tuple[Block, ...]
    level: int = 1


@dataclass(frozen=True, slots=True)
class Note:
    """What leaves the desk."""

    title: str
    audience: Audience
    sections: tuple[Section, ...]
    language: str = "en"
