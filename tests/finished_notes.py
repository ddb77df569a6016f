"""An invented case and its finished notes, and a check that finds numbers which stand nowhere in the case."""

import html
import json
import re
import sys
import zipfile
from collections.abc import Iterable, Iterator
from html.parser import HTMLParser
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

from reviewkit import __version__
from reviewkit.comparison import LEVEL, MATERIAL_SHARE
from reviewkit.compose import CaseContent, NoteWishes, Repeat, compose
from reviewkit.decisions import decide
from reviewkit.exhibit import BarFigure, Bin, BinnedFigure, Exhibit, Interval, IntervalFigure
from reviewkit.facts import NOT_STATED, STUDY, Fact, Facts, Source, SourceKind, Standing, Value
from reviewkit.note import Audience, Note
from reviewkit.placeholders import render
from reviewkit.printed import Printed, read_printed
from reviewkit.references import citation, short_citation
from reviewkit.rulefiles import read_rule_book
from reviewkit.shipped import rules_folder
from reviewkit.writers.docx import write_docx
from reviewkit.writers.html import write_html
from reviewkit.writers.markdown import write_markdown
from reviewkit.writers.note_json import write_json
from reviewkit.writers.text import write_text

BOOK = read_rule_book(rules_folder())
MODEL, CLAIM, DATA = "model:main", "claim:headline", "data:main"
SPECIFICATION = """format = 1
name = "main"
data = "stalls.csv"

[outcome]
column = "takings"
transform = "log_plus"
constant = 1.0
zeros = "kept"

[model]
estimator = "ols"
terms = ["lamp", "factor(square)"]
"""
DEFAULTS = {
    "refit.submitted": 0.394,
    "refit.submitted_low": 0.21,
    "refit.submitted_high": 0.578,
    "refit.submitted_percent": 48.3,
    "refit.alternative": 0.179,
    "refit.alternative_low": 0.043,
    "refit.alternative_high": 0.315,
    "refit.alternative_percent": 19.6,
    "refit.alternative_percent_low": 4.4,
    "refit.alternative_percent_high": 37.1,
    "refit.agree_within_percent": 71.2,
    "refit.differ_by_at_least_percent": 22.3,
    "refit.error_ratio": 1.24,
    "refit.coefficient": 0.4112,
    "refit.coefficient_error": 0.0934,
    "outcome.zero_share": 0.284,
}
"""Numbers of the invented case; tests put others in their place."""


def done(name: str, value: Value, exhibit: str) -> Fact:
    return Fact(name, value, Standing.DONE, Source(SourceKind.EXHIBIT, exhibit), MODEL)


def settled(name: str, value: Value, place: str = "", subject: str = MODEL) -> Fact:
    return Fact(name, value, Standing.SETTLED, Source(SourceKind.ANSWER, place), subject)


def stated(name: str, value: Value, place: str, quote: str = "") -> Fact:
    source = Source(SourceKind.MANUSCRIPT, place, quote)
    return Fact(name, value, Standing.STATED, source, MODEL, confirmed=False)


def evidence(numbers: dict[str, float], conclusion: str = "differs") -> tuple[Exhibit, ...]:
    """Exhibits that yield these numbers as facts."""
    sample = tuple(done(name, numbers[name], "sample") for name in ("outcome.zero_share",))
    models = (
        done("refit.reproduced", "yes", "models"),
        done("refit.printed_estimate", read_printed("0.41"), "models"),
        done("refit.printed_error", read_printed("0.09"), "models"),
        done("n.used", 2418.0, "models"),
        done("refit.separated_rows", 0.0, "models"),
        *(done(name, numbers[name], "models") for name in ("refit.coefficient", "refit.coefficient_error")),
    )
    kept = [name for name in numbers if name.startswith("refit.") and "coefficient" not in name]
    comparison = (
        done("refit.conclusion", conclusion, "comparison"),
        done("refit.difference_excludes_zero", "yes" if conclusion == "differs" else "no", "comparison"),
        done("refit.sign_turns", "no", "comparison"),
        done("refit.scale", "log_ratio_of_means", "comparison"),
        *(done(name, numbers[name], "comparison") for name in kept),
    )
    rows = [("lamp", "submitted", numbers["refit.coefficient"], numbers["refit.coefficient_error"], 0.0004)]
    bins = tuple(
        Bin(10.0 * at, (at - 4) ** 2 - 9.5, (at - 4) ** 2 - 30.0, (at - 4) ** 2 + 20.0, 120) for at in range(9)
    )
    ends = [numbers[f"refit.alternative{end}"] for end in ("", "_low", "_high")]
    return (
        Exhibit(
            "sample",
            "The sample and its outcome",
            ("what", "value"),
            (("rows used", 2418), ("share of zeros", numbers["outcome.zero_share"])),
            "Zeros are kept",
            (BarFigure("takings in coins", "per cent of all rows", (("none", 28.4), ("some", 71.6))),),
            sample,
        ),
        Exhibit(
            "models",
            "The submitted model",
            ("term", "model", "estimate", "std_error", "p"),
            tuple(rows),
            "The printed figures come out of the data",
            (IntervalFigure("log ratio of means", (Interval("model of the mean", *ends),)),),
            models,
        ),
        Exhibit(
            "comparison",
            "Both models on one scale",
            ("term", "submitted", "alternative"),
            (("lamp", numbers["refit.submitted"], numbers["refit.alternative"]),),
            "The two stand side by side",
            (),
            comparison,
        ),
        Exhibit(
            "baseline-diagnostics",
            "Residuals of the untransformed fit",
            (),
            (),
            "",
            (BinnedFigure("fitted takings in coins", "residual in coins", bins, (0.0, 0.0)),),
        ),
    )


