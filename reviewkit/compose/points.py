"""Raised findings as points: which come first, which exhibits they rest on, and how each is told."""

from collections.abc import Iterable
from dataclasses import dataclass

from reviewkit.clauses import Lookup
from reviewkit.compose.content import CaseContent
from reviewkit.compose.phrases import Phrases
from reviewkit.derived import needs
from reviewkit.facts import STUDY, Fact, SourceKind, Standing, Value
from reviewkit.note import Block, Paragraph, Section
from reviewkit.placeholders import placeholders, render, sentences
from reviewkit.references import Citation, Side, citation, short_citation
from reviewkit.rules import Finding, Importance, Rule, State
from reviewkit.wording import clean, joined, sentence, text

PRIVATE = ("editor", "remark", "remarks")
"""First or last parts of the names of facts that never reach the authors."""

_MOST_FACTS, _MOST_WORKS = 4, 1
_MOST_PLACES = 2
_CLAIMED = "claim.percent"
ABOUT_NUMBERS = "refit"  # the topic of rules whose sentences tell what the data show
_ABOUT_REPORTING = "reporting"
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
    """Raised points for the authors, one a rule, the most important first; what another point covers is not told."""
    by_rule: dict[str, list[Finding]] = {}
    for finding in _raised(case):
        if not is_covered(finding, case):
            by_rule.setdefault(finding.rule.name, []).append(finding)
    found = [_point(case, findings) for findings in by_rule.values()]
    return tuple(sorted(found, key=lambda point: _rank(case, point)))


def _raised(case: CaseContent) -> list[Finding]:
    dropped = case.wishes.dropped
    raised = [each for each in case.findings if each.state is State.RAISED and each.rule.name not in dropped]
    return [finding for finding in raised if open_to_authors(finding)]


def is_covered(finding: Finding, case: CaseContent, also: Iterable[Finding] = ()) -> bool:
    """Whether a raised point, or one of `also`, says as much about the same subject or about one linked to it."""
    covering = [other for other in (*_raised(case), *also) if other.rule.name in finding.rule.covered_by]
    return any(_are_linked(finding.subject, other.subject, case) for other in covering)


def _are_linked(one: str, other: str, case: CaseContent) -> bool:
    return any(up in level for down, up in ((one, other), (other, one)) for level in case.facts.sight(down))


def listed(rest: Iterable[Point], phrases: Phrases) -> tuple[tuple[Point, ...], ...]:
    """Points that are told in a line, each alone but for those on what could not be found, which share the last."""
    all_points = tuple(rest)
    unfound = tuple(point for point in all_points if _is_unfound(point, phrases))
    return (*((point,) for point in all_points if point not in unfound), *([unfound] if unfound else []))


def _is_unfound(point: Point, phrases: Phrases) -> bool:
    is_minor = point.finding.importance is not Importance.MAJOR
    return is_minor and point.rule.topic == _ABOUT_REPORTING and point.rule.short.startswith(_unfound(phrases))


def _unfound(phrases: Phrases) -> str:
    return f"{phrases.say('point.unfound')} "


def _point(case: CaseContent, findings: list[Finding]) -> Point:
    told = min(findings, key=lambda finding: finding.importance is not Importance.MAJOR)
    others = tuple(finding.subject for finding in findings if finding is not told)
    return Point(told, others, _exhibits_of(case, told))


def _rank(case: CaseContent, point: Point) -> tuple[int, bool, bool, bool]:
    """The referee's order, then major before minor, then what the data show, then points with any exhibit."""
    order = case.wishes.order
    wished = order.index(point.rule.name) if point.rule.name in order else len(order)
    shows_numbers = point.rule.topic == ABOUT_NUMBERS and bool(point.exhibits)
    return wished, point.finding.importance is not Importance.MAJOR, not shows_numbers, not point.exhibits


def _exhibits_of(case: CaseContent, finding: Finding) -> tuple[int, ...]:
    """Numbers of the exhibits that yielded facts which the point's conditions or texts name."""
    names = {name for condition in finding.rule.conditions for name in condition.names}
    names |= set(_told_names(finding.rule.says, finding.rule.why))
    shown = {place for name in names for place in _shown_in(case, name, finding.subject)}
    return tuple(place for place, exhibit in enumerate(case.exhibits, 1) if exhibit.name in shown)


def _told_names(*templates: str) -> list[str]:
    """The facts that texts name, and those that these are worked out from."""
    named = dict.fromkeys(name for words in templates for name in placeholders(words))
    return [each for name in named for each in (name, *needs(name))]


def _shown_in(case: CaseContent, name: str, subject: str) -> list[str]:
    """Names of the exhibits that show the fact as the note tells it."""
    known = case.facts.known(name, subject)
    told = [fact for fact in case.facts.every(name, subject) if known is not None and fact.value == known.value]
    return [fact.source.place for fact in told if fact.source.kind is SourceKind.EXHIBIT]


