"""Finished files: real styles, alternative texts, nothing that tells who, where or when; hostile text stays text."""

import io
import os
import struct
import zipfile
from pathlib import Path
from xml.etree import ElementTree

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reviewkit.exhibit import BarFigure, Bin, BinnedFigure, Exhibit, FigureData, Interval, IntervalFigure
from reviewkit.exhibit_blocks import alt_text, exhibit_blocks, exhibit_table
from reviewkit.note import (
    Audience,
    Excerpt,
    Figure,
    Note,
    Paragraph,
    Points,
    ReferenceList,
    Section,
    Table,
)
from reviewkit.writers.docx import docx_bytes, write_docx
from reviewkit.writers.markdown import escaped, markdown_of, write_markdown
from reviewkit.writers.pictures import COLUMN_CM, FULL_CM, draw
from reviewkit.writers.text import WIDTH, text_of, write_text
from reviewkit.writers.typesetting import typeset

GOLDEN = Path(__file__).parent / "golden"
W = "{http://schemas.openxmlformats.org/wordprocessingml/2006/main}"
INTERVALS = IntervalFigure(
    "log ratio of means", (Interval("submitted", 0.41, 0.22, 0.6), Interval("model of the mean", 0.18, None, None))
)
BINS = BinnedFigure("fitted, in cups", "residual, in cups", (Bin(1, 0.5, -1, 2, 80), Bin(3, -0.5, -2, 1, 80)), (0, 0))
BARS = BarFigure("cups a day", "per cent of all rows", (("none", 31.0), ("some", 69.0)))
FIGURES = (INTERVALS, BINS, BARS)
TABLE = Table(
    "Exhibit 1. Cups by hour.", ("Hour", "Mean"), (("early", "-1.25"), ("late", "1,204.00")), "Means of all rows."
)
SMALL = Note(
    "Coffee carts and cups: comments",
    Audience.AUTHORS,
    (
        Section("", (Paragraph("An opening of one line, 31 % of it -0.4."),)),
        Section("Requests", ()),
        Section("1. We ask for a table (minor)", (Paragraph("It counts cups.", "In the paper."),), level=2),
        Section("Smaller points", (Points(("A first point.", "A second point.")),)),
        Section("Works cited", (ReferenceList(("Somebody, A. (2001). A title. A journal 1(2), 3–4.",)),)),
        Section("Again", (Excerpt('format = 1\nname = "main"', "specification"),)),
        Section("Exhibits", (TABLE, Figure("Exhibit 2, drawn.", alt_text(BARS, "Cups"), BARS))),
    ),
)


def parts(content: bytes) -> dict[str, bytes]:
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        return {name: archive.read(name) for name in archive.namelist()}


def document(note: Note) -> ElementTree.Element:
    return ElementTree.fromstring(parts(docx_bytes(note))["word/document.xml"])


def of_text(text: str) -> Note:
    """A note in which that text stands everywhere."""
    table = Table(text, (text, text), ((text, text),), text)
    blocks = (Paragraph(text, text), Points((text,)), table, Excerpt(text, text), ReferenceList((text,)))
    return Note(text, Audience.AUTHORS, (Section(text, (*blocks, Figure(text, text, BARS))),))


# --- golden files -----------------------------------------------------------------------------------------------


def finished(tmp_path: Path) -> Path:
    write_text(SMALL, tmp_path / "small.txt")
    write_markdown(SMALL, tmp_path / "small.md")
    write_docx(SMALL, tmp_path / "small.docx")
    return tmp_path


@pytest.mark.parametrize("name", ["small.txt", "small.md"])
def test_a_small_note_reads_as_it_did(tmp_path, name):
    made = (finished(tmp_path) / name).read_text(encoding="utf-8")
    if os.environ.get("REVIEWKIT_WRITE_GOLDEN") == "yes":
        (GOLDEN / name).write_text(made, encoding="utf-8", newline="\n")
    assert made == (GOLDEN / name).read_text(encoding="utf-8")


def test_a_small_docx_has_the_parts_it_had(tmp_path):
    made = parts((finished(tmp_path) / "small.docx").read_bytes())
    for name in ("word/document.xml", "docProps/core.xml", "word/footer1.xml"):
        tidy = ElementTree.canonicalize(made[name].decode(), strip_text=False)
        golden = GOLDEN / f"small.docx.{Path(name).name}"
        if os.environ.get("REVIEWKIT_WRITE_GOLDEN") == "yes":
            golden.write_text(tidy, encoding="utf-8", newline="\n")
        assert tidy == golden.read_text(encoding="utf-8"), name