def readings() -> tuple[Fact, ...]:
    """What the invented paper says."""
    return (
        stated("outcome.transform", "log of y plus a constant", "methods, paragraph 14"),
        stated("outcome.constant", 1.0, "methods, paragraph 14"),
        settled("outcome.kind", "amount with zeros"),
        settled("outcome.has_zeros", "yes"),
        settled("outcome.zeros", "constant added", "p. 6"),
        settled("estimator", "least squares", "table 2"),
        settled("transform.reason", NOT_STATED),
        settled("errors.kind", "clustered", "note to table 2"),
        settled("claim.scale", "percent", "abstract", CLAIM),
        settled("claim.target", "arithmetic mean", "abstract", CLAIM),
        settled("claim.percent", read_printed("51"), "abstract", CLAIM),
        settled("claim.coefficient", read_printed("0.41"), "table 2", CLAIM),
    )


def case_with(
    numbers: dict[str, float] | None = None,
    wishes: NoteWishes | None = None,
    more: Iterable[Fact] = (),
    has_data: bool = True,
) -> CaseContent:
    """The invented case with these numbers, wishes and further facts."""
    exhibits = evidence({**DEFAULTS, **(numbers or {})}) if has_data else ()
    found = [fact for exhibit in exhibits for fact in exhibit.facts]
    facts = Facts((*readings(), *found, *more)).linked(CLAIM, MODEL).linked(MODEL, DATA)
    repeats = (Repeat("main", SPECIFICATION, "stalls.csv", "0f" * 32),) if has_data else ()
    title = "Lamps over stalls and evening takings"
    return CaseContent(title, facts, decide(facts, BOOK), BOOK, exhibits, wishes or NoteWishes(), repeats)


WRITERS = {"docx": write_docx, "md": write_markdown, "txt": write_text, "html": write_html, "json": write_json}


def write_all(case: CaseContent, folder: Path, formats: Iterable[str] = tuple(WRITERS)) -> list[Path]:
    """Both notes in every format."""
    for audience in Audience:
        note = compose(case, audience)
        for ending in formats:
            WRITERS[ending](note, folder / f"to-{audience}.{ending}")
    return sorted(folder.iterdir())


# --- what stands in a finished file -----------------------------------------------------------------------------


def shown_text(path: Path) -> str:
    """All that a reader of the file sees or is read out."""
    if path.suffix == ".md":
        return re.sub(r"\]\(figure-[^)]*\)", "]", re.sub(r"\\(.)", r"\1", path.read_text(encoding="utf-8")))
    if path.suffix == ".html":
        return _Shown(path.read_text(encoding="utf-8")).text
    if path.suffix == ".json":
        return "\n".join(_texts_in(json.loads(path.read_text(encoding="utf-8"))))
    return "\n".join(_docx_lines(path)) if path.suffix == ".docx" else path.read_text(encoding="utf-8")


