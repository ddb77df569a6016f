"""The note to the authors: requests, what was looked at, what was not, works, how to repeat, exhibits."""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from reviewkit import __version__
from reviewkit.compose.content import CaseContent
from reviewkit.compose.length import words_in
from reviewkit.compose.phrases import Phrases
from reviewkit.compose.points import (
    ABOUT_NUMBERS,
    Fullness,
    Point,
    full_section,
    is_covered,
    listed,
    missing_facts,
    open_to_authors,
    points,
    short_line,
    works_cited,
)
from reviewkit.exhibit_blocks import exhibit_blocks
from reviewkit.facts import Value
from reviewkit.note import Audience, Block, Excerpt, Note, Paragraph, ReferenceList, Section
from reviewkit.rules import Finding, Importance, State
from reviewkit.wording import clean, fixed, joined, percent, sentence, text

_REPRODUCED = "refit.reproduced"
_MOST_REASONS, _FEW_REASONS = 8, 3


@dataclass(frozen=True, slots=True)
class _Length:
    """How much is told: points in full, the first of them with why and with a way, and reasons of what is clear."""

    full: int
    whys: int
    ways: int
    reasons: int
    limit: int
    """Words that it must keep to."""


@dataclass(frozen=True, slots=True)
class _Told:
    """The points as this note tells them."""

    full: tuple[Point, ...]
    rest: tuple[tuple[Point, ...], ...]
    """Those told in a line, by line."""
    length: _Length


def authors_note(case: CaseContent, phrases: Phrases) -> Note:
    """The fullest note that keeps to its words: minor points shrink first, then ways, then whys; never what is open."""
    found = points(case)
    for length in _lengths(found, phrases):
        rest = listed(found[length.full :], phrases)
        note = _note(case, phrases, _Told(found[: length.full], rest, length))
        if words_in(note) <= length.limit:
            break
    return note


def _lengths(found: tuple[Point, ...], phrases: Phrases) -> Iterator[_Length]:
    """From the fullest to the shortest; minor points are told in full only in a note that is short anyway."""
    aim, limit, most = (phrases.limit(name) for name in ("authors_aim", "authors_words", "full_points"))
    weighty = [at for at, point in enumerate(found, 1) if point.finding.importance is Importance.MAJOR]
    majors = min(max(weighty, default=0), most)
    for full in range(min(len(found), most), majors, -1):
        yield _Length(full, full, full, _MOST_REASONS, aim)
    for ways in range(majors, -1, -1):
        yield _Length(majors, majors, ways, _MOST_REASONS, limit)
    for whys in range(majors - 1, 0, -1):
        yield _Length(majors, whys, 0, _FEW_REASONS, limit)
    for full in range(majors - 1, -1, -1):
        yield _Length(full, min(full, 1), 0, _FEW_REASONS, limit)
    yield _Length(0, 0, 0, 0, limit)


def _note(case: CaseContent, phrases: Phrases, told: _Told) -> Note:
    sections: list[Section] = []
    for part in phrases.order:
        sections += _part(part, case, phrases, told)
    return Note(phrases.say("titles.authors", title=clean(case.title)), Audience.AUTHORS, tuple(sections))


def _part(part: str, case: CaseContent, phrases: Phrases, told: _Told) -> list[Section]:
    """The sections of one part of the note, none where it has nothing to say."""
    blocks: tuple[Block, ...]
    title = phrases.say(f"titles.{part}") if phrases.has(f"titles.{part}") else ""
    match part:
        case "opening":
            blocks = _opening(case, phrases, bool(told.full or told.rest))
        case "points":
            full = _full(case, phrases, told)
            return [Section(title, ()), *full] if full else []
        case "smaller":
            first = len(told.full) + 1
            blocks = _numbered(first, (short_line(line, case, phrases) for line in told.rest))
            weighs = any(point.finding.importance is Importance.MAJOR for line in told.rest for point in line)
            title = phrases.say("titles.further") if weighs else title
        case "own":
            first = len(told.full) + len(told.rest) + 1
            blocks = _numbered(first, (sentence(clean(own)) for own in case.wishes.own_points))
        case "quiet":
            blocks = _quiet(case, phrases, told.length.reasons)
        case "open":
            blocks = _open(case, phrases)
        case "closing":
            own_words = clean(case.wishes.own_words.get("closing", ""))
            blocks = (Paragraph(own_words),) if own_words else ()
        case "works":
            entries = works_cited(told.full[: told.length.whys], case)
            blocks = (ReferenceList(entries),) if entries else ()
        case "repeat":
            blocks = _repeat(case, phrases)
        case "exhibits":
            blocks = _exhibits(case, phrases, told)
        case _:
            raise ValueError(part)
    return [Section(title, blocks)] if blocks else []


def _full(case: CaseContent, phrases: Phrases, told: _Told) -> list[Section]:
    return [
        full_section(point, at, (case, phrases), Fullness(at <= told.length.whys, at <= told.length.ways))
        for at, point in enumerate(told.full, 1)
    ]


