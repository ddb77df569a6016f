"""From where a case stands to files: the two notes, and the letter that asks for what is open."""

import tomllib
from collections.abc import Mapping
from dataclasses import replace
from difflib import get_close_matches
from pathlib import Path
from typing import TYPE_CHECKING

from reviewkit import casefolder, safekeeping
from reviewkit.casefolder import CaseFolder
from reviewkit.note import Audience, Note, Paragraph, Points, Section
from reviewkit.refusals import Refusal
from reviewkit.review import Review, look
from reviewkit.rules import Importance, RuleBook, State
from reviewkit.specification import read_specification, specification_text

if TYPE_CHECKING:
    from reviewkit.compose.content import NoteWishes, Repeat

FORMATS = ("docx", "md", "txt", "html", "json")
OWN_PARTS = ("opening", "closing", "editor")
"""Parts of a note that the referee's own words may go to, besides points."""
USUAL = ("docx", "txt", "md")
"""Formats that are written where none is asked for."""


def draft(folder: Path, formats: tuple[str, ...] = USUAL, request: bool = False) -> tuple[tuple[Path, bool], ...]:
    """Write both notes, or the letter that asks for what is open; each file, and whether another was kept beside it."""
    unknown = [each for each in formats if each not in FORMATS]
    if unknown:
        raise Refusal("--as", f"`{unknown[0]}` is no format of notes", ", ".join(FORMATS))
    review = look(folder)
    with casefolder.working_in(review.case):
        made = request_notes(review) if request else notes(review)
        return tuple(write(review.case, note, stem, each) for stem, note in made.items() for each in formats)


def notes(review: Review) -> Mapping[str, Note]:
    """The notes to authors and to the editor, by the stems of their files."""
    from reviewkit.compose import compose
    from reviewkit.compose.content import CaseContent

    content = CaseContent(
        review.case.title,
        review.facts,
        review.findings,
        review.book,
        review.results.exhibits if review.results is not None and not review.results.is_old else (),
        _wishes(review.case, review.book),
        _repeats(review.case),
    )
    return {"to-authors": compose(content, Audience.AUTHORS), "to-editor": compose(content, Audience.EDITOR)}


def request_notes(review: Review) -> Mapping[str, Note]:
    """A short letter that asks the authors for what most points wait on, through the editor."""
    waiting: dict[str, int] = {}
    for finding in review.in_state(State.OPEN):
        weight = 2 if finding.importance is Importance.MAJOR else 1
        for name in finding.missing:
            waiting[name] = waiting.get(name, 0) + weight
    if not waiting:
        raise Refusal(review.case.path.name, "no point waits for anything, so there is nothing to ask for")
    asked = sorted(waiting, key=lambda name: (-waiting[name], name))
    points = tuple(dict.fromkeys(_asked(review, name) for name in asked))
    blocks = (
        Paragraph("Before we can finish our comments on the outcome variable, we would be grateful to know:"),
        Points(points[:8]),
        Paragraph("A sentence on each is enough; we could not find them in what we were given."),
    )
    return {"request": Note(f"Request: {review.case.title}", Audience.AUTHORS, (Section("What we ask for", blocks),))}


def _asked(review: Review, name: str) -> str:
    definition = review.book.vocabulary.get(name)
    label = definition.label if definition is not None and definition.label else name
    return label[:1].upper() + label[1:] + "."


def write(case: CaseFolder, note: Note, stem: str, ending: str) -> tuple[Path, bool]:
    """Write a note in one format; where it stands, and whether an edited or open file was kept beside it."""
    path = case.path / f"{stem}.{ending}"
    made = path.with_name(f".making-{path.name}")
    try:
        _write_format(note, made, ending)
        content = made.read_bytes()
    finally:
        made.unlink(missing_ok=True)
    written = casefolder.write_beside(case, path, content)
    return written, written != path


def _write_format(note: Note, path: Path, ending: str) -> None:
    with safekeeping.refusing(path, "written"):
        match ending:
            case "docx":
                from reviewkit.writers.docx import write_docx

                write_docx(note, path)
            case "md":
                from reviewkit.writers.markdown import write_markdown

                write_markdown(note, path)
            case "txt":
                from reviewkit.writers.text import write_text

                write_text(note, path)
            case "html":
                from reviewkit.writers.html import write_html

                write_html(note, path)
            case "json":
                from reviewkit.writers.note_json import write_json

                write_json(note, path)
            case _:
                raise Refusal("--as", f"`{ending}` is no format of notes", ", ".join(FORMATS))


def _wishes(case: CaseFolder, book: RuleBook) -> "NoteWishes":
    from reviewkit.compose.content import wishes_from

    text = casefolder.note_wishes_text(case)
    try:
        wishes = wishes_from(tomllib.loads(text), casefolder.NOTE)
    except tomllib.TOMLDecodeError as problem:
        raise Refusal(casefolder.NOTE, f"not valid TOML ({problem})", remedy="Correct that line") from None
    rules = {rule.name for rule in book.rules}
    for name in (*wishes.order, *wishes.dropped, *(each for each in wishes.own_words if each not in OWN_PARTS)):
        if name not in rules:
            near = ", ".join(get_close_matches(name, rules, 3)) or "names that `reviewkit show` lists"
            raise Refusal(casefolder.NOTE, f"there is no rule `{name}`", near, "Check its spelling")
    return wishes


def _repeats(case: CaseFolder) -> tuple["Repeat", ...]:
    """How to compute the numbers again; the data are named without their place."""
    from reviewkit.compose.content import Repeat

    found = []
    for model in case.settings.models:
        kept, path = casefolder.read_results(case, model), case.specification(model)
        if kept is not None and path.exists():
            spec = read_specification(path)
            named = replace(spec, data=Path(spec.data).name)
            found.append(Repeat(model, specification_text(named), named.data, kept["data_sha256"]))
    return tuple(found)
