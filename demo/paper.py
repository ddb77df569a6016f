"""Writes an invented manuscript as a .docx file whose bytes depend on its text alone."""

import io
import zipfile
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Any

_MOMENT = datetime(2024, 1, 1)  # the same in every file: no file tells when it was made
_NOT_NEEDED = ("/thumbnail", "/extended-properties", "/stylesWithEffects", "/customXml")


@dataclass(frozen=True, slots=True)
class ResultsTable:
    """A table as papers print it: caption above, estimates over errors in brackets, a note below."""

    caption: str
    rows: tuple[tuple[str, ...], ...]
    note: str


@dataclass(frozen=True, slots=True)
class PaperSection:
    """A heading with paragraphs and tables in reading order."""

    heading: str
    blocks: tuple[str | ResultsTable, ...]


def write_paper(path: Path, title: str, sections: tuple[PaperSection, ...]) -> None:
    """Write the manuscript; no author, no institution, no time stamp."""
    from docx import Document

    document = Document()
    _lighten(document)
    _describe(document, title)
    document.add_paragraph(title, style="Title")
    for section in sections:
        document.add_heading(section.heading, level=1)
        for block in section.blocks:
            _add_block(document, block)
    content = io.BytesIO()
    document.save(content)
    path.write_bytes(_with_fixed_times(content.getvalue()))


def _lighten(document: Any) -> None:
    """Leave out the template's parts and table styles that no manuscript of ours uses."""
    for relations in (document.part.rels, document.part.package.rels):
        for key in [each for each, relation in relations.items() if relation.reltype.endswith(_NOT_NEEDED)]:
            del relations[key]
    for style in [each for each in document.styles if each.type is not None and each.type.name == "TABLE"]:
        if style.name != "Normal Table":
            style.delete()


def _describe(document: Any, title: str) -> None:
    about = document.core_properties
    about.title, about.author, about.last_modified_by, about.comments = title, "", "", ""
    about.created = about.modified = _MOMENT
    about.revision, about.language = 1, "en"


def _add_block(document: Any, block: str | ResultsTable) -> None:
    if isinstance(block, str):
        document.add_paragraph(block)
        return
    document.add_paragraph(block.caption, style="Caption")
    table = document.add_table(rows=len(block.rows), cols=len(block.rows[0]))
    for line, texts in zip(table.rows, block.rows, strict=True):
        for place, (cell, text) in enumerate(zip(line.cells, texts, strict=True)):
            cell.text = text
            _set_tight(cell.paragraphs[0], centred=place > 0)
    _rule_lines(table)
    document.add_paragraph(block.note)


def _set_tight(paragraph: Any, centred: bool) -> None:
    from docx.enum.text import WD_ALIGN_PARAGRAPH
    from docx.shared import Pt

    paragraph.paragraph_format.space_after = Pt(0)
    if centred:
        paragraph.alignment = WD_ALIGN_PARAGRAPH.CENTER


def _rule_lines(table: Any) -> None:
    """Lines above the table, below its header and below its end."""
    for row, sides in ((0, ("top", "bottom")), (len(table.rows) - 1, ("bottom",))):
        for cell in table.rows[row].cells:
            cell._tc.get_or_add_tcPr().append(_borders(sides))


def _borders(sides: tuple[str, ...]) -> Any:
    from docx.oxml import OxmlElement
    from docx.oxml.ns import qn

    borders = OxmlElement("w:tcBorders")
    for side in sides:
        line = OxmlElement(f"w:{side}")
        line.set(qn("w:val"), "single")
        line.set(qn("w:sz"), "8")
        borders.append(line)
    return borders


def _with_fixed_times(content: bytes) -> bytes:
    """The same package, parts in order of name with one time for all; stored, since packers differ."""
    packed = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(packed, "w") as new:
        for name in sorted(old.namelist(), key=lambda each: (each != "[Content_Types].xml", each)):
            part = zipfile.ZipInfo(name, _MOMENT.timetuple()[:6])
            part.create_system = 0
            new.writestr(part, old.read(name))
    return packed.getvalue()
