"""Raised findings as points: which come first, which exhibits they rest on, and how each is told."""

from collections.abc import Iterable
from dataclasses import dataclass

from reviewkit.clauses import Lookup
from reviewkit.compose.content import CaseContent
from reviewkit.compose.phrases import Phrases
from reviewkit.facts import STUDY, Fact, SourceKind, Standing, Value
from reviewkit.note import Block, Paragraph, Section
from reviewkit.placeholders import placeholders, render
from reviewkit.references import Citation, Side, citation, short_citation
from reviewkit.rules import Finding, Importance, Rule, State
from reviewkit.wording import clean, joined, sentence, text

PRIVATE = ("editor", "remark", "remarks")
"""First or last parts of the names of facts that never reach the authors."""

_MOST_FACTS, _MOST_WORKS = 4, 2
_ABOUT_NUMBERS = "refit"  # the topic of rules whose sentences tell what the data show
_IN_THE_PAPER = (SourceKind.MANUSCRIPT, SourceKind.SCRIPT, SourceKind.ANSWER, SourceKind.SPECIFICATION)


@dataclass(frozen=True, slots=True)
class Point:
    """A raised rule: the finding that is told, other subjects that it holds for, and its exhibits' numbers."""

    finding: Finding
    others: tuple[str, ...] = ()
    exhibits: tuple[int, ...] = ()

    @property
    def rule(self) -> Rule:
        """The rule that was raised."""
        return self.finding.rule


def is_private(name: str) -> bool:
    """Whether a fact of that name is the editor's or the referee's own."""
    parts = name.split(".")
    return parts[0] in PRIVATE or parts[-1] in PRIVATE


def open_to_authors(finding: Finding) -> bool:
    """Whether a finding rests on nothing that authors may not see."""
    rule = finding.rule
    named = [name for condition in rule.conditions for name in condition.names]
    named += placeholders(f"{rule.stands} {rule.clear}")  # the reason of a clear state is rendered before it gets here
    return not any(map(is_private, named))


def authors_lookup(case: CaseContent, subject: str) -> Lookup:
    """The subject's facts without those that authors may not see."""
    lookup = case.book.lookup(case.facts, subject)

    def find(name: str) -> Value | None:
        return None if is_private(name) else lookup(name)

    return find


def points(case: CaseContent) -> tuple[Point, ...]:
    """Raised points for the authors, one a rule, the most important first."""
    by_rule: dict[str, list[Finding]] = {}
    for finding in case.findings:
        if finding.state is State.RAISED and open_to_authors(finding) and finding.rule.name not in case.wishes.dropped:
            by_rule.setdefault(finding.rule.name, []).append(finding)
    found = [_point(case, findings) for findings in by_rule.values()]
    return tuple(sorted(found, key=lambda point: _rank(case, point)))


def _point(case: CaseContent, findings: list[Finding]) -> Point:
    told = min(findings, key=lambda finding: finding.importance is not Importance.MAJOR)
    others = tuple(finding.subject for finding in findings if finding is not told)
    return Point(told, others, _exhibits_of(case, told))


def _rank(case: CaseContent, point: Point) -> tuple[int, bool, bool, bool]:
    """The referee's order, then major before minor, then what the data show, then points with any exhibit."""
    order = case.wishes.order
    wished = order.index(point.rule.name) if point.rule.name in order else len(order)
    shows_numbers = point.rule.topic == _ABOUT_NUMBERS and bool(point.exhibits)
    return wished, point.finding.importance is not Importance.MAJOR, not shows_numbers, not point.exhibits


def _exhibits_of(case: CaseContent, finding: Finding) -> tuple[int, ...]:
    """Numbers of the exhibits that yielded facts which the point's conditions or texts name."""
    names = {name for condition in finding.rule.conditions for name in condition.names}
    names |= {name for words in (finding.rule.says, finding.rule.why) for name in placeholders(words)}
    shown = {place for name in names for place in _shown_in(case, name, finding.subject)}
    return tuple(place for place, exhibit in enumerate(case.exhibits, 1) if exhibit.name in shown)


def _shown_in(case: CaseContent, name: str, subject: str) -> list[str]:
    """Names of the exhibits that show the fact as the note tells it."""
    known = case.facts.known(name, subject)
    told = [fact for fact in case.facts.every(name, subject) if known is not None and fact.value == known.value]
    return [fact.source.place for fact in told if fact.source.kind is SourceKind.EXHIBIT]


# --- a point in full, and in a line -----------------------------------------------------------------------------


def full_section(point: Point, number: int, case: CaseContent, phrases: Phrases) -> Section:
    """The point with what was done, the case for it, what was found, why it may matter, and a way."""
    rule, lookup = point.rule, authors_lookup(case, point.finding.subject)
    request = _told(rule.request, lookup, phrases).rstrip(".")
    title = phrases.say(
        "point.heading", number=str(number), request=_capital(request), importance=point.finding.importance
    )
    told = [
        ("paper", _in_the_paper(point, case, phrases)),
        ("favour", _told(rule.best_case, lookup, phrases)),
        ("numbers", _from_the_numbers(point, lookup, phrases)),
        ("why", _why(rule, lookup, case, phrases)),
        ("way", _told(rule.way, lookup, phrases)),
        ("also", _also(point, case, phrases)),
    ]
    blocks = [Paragraph(words, phrases.say(f"leads.{lead}")) for lead, words in told if words]
    return Section(title, tuple[Block, ...](blocks), level=2)


