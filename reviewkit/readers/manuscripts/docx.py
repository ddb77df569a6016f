"""Manuscripts in .docx files, as they read once every tracked change is accepted."""

import io
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any

from reviewkit.readers.manuscripts.manuscript import Manuscript, ManuscriptParagraph, ManuscriptTable
from reviewkit.readers.manuscripts.officefiles import check_office_file
from reviewkit.refusals import Refusal

MOST_PARAGRAPHS = 100_000
_W = "{http://schemas.openxmlformats.org/wordprocessingml/2006/main}"
_M = "{http://schemas.openxmlformats.org/officeDocument/2006/math}"
_FALLBACK = "{http://schemas.openxmlformats.org/markup-compatibility/2006}Fallback"
_GONE = (f"{_W}del", f"{_W}moveFrom", _FALLBACK, f"{_W}instrText", f"{_W}txbxContent", f"{_W}sdtPr")
_CAPTION = re.compile(r"^\s*(?:Table|Tab\.)\s+(?:[A-Z]?\.?\d{1,3}[a-z]?|[IVX]{1,5})\s*(?:[.:–—-]|$|\s)", re.IGNORECASE)
_NOTES = re.compile(
    r"^\s*(?:Notes?|Sources?)\b|(?:standard errors|t[- ]statistics|p[- ]values)\b.*\b(?:parenthes|bracket)", re.I
)


def read_docx(data: bytes, name: str) -> Manuscript:
    """Read the bytes of a .docx file.

    Raises:
        Refusal: the file is protected, damaged, dangerous or no .docx.
    """
    check_office_file(data, name)
    import docx

    try:
        document = docx.Document(io.BytesIO(data))
        body = document.element.body
        headings = _heading_styles(document)
        reading = _Reading(headings)
        reading.read(body)
    except Exception:  # hostile bytes: whatever the library raises means that the file is no sound .docx
        raise Refusal(
            name,
            "the .docx file is damaged or of another kind",
            "a plain .docx file",
            "Save it anew as .docx and try again",
        ) from None
    if not reading.paragraphs and not reading.tables:
        raise Refusal(
            name, "the document holds no text", "a manuscript with text", "A scan must be turned into text first"
        )
    return Manuscript(tuple(reading.paragraphs), tuple(_with_captions(reading)), reading.title)


def _heading_styles(document: Any) -> dict[str, str]:
    """Style id to its role: title, heading or caption; styles based on others take over theirs."""
    roles = {}
    for style in document.styles:
        seen, current = 0, style
        while current is not None and seen < 10:
            role = _role(str(current.name or ""))
            if role:
                roles[str(style.style_id)] = role
                break
            current, seen = getattr(current, "base_style", None), seen + 1
    return roles


def _role(style_name: str) -> str:
    plain = style_name.lower()
    if plain.startswith("heading"):
        return "heading"
    return plain if plain in ("title", "caption") else ""


@dataclass(slots=True)
class _Reading:
    """Walks the body once and gathers paragraphs and tables."""

    roles: dict[str, str]
    paragraphs: list[ManuscriptParagraph] = field(default_factory=list)
    tables: list[tuple[tuple[tuple[str, ...], ...], int]] = field(default_factory=list)
    """Rows of each table, and how many paragraphs stand before it."""
    title: str = ""
    heading: str = ""
    carried: str = ""
    """Text of a paragraph whose end mark was deleted: it goes on in the next."""

    def read(self, parent: Any) -> None:
        for child in parent:
            if child.tag == f"{_W}p":
                self.paragraph(child)
            elif child.tag == f"{_W}tbl":
                rows = _rows_of(child)
                if any(cell for row in rows for cell in row):
                    self.tables.append((rows, len(self.paragraphs)))
            elif child.tag not in _GONE:
                self.read(child)

    def paragraph(self, element: Any) -> None:
        text = self.carried + _text_of(element)
        self.carried = text if element.find(f"{_W}pPr/{_W}rPr/{_W}del") is not None else ""
        text = " ".join(text.split())
        if text and not self.carried and len(self.paragraphs) < MOST_PARAGRAPHS:
            role = self.role_of(element)
            if role == "title" and not self.title:
                self.title = text
            if role == "heading":
                self.heading = text
            numbered = ManuscriptParagraph(len(self.paragraphs) + 1, text, self.heading, role == "heading")
            self.paragraphs.append(numbered)
        for box in _text_boxes(element):
            self.read(box)

    def role_of(self, element: Any) -> str:
        style = element.find(f"{_W}pPr/{_W}pStyle")
        role = self.roles.get(style.get(f"{_W}val", ""), "") if style is not None else ""
        level = element.find(f"{_W}pPr/{_W}outlineLvl")
        return "heading" if not role and level is not None and level.get(f"{_W}val", "9") < "9" else role