# --- docx -------------------------------------------------------------------------------------------------------


def test_a_docx_has_real_styles_and_heading_levels():
    styles = [each.get(f"{W}val") for each in document(SMALL).iter(f"{W}pStyle")]
    assert styles[0] == "Title"
    assert styles.count("Heading1") == 5
    assert styles.count("Heading2") == 1
    assert {"Caption", "ListBullet", "Works", "Excerpt", "TableText", "TableNote"} <= set(styles)


def test_a_table_has_one_header_row_that_repeats_and_rows_that_stay_whole():
    table = next(document(SMALL).iter(f"{W}tbl"))
    rows = list(table.iter(f"{W}tr"))
    assert [row.find(f"{W}trPr/{W}tblHeader") is not None for row in rows] == [True, False, False]
    assert all(row.find(f"{W}trPr/{W}cantSplit") is not None for row in rows)


def test_every_picture_has_an_alternative_text():
    described = [each.get("descr") for each in document(SMALL).iter() if each.tag.endswith("}docPr")]
    assert described == [alt_text(BARS, "Cups")]


def test_the_footer_numbers_the_pages_and_the_language_is_set():
    made = parts(docx_bytes(SMALL))
    assert b'w:instr="PAGE"' in made["word/footer1.xml"]
    assert b'<w:lang w:val="en"' in made["word/styles.xml"]


def test_a_docx_tells_nothing_of_its_maker():
    made = parts(docx_bytes(SMALL))
    root = ElementTree.fromstring(made["docProps/core.xml"])
    assert {each.tag.rpartition("}")[2]: each.text for each in root} == {"title": SMALL.title, "language": "en"}
    assert not [name for name in made if "thumbnail" in name or name.endswith("app.xml")]
    everything = b"".join(made.values())
    for trace in (b"python-docx", b"w:rsid ", b"w:rsidR", b"w:author", b"dcterms:created"):
        assert trace not in everything, trace


def test_entries_of_a_docx_have_no_time():
    with zipfile.ZipFile(io.BytesIO(docx_bytes(SMALL))) as archive:
        assert {entry.date_time for entry in archive.infolist()} == {(1980, 1, 1, 0, 0, 0)}
    assert docx_bytes(SMALL) == docx_bytes(SMALL)


def test_minus_signs_are_set_and_ranges_left_alone():
    assert typeset("-0.4 and (-2), 31 %") == "−0.4 and (−2), 31\u00a0%"
    assert typeset("2001-2003, SHA-256, log-1, a - b") == "2001-2003, SHA-256, log-1, a - b"


# --- hostile text -----------------------------------------------------------------------------------------------

HOSTILE = '<b>x</b> {HYPERLINK "http://a.b"} [l](javascript:1) www.a.b a@b.c `c` $x$ | # 1. \x00\x0b\u202e\ufffe & ]]>'


def test_hostile_text_stays_text_in_a_docx():
    made = parts(docx_bytes(of_text(HOSTILE)))
    assert b"w:hyperlink" not in made["word/document.xml"]
    assert b"instrText" not in made["word/document.xml"]
    assert b"fldSimple" not in made["word/document.xml"]
    assert b"TargetMode" not in made["word/_rels/document.xml.rels"]
    assert "[l](javascript:1)" in "".join(document(of_text(HOSTILE)).itertext())


def test_hostile_text_becomes_no_markup_and_no_link_in_markdown():
    text = escaped(HOSTILE)
    for raw in ("<b>", "[l](", "http://", "www.", "a@b", "`c`", "$x$", " | "):
        assert raw not in text.replace("\\<", "").replace("\\`", ""), raw
    assert [escaped(start)[:3] for start in ("- a", "1. a", "+ a", "12) a")] == ["\\- ", "1\\.", "\\+ ", "12\\"]


@settings(max_examples=20)
@given(st.text(max_size=80))
def test_any_text_can_be_written(text):
    note = of_text(text)
    ElementTree.fromstring(parts(docx_bytes_without_pictures(note))["word/document.xml"])
    assert text_of(note)
    without_figures = Note(note.title, note.audience, tuple(_without_figures(each) for each in note.sections))
    assert markdown_of(without_figures, {})


