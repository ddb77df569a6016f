"""A note as a .docx file with real styles, and nothing in it that tells who made it, where or when."""

import io
import zipfile
from pathlib import Path
from typing import TYPE_CHECKING, assert_never

from reviewkit.note import Block, Excerpt, Figure, Note, Paragraph, Points, ReferenceList, Table
from reviewkit.safekeeping import write_atomically
from reviewkit.wording import clean
from reviewkit.writers.docx_styles import Looks, looks, prepare
from reviewkit.writers.pictures import PAGE_CM, draw
from reviewkit.writers.table_widths import column_widths
from reviewkit.writers.typesetting import is_numeric, typeset

if TYPE_CHECKING:
    from docx.document import Document
    from docx.table import Table as DocxTable
    from docx.table import _Cell
    from docx.text.paragraph import Paragraph as DocxParagraph

_EPOCH = (1980, 1, 1, 0, 0, 0)
_MOST_WHOLE_ROWS, _EDGE = 14, 4
_PADDING_TWIPS = 85  # left and right of a cell's text: 1.5 mm
_PADDING_CM = _PADDING_TWIPS / 567
_CM_A_CHARACTER = 0.2  # of the table's text, on average with its padding


def write_docx(note: Note, path: Path) -> None:
    """Write the note; the same note gives the same bytes."""
    write_atomically(path, docx_bytes(note))


def docx_bytes(note: Note) -> bytes:
    """The note as the content of a .docx file."""
    import docx

    style = looks()
    document = docx.Document()
    prepare(document, note, style)
    document.add_paragraph(typeset(note.title), style="Title")
    for section in note.sections:
        if section.title:
            document.add_paragraph(typeset(section.title), style=f"Heading {section.level}")
        for block in section.blocks:
            _add(document, block, style)
    saved = io.BytesIO()
    document.save(saved)
    return _timeless(saved.getvalue())


def _add(document: "Document", block: Block, style: Looks) -> None:
    match block:
        case Paragraph():
            paragraph = document.add_paragraph(style="Body Text")
            if block.lead:
                paragraph.add_run(f"{typeset(block.lead)} ", style="Strong")
            paragraph.add_run(typeset(block.text))
        case Points():
            for item in block.items:
                document.add_paragraph(typeset(item), style="List Bullet")
        case Table():
            _add_table(document, block, style)
        case Figure():
            _add_figure(document, block)
        case Excerpt():
            _add_excerpt(document, block)
        case ReferenceList():
            for entry in block.entries:
                document.add_paragraph(typeset(entry), style="Works")
        case _:
            assert_never(block)


def _add_excerpt(document: "Document", block: Excerpt) -> None:
    lead = document.add_paragraph(typeset(f"{block.place}:"), style="Body Text")
    lead.paragraph_format.keep_with_next = True
    lines = block.text.strip().splitlines()
    for at, line in enumerate(lines, 1):
        paragraph = document.add_paragraph(clean(line), style="Excerpt")
        paragraph.paragraph_format.keep_with_next = None if at == len(lines) else True


def _add_figure(document: "Document", block: Figure) -> None:
    """The picture with its alternative text, the caption above it as with tables."""
    from docx.shared import Cm

    caption = document.add_paragraph(typeset(block.caption), style="Caption")
    caption.paragraph_format.keep_with_next = True
    paragraph = document.add_paragraph(style="Body Text")
    picture = paragraph.add_run().add_picture(io.BytesIO(draw(block.data, PAGE_CM)), width=Cm(PAGE_CM))
    picture._inline.docPr.set("descr", clean(block.alt))


# --- tables -----------------------------------------------------------------------------------------------------


def _add_table(document: "Document", block: Table, style: Looks) -> None:
    caption = document.add_paragraph(typeset(block.caption), style="Caption")
    caption.paragraph_format.keep_with_next = True
    table = document.add_table(rows=1 + len(block.rows), cols=len(block.columns))
    table.autofit = False
    _align_with_text(table)
    right = [is_numeric(row[at] for row in block.rows) for at in range(len(block.columns))]
    for at, texts in enumerate((block.columns, *block.rows)):
        for cell, text, is_right in zip(table.rows[at].cells, texts, right, strict=True):
            _fill(cell, text, is_right, _may_end_a_page(at, block))
    _share_widths(table, block, style.text_width)
    _rule(table, style)
    if block.note:
        document.add_paragraph(typeset(block.note), style="Table Note")


