"""The note to the authors: requests, what was looked at, what was not, works, how to repeat, exhibits."""

from collections.abc import Iterable
from dataclasses import dataclass

from reviewkit import __version__
from reviewkit.compose.content import CaseContent
from reviewkit.compose.length import words_in
from reviewkit.compose.phrases import Phrases
from reviewkit.compose.points import Point, full_section, is_private, open_to_authors, points, short_line, works_cited
from reviewkit.exhibit_blocks import exhibit_blocks
from reviewkit.facts import Value
from reviewkit.note import Audience, Block, Excerpt, Note, Paragraph, Points, ReferenceList, Section
from reviewkit.rules import Finding, Importance, State
from reviewkit.wording import clean, fixed, joined, percent, sentence, text

_NEEDS_DATA = " (needs data)"


@dataclass(frozen=True, slots=True)
class _Length:
    """How much is told in full: points, and reasons of what was looked at."""

    full: int
    reasons: int


def authors_note(case: CaseContent, phrases: Phrases) -> Note:
    """The fullest note that keeps to the limit on words; what is open is never cut."""
    fewer = range(phrases.limit("full_points"), -1, -1)
    steps = [_Length(full, reasons) for full in fewer for reasons in (6, 3)]
    for step in (*steps, _Length(0, 0)):
        note = _note(case, phrases, step)
        if words_in(note) <= phrases.limit("authors_words"):
            break
    return note


def _note(case: CaseContent, phrases: Phrases, length: _Length) -> Note:
    found = points(case)
    told, rest = found[: length.full], found[length.full :]
    sections: list[Section] = []
    for part in phrases.order:
        sections += _part(part, case, phrases, (told, rest, length))
    return Note(phrases.say("titles.authors", title=clean(case.title)), Audience.AUTHORS, tuple(sections))


def _part(
    part: str, case: CaseContent, phrases: Phrases, chosen: tuple[tuple[Point, ...], tuple[Point, ...], _Length]
) -> list[Section]:
    """The sections of one part of the note, none where it has nothing to say."""
    told, rest, length = chosen
    blocks: tuple[Block, ...]
    match part:
        case "opening":
            return [Section("", _opening(case, phrases, bool(told or rest)))]
        case "points":
            full = [full_section(point, number, case, phrases) for number, point in enumerate(told, 1)]
            return [Section(phrases.say("titles.points"), ()), *full] if full else []
        case "smaller":
            blocks = _list(short_line(point, case, phrases) for point in rest)
        case "own":
            blocks = _list(sentence(clean(own)) for own in case.wishes.own_points)
        case "quiet":
            blocks = _quiet(case, phrases, length.reasons)
        case "open":
            blocks = _open(case, phrases)
        case "closing":
            own_words = clean(case.wishes.own_words.get("closing", ""))
            return [Section("", (Paragraph(own_words),))] if own_words else []
        case "works":
            entries = works_cited(told, case)
            blocks = (ReferenceList(entries),) if entries else ()
        case "repeat":
            blocks = _repeat(case, phrases)
        case "exhibits":
            blocks = tuple(block for at, each in enumerate(case.exhibits, 1) for block in exhibit_blocks(each, at))
        case _:
            raise ValueError(part)
    return [Section(phrases.say(f"titles.{part}"), blocks)] if blocks else []


def _list(lines: Iterable[str]) -> tuple[Block, ...]:
    items = tuple(lines)
    return (Points(items),) if items else ()


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
    """Clear findings: some with their reason, the others by title."""
    found = _in_state(case, State.CLEAR)
    reasons = tuple(dict.fromkeys(clean(phrases.spoken(finding.reason)) for finding in found if finding.reason))[:most]
    titles = dict.fromkeys(
        clean(phrases.spoken(finding.rule.title))
        for finding in found
        if clean(phrases.spoken(finding.reason)) not in reasons
    )
    listed = "; ".join(title[:1].lower() + title[1:] for title in titles)
    more = phrases.say("quiet.more", titles=listed) if listed and most else ""
    words = " ".join(part for part in (*reasons, more) if part)
    return (Paragraph(words),) if words else ()


def _open(case: CaseContent, phrases: Phrases) -> tuple[Block, ...]:
    """Every missing fact in words, those that only data can show together."""
    names = dict.fromkeys(name for finding in _in_state(case, State.OPEN) for name in finding.missing)
    open_to_all = [name for name in names if not is_private(name)]
    asked = [_label(case, name) for name in open_to_all if not _from_data(case, name)]
    by_data = [_label(case, name).removesuffix(_NEEDS_DATA) for name in open_to_all if _from_data(case, name)]
    lines = [*asked, *([phrases.say("open.data", labels=joined(by_data))] if by_data else [])]
    return (Paragraph(f"{phrases.say('open.lead')} {'; '.join(lines)}."),) if lines else ()


def _from_data(case: CaseContent, name: str) -> bool:
    """Whether the fact is never asked for, but comes from a re-estimation."""
    definition = case.book.vocabulary.get(name)
    return definition is not None and not definition.asked


def _label(case: CaseContent, name: str) -> str:
    definition = case.book.vocabulary.get(name)
    return clean(definition.label) if definition is not None and definition.label else name


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
