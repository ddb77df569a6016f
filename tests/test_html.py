"""The html page of a note: whole in one file, literal, readable by eye and by ear, and the same everywhere."""

import base64
import hashlib
import itertools
import os
import re
from html.parser import HTMLParser
from pathlib import Path
from unittest import mock

import browser
import pytest
from finished_notes import case_with, shown_text
from hypothesis import given, settings
from hypothesis import strategies as st
from test_writers import BARS, FIGURES, SMALL, of_text

from reviewkit.compose import compose
from reviewkit.note import Audience, Figure, Note, Paragraph, Points, Section, Table
from reviewkit.shipped import templates_folder
from reviewkit.writers import html as writer
from reviewkit.writers.html import html_bytes, write_html
from reviewkit.writers.pictures import draw
from reviewkit.writers.typesetting import typeset

GOLDEN = Path(__file__).parent / "golden"
VOID = {"meta", "img", "source"}
LANDMARKS = {"header", "nav", "main", "footer"}
WIDE = Table(
    "Exhibit 7. A table of many columns.",
    tuple(f"A heading {at}" for at in range(14)),
    tuple((f"row {row}", *(f"{row * at:.3f}" for at in range(1, 14))) for row in range(5)),
    "A note below it.",
)
UNBROKEN = "averylongwordwithoutanyplacetobreakit" * 8


class Element:
    """One start tag with its attributes, the elements around it, and the text within."""

    def __init__(self, tag, attributes, around):
        self.tag, self.attributes, self.around, self.text = tag, dict(attributes), around, ""

    def within(self, tag):
        return any(each.tag == tag for each in self.around)


class Reader(HTMLParser):
    """All elements of a page in order; a tag left open or closed out of turn is an error."""

    def __init__(self, page):
        super().__init__()
        self.elements, self._open = [], []
        self.feed(page)
        self.close()
        assert self._open == []

    def handle_starttag(self, tag, attributes):
        assert len(attributes) == len(dict(attributes))
        self.elements.append(Element(tag, attributes, tuple(self._open)))
        if tag not in VOID:
            self._open.append(self.elements[-1])

    def handle_endtag(self, tag):
        assert self._open.pop().tag == tag

    def handle_data(self, data):
        for each in self._open:
            each.text += data

    def all(self, *tags):
        return [each for each in self.elements if each.tag in tags]

    def only(self, tag):
        (found,) = self.all(tag)
        return found


def read(note):
    return Reader(html_bytes(note).decode())


@pytest.fixture(scope="module")
def whole():
    """The invented case for the authors, with a wide table, a long word and a deep section added."""
    note = compose(case_with(), Audience.AUTHORS)
    more = Section("More", (WIDE, Paragraph(f"See exhibit 7 and {UNBROKEN}."), Points((UNBROKEN,))), level=1)
    return Note(note.title, note.audience, (*note.sections, more, Section("Deep", (), 4), Section("Next", (), 4)))


@pytest.fixture(scope="module")
def page(whole):
    return read(whole)


def without_pictures(content):
    """The page with its pictures and its style cut out: the one depends on the drawing library, the other is a file."""
    short = re.sub(r"base64,[A-Za-z0-9+/=]+", "base64,…", content)
    return re.sub(
        r"sha256-[^']+", "sha256-…", re.sub(r"<style>.*?</style>", "<style>…</style>", short, flags=re.DOTALL)
    )


def test_a_small_note_reads_as_it_did(tmp_path):
    write_html(SMALL, tmp_path / "small.html")
    made = without_pictures((tmp_path / "small.html").read_text(encoding="utf-8"))
    if os.environ.get("REVIEWKIT_WRITE_GOLDEN") == "yes":
        (GOLDEN / "small.html").write_text(made, encoding="utf-8", newline="\n")
    assert made == (GOLDEN / "small.html").read_text(encoding="utf-8")


def test_the_same_note_gives_the_same_bytes():
    assert html_bytes(SMALL) == html_bytes(SMALL)


# --- one file ---------------------------------------------------------------------------------------------------