class _Shown(HTMLParser):
    """The text of a page and the alternative texts of its pictures; its style is not read."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.text, self._in_style = "", False
        self.feed(page)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self._in_style = tag == "style"
        inline = tag in ("a", "strong", "span")
        self.text += "" if inline else "\n" + (dict(attrs).get("alt") or "")

    def handle_endtag(self, tag: str) -> None:
        self._in_style = False

    def handle_data(self, data: str) -> None:
        self.text += "" if self._in_style else data


def _texts_in(content: Any) -> Iterator[str]:
    """All texts in lists and objects; numbers of figures stand beside them as data."""
    if isinstance(content, str):
        yield content
    elif isinstance(content, list | dict):
        for each in content.values() if isinstance(content, dict) else content:
            yield from _texts_in(each)


def _docx_lines(path: Path) -> Iterator[str]:
    with zipfile.ZipFile(path) as archive:
        root = ElementTree.fromstring(archive.read("word/document.xml"))
    for element in root.iter():
        name = element.tag.rpartition("}")[2]
        if name == "p":
            yield "".join(each.text or "" for each in element.iter() if each.tag.endswith("}t"))
        elif name == "docPr":
            yield element.get("descr", "")


def everything_in(path: Path) -> bytes:
    """All bytes of the file, parts of an archive unpacked."""
    if path.suffix != ".docx":
        return path.read_bytes()
    with zipfile.ZipFile(path) as archive:
        return b"\n".join(name.encode() + archive.read(name) for name in archive.namelist()) + path.read_bytes()


# --- numbers ----------------------------------------------------------------------------------------------------

_TOKEN = re.compile(r"(?<![\w.])([-−]?)(\d{1,3}(?:,\d{3})+|\d+)(?:\.(\d+))?(e-?\d+)?(?![\w])")


def numbers_without_source(text: str, case: CaseContent, note: Note) -> list[str]:
    """Numbers of a finished text that stand in no exhibit, fact, setting, source place or cited work."""
    values, words = list(_values(case)), "\n".join(_words(case, note))
    plain = _without_apparatus(re.sub(r"\s+", " ", html.unescape(text).replace("\u00a0", " ")), case)
    plain = re.sub(r"< (0\.\d+)", lambda bound: "" if _is_below(float(bound[1]), values) else bound[0], plain)
    spoken = set(_tokens(words))
    return [token for token in _tokens(plain) if token not in spoken and not _is_among(token, values)]


def _tokens(text: str) -> list[str]:
    return [found[0].replace("−", "-") for found in _TOKEN.finditer(text)]


def _is_among(token: str, values: list[float]) -> bool:
    """Whether a value, or its share in per cent, rounds to the token; direction words may carry the sign."""
    shown = float(token.replace(",", ""))
    mantissa, _, exponent = token.partition("e")
    half = 0.5 * 10.0 ** (int(exponent or 0) - len(mantissa.partition(".")[2])) * (1 + 1e-9)
    return any(abs(abs(shown) - abs(value) * scale) <= half for value in values for scale in (1.0, 100.0))


def _is_below(bound: float, values: list[float]) -> bool:
    return any(0 <= value < bound for value in values)


def _without_apparatus(text: str, case: CaseContent) -> str:
    """The text without numbers of points and exhibits, each checked to be one that exists."""
    for found in re.finditer(r"[Ee]xhibits? ((?:\d+(?:, | and | to )?)+)", text):
        assert all(1 <= int(one) <= len(case.exhibits) for one in re.findall(r"\d+", found[1])), found[0]
    without_exhibits = re.sub(r"([Ee]xhibits?) (?:\d+(?:, | and | to )?)+", r"\1 ", text)
    return re.sub(r"\b([1-5])\. (?=[A-Z][^.]*\((?:major|minor)\))", "", without_exhibits)


def _values(case: CaseContent) -> Iterator[float]:
    yield from (100 * LEVEL, 100 * MATERIAL_SHARE)
    yield from (setting.value for setting in case.book.settings.values())
    for fact in case.facts:
        if isinstance(fact.value, float):
            yield fact.value
        elif isinstance(fact.value, Printed):
            yield fact.value.value
    for exhibit in case.exhibits:
        yield from (cell for row in exhibit.rows for cell in row if isinstance(cell, int | float))
        for figure in exhibit.figures:
            yield from _drawn(figure)


def _drawn(figure: IntervalFigure | BinnedFigure | BarFigure) -> Iterator[float]:
    match figure:
        case IntervalFigure():
            yield from (one for row in figure.rows for one in (row.estimate, row.low, row.high) if one is not None)
            yield from (len(figure.rows), figure.reference or 0.0)
        case BinnedFigure():
            yield from (one for each in figure.bins for one in (each.x, each.middle))
            yield from (len(figure.bins), *(figure.line or ()))
        case BarFigure():
            yield from (height for _, height in figure.bars)


def _words(case: CaseContent, note: Note) -> Iterator[str]:
    """Texts of others in which numbers may stand: places, names, works, the specification, fixed words of rules."""
    yield from (case.title, __version__)
    for fact in case.facts:
        yield fact.source.place
        if isinstance(fact.value, str):
            yield fact.value
    for work in case.book.references.values():
        yield from (citation(work).replace("https://doi.org/", "doi:"), short_citation(work))
    for each in case.repeats:
        yield from (each.specification, each.sha256, f"SHA-256 {each.data_name}")
    for exhibit in case.exhibits:
        yield from (exhibit.title, exhibit.sentence, *exhibit.columns)
        yield from (cell for row in exhibit.rows for cell in row if isinstance(cell, str))
    for finding in case.findings:
        rule = finding.rule
        for template in (rule.says, rule.why, rule.best_case, rule.request, rule.short, rule.way):
            yield render(re.sub(r"\{[^}]*\}", "", template), lambda name: None)


# --- as a program: the same bytes wherever it runs ---------------------------------------------------------------

PRIVATE = (
    settled("editor.remark", "SENTINEL-EDITOR-FACT", "", STUDY),
    settled("remarks", "SENTINEL-REMARK", "", STUDY),
    settled("data.first_row", "SENTINEL-CELL", "", DATA),
    stated("outcome.unit", "coins", "p. 7", "SENTINEL-QUOTE"),
)

if __name__ == "__main__":
    write_all(case_with(more=PRIVATE), Path(sys.argv[1]))
