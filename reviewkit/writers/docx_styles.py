"""Styles, page and properties of docx notes, as templates/docx.toml sets them."""

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from reviewkit.note import Note
from reviewkit.shipped import templates_folder
from reviewkit.wording import clean

if TYPE_CHECKING:
    from docx.document import Document
    from docx.styles.style import ParagraphStyle

_KEPT_PROPERTIES = ("title", "language")
_LEFT_OUT = ("/thumbnail", "/extended-properties", "/customXml", "/stylesWithEffects")
_TRACES = ("w:rsids", "w:attachedTemplate", "w:proofState", "w:docVars")


@dataclass(frozen=True, slots=True)
class Looks:
    """Sizes, fonts and colours by table and key."""

    tables: Mapping[str, Mapping[str, Any]]

    def size(self, name: str) -> float:
        """A size in points."""
        return float(self.tables["sizes"][name])

    def colour(self, name: str) -> str:
        """A colour as RRGGBB."""
        return str(self.tables["colours"][name])

    def font(self, name: str) -> str:
        """The name of a font."""
        return str(self.tables["fonts"][name])

    def page(self, name: str) -> float:
        """A length of the page in centimetres."""
        return float(self.tables["page"][name])

    @property
    def text_width(self) -> float:
        """Centimetres between the margins."""
        return self.page("width") - 2 * self.page("margin")


def looks() -> Looks:
    """The looks shipped with the program."""
    return Looks(tomllib.loads((templates_folder() / "docx.toml").read_text(encoding="utf-8")))


def prepare(document: "Document", note: Note, style: Looks) -> None:
    """Give a new document its page, styles, footer and properties."""
    _set_page(document, style)
    _set_styles(document, style)
    _set_language(document, note.language)
    _number_pages(document)
    _clear_properties(document, note)


def _set_page(document: "Document", style: Looks) -> None:
    from docx.shared import Cm

    for section in document.sections:
        section.page_width, section.page_height = Cm(style.page("width")), Cm(style.page("height"))
        section.left_margin = section.right_margin = Cm(style.page("margin"))
        section.top_margin = section.bottom_margin = Cm(style.page("margin"))


def _set_styles(document: "Document", style: Looks) -> None:
    """Sizes, space before and after (points) of each style in use."""
    _set_style(document, "Normal", style, ("body", 0, 0))
    _set_style(document, "Body Text", style, ("body", 0, 6))
    _set_style(document, "Title", style, ("title", 0, 12))
    _set_style(document, "Heading 1", style, ("heading_1", 16, 4))
    _set_style(document, "Heading 2", style, ("heading_2", 10, 3))
    _set_style(document, "List Bullet", style, ("body", 0, 3))
    _set_style(document, "Caption", style, ("caption", 10, 4))
    _set_style(document, "Footer", style, ("footer", 0, 0))
    for name, sizes in (("Table Text", ("table", 1.5, 1.5)), ("Table Note", ("table", 3, 10))):
        _set_style(document, name, style, sizes)
    _set_style(document, "Excerpt", style, ("code", 0, 0))
    document.styles["Excerpt"].font.name = style.font("code")
    _set_style(document, "Works", style, ("body", 0, 3))
    _hang(document)


def _set_style(document: "Document", name: str, style: Looks, sizes: tuple[str, float, float]) -> None:
    from docx.enum.style import WD_STYLE_TYPE
    from docx.shared import Pt, RGBColor

    known = name in [each.name for each in document.styles]
    made: ParagraphStyle = document.styles[name] if known else document.styles.add_style(name, WD_STYLE_TYPE.PARAGRAPH)
    size, before, after = sizes
    made.font.size = Pt(style.size(size))
    made.font.color.rgb = RGBColor.from_string(style.colour("text"))
    made.paragraph_format.space_before, made.paragraph_format.space_after = Pt(before), Pt(after)
    made.paragraph_format.line_spacing = 1.0 if name.startswith(("Table", "Excerpt", "Footer")) else 1.12
    _set_font(made, style.font("text"))
    if name == "Title":
        _without_rule(made)


def _set_font(made: "ParagraphStyle", font: str) -> None:
    """One font for all scripts, without references to a theme."""
    from docx.oxml.ns import qn

    made.font.name = font
    fonts = made.element.get_or_add_rPr().get_or_add_rFonts()
    for key in [key for key in fonts.attrib if "heme" in key]:
        del fonts.attrib[key]
    for script in ("w:ascii", "w:hAnsi", "w:cs", "w:eastAsia"):
        fonts.set(qn(script), font)


def _without_rule(made: "ParagraphStyle") -> None:
    from docx.oxml.ns import qn

    for rule in made.element.findall(f".//{qn('w:pBdr')}"):
        rule.getparent().remove(rule)


def _hang(document: "Document") -> None:
    from docx.shared import Cm

    works = document.styles["Works"].paragraph_format
    works.left_indent, works.first_line_indent = Cm(0.8), Cm(-0.8)
    document.styles["Excerpt"].paragraph_format.left_indent = Cm(0.6)


def _set_language(document: "Document", language: str) -> None:
    from docx.oxml.ns import qn

    for found in document.styles.element.iter(qn("w:lang")):
        found.set(qn("w:val"), language)


def _number_pages(document: "Document") -> None:
    """A page number field in the middle of the footer."""
    from docx.enum.text import WD_ALIGN_PARAGRAPH
    from docx.oxml import OxmlElement
    from docx.oxml.ns import qn

    paragraph = document.sections[0].footer.paragraphs[0]
    paragraph.style = "Footer"
    paragraph.alignment = WD_ALIGN_PARAGRAPH.CENTER
    field = OxmlElement("w:fldSimple")
    field.set(qn("w:instr"), "PAGE")
    run, shown = OxmlElement("w:r"), OxmlElement("w:t")
    shown.text = "1"
    run.append(shown)
    field.append(run)
    paragraph._p.append(field)


def _clear_properties(document: "Document", note: Note) -> None:
    """Only title and language stay: no author, program, revision or time; no thumbnail, no editing marks."""
    from docx.oxml.ns import qn

    properties = document.core_properties
    properties.title, properties.language = clean(note.title), note.language
    root = properties._element
    for each in list(root):
        if each.tag.rpartition("}")[2] not in _KEPT_PROPERTIES:
            root.remove(each)
    for relations in (document.part.package.rels, document.part.rels):
        for key in [key for key, one in relations.items() if one.reltype.endswith(_LEFT_OUT)]:
            del relations[key]
    for each in document.styles.element.findall(f".//{qn('w:rsid')}"):
        each.getparent().remove(each)
    for section in document.sections:
        for key in [key for key in section._sectPr.attrib if "rsid" in key]:
            del section._sectPr.attrib[key]
    settings = document.settings.element
    for name in _TRACES:
        for each in settings.findall(qn(name)):
            settings.remove(each)