def test_nothing_is_fetched_and_nothing_runs(page):
    assert not page.all("script", "link", "iframe", "object", "embed", "form", "base", "svg")
    for each in page.elements:
        assert not [name for name in each.attributes if name.startswith("on") or name == "style"]
        for name in ("src", "srcset", "data", "action", "background", "poster"):
            assert each.attributes.get(name, "data:image/png;base64,").startswith("data:image/png;base64,")
    assert "url(" not in page.only("style").text
    assert "@import" not in page.only("style").text


def test_the_policy_allows_only_the_pictures_within_and_this_very_style(page):
    told = {each.attributes.get("http-equiv"): each.attributes["content"] for each in page.all("meta")[1:]}
    rules = dict(each.strip().split(" ", 1) for each in told["Content-Security-Policy"].split(";"))
    digest = base64.b64encode(hashlib.sha256(page.only("style").text.encode()).digest()).decode()
    assert rules == {
        "default-src": "'none'",
        "img-src": "data:",
        "style-src": f"'sha256-{digest}'",
        "base-uri": "'none'",
        "form-action": "'none'",
    }


def test_pictures_within_are_those_that_are_drawn(whole, page):
    drawn = [block.data for section in whole.sections for block in section.blocks if isinstance(block, Figure)]
    assert len(drawn) == 3
    for figure, image, source in zip(drawn, page.all("img"), page.all("source"), strict=True):
        for uri, width in ((image.attributes["src"], 16.0), (source.attributes["srcset"], 8.5)):
            assert base64.b64decode(uri.partition(",")[2]) == draw(figure, width)
    assert [round(int(each.attributes["width"]) / 96 * 2.54, 1) for each in page.all("img")] == [16.0] * 3


# --- hostile text -----------------------------------------------------------------------------------------------

HOSTILE = (
    "<script>alert(1)</script>",
    "</style></title></pre>",
    "javascript:alert(1)",
    '" onload="x" \'',
    "&lt;b&gt; &amp;#60; &copy",
    "<!-- --> <![CDATA[ ]]>",
    "{title} {sections} {style_hash}",
    "\u202etxt.exe\u2066 \x00\x1b \ud800 \ufffe",
    "<a href=https://elsewhere.example>",
    "\n\n\r \u2028 \t",
)


def shape(note):
    """Tags and names of attributes in their order."""
    return [(each.tag, tuple(each.attributes)) for each in read(note).elements]


PICTURES = {width: draw(BARS, width) for width in (8.5, 16.0)}
HARMLESS = "words"


@settings(max_examples=60)
@given(st.lists(st.sampled_from(HOSTILE) | st.text(max_size=30)).map(" ".join))
def test_text_of_others_never_becomes_markup(text):
    with mock.patch.object(writer, "draw", lambda _, width: PICTURES[width]):
        told, plain = read(of_text(f"x{text}")), shape(of_text(HARMLESS))
    assert [(each.tag, tuple(each.attributes)) for each in told.elements] == plain
    assert told.only("title").text == typeset(f"x{text}").strip()
    assert told.only("img").attributes["alt"] == typeset(f"x{text}").strip()
    assert {each.text for each in told.all("th", "td")} == {typeset(f"x{text}").strip()}
    turning = set("\u202a\u202b\u202c\u202d\u202e\u2066\u2067\u2068\u2069\u200e\u200f\x00\x1b")
    assert not turning & set("".join(each.text for each in told.all("body")))


def test_an_excerpt_keeps_its_lines_and_its_indent():
    note = of_text("first\n    second <b>\n\nlast")
    assert read(note).only("pre").text == "first\n    second <b>\n\nlast"


# --- structure --------------------------------------------------------------------------------------------------


def test_there_is_one_first_heading_and_no_rank_is_left_out(whole, page):
    ranks = [int(each.tag[1]) for each in page.elements if re.fullmatch(r"h[1-6]", each.tag)]
    assert page.only("h1").text == typeset(whole.title)
    assert ranks.count(1) == 1
    assert ranks[0] == 1
    assert max(later - earlier for earlier, later in itertools.pairwise(ranks)) == 1


