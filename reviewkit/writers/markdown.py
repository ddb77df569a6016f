"""A note as markdown, its figures as PNG files beside it; no text of others can become markup or a link."""

import hashlib
import re
from pathlib import Path
from typing import assert_never

from reviewkit.note import Block, Excerpt, Figure, Note, Paragraph, Points, ReferenceList, Table
from reviewkit.safekeeping import write_atomically
from reviewkit.wording import clean
from reviewkit.writers.pictures import PAGE_CM, draw
from reviewkit.writers.typesetting import tied

_SPECIAL = re.compile(r"([\\`*_{}\[\]<>#|~$@&])")
_LINE_START = re.compile(r"^(\d*)([-+=.)])")  # would begin a list or underline a heading
_LINKED = re.compile(r"(?i)\b(www)(\.)|([a-z][a-z0-9+.-]*)(:)(?=//)|\b(mailto|xmpp)(:)")


def write_markdown(note: Note, path: Path) -> None:
    """Write the note, and beside it each figure as `figure-1-….png`, named by its content."""
    pictures = _pictures(note)
    for name, content in pictures.values():
        write_atomically(path.parent / name, content)
    write_atomically(path, markdown_of(note, {figure: name for figure, (name, _) in pictures.items()}).encode("utf-8"))


def markdown_of(note: Note, names: dict[Figure, str]) -> str:
    """The note as markdown; `names` are the file names of its figures."""
    parts = [f"# {_heading(note.title)}"]
    for section in note.sections:
        if section.title:
            parts.append(f"{'#' * (section.level + 1)} {_heading(section.title)}")
        parts += [_block(block, names) for block in section.blocks]
    return "\n\n".join(parts) + "\n"


def escaped(text: str) -> str:
    """The text on one line, with everything that markdown would read as markup made literal."""
    return _LINE_START.sub(r"\1\\\2", _heading(text))


def _heading(text: str) -> str:
    return _LINKED.sub(_unlinked, _SPECIAL.sub(r"\\\1", tied(text).strip()))


def _unlinked(found: re.Match[str]) -> str:
    word, mark = next((found[at], found[at + 1]) for at in (1, 3, 5) if found[at])
    return f"{word}\\{mark}"


def _pictures(note: Note) -> dict[Figure, tuple[str, bytes]]:
    figures = dict.fromkeys(block for section in note.sections for block in section.blocks if isinstance(block, Figure))
    return {figure: (_picture_name(figure, at), draw(figure.data, PAGE_CM)) for at, figure in enumerate(figures, 1)}


def _picture_name(figure: Figure, at: int) -> str:
    """A name by what is drawn, so that a later note leaves the pictures of an earlier one alone."""
    return f"figure-{at}-{hashlib.sha256(repr(figure.data).encode()).hexdigest()[:8]}.png"


def _block(block: Block, names: dict[Figure, str]) -> str:
    match block:
        case Paragraph():
            return f"*{escaped(block.lead)}* {escaped(block.text)}" if block.lead else escaped(block.text)
        case Points():
            return "\n".join(f"- {escaped(item)}" for item in block.items)
        case Table():
            return _table(block)
        case Figure():
            return f"**{escaped(block.caption)}**\n\n![{escaped(block.alt)}]({names[block]})"
        case Excerpt():
            return f"{escaped(block.place)}:\n\n" + _indented(block.text)
        case ReferenceList():
            return "\n".join(f"- {escaped(entry)}" for entry in block.entries)
        case _:
            assert_never(block)


def _indented(text: str) -> str:
    """Lines as an indented block, in which markdown reads nothing."""
    return "\n".join(f"    {clean(line)}".rstrip() for line in text.strip().splitlines())


def _table(table: Table) -> str:
    head = [escaped(column) or " " for column in table.columns]
    lines = [head, ["---"] * len(head), *[[escaped(cell) for cell in row] for row in table.rows]]
    body = "\n".join(f"| {' | '.join(cells)} |" for cells in lines)
    note = f"\n\n{escaped(table.note)}" if table.note else ""
    return f"**{escaped(table.caption)}**\n\n{body}{note}"
