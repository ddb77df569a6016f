"""A note as one html page: its pictures inside, no script, nothing fetched; no text of others can become markup."""

import base64
import hashlib
import html
import itertools
import re
import struct
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import assert_never

from reviewkit.note import Block, Excerpt, Figure, Note, Paragraph, Points, ReferenceList, Section, Table
from reviewkit.safekeeping import write_atomically
from reviewkit.shipped import templates_folder
from reviewkit.wording import clean
from reviewkit.writers.pictures import COLUMN_CM, FULL_CM, draw
from reviewkit.writers.typesetting import is_numeric, typeset

_PLACEHOLDER = re.compile(r"\{(language|title|style|style_hash|contents|sections)\}")
_EXHIBIT_CAPTION = re.compile(r"Exhibit (\d+)[a-z]?\b")
_EXHIBIT_MENTION = re.compile(r"\b[Ee]xhibits?\s\d+(?:(?:,\s|\sand\s)\d+)*\b")
_LOWEST_HEADING = 6
_PIXELS_A_DOT = 96 / 300  # pictures have 300 dots an inch, a page 96 pixels

Anchors = Mapping[str, str]
"""Numbers of exhibits, each with the id of the place where it stands."""


@dataclass(frozen=True, slots=True)
class _Part:
    """A section on its page: its id, the rank of its heading, and the sections within it."""

    section: Section
    anchor: str
    rank: int
    within: tuple["_Part", ...]


def write_html(note: Note, path: Path) -> None:
    """Write the note as one file."""
    write_atomically(path, html_bytes(note))


def html_bytes(note: Note) -> bytes:
    """The note as an html page in UTF-8; the same note gives the same bytes."""
    parts, style = _parts(tuple(enumerate(note.sections, 1))), _template("page.css")
    anchors = _exhibit_anchors(note)
    values = {
        "language": _escaped(note.language),
        "title": _escaped(note.title),
        "style": style,
        "style_hash": f"sha256-{_base64(hashlib.sha256(style.encode()).digest())}",
        "contents": _contents(parts),
        "sections": "\n".join(_section(part, anchors) for part in parts),
    }
    return _PLACEHOLDER.sub(lambda found: values[found[1]], _template("note.html")).encode()


def _template(name: str) -> str:
    return (templates_folder() / name).read_text(encoding="utf-8")


def _escaped(text: str) -> str:
    """The text typeset and literal, inside an element as well as inside an attribute."""
    return html.escape(typeset(text).strip())


def _base64(content: bytes) -> str:
    return base64.b64encode(content).decode("ascii")


# --- sections ---------------------------------------------------------------------------------------------------


def _parts(numbered: Sequence[tuple[int, Section]], rank: int = 2) -> tuple[_Part, ...]:
    """Sections as a tree: what is of a deeper level stands within the one before, and no rank is left out."""
    if not numbered:
        return ()
    (at, first), *later = numbered
    within = tuple(itertools.takewhile(lambda each: each[1].level > first.level, later))
    inner = _parts(within, min(rank + bool(first.title), _LOWEST_HEADING))
    return (_Part(first, f"section-{at}", rank, inner), *_parts(later[len(within) :], rank))


def _contents(parts: Sequence[_Part]) -> str:
    entries = _entries(parts)
    if not entries:
        return ""
    return f'<nav aria-labelledby="contents">\n<div>\n<h2 id="contents">Contents</h2>\n{entries}\n</div>\n</nav>'


def _entries(parts: Sequence[_Part]) -> str:
    """The titled sections as a list of links, nested as they are."""
    items = "".join(
        f'<li><a href="#{part.anchor}">{_escaped(part.section.title)}</a>{_entries(part.within)}</li>'
        for part in _titled(parts)
    )
    return f"<ul>{items}</ul>" if items else ""


def _titled(parts: Sequence[_Part]) -> list[_Part]:
    return [each for part in parts for each in ((part,) if part.section.title else _titled(part.within))]


def _section(part: _Part, anchors: Anchors) -> str:
    content = [*_blocks(part, anchors), *(_section(each, anchors) for each in part.within)]
    if not part.section.title:
        return "\n".join(["<div>", *content, "</div>"])
    opening = f'<section id="{part.anchor}" aria-labelledby="{part.anchor}-title">'
    heading = f'<h{part.rank} id="{part.anchor}-title">{_escaped(part.section.title)}</h{part.rank}>'
    return "\n".join([opening, heading, *content, "</section>"])


# --- exhibits ---------------------------------------------------------------------------------------------------


def _exhibit_number(block: Block) -> str:
    """The number that the block's caption begins with; empty for what is no exhibit."""
    found = _EXHIBIT_CAPTION.match(block.caption) if isinstance(block, Table | Figure) else None
    return found[1] if found else ""


def _exhibit_anchors(note: Note) -> Anchors:
    anchors: dict[str, str] = {}
    for place, section in enumerate(note.sections, 1):
        for at, block in enumerate(section.blocks, 1):
            anchors.setdefault(_exhibit_number(block), f"section-{place}-{at}")
    return anchors