def _may_end_a_page(at: int, block: Table) -> bool:
    """Short tables stay whole; long ones may break, away from their head, their end and their note."""
    rows = len(block.rows)
    return (at == rows and not block.note) or (rows > _MOST_WHOLE_ROWS and _EDGE <= at < rows - _EDGE)


def _fill(cell: "_Cell", text: str, is_right: bool, may_end_a_page: bool) -> None:
    from docx.enum.text import WD_ALIGN_PARAGRAPH

    paragraph: DocxParagraph = cell.paragraphs[0]
    paragraph.style = "Table Text"
    paragraph.add_run(typeset(text))
    paragraph.paragraph_format.keep_with_next = None if may_end_a_page else True
    if is_right:
        paragraph.alignment = WD_ALIGN_PARAGRAPH.RIGHT


def _share_widths(table: "DocxTable", block: Table, width_cm: float) -> None:
    """Columns as wide as their texts ask for, within bounds, the whole table no wider than the text."""
    from docx.shared import Cm

    needs = column_widths((block.columns, *block.rows), int(width_cm / _CM_A_CHARACTER), padding=3)
    unit = min((width_cm - 2 * _PADDING_CM) / sum(needs), _CM_A_CHARACTER)
    for column, need in zip(table.columns, needs, strict=True):
        for cell in (column, *column.cells):
            cell.width = Cm(need * unit)


def _align_with_text(table: "DocxTable") -> None:
    """The table's rules begin where the text does: a table stands out by the padding of its cells otherwise."""
    from docx.oxml import OxmlElement
    from docx.oxml.ns import qn

    properties = table._tbl.tblPr
    padding = OxmlElement("w:tblCellMar")
    for side in ("left", "right"):
        each = OxmlElement(f"w:{side}")
        each.set(qn("w:w"), str(_PADDING_TWIPS))
        each.set(qn("w:type"), "dxa")
        padding.append(each)
    indent = OxmlElement("w:tblInd")
    indent.set(qn("w:w"), str(_PADDING_TWIPS))
    indent.set(qn("w:type"), "dxa")
    layout = properties.find(qn("w:tblLayout"))
    layout.addprevious(indent)
    layout.addnext(padding)


def _rule(table: "DocxTable", style: Looks) -> None:
    """A header row that repeats, rows that stay whole, and light rules."""
    from docx.oxml import OxmlElement
    from docx.oxml.ns import qn

    for at, row in enumerate(table.rows):
        properties = row._tr.get_or_add_trPr()
        properties.append(OxmlElement("w:cantSplit"))
        if at == 0:
            properties.append(OxmlElement("w:tblHeader"))
            for cell in row.cells:
                cell.paragraphs[0].runs[0].bold = True
                _border(cell._tc.get_or_add_tcPr(), "w:tcBorders", {"bottom": (6, style.colour("rule"))})
    rules = {"top": (8, style.colour("rule")), "bottom": (8, style.colour("rule"))}
    rules["insideH"] = (2, style.colour("light_rule"))
    borders = _border(table._tbl.tblPr, "w:tblBorders", rules)
    layout = table._tbl.tblPr.find(qn("w:tblLayout"))
    if layout is not None:
        layout.addprevious(borders)  # the schema wants borders between indent and layout


def _border(parent: "object", name: str, sides: dict[str, tuple[int, str]]) -> "object":
    from docx.oxml import OxmlElement
    from docx.oxml.ns import qn

    borders = OxmlElement(name)
    for side, (eighths, colour) in sides.items():
        line = OxmlElement(f"w:{side}")
        for key, value in (("val", "single"), ("sz", str(eighths)), ("space", "0"), ("color", colour)):
            line.set(qn(f"w:{key}"), value)
        borders.append(line)
    parent.append(borders)  # type: ignore[attr-defined]
    return borders


# --- the file ---------------------------------------------------------------------------------------------------


def _timeless(content: bytes) -> bytes:
    """The same archive with every entry at a fixed time and without marks of the system."""
    made = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(made, "w") as new:
        for entry in old.infolist():
            plain = zipfile.ZipInfo(entry.filename, _EPOCH)
            plain.compress_type, plain.create_system, plain.external_attr = zipfile.ZIP_DEFLATED, 3, 0
            new.writestr(plain, old.read(entry))
    return made.getvalue()