@pytest.mark.parametrize("levels", [(3, 1, 2), (1, 4, 2, 6, 1), (2, 2, 1), tuple(range(1, 10))])
@pytest.mark.parametrize("untitled", [0, 1, 2])
def test_ranks_are_whole_whatever_the_levels(levels, untitled):
    sections = (Section("" if at == untitled else f"s{at}", (), level) for at, level in enumerate(levels))
    page = read(Note("T", Audience.EDITOR, tuple(sections)))
    ranks = [int(each.tag[1:]) for each in page.elements if re.fullmatch(r"h\d+", each.tag) and each.within("main")]
    steps = [later - earlier for earlier, later in itertools.pairwise([1, *ranks])]
    assert max(steps) == 1
    assert max(ranks) <= 6


def test_landmarks_are_there_once_and_the_language_is_set(page):
    assert {each.tag: each.attributes.get("id") for each in page.elements if each.tag in LANDMARKS} == {
        "header": None,
        "nav": None,
        "main": "note",
        "footer": None,
    }
    assert page.only("html").attributes["lang"] == "en"
    assert [each.attributes["charset"] for each in page.all("meta")[:1]] == ["utf-8"]


def test_ids_are_unique_and_links_lead_to_places_on_the_page(page):
    ids = [each.attributes["id"] for each in page.elements if "id" in each.attributes]
    assert len(ids) == len(set(ids))
    links = [each.attributes["href"] for each in page.all("a")]
    assert links[0] == "#note"
    assert {each[0] for each in links} == {"#"}
    assert {each[1:] for each in links} <= set(ids)
    for name in ("aria-labelledby", "aria-describedby"):
        assert {each.attributes[name] for each in page.elements if name in each.attributes} <= set(ids)


def test_the_contents_name_every_titled_section_in_order(whole, page):
    titles = [typeset(section.title) for section in whole.sections if section.title]
    assert [each.text for each in page.all("a") if each.within("nav")] == titles
    headed = [each for each in page.all("h2", "h3", "h4") if each.within("section")]
    assert [each.text for each in headed] == titles


def test_every_section_is_named_by_its_heading(page):
    headings = {each.attributes.get("id"): each.text for each in page.all("h2", "h3", "h4", "h5", "h6")}
    assert page.all("section")
    assert all(headings[each.attributes["aria-labelledby"]] for each in page.all("section"))


def test_every_table_has_a_caption_and_scopes_in_a_box_of_its_own(page):
    tables = page.all("table")
    assert len(tables) == len(page.all("caption")) == 4
    assert all(each.around[-1].attributes["class"] == "scroll" for each in tables)
    assert all(each.around[-1].attributes["tabindex"] == "0" for each in tables)
    for each in page.all("th"):
        assert each.attributes["scope"] == ("col" if each.within("thead") else "row")
    rows = [each for each in page.all("tr") if each.within("tbody")]
    assert len(rows) == len([each for each in page.all("th") if each.within("tbody")])


def test_an_empty_heading_names_nothing():
    table = Table("Turned.", (" ", "first"), (("rows", "12"), ("", "3")))
    page = read(Note("T", Audience.EDITOR, (Section("", (table,)),)))
    assert [(each.text, each.attributes["scope"]) for each in page.all("th")] == [("first", "col"), ("rows", "row")]
    assert [each.text for each in page.all("td")] == ["", "12", "", "3"]
    assert [each.attributes.get("class") for each in page.all("td")] == [None, "number", None, "number"]


def test_every_picture_has_an_alternative_text_and_a_caption(whole, page):
    drawn = [block for section in whole.sections for block in section.blocks if isinstance(block, Figure)]
    assert [each.attributes["alt"] for each in page.all("img")] == [typeset(each.alt) for each in drawn]
    captions = [each.text for each in page.all("figcaption")]
    assert set(captions) >= {typeset(each.caption) for each in drawn}


def test_a_number_of_an_exhibit_leads_to_it(page):
    places = {each.attributes["id"]: each.text for each in page.all("div") if each.attributes.get("class") == "exhibit"}
    links = [each for each in page.all("a") if each.within("p") or (each.within("li") and not each.within("nav"))]
    assert [each.text for each in links][-1] == "7"
    assert len(links) > 2
    for each in links:
        assert re.match(rf"\s*Exhibit\s{each.text}[.a]", places[each.attributes["href"][1:]])