def short_line(point: Point, case: CaseContent, phrases: Phrases) -> str:
    """The point in one line."""
    words = _told(point.rule.short, authors_lookup(case, point.finding.subject), phrases).rstrip(".")
    own = case.wishes.own_words.get(point.rule.name, "")
    line = phrases.say("point.short", text=_capital(words), importance=point.finding.importance)
    return " ".join(part for part in (sentence(line), clean(own)) if part)


def _in_the_paper(point: Point, case: CaseContent, phrases: Phrases) -> str:
    """What was done: the rule's own sentence where no data speak, else the facts that the text states."""
    lookup = authors_lookup(case, point.finding.subject)
    facts = [fact for fact in point.finding.facts if not is_private(fact.name)]
    stated = [fact for fact in facts if fact.source.kind in _IN_THE_PAPER]
    if point.rule.topic == _ABOUT_NUMBERS:
        words = sentence("; ".join(_stated(fact, case) for fact in stated[:_MOST_FACTS]))
    else:
        words = _with_exhibits(_told(point.rule.says, lookup, phrases), point, phrases)
    found = places(facts, phrases)
    return " ".join(part for part in (words, phrases.say("point.places", places=found) if found else "") if part)


def _stated(fact: Fact, case: CaseContent) -> str:
    definition = case.book.vocabulary.get(fact.name)
    label = definition.label if definition is not None and definition.label else fact.name
    return f"{label}: {text(fact.value)}"


def places(facts: Iterable[Fact], phrases: Phrases) -> str:
    """Where the facts stand, machine readings marked as unconfirmed."""
    shown: dict[str, bool] = {}
    for fact in facts:
        place = clean(fact.source.place)
        if place and fact.source.kind in (SourceKind.MANUSCRIPT, SourceKind.SCRIPT, SourceKind.ANSWER):
            shown[place] = shown.get(place, True) and (fact.confirmed or fact.standing is Standing.SETTLED)
    mark = phrases.say("point.unconfirmed")
    return joined(place if confirmed else f"{place} ({mark})" for place, confirmed in shown.items())


def _from_the_numbers(point: Point, lookup: Lookup, phrases: Phrases) -> str:
    says = _told(point.rule.says, lookup, phrases)
    return _with_exhibits(says, point, phrases) if point.rule.topic == _ABOUT_NUMBERS else ""


def _with_exhibits(words: str, point: Point, phrases: Phrases) -> str:
    """The words, followed by the exhibits that they rest on."""
    if not point.exhibits:
        return words
    numbers = [str(number) for number in point.exhibits]
    name = "point.exhibit" if len(numbers) == 1 else "point.exhibits"
    cited = phrases.say(name, number=numbers[0], numbers=joined(numbers))
    return f"{words.rstrip('.')} ({cited})."


def _why(rule: Rule, lookup: Lookup, case: CaseContent, phrases: Phrases) -> str:
    parts = [_told(rule.why, lookup, phrases)]
    for side, phrase in ((Side.FOR, "point.see"), (Side.COUNTER, "point.counter")):
        works = [short_citation(case.book.references[one.id]) for one in _cited(rule, case) if one.side is side]
        parts += [phrases.say(phrase, works=joined(works))] if works else []
    if not rule.references:
        parts.append(phrases.say("point.no_source"))
    return " ".join(part for part in parts if part)


def _also(point: Point, case: CaseContent, phrases: Phrases) -> str:
    subjects = joined(subject_name(subject) for subject in point.others)
    likewise = phrases.say("point.likewise", subjects=subjects) if subjects else ""
    own = clean(case.wishes.own_words.get(point.rule.name, ""))
    return " ".join(part for part in (likewise, own) if part)


def subject_name(subject: str) -> str:
    """`model:main` in words."""
    kind, _, name = subject.partition(":")
    return "the study" if subject == STUDY else f"{kind} {clean(name)}"


def works_cited(told: Iterable[Point], case: CaseContent) -> tuple[str, ...]:
    """Entries of all works that the points cite, in alphabetical order; a DOI stands as text, not as a link."""
    works = {one.id: case.book.references[one.id] for point in told for one in _cited(point.rule, case)}
    return tuple(sorted(clean(citation(work)).replace("https://doi.org/", "doi:") for work in works.values()))


def _cited(rule: Rule, case: CaseContent) -> list[Citation]:
    """The works that the rule cites: at most two for the point and one for another view, those read here first."""
    known = [one for one in rule.references if one.id in case.book.references]
    known.sort(key=lambda one: not case.book.references[one.id].text_seen)
    sides = ((Side.FOR, _MOST_WORKS), (Side.COUNTER, 1))
    return [one for side, most in sides for one in [each for each in known if each.side is side][:most]]


def _told(template: str, lookup: Lookup, phrases: Phrases) -> str:
    return clean(phrases.spoken(render(template, lookup)))


def _capital(words: str) -> str:
    return words[:1].upper() + words[1:]
