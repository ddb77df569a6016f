"""What is known, and from where: facts are only ever added to."""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace
from enum import StrEnum

from reviewkit.printed import Printed

STUDY = "study"
"""The subject of facts about the whole study; others are `data:NAME`, `model:NAME`, `claim:NAME`."""


class Standing(StrEnum):
    """How a fact came to be known; later members outweigh earlier ones."""

    STATED = "stated"  # what the text says
    DONE = "done"  # what script, data or re-estimation show
    SETTLED = "settled"  # the referee's word


_WEIGHT = {standing: place for place, standing in enumerate(Standing)}


class SourceKind(StrEnum):
    """Where a fact was seen."""

    ANSWER = "answer"
    MANUSCRIPT = "manuscript"
    SCRIPT = "script"
    COLUMN = "column"
    SPECIFICATION = "specification"
    EXHIBIT = "exhibit"
    DERIVED = "derived"


@dataclass(frozen=True, slots=True)
class Source:
    """A place that can be shown to an author: `Source(MANUSCRIPT, "paragraph 12", "sales were logged")`."""

    kind: SourceKind
    place: str = ""
    quote: str = ""


class NotStated:
    """The value of a fact that was looked for and not found: every comparison with it is unknown."""

    _one: "NotStated | None" = None

    def __new__(cls) -> "NotStated":
        """The only one there is."""
        if cls._one is None:
            cls._one = super().__new__(cls)
        return cls._one

    def __repr__(self) -> str:
        return "not stated"


NOT_STATED = NotStated()

Value = str | float | Printed | tuple[str, ...] | NotStated
"""One of (str), some of or names (tuple), number (float), printed number, text (str), yes/partly/no (str)."""


@dataclass(frozen=True, slots=True)
class Fact:
    """One thing known about one subject."""

    name: str
    value: Value
    standing: Standing
    source: Source
    subject: str = STUDY
    confirmed: bool = True
    """False for a machine reading of text or script that nobody has looked at yet: a proposal."""


@dataclass(frozen=True, slots=True)
class Facts:
    """All that is known; `links` leads from a subject to those whose facts it sees."""

    facts: tuple[Fact, ...] = ()
    links: tuple[tuple[str, str], ...] = ()
    _index: dict[tuple[str, str], tuple[Fact, ...]] = field(init=False, repr=False, compare=False, default_factory=dict)

    def __post_init__(self) -> None:
        for fact in self.facts:
            key = (fact.subject, fact.name)
            self._index[key] = (*self._index.get(key, ()), fact)

    def __iter__(self) -> Iterator[Fact]:
        return iter(self.facts)

    def adding(self, more: Iterable[Fact]) -> "Facts":
        """These facts and `more`."""
        return replace(self, facts=(*self.facts, *more))

    def linked(self, subject: str, seen: str) -> "Facts":
        """The same facts, where `subject` also sees the facts of `seen`."""
        return self if (subject, seen) in self.links else replace(self, links=(*self.links, (subject, seen)))

    def every(self, name: str, subject: str) -> tuple[Fact, ...]:
        """All facts of that name that the subject sees: its own, else those one link up, and so on."""
        for level in self.sight(subject):
            found = tuple(fact for each in level for fact in self._index.get((each, name), ()))
            if found:
                return found
        return ()

    def known(self, name: str, subject: str) -> Fact | None:
        """The fact that counts: the weightiest standing, and the latest among equals."""
        found = self.every(name, subject)
        return max(enumerate(found), key=lambda one: (_WEIGHT[one[1].standing], one[0]))[1] if found else None

    def sight(self, subject: str) -> Iterator[tuple[str, ...]]:
        """The subjects seen from `subject`, nearest first; the study comes last for all."""
        level: tuple[str, ...] = (subject,)
        seen = {subject, STUDY}
        while level:
            yield level
            level = tuple(up for down, up in self.links if down in level and up not in seen)
            seen.update(level)
        if subject != STUDY:
            yield (STUDY,)

    def subjects(self, kind: str) -> tuple[str, ...]:
        """All subjects of a kind (`study`, `data`, `model`, `claim`) in order of appearance."""
        named = [fact.subject for fact in self.facts] + [each for link in self.links for each in link]
        found = dict.fromkeys(each for each in named if each.partition(":")[0] == kind)
        return (STUDY,) if kind == STUDY else tuple(found)