def test_a_table_and_its_pictures_stand_in_one_panel(page):
    panels = [each for each in page.all("div") if each.attributes.get("class") == "exhibit"]
    assert [re.match(r"\s*Exhibit\s(\d)", each.text)[1] for each in panels] == ["1", "2", "3", "4", "7"]


def test_an_exhibit_that_does_not_exist_is_not_linked():
    note = Note("T", Audience.EDITOR, (Section("S", (Paragraph("See exhibit 9 and exhibits 2, 3."),)),))
    assert [each.attributes["href"] for each in read(note).all("a")] == ["#note", "#section-1"]


def test_a_note_without_titles_has_no_contents():
    page = read(Note("T", Audience.EDITOR, (Section("", (Paragraph("Words."),)),)))
    assert not page.all("nav")
    assert page.only("main").text.strip() == "Words."


# --- colours ----------------------------------------------------------------------------------------------------


def luminance(colour):
    parts = [int(colour[at : at + 2], 16) / 255 for at in (1, 3, 5)]
    linear = [part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in parts]
    return sum(weight * part for weight, part in zip((0.2126, 0.7152, 0.0722), linear, strict=True))


def contrast(one, other):
    """The ratio that the accessibility guidelines of the web define, 1 to 21."""
    dark, light = sorted((luminance(one), luminance(other)))
    return (light + 0.05) / (dark + 0.05)


def colours(is_dark):
    style = (templates_folder() / "page.css").read_text(encoding="utf-8")
    blocks = re.findall(r":root \{(.*?)\}", style, flags=re.DOTALL)
    assert len(blocks) == 2
    found = [dict(re.findall(r"--(\w+): (#[0-9a-f]{6});", block)) for block in blocks]
    return {**found[0], **found[1]} if is_dark else found[0]


def test_the_measure_of_contrast_is_right():
    assert contrast("#000000", "#ffffff") == pytest.approx(21)
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.01)


@pytest.mark.parametrize("is_dark", [False, True])
@pytest.mark.parametrize("ground", ["paper", "panel"])
@pytest.mark.parametrize("letters", ["ink", "quiet", "accent"])
def test_letters_stand_out_from_their_ground(letters, ground, is_dark):
    found = colours(is_dark)
    assert contrast(found[letters], found[ground]) >= 4.5


# --- in a browser -----------------------------------------------------------------------------------------------

needs_browser = pytest.mark.skipif(browser.FOUND is None, reason="needs chromium")
WIDTHS = [(360, 1), (380, 1), (660, 1), (1000, 1), (1000, 2), (1400, 1)]
TOO_WIDE = "[document.documentElement.scrollWidth, document.documentElement.clientWidth]"
LINES = """
[...document.querySelectorAll('main p, main li, figcaption')].flatMap(each => {
  const walk = document.createTreeWalker(each, NodeFilter.SHOW_TEXT), lines = {};
  for (let node; node = walk.nextNode();)
    for (let at = 0; at < node.length; at++) {
      const range = document.createRange();
      range.setStart(node, at); range.setEnd(node, at + 1);
      const box = range.getBoundingClientRect(), line = Math.round(box.bottom / 12);
      if (box.width) lines[line] = (lines[line] || 0) + 1;
    }
  return Object.values(lines);
})"""
PAIRS = """
[...document.querySelectorAll('body *')].filter(each => each.checkVisibility() &&
    [...each.childNodes].some(one => one.nodeType == 3 && one.data.trim())).map(each => {
  let ground = each;
  while (getComputedStyle(ground).backgroundColor == 'rgba(0, 0, 0, 0)') ground = ground.parentElement;
  return [each.tagName, getComputedStyle(each).color, getComputedStyle(ground).backgroundColor];
})"""


@pytest.fixture(scope="module")
def shown(whole, tmp_path_factory):
    """The page in a browser, and where its file stands."""
    folder = tmp_path_factory.mktemp("browser")
    write_html(whole, folder / "note.html")
    with browser.page(folder / "profile") as opened:
        yield opened, folder / "note.html"


