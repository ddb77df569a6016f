"""Published works as they may be cited: only fields that were seen, a DOI only where one was seen."""

from dataclasses import dataclass
from enum import StrEnum


class Use(StrEnum):
    """How strongly a work is cited."""

    SHOWS = "shows"  # somebody here read what it shows
    SEE = "see"


class Side(StrEnum):
    """Whether a work supports the point or the authors' choice."""

    FOR = "for"
    COUNTER = "counter"


@dataclass(frozen=True, slots=True)
class Work:
    """One published work; `families` are the authors' family names in order."""

    id: str
    families: tuple[str, ...]
    year: str
    title: str
    details: str = ""
    """Journal, volume and pages, or publisher, as far as seen."""
    doi: str = ""
    text_seen: bool = False
    """Whether abstract or text was read; otherwise it is cited with `see` only."""
    supports: str = ""
    limits: str = ""


@dataclass(frozen=True, slots=True)
class Citation:
    """A rule's use of a work."""

    id: str
    use: Use = Use.SEE
    side: Side = Side.FOR


def short_citation(work: Work) -> str:
    """`Chen and Roth (2024)`."""
    raise NotImplementedError


def citation(work: Work) -> str:
    """The full entry of a reference list."""
    raise NotImplementedError