def _blocks(part: _Part, anchors: Anchors) -> list[str]:
    """The blocks of a section; what belongs to one exhibit stands in one panel."""
    made = []
    numbered = enumerate(part.section.blocks, 1)
    for number, group in itertools.groupby(numbered, lambda each: _exhibit_number(each[1])):
        members = list(group)
        shown = "\n".join(_block(block, f"{part.anchor}-{at}", anchors) for at, block in members)
        panel = f'<div class="exhibit" id="{part.anchor}-{members[0][0]}">\n{shown}\n</div>'
        made.append(panel if number else shown)
    return made


def _with_links(text: str, anchors: Anchors) -> str:
    """The text, literal, with the numbers of exhibits as links to them."""

    def link(found: re.Match[str]) -> str:
        number = found[0]
        return f'<a href="#{anchors[number]}">{number}</a>' if number in anchors else number

    return _EXHIBIT_MENTION.sub(lambda mention: re.sub(r"\d+", link, mention[0]), _escaped(text))


# --- blocks -----------------------------------------------------------------------------------------------------


def _block(block: Block, anchor: str, anchors: Anchors) -> str:
    match block:
        case Paragraph():
            lead = f'<strong class="lead">{_escaped(block.lead)}</strong> ' if block.lead else ""
            return f"<p>{lead}{_with_links(block.text, anchors)}</p>"
        case Points():
            return _list("points", [_with_links(item, anchors) for item in block.items])
        case Table():
            return _table(block, anchor)
        case Figure():
            return f"<figure>\n<figcaption>{_escaped(block.caption)}</figcaption>\n{_picture(block)}\n</figure>"
        case Excerpt():
            lines = "\n".join(html.escape(clean(line).rstrip()) for line in block.text.strip().splitlines())
            place = f"<figcaption>{_escaped(block.place)}:</figcaption>"
            return f'<figure class="excerpt">\n{place}\n<pre>{lines}</pre>\n</figure>'
        case ReferenceList():
            return _list("works", [_escaped(entry) for entry in block.entries])
        case _:
            assert_never(block)


def _list(kind: str, items: Sequence[str]) -> str:
    return f'<ul class="{kind}">\n' + "\n".join(f"<li>{item}</li>" for item in items) + "\n</ul>"


def _picture(figure: Figure) -> str:
    """The figure drawn twice, so that its letters can be read on a narrow screen too."""
    narrow, full = draw(figure.data, COLUMN_CM), draw(figure.data, FULL_CM)
    source = f'<source media="(max-width: 40rem)" srcset="{_data_uri(narrow)}" {_size(narrow)}>'
    return f'<picture>{source}<img src="{_data_uri(full)}" {_size(full)} alt="{_escaped(figure.alt)}"></picture>'


def _data_uri(png: bytes) -> str:
    return f"data:image/png;base64,{_base64(png)}"


def _size(png: bytes) -> str:
    """Width and height as the picture's header has them, in pixels of a page."""
    width, height = struct.unpack(">II", png[16:24])
    return f'width="{round(width * _PIXELS_A_DOT)}" height="{round(height * _PIXELS_A_DOT)}"'


# --- tables -----------------------------------------------------------------------------------------------------


def _table(table: Table, anchor: str) -> str:
    """The table in a box of its own that scrolls where it is too wide, its note below."""
    right = [is_numeric(row[at] for row in table.rows) for at in range(len(table.columns))]
    head = "".join(_heading(cell, "col", is_right) for cell, is_right in zip(table.columns, right, strict=True))
    rows = "\n".join(f"<tr>{_row(row, right)}</tr>" for row in table.rows)
    described = f' aria-describedby="{anchor}-note"' if table.note else ""
    note = f'\n<p class="note" id="{anchor}-note">{_escaped(table.note)}</p>' if table.note else ""
    return (
        f'<div class="scroll" role="region" tabindex="0" aria-labelledby="{anchor}-caption">\n<table{described}>\n'
        f'<caption id="{anchor}-caption"><span>{_escaped(table.caption)}</span></caption>\n'
        f"<thead>\n<tr>{head}</tr>\n</thead>\n<tbody>\n{rows}\n</tbody>\n</table>\n</div>{note}"
    )


def _row(row: Sequence[str], right: Sequence[bool]) -> str:
    first = "".join(_heading(cell, "row", is_right) for cell, is_right in zip(row[:1], right, strict=False))
    return first + "".join(_cell(cell, is_right) for cell, is_right in zip(row[1:], right[1:], strict=True))


def _heading(cell: str, scope: str, is_right: bool) -> str:
    """A cell that names its row or column; an empty one names nothing."""
    shown = _escaped(cell)
    return f'<th scope="{scope}"{_side(is_right)}>{shown}</th>' if shown else "<td></td>"


def _cell(cell: str, is_right: bool) -> str:
    return f"<td{_side(is_right)}>{_escaped(cell)}</td>"


def _side(is_right: bool) -> str:
    return ' class="number"' if is_right else ""