@needs_browser
def test_the_browser_shows_the_note_and_asks_for_nothing_else(shown, whole):
    opened, file = shown
    opened.open(file, 1000)
    assert opened.tell("document.querySelector('h1').innerText") == typeset(whole.title)
    assert opened.tell("[...document.images].map(each => each.naturalWidth > 500)") == [True] * 3
    assert opened.tell("getComputedStyle(document.querySelector('.exhibit')).backgroundColor") == "rgb(239, 243, 245)"
    assert {each for each in opened.requests if not each.startswith("data:image/png")} == {file.resolve().as_uri()}
    assert opened.complaints == []


@needs_browser
@pytest.mark.parametrize(("width", "zoom"), WIDTHS)
def test_nothing_scrolls_sideways_but_wide_tables_in_their_boxes(shown, width, zoom):
    opened, file = shown
    opened.open(file, width, zoom=zoom)
    needed, there = opened.tell(TOO_WIDE)
    assert needed <= there == width // zoom
    boxes = opened.tell("[...document.querySelectorAll('.scroll')].map(each => each.scrollWidth > each.clientWidth)")
    assert boxes[-1] is True
    inside = "Math.max(...[...document.querySelectorAll('p, h1, h2, li, img, pre, figcaption, caption span')]"
    assert opened.tell(f"{inside}.map(each => each.getBoundingClientRect().right))") <= width // zoom


@needs_browser
@pytest.mark.parametrize("width", [1000, 1400])
def test_a_line_has_at_most_75_characters(shown, width):
    opened, file = shown
    opened.open(file, width)
    lines = opened.tell(LINES)
    assert 60 < max(lines) <= 75


@needs_browser
@pytest.mark.parametrize("width", [380, 1400])
@pytest.mark.parametrize("is_dark", [False, True])
def test_all_that_is_shown_has_contrast(shown, width, is_dark):
    opened, file = shown
    opened.open(file, width, is_dark=is_dark)
    pairs = opened.tell(PAIRS)
    assert {"P", "TD", "TH", "A", "FIGCAPTION", "STRONG", "H2", "PRE"} <= {tag for tag, _, _ in pairs}
    for tag, letters, ground in pairs:
        one, other = (
            "#" + "".join(f"{int(part):02x}" for part in re.findall(r"\d+", each)) for each in (letters, ground)
        )
        assert contrast(one, other) >= 4.5, (tag, letters, ground)
    assert (luminance(other) < 0.1) is is_dark


@needs_browser
def test_the_first_key_leads_past_the_contents(shown):
    opened, file = shown
    opened.open(file, 1000)
    opened.press("Tab")
    assert opened.tell("document.activeElement.className") == "skip"
    assert opened.tell("document.activeElement.getBoundingClientRect().top") >= 0
    opened.press("Enter")
    assert opened.tell("location.hash") == "#note"


@needs_browser
def test_it_prints_dark_on_white_without_contents(shown, tmp_path):
    opened, file = shown
    opened.open(file, 700, is_dark=True, media="print")
    assert opened.tell("[...document.querySelectorAll('nav, .skip')].some(each => each.checkVisibility())") is False
    assert opened.tell("getComputedStyle(document.body).color") == "rgb(32, 38, 43)"
    assert opened.tell("getComputedStyle(document.querySelector('tr')).breakInside") == "avoid"
    opened.printed(tmp_path / "note.pdf")
    assert (tmp_path / "note.pdf").read_bytes().startswith(b"%PDF")


# --- as text ----------------------------------------------------------------------------------------------------


def test_what_is_read_out_is_the_whole_note(whole, tmp_path):
    write_html(whole, tmp_path / "note.html")
    told = " ".join(shown_text(tmp_path / "note.html").split())
    for block in (block for section in whole.sections for block in section.blocks):
        texts = [block.text] if isinstance(block, Paragraph) else [block.alt] if isinstance(block, Figure) else []
        for text in texts:
            assert " ".join(typeset(text).split()) in told


@pytest.mark.parametrize("figure", FIGURES, ids=lambda one: type(one).__name__)
def test_every_kind_of_figure_can_be_shown(figure):
    page = read(Note("T", Audience.EDITOR, (Section("", (Figure("Caption.", "Alternative.", figure),)),)))
    for tag, width_cm in (("img", 16.0), ("source", 8.5)):
        assert int(page.only(tag).attributes["width"]) == pytest.approx(width_cm / 2.54 * 96, abs=1)