def docx_bytes_without_pictures(note: Note) -> bytes:
    return docx_bytes(Note(note.title, note.audience, tuple(_without_figures(each) for each in note.sections)))


def _without_figures(section: Section) -> Section:
    kept = tuple(block for block in section.blocks if not isinstance(block, Figure))
    return Section(section.title, kept, section.level)


# --- text -------------------------------------------------------------------------------------------------------


def test_a_wide_table_keeps_to_the_width_and_loses_no_word():
    words = "a rather long heading of a column"
    table = Table("Caption.", tuple(f"{words} {at}" for at in range(6)), (tuple(f"value {at}" for at in range(6)),))
    lines = text_of(Note("T", Audience.EDITOR, (Section("", (table,)),))).splitlines()
    assert max(map(len, lines)) <= WIDTH
    assert sum(line.count("heading") for line in lines) == 6


def test_numbers_stand_right_and_words_left():
    text = text_of(SMALL)
    assert "early     -1.25\nlate   1,204.00" in text


def test_a_figure_is_told_in_words():
    assert alt_text(BARS, "Cups") in " ".join(text_of(SMALL).split())


# --- pictures ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("figure", FIGURES, ids=lambda one: type(one).__name__)
@pytest.mark.parametrize("width", [COLUMN_CM, FULL_CM])
def test_a_picture_has_its_width_the_same_bytes_and_no_metadata(figure: FigureData, width: float):
    made = draw(figure, width)
    assert made == draw(figure, width)
    assert abs(struct.unpack(">I", made[16:20])[0] - width / 2.54 * 300) <= 1
    assert not any(chunk in made for chunk in (b"tEXt", b"iTXt", b"zTXt", b"tIME", b"eXIf"))


def test_a_picture_does_not_depend_on_the_readers_own_settings():
    import matplotlib

    plain = draw(BARS)
    with matplotlib.rc_context({"font.size": 30, "axes.facecolor": "red", "savefig.dpi": 20}):
        assert draw(BARS) == plain
        assert matplotlib.rcParams["font.size"] == 30


def test_a_picture_can_be_read_without_colour():
    import numpy as np
    from matplotlib.image import imread

    pixels = imread(io.BytesIO(draw(INTERVALS)))[..., :3]
    grey = pixels @ np.array([0.299, 0.587, 0.114])
    marks = pixels[(np.abs(pixels - np.array([0x0B, 0x5A, 0x8A]) / 255) < 0.02).all(axis=-1)]
    assert len(marks) > 100
    assert grey.max() - (marks @ np.array([0.299, 0.587, 0.114])).max() > 0.5


def test_alternative_texts_say_what_is_drawn():
    assert alt_text(INTERVALS, "Models") == (
        "Models. Estimates with intervals of log ratio of means: submitted: 0.410 (0.220 to 0.600); "
        "model of the mean: 0.180, no interval. A vertical line stands at 0."
    )
    assert "none: 31 %; some: 69 %" in alt_text(BARS, "Cups")
    assert "2 bins" in alt_text(BINS, "Cups")
    assert "too few rows" in alt_text(BinnedFigure("x", "y", ()), "Cups")


# --- exhibits ---------------------------------------------------------------------------------------------------


def test_a_table_follows_the_digits_of_its_errors():
    rows = (("a", 0.38123, 0.1134, 0.0002, 12), ("b", float("nan"), None, 0.51, 1204))
    exhibit = Exhibit("models", "Models", ("term", "estimate", "std_error", "p", "rows"), rows, "They differ")
    table = exhibit_table(exhibit)
    assert table.rows == (("a", "0.38", "0.11", "< 0.001", "12"), ("b", "–", "–", "0.510", "1,204"))
    assert table.columns == ("Term", "Estimate", "Std error", "p", "Rows")


def test_an_exhibit_without_rows_gives_only_its_figures():
    blocks = exhibit_blocks(Exhibit("e", "Title", (), (), "", (BARS,)), 3)
    assert [type(block) for block in blocks] == [Figure]
    assert blocks[0].caption.startswith("Exhibit 3")


def test_writing_replaces_a_file_whole_and_leaves_nothing_behind(tmp_path):
    for write, name in ((write_text, "a.txt"), (write_docx, "a.docx")):
        (tmp_path / name).write_text("old")
        write(SMALL, tmp_path / name)
        assert (tmp_path / name).read_bytes() != b"old"
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.docx", "a.txt"]