def _text_of(element: Any) -> str:
    return "".join(_pieces_of(element, 0))


def _pieces_of(element: Any, depth: int) -> Iterator[str]:
    """Texts in reading order: insertions in, deletions, hidden runs and field codes out."""
    if depth > 60:
        return
    for child in element:
        if child.tag in _GONE or (child.tag == f"{_W}r" and _hidden(child)):
            continue
        match child.tag:
            case tag if tag in (f"{_W}t", f"{_M}t"):
                yield child.text or ""
            case tag if tag in (f"{_W}tab", f"{_W}br", f"{_W}cr"):
                yield " "
            case tag if tag == f"{_W}noBreakHyphen":
                yield "-"
            case tag if isinstance(tag, str):
                yield from _pieces_of(child, depth + 1)


def _hidden(run: Any) -> bool:
    mark = run.find(f"{_W}rPr/{_W}vanish")
    return mark is not None and mark.get(f"{_W}val", "1") not in ("0", "false")


def _text_boxes(element: Any) -> Iterator[Any]:
    for box in element.iter(f"{_W}txbxContent"):
        inside = [ancestor.tag for ancestor in box.iterancestors()]
        if _FALLBACK not in inside and inside.count(f"{_W}txbxContent") == 0:
            yield box


def _rows_of(table: Any) -> tuple[tuple[str, ...], ...]:
    rows = []
    for row in table.iter(f"{_W}tr"):
        gone = row.find(f"{_W}trPr/{_W}del") is not None
        if not gone and next(row.iterancestors(f"{_W}tbl")) is table:
            rows.append(tuple(_cells_of(row)))
    width = max((len(row) for row in rows), default=0)
    return tuple(row + ("",) * (width - len(row)) for row in rows)


def _cells_of(row: Any) -> Iterator[str]:
    for cell in row.iter(f"{_W}tc"):
        if next(cell.iterancestors(f"{_W}tr")) is not row:
            continue
        merged = cell.find(f"{_W}tcPr/{_W}vMerge")
        goes_on = merged is not None and merged.get(f"{_W}val", "continue") == "continue"
        text = "" if goes_on else " ".join(" ".join(_text_of(each) for each in cell.iter(f"{_W}p")).split())
        yield text
        span = cell.find(f"{_W}tcPr/{_W}gridSpan")
        wide = span.get(f"{_W}val", "1") if span is not None else "1"
        yield from [""] * (min(int(wide), 200) - 1 if wide.isdigit() else 0)


def _with_captions(reading: _Reading) -> Iterator[ManuscriptTable]:
    """Each table with the caption above or below it, and its notes."""
    taken: set[int] = set()
    paragraphs = reading.paragraphs
    for number, (rows, before) in enumerate(reading.tables, start=1):
        near = [
            place for place in (before - 1, before - 2, before) if 0 <= place < len(paragraphs) and place not in taken
        ]
        caption = next((place for place in near if _CAPTION.match(paragraphs[place].text)), None)
        if caption is not None:
            taken.add(caption)
        below = [place for place in (before, before + 1) if place < len(paragraphs) and place != caption]
        notes = next((paragraphs[place].text for place in below[:2] if _NOTES.search(paragraphs[place].text)), "")
        yield ManuscriptTable(number, paragraphs[caption].text if caption is not None else "", rows, notes)