def missing_facts(case: CaseContent) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Labels of the facts that open findings wait for: those that could be read or asked, and those of the data."""
    waiting = [each for each in case.findings if each.state is State.OPEN and open_to_authors(each)]
    waiting.sort(key=lambda finding: finding.importance is not Importance.MAJOR)
    names = [name for finding in waiting for name in finding.missing if not is_private(name)]
    found = [case.book.vocabulary[name] for name in dict.fromkeys(names) if case.book.vocabulary.get(name)]
    asked = tuple(clean(each.label) for each in found if each.asked)
    return asked, tuple(clean(each.label) for each in found if not each.asked)


def missing_labels(case: CaseContent) -> tuple[str, ...]:
    """All of these, those that could be read first."""
    return tuple(label for labels in missing_facts(case) for label in labels)


# --- a point in full, and in a line -----------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Fullness:
    """Which parts of a point are told."""

    why: bool = True
    way: bool = True


def full_section(point: Point, number: int, content: tuple[CaseContent, Phrases], fullness: Fullness) -> Section:
    """The point with what was done, the case for it, what was found, why it may matter, a way, and what is enough."""
    case, phrases = content
    rule, lookup = point.rule, authors_lookup(case, point.finding.subject)
    request, *enough = sentences(_told(rule.request, lookup, phrases))
    title = phrases.say(
        "point.heading", number=str(number), request=request.rstrip("."), importance=point.finding.importance
    )
    told = [
        ("paper", _in_the_paper(point, case, phrases)),
        ("favour", _told(rule.best_case, lookup, phrases)),
        ("numbers", _from_the_numbers(point, lookup, phrases)),
        ("why", _why(rule, lookup, case, phrases) if fullness.why else ""),
        ("way", _told(rule.way, lookup, phrases) if fullness.way else ""),
        ("enough", " ".join(enough)),
        ("also", _also(point, case, phrases)),
    ]
    blocks = [Paragraph(words, phrases.say(f"leads.{lead}")) for lead, words in told if words]
    return Section(title, tuple[Block, ...](blocks), level=2)


def short_line(points_told: tuple[Point, ...], case: CaseContent, phrases: Phrases) -> str:
    """The point, or several on what could not be found, in one line."""
    first = points_told[0]
    lead = _unfound(phrases) if len(points_told) > 1 else ""
    shown = [_told(each.rule.short, authors_lookup(case, each.finding.subject), phrases) for each in points_told]
    spoken_lead = phrases.spoken(lead)
    words = spoken_lead + joined((each.removeprefix(spoken_lead).rstrip(".") for each in shown), "or")
    line = phrases.say("point.short", text=_capital(words), importance=first.finding.importance)
    own = [clean(case.wishes.own_words.get(each.rule.name, "")) for each in points_told]
    return " ".join(part for part in (sentence(line), *own) if part)


def _in_the_paper(point: Point, case: CaseContent, phrases: Phrases) -> str:
    """What was done: the rule's own sentence where no data speak, else the facts that the text states."""
    lookup = authors_lookup(case, point.finding.subject)
    if point.rule.topic == ABOUT_NUMBERS:
        facts = [fact for fact in point.finding.facts if not is_private(fact.name)]
        stated = [fact for fact in facts if fact.source.kind in _IN_THE_PAPER]
        words = sentence("; ".join(_stated(fact, case, lookup) for fact in stated[:_MOST_FACTS]))
    else:
        words = _with_exhibits(_told(point.rule.says, lookup, phrases), point, phrases)
    found = places(_rests_on(point, case), phrases)
    return " ".join(part for part in (words, phrases.say("point.places", places=found) if found else "") if part)


def _rests_on(point: Point, case: CaseContent) -> list[Fact]:
    """The facts that the point tells, the stated percent of a claim first; without any, those of its conditions."""
    finding = point.finding
    of_claim = [_CLAIMED] if finding.rule.subject == "claim" else []
    names = dict.fromkeys([*of_claim, *_told_names(finding.rule.says)])
    told = [fact for name in names if (fact := case.facts.known(name, finding.subject)) is not None]
    return [fact for fact in (told or finding.facts) if not is_private(fact.name)]


def _stated(fact: Fact, case: CaseContent, lookup: Lookup) -> str:
    definition = case.book.vocabulary.get(fact.name)
    label = definition.label if definition is not None and definition.label else fact.name
    in_words = lookup(f"{fact.name}_in_words")
    return f"{label}: {text(fact.value if in_words is None else in_words)}"


def places(facts: Iterable[Fact], phrases: Phrases) -> str:
    """Where the facts stand: the first places, and every one that a machine read and nobody confirmed."""
    shown: dict[str, bool] = {}
    for fact in facts:
        place = clean(fact.source.place)
        if place and fact.source.kind in (SourceKind.MANUSCRIPT, SourceKind.SCRIPT, SourceKind.ANSWER):
            shown[place] = shown.get(place, True) and (fact.confirmed or fact.standing is Standing.SETTLED)
    mark = phrases.say("point.unconfirmed")
    told = [place for place, confirmed in shown.items() if confirmed][:_MOST_PLACES]
    return "; ".join([*told, *(f"{place} ({mark})" for place, confirmed in shown.items() if not confirmed)])


def _from_the_numbers(point: Point, lookup: Lookup, phrases: Phrases) -> str:
    says = _told(point.rule.says, lookup, phrases)
    return _with_exhibits(says, point, phrases) if point.rule.topic == ABOUT_NUMBERS else ""


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
    """The works that the rule cites: one for the point and one for another view, those read here first."""
    known = [one for one in rule.references if one.id in case.book.references]
    known.sort(key=lambda one: not case.book.references[one.id].text_seen)
    sides = ((Side.FOR, _MOST_WORKS), (Side.COUNTER, 1))
    return [one for side, most in sides for one in [each for each in known if each.side is side][:most]]


def _told(template: str, lookup: Lookup, phrases: Phrases) -> str:
    return clean(phrases.spoken(render(template, lookup)))


def _capital(words: str) -> str:
    return words[:1].upper() + words[1:]
