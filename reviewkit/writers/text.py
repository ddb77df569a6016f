"""A note as plain text of at most 78 columns: tables aligned, figures told in words."""

import textwrap
import unicodedata
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import assert_never

from reviewkit.note import Block, Excerpt, Figure, Note, Paragraph, Points, ReferenceList, Section, Table
from reviewkit.safekeeping import write_atomically
from reviewkit.wording import clean
from reviewkit.writers.table_widths import column_widths
from reviewkit.writers.typesetting import is_numeric, tied

WIDTH = 78
_GAP = 2
_RULES = {0: "=", 1: "-"}


def write_text(note: Note, path: Path) -> None:
    """Write the note to a file in UTF-8."""
    write_atomically(path, text_of(note).encode("utf-8"))


def text_of(note: Note) -> str:
    """The note as plain text."""
    parts = [_heading(note.title, 0), *(part for section in note.sections for part in _section(section))]
    return "\n\n".join(part for part in parts if part) + "\n"


def _section(section: Section) -> Iterator[str]:
    if section.title:
        yield _heading(section.title, section.level)
    for block in section.blocks:
        yield _block(block)


def _heading(title: str, level: int) -> str:
    lines = _wrap(title)
    return "\n".join([*lines, _RULES[level] * max(map(_wide, lines), default=0)] if level in _RULES else lines)


def _block(block: Block) -> str:
    match block:
        case Paragraph():
            return "\n".join(_wrap(f"{block.lead} {block.text}" if block.lead else block.text))
        case Points():
            return "\n".join(line for item in block.items for line in _wrap(item, "- ", "  "))
        case Table():
            return _table(block)
        case Figure():
            return "\n".join([*_wrap(block.caption), *_wrap(f"[Figure: {block.alt}]", "  ", "  ")])
        case Excerpt():
            quoted = [line for each in block.text.splitlines() for line in _wrap(each, "    ", "      ") or [""]]
            return "\n".join([*_wrap(f"{block.place}:"), *quoted]).rstrip()
        case ReferenceList():
            return "\n".join(line for entry in block.entries for line in _wrap(entry, "", "    "))
        case _:
            assert_never(block)


def _wrap(words: str, first: str = "", later: str = "") -> list[str]:
    lines = textwrap.wrap(
        tied(words), WIDTH, initial_indent=first, subsequent_indent=later, break_on_hyphens=False, break_long_words=True
    )
    return [line.replace("\u00a0", " ") for line in lines]


# --- tables -----------------------------------------------------------------------------------------------------


def _table(table: Table) -> str:
    grid = [[clean(cell) for cell in row] for row in (table.columns, *table.rows)]
    widths = column_widths(grid, WIDTH - _GAP * (len(grid[0]) - 1))
    right = [is_numeric([row[at] for row in grid[1:]]) for at in range(len(widths))]
    lines = [_lines(row, widths, right) for row in grid]
    rule = "-" * min(sum(widths) + _GAP * (len(widths) - 1), WIDTH)
    body = "\n".join([*lines[0], rule, *(line for row in lines[1:] for line in row)])
    note = ["", *_wrap(table.note)] if table.note else []
    return "\n".join([*_wrap(table.caption), "", body, *note])


def _lines(row: Sequence[str], widths: Sequence[int], right: Sequence[bool]) -> list[str]:
    cells = [textwrap.wrap(cell, width) or [""] for cell, width in zip(row, widths, strict=True)]
    height = max(map(len, cells))
    padded = [cell + [""] * (height - len(cell)) for cell in cells]
    return [
        (" " * _GAP).join(_padded(padded[at][line], widths[at], right[at]) for at in range(len(widths))).rstrip()
        for line in range(height)
    ]


def _padded(cell: str, width: int, right: bool) -> str:
    space = " " * (width - _wide(cell))
    return space + cell if right else cell + space


def _wide(text: str) -> int:
    """Columns that a terminal needs for the text."""
    return sum(
        0 if unicodedata.combining(one) else 2 if unicodedata.east_asian_width(one) in "WF" else 1 for one in text
    )