def _numbered(first: int, lines: Iterable[str]) -> tuple[Block, ...]:
    """Lines that go on with the numbers of the points before, so that authors can answer by number."""
    return tuple(Paragraph(line, f"{number}.") for number, line in enumerate(lines, first))


def _exhibits(case: CaseContent, phrases: Phrases, told: _Told) -> tuple[Block, ...]:
    """All exhibits, after a word on those that no point in full cites."""
    cited = {number for point in told.full for number in point.exhibits}
    others = [number for number in range(1, len(case.exhibits) + 1) if number not in cited]
    name = "exhibits.uncited_one" if len(others) == 1 else "exhibits.uncited"
    lead = phrases.say(name, numbers=_run(others)) if others and cited else ""
    blocks = [block for at, each in enumerate(case.exhibits, 1) for block in exhibit_blocks(each, at)]
    return (*([Paragraph(lead)] if lead and blocks else []), *blocks)


def _run(numbers: list[int]) -> str:
    """`4 to 9`, `4 and 5`, `4, 6 and 7`."""
    if len(numbers) > 2 and numbers[-1] - numbers[0] == len(numbers) - 1:
        return f"{numbers[0]} to {numbers[-1]}"
    return joined(str(number) for number in numbers)


# --- beginning and end ------------------------------------------------------------------------------------------


def _opening(case: CaseContent, phrases: Phrases, raised: bool) -> tuple[Block, ...]:
    is_open = any(finding.state is State.OPEN for finding in case.findings)
    name = "opening.raised" if raised else "opening.quiet_open" if is_open else "opening.quiet"
    parts = [phrases.say(name), clean(case.wishes.own_words.get("opening", ""))]
    if not case.exhibits:
        parts.append(phrases.say("opening.no_data"))
    elif not raised:
        parts += _bounds(case, phrases)
    return tuple(Paragraph(part) for part in (" ".join(filter(None, parts)),))


def _bounds(case: CaseContent, phrases: Phrases) -> list[str]:
    """With what bound the two models agree, for each model that was estimated again."""
    found = []
    for subject in case.facts.subjects("model"):
        lookup = case.book.lookup(case.facts, subject)
        conclusion, bound = lookup("refit.conclusion"), lookup("refit.agree_within_percent")
        if isinstance(bound, float) and conclusion in ("agrees", "unsettled"):
            excludes_zero = lookup("refit.difference_excludes_zero") == "yes"
            if conclusion == "agrees" or not excludes_zero:
                found.append(phrases.say(f"opening.bound_{conclusion}", bound=percent(bound)))
    return found


# --- looked at, and not looked at -------------------------------------------------------------------------------


def _in_state(case: CaseContent, state: State) -> list[Finding]:
    found = [each for each in case.findings if each.state is state and open_to_authors(each)]
    return sorted(found, key=lambda finding: finding.importance is not Importance.MAJOR)


def _quiet(case: CaseContent, phrases: Phrases, most: int) -> tuple[Block, ...]:
    """Why nothing is asked: first whether the printed figures came out, and what else the data show."""
    clear = [finding for finding in _in_state(case, State.CLEAR) if finding.reason]
    found = [finding for finding in clear if not is_covered(finding, case, clear)]
    found.sort(key=lambda finding: (finding.rule.topic != ABOUT_NUMBERS, _REPRODUCED not in finding.rule.when.names))
    reasons = tuple(dict.fromkeys(clean(phrases.spoken(finding.reason)) for finding in found))[:most]
    return (Paragraph(" ".join(reasons)),) if reasons else ()


def _open(case: CaseContent, phrases: Phrases) -> tuple[Block, ...]:
    """Every missing fact in words, those that only data can show together."""
    asked, by_data = missing_facts(case)
    lines = [*asked, *([phrases.say("open.data", labels=joined(by_data))] if by_data else [])]
    return (Paragraph(f"{phrases.say('open.lead')} {'; '.join(lines)}."),) if lines else ()


# --- how to repeat ----------------------------------------------------------------------------------------------


def _repeat(case: CaseContent, phrases: Phrases) -> tuple[Block, ...]:
    if not case.repeats:
        return ()
    from reviewkit.comparison import LEVEL, MATERIAL_SHARE

    level, material = fixed(100 * LEVEL, 0), fixed(100 * MATERIAL_SHARE, 0)
    lines = [phrases.say("repeat.program", version=__version__, level=level, material=material)]
    for each in case.repeats:
        lines.append(phrases.say("repeat.data", model=each.model, name=clean(each.data_name), sha256=each.sha256))
        lookup = case.book.lookup(case.facts, f"model:{each.model}")
        known = [_errors(lookup(name), phrases) for name in ("errors.kind", "errors.type")]
        errors = ", ".join(filter(None, known))
        lines += [phrases.say("repeat.errors", model=each.model, errors=errors)] if errors else []
    shown = [Excerpt(each.specification, phrases.say("repeat.place", model=each.model)) for each in case.repeats]
    return (Paragraph(" ".join(lines)), *shown)


def _errors(value: Value | None, phrases: Phrases) -> str:
    words = text(value) if isinstance(value, str) else ""
    return phrases.say(f"errors.{words}") if phrases.has(f"errors.{words}") else words
