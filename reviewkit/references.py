"""Published works as they may be cited: only fields that were seen, a DOI only where one was seen."""

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from typing import Any

from reviewkit.refusals import Refusal

_MOST_NAMES = 3  # works with more authors are cited as `… et al.`
_FULL_NAMES = 8  # in the list of works


class Use(StrEnum):
    """How strongly a work is cited."""

    SHOWS = "shows"  # its abstract or text was read
    SEE = "see"


class Side(StrEnum):
    """Whether a work supports the point or the authors' choice."""

    FOR = "for"
    COUNTER = "counter"


@dataclass(frozen=True, slots=True)
class Citation:
    """A rule's use of a work."""

    id: str
    use: Use = Use.SEE
    side: Side = Side.FOR


@dataclass(frozen=True, slots=True)
class Author:
    """One author; an organisation has a family name only."""

    family: str
    given: str = ""


@dataclass(frozen=True, slots=True)
class Work:
    """One published work, as far as its details were seen."""

    id: str
    authors: tuple[Author, ...]
    year: str
    title: str
    container: str = ""
    """The journal or book it stands in."""
    volume: str = ""
    issue: str = ""
    pages: str = ""
    publisher: str = ""
    edition: str = ""
    doi: str = ""
    address: str = ""
    text_seen: bool = False
    """Whether abstract or text was read; otherwise it is cited with `see` only."""
    complete: bool = True
    """False where the list of authors is cut."""


def read_work(entry: Mapping[str, Any], where: str) -> Work:
    """A work from an entry in CSL JSON; fields that nobody saw are not in the file."""
    for key in ("id", "title", "author", "issued"):
        if not entry.get(key):
            raise Refusal(where, f"a work ({entry.get('id', 'without id')}) has no {key}")
    names = [each for each in entry["author"] if each.get("literal") != "and others"]
    return Work(
        id=entry["id"],
        authors=tuple(Author(each.get("family") or each["literal"], each.get("given", "")) for each in names),
        year=str(entry["issued"]["date-parts"][0][0]),
        title=entry["title"],
        container=entry.get("container-title", ""),
        volume=entry.get("volume", ""),
        issue=entry.get("issue", ""),
        pages=entry.get("page", ""),
        publisher=entry.get("publisher", ""),
        edition=entry.get("edition", ""),
        doi=entry.get("DOI", ""),
        address=entry.get("URL", ""),
        text_seen=bool(entry.get("custom", {}).get("text_seen", False)),
        complete=len(names) == len(entry["author"]),
    )


def short_citation(work: Work) -> str:
    """`Chen and Roth (2024)`; for use in brackets see `bracketed_citation`."""
    return f"{_families(work)} ({work.year})"


def bracketed_citation(work: Work) -> str:
    """`Chen and Roth 2024`."""
    return f"{_families(work)} {work.year}"


def citation(work: Work) -> str:
    """The entry of a list of works: authors, year, title, where it appeared, and its DOI if one was seen."""
    edition = f", edition {work.edition}" if work.edition else ""
    parts = [f"{_full_names(work)} ({work.year})", f"{work.title}{edition}", _appeared(work)]
    text = " ".join(part if part.endswith("?") else f"{part}." for part in parts if part)
    link = f"https://doi.org/{work.doi}" if work.doi else work.address
    return f"{text} {link}".strip()


def _families(work: Work) -> str:
    families = [author.family for author in work.authors]
    if len(families) > _MOST_NAMES or not work.complete:
        return f"{families[0]} et al."
    return _joined(families)


def _full_names(work: Work) -> str:
    first, *others = work.authors
    lead = f"{first.family}, {first.given}" if first.given else first.family
    rest = [f"{author.given} {author.family}".strip() for author in others]
    if not work.complete or len(rest) >= _FULL_NAMES:
        return ", ".join([lead, *rest[: _FULL_NAMES - 1]]) + " and others"
    return _joined([lead, *rest])


def _joined(names: list[str]) -> str:
    return " and ".join([", ".join(names[:-1]), names[-1]]) if len(names) > 1 else names[0]


def _appeared(work: Work) -> str:
    issue = f"({work.issue})" if work.issue else ""
    numbers = f" {work.volume}{issue}" if work.volume else ""
    pages = f", {work.pages.replace('-', '–')}" if work.pages else ""
    journal = f"{work.container}{numbers}{pages}"
    return ", ".join(part for part in (journal, work.publisher) if part)
