"""A .docx manuscript is read as it stands once tracked changes are accepted; dangerous files are refused."""

import io
import zipfile

import docx
import pytest
from docx.oxml import parse_xml
from docx.oxml.ns import nsdecls
from hypothesis import given
from hypothesis import strategies as some

from reviewkit.facts import Fact, SourceKind, Standing
from reviewkit.printed import Printed
from reviewkit.readers.manuscripts import (
    Manuscript,
    ManuscriptParagraph,
    ManuscriptTable,
    proposed_facts,
    read_manuscript,
)
from reviewkit.refusals import Refusal

W = nsdecls("w")


def saved(document, folder, name: str = "paper.docx"):
    path = folder / name
    document.save(path)
    return path


def changed_part(path, name: str, change):
    """The same archive with one part's bytes changed."""
    with zipfile.ZipFile(path) as archive:
        parts = {each: archive.read(each) for each in archive.namelist()}
    parts[name] = change(parts.get(name, b""))
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for each, content in parts.items():
            archive.writestr(each, content)
    return path


def messy():
    """Tracked changes, a text box, hidden text, a merged table, a nested table and odd blanks."""
    paper = docx.Document()
    paper.add_paragraph("Tolls and the trade of mountain inns", style="Title")
    paper.add_heading("2 Methods", level=1)
    edited = paper.add_paragraph("We drop ")
    edited._p.append(parse_xml(f'<w:ins {W} w:id="1" w:author="a"><w:r><w:t>inns </w:t></w:r></w:ins>'))
    edited._p.append(parse_xml(f'<w:del {W} w:id="2" w:author="a"><w:r><w:delText>hotels </w:delText></w:r></w:del>'))
    edited.add_run("with zero")
    edited.add_run(" secret").font.hidden = True
    edited.add_run("\tguests.")
    paper.add_paragraph("")
    boxed = paper.add_paragraph("Before the box.")
    inside = "<w:txbxContent><w:p><w:r><w:t>Inside the box.</w:t></w:r></w:p></w:txbxContent>"
    boxed._p.append(
        parse_xml(
            f'<w:r {W} xmlns:mc="http://schemas.openxmlformats.org/markup-compatibility/2006"><mc:AlternateContent>'
            f'<mc:Choice Requires="wps"><w:pict>{inside}</w:pict></mc:Choice>'
            f"<mc:Fallback><w:pict>{inside}</w:pict></mc:Fallback></mc:AlternateContent></w:r>"
        )
    )
    paper.add_paragraph("Table 3: Tolls and income", style="Caption")
    table = paper.add_table(rows=4, cols=3)
    table.cell(0, 1).merge(table.cell(0, 2)).text = "log income"
    table.cell(1, 0).text, table.cell(1, 1).text, table.cell(1, 2).text = "Toll", "−0.210**", "-0.19"
    table.cell(2, 1).text = "(0.095)"
    table.cell(3, 0).text, table.cell(3, 1).text = "N", "1 204"
    table.rows[2]._tr.get_or_add_trPr().append(parse_xml(f'<w:ins {W} w:id="3" w:author="a"/>'))
    gone = table.add_row()
    gone.cells[0].text = "Deleted row"
    gone._tr.get_or_add_trPr().append(parse_xml(f'<w:del {W} w:id="4" w:author="a"/>'))
    paper.add_paragraph("Notes: Standard errors in parentheses.")
    return paper


def test_a_messy_document_reads_as_it_stands(tmp_path) -> None:
    read = read_manuscript(saved(messy(), tmp_path))
    assert read.title == "Tolls and the trade of mountain inns"
    assert [each.text for each in read.paragraphs] == [
        "Tolls and the trade of mountain inns",
        "2 Methods",
        "We drop inns with zero guests.",
        "Before the box.",
        "Inside the box.",
        "Table 3: Tolls and income",
        "Notes: Standard errors in parentheses.",
    ]
    assert [each.number for each in read.paragraphs] == [1, 2, 3, 4, 5, 6, 7]
    assert read.paragraphs[2].heading == "2 Methods"
    (table,) = read.tables
    assert table.caption == "Table 3: Tolls and income"
    assert table.place(2) == "table 3, row 2"
    assert table.notes == "Notes: Standard errors in parentheses."
    assert table.rows == (
        ("", "log income", ""),
        ("Toll", "−0.210**", "-0.19"),
        ("", "(0.095)", ""),
        ("N", "1 204", ""),
    )


def test_a_paragraph_whose_end_was_deleted_goes_on_in_the_next(tmp_path) -> None:
    paper = docx.Document()
    first = paper.add_paragraph("Fares were ")
    first._p.get_or_add_pPr().append(parse_xml(f'<w:rPr {W}><w:del w:id="1" w:author="a"/></w:rPr>'))
    paper.add_paragraph("not logged.")
    assert [each.text for each in read_manuscript(saved(paper, tmp_path)).paragraphs] == ["Fares were not logged."]


def test_macros_and_outside_links_are_left_alone(tmp_path) -> None:
    path = saved(messy(), tmp_path)
    changed_part(path, "word/vbaProject.bin", lambda _: b"\xd0\xcf\x11\xe0 macro")
    assert read_manuscript(path).title


def bombed(path):
    return changed_part(path, "word/extra.xml", lambda _: b"<a>" + b" " * (70 * 1024**2) + b"</a>")


def with_entities(path):
    lines = b'<?xml version="1.0"?><!DOCTYPE a [<!ENTITY x SYSTEM "file:///etc/hostname">]>'
    return changed_part(path, "word/document.xml", lambda old: lines + old.split(b"?>", 1)[1])


def with_hidden_entities(path):
    return changed_part(
        path, "word/document.xml", lambda _: '<?xml version="1.0" encoding="utf-16"?><!DOCTYPE a><a/>'.encode("utf-16")
    )


def halved(path):
    return changed_part(path, "word/document.xml", lambda old: old[: len(old) // 2])


def of_another_kind(path):
    return changed_part(path, "[Content_Types].xml", lambda old: old.replace(b"document.main", b"template.main"))


def cut(path):
    path.write_bytes(path.read_bytes()[:-400])
    return path


def replaced(content: bytes):
    def change(path):
        path.write_bytes(content)
        return path

    return change


@pytest.mark.parametrize(
    ("harm", "said"),
    [
        (bombed, "more than a manuscript holds"),
        (with_entities, "entities"),
        (with_hidden_entities, "entities"),
        (cut, "cut short"),
        (replaced(b""), "empty"),
        (replaced(b"Dear editor"), "not a .docx"),
        (replaced(b"%PDF-1.7"), "not a .docx"),
        (replaced(b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + b"x" * 99), "password"),
        (halved, "damaged"),
        (of_another_kind, "damaged"),
    ],
)  # fmt: skip
def test_dangerous_and_broken_files_get_one_message(tmp_path, harm, said: str) -> None:
    path = harm(saved(messy(), tmp_path))
    with pytest.raises(Refusal, match=said) as refused:
        read_manuscript(path)
    assert refused.value.where == "paper.docx" and "\n" not in str(refused.value)


def test_an_archive_of_something_else_and_other_formats_are_refused(tmp_path) -> None:
    stored = io.BytesIO()
    with zipfile.ZipFile(stored, "w") as archive:
        archive.writestr("letter.txt", "hello")
    (tmp_path / "a.docx").write_bytes(stored.getvalue())
    (tmp_path / "b.odt").write_bytes(b"x")
    for name, said in (
        ("a.docx", "holds no document"),
        ("b.odt", "not read as a manuscript"),
        ("c.docx", "no such file"),
    ):
        with pytest.raises(Refusal, match=said):
            read_manuscript(tmp_path / name)


def test_an_empty_document_is_said_to_hold_no_text(tmp_path) -> None:
    with pytest.raises(Refusal, match="no text"):
        read_manuscript(saved(docx.Document(), tmp_path))


def facts_of(*sentences: str, tables: tuple[ManuscriptTable, ...] = (), focus: str = "") -> dict[str, Fact]:
    paragraphs = tuple(ManuscriptParagraph(number, text, "") for number, text in enumerate(sentences, start=1))
    return {fact.name: fact for fact in proposed_facts(Manuscript(paragraphs, tables), focus)}


def stated(name: str, *sentences: str):
    found = facts_of(*sentences)
    return found[name].value if name in found else None


LOG, LOG_PLUS, ASINH = "log", "log of y plus a constant", "inverse hyperbolic sine"


@pytest.mark.parametrize(
    ("sentence", "transform", "constant"),
    [
        ("We regress the log of weekly rent on the distance to the tram.", LOG, None),
        ("We regress log(rent + 1) on the distance.", LOG_PLUS, 1.0),
        ("The dependent variable is the natural logarithm of visits plus one.", LOG_PLUS, 1.0),
        ("The dependent variable is the logarithm of one plus visits.", LOG_PLUS, 1.0),
        ("Our outcome is the inverse hyperbolic sine of income.", ASINH, None),
        ("The outcome is asinh(income).", ASINH, None),
        ("We estimate ln(catch + 0.5) = a + b quota + u.", LOG_PLUS, 0.5),
        ("The outcome is the square root of visits.", "square root", None),
        ("We use the log of fares as the dependent variable.", LOG, None),
        ("We log-transform the outcome.", LOG, None),
        ("The dependent variable is log(sales + c).", LOG_PLUS, None),
    ],
)
def test_the_transform_of_the_outcome_is_read(sentence: str, transform: str, constant: float | None) -> None:
    found = facts_of(sentence)
    assert found["outcome.transform"].value == transform
    assert (found["outcome.constant"].value if "outcome.constant" in found else None) == constant


@pytest.mark.parametrize(
    "sentence",
    [
        "We do not log the outcome.",
        "The dependent variable is rent, not its logarithm.",
        "Controls include the log of population.",
        "We regress rent on the log of distance.",
        "As a robustness check, the dependent variable is the log of rent.",
        "Smith and Jones (2011) regress log wages on schooling.",
        "One could use the log of fares as the dependent variable.",
        "The outcome is rent in euros; we control for the log of population.",
        "Instead of the logarithm, the dependent variable is the count itself.",
        "Logging of forests is the outcome.",
    ],
)
def test_no_transform_is_proposed_where_none_is_stated(sentence: str) -> None:
    assert "outcome.transform" not in facts_of(sentence)


def test_two_different_transforms_are_no_statement() -> None:
    assert (
        stated("outcome.transform", "We regress the log of rent on age.", "We regress the square root of rent on age.")
        is None
    )
    assert stated("outcome.transform", "We regress log rent on age.", "We regress log(rent + 1) on age.") == LOG_PLUS


@pytest.mark.parametrize(
    ("sentence", "expected"),
    [
        ("Observations with zero sales are dropped.", "dropped"),
        ("We exclude households with no income.", "dropped"),
        ("We add 1 before taking logs to keep zeros.", "constant added"),
        ("Zeros are replaced by 0.01.", "replaced by a small value"),
        ("The inverse hyperbolic sine is defined at zero.", ASINH),
        ("The outcome has no zeros.", "none present"),
        ("Zeros were not dropped.", None),
        ("Earlier work dropped observations with zero sales.", None),
        ("Temperatures fell below zero.", None),
    ],
)
def test_what_was_done_with_zeros_is_read(sentence: str, expected: str | None) -> None:
    assert stated("outcome.zeros", sentence) == expected


@pytest.mark.parametrize(
    ("sentence", "expected"),
    [
        ("We take logs so that the outcome is closer to normal.", ("normality",)),
        ("Visits were log-transformed to reduce the influence of outliers.", ("outliers",)),
        ("We use logs so that coefficients can be interpreted as percent changes.", ("percent reading",)),
        ("We log visits to stabilise the variance.", ("unequal variance",)),
        ("Standard errors are robust to heteroskedasticity, and we log visits.", None),
        ("In a normal year, we log visits because records are complete.", None),
    ],
)
def test_the_reason_for_the_transform_is_read(sentence: str, expected: tuple[str, ...] | None) -> None:
    assert stated("transform.reason", sentence) == expected


@pytest.mark.parametrize(
    ("sentence", "expected"),
    [
        ("We estimate the model by ordinary least squares.", "least squares"),
        ("All models are estimated by OLS.", "least squares"),
        ("We fit a Poisson regression with robust errors.", "Poisson"),
        ("We use a negative binomial model.", "negative binomial"),
        ("We do not use Poisson regression.", None),
        ("An alternative is Poisson regression.", None),
        ("We estimate the model by OLS and by Poisson regression.", None),
    ],
)
def test_the_estimator_is_read(sentence: str, expected: str | None) -> None:
    assert stated("estimator", sentence) == expected


@pytest.mark.parametrize(
    ("sentence", "kind", "level", "clusters"),
    [
        ("Standard errors are clustered by village.", "clustered", ("village",), None),
        ("Standard errors, clustered at the school level, are in parentheses.", "clustered", ("school",), None),
        ("We cluster standard errors at the level of the postal district.", "clustered", ("postal district",), None),
        ("Robust standard errors clustered by firm and year in parentheses.", "clustered", ("firm", "year"), None),
        ("Standard errors are clustered by county (58 counties).", "clustered", ("county",), 58.0),
        ("Standard errors are clustered by village (88 clusters).", "clustered", ("village",), 88.0),
        ("Robust standard errors in parentheses.", "robust", None, None),
        ("We report heteroskedasticity-consistent standard errors.", "robust", None, None),
        ("Bootstrapped standard errors in brackets.", "bootstrap", None, None),
        ("Standard errors in parentheses.", None, None, None),
        ("Standard errors are not clustered.", None, None, None),
        ("Villages cluster along the river.", None, None, None),
    ],
)
def test_standard_errors_are_read(
    sentence: str, kind: str | None, level: tuple[str, ...] | None, clusters: float | None
) -> None:
    found = facts_of(sentence)
    values = {name: fact.value for name, fact in found.items()}
    assert values.get("errors.kind") == kind
    assert values.get("errors.cluster_level") == level
    assert values.get("errors.clusters") == clusters


@pytest.mark.parametrize(
    ("sentence", "text"),
    [
        ("A tram stop raises rents by 12 percent.", "12"),
        ("Fees reduce visits by about 7.5%.", "-7.5"),
        ("Rents are 12 per cent higher near a stop.", "12"),
        ("Treated inns have 9% fewer guests.", "-9"),
        ("We find a 20 percent increase in catches.", "20"),
        ("In the sample, 39 percent of boats landed nothing.", None),
        ("The effect is significant at the 5 percent level.", None),
        ("Rents rise by 3 percentage points.", None),
        ("Fees do not reduce visits by 7 percent.", None),
        ("Lopez (2009) finds that fees reduce visits by 7 percent.", None),
        ("It could raise rents by 12 percent.", None),
        ("If it cuts rents by 12 percent, stops are worth it.", None),
    ],
)
def test_a_percent_claim_is_read(sentence: str, text: str | None) -> None:
    value = stated("claim.percent", sentence)
    assert (value.text if isinstance(value, Printed) else None) == text
    assert stated("claim.scale", sentence) == ("percent" if text else None)


def test_the_abstract_decides_between_claims() -> None:
    paragraphs = (
        ManuscriptParagraph(1, "A stop raises rents by 12 percent.", "Abstract"),
        ManuscriptParagraph(2, "In towns a stop raises rents by 15 percent.", "Results"),
    )
    found = {fact.name: fact.value for fact in proposed_facts(Manuscript(paragraphs, ()))}
    assert str(found["claim.percent"]) == "12"


def test_a_coefficient_in_the_text_is_read_with_its_error() -> None:
    found = facts_of("The coefficient of the toll is −0.210 (standard error 0.095).")
    assert (str(found["claim.coefficient"].value), str(found["claim.std_error"].value)) == ("-0.210", "0.095")


def rents(notes: str = "Standard errors in parentheses.", columns: int = 1) -> ManuscriptTable:
    rows = [("", "log(rent)", "log(rent)"), ("Stop", "0.113**", "0.120**"), ("", "(0.051)", "(0.050)")]
    rows += [
        ("Age", "-0.02", "-0.03"),
        ("", "(0.01)", "(0.01)"),
        ("Observations", "1,204", "1,100"),
        ("R-squared", "0.31", "0.33"),
    ]
    return ManuscriptTable(1, "Table 2. Rents", tuple(row[: columns + 1] for row in rows), notes)


def test_the_first_row_of_a_table_is_the_claim_and_its_column_gives_n() -> None:
    found = facts_of("Words.", tables=(rents(),))
    assert str(found["claim.coefficient"].value) == "0.113"
    assert str(found["claim.std_error"].value) == "0.051"
    assert found["n.printed"].value == 1204.0
    assert found["outcome.transform"].value == LOG
    assert found["claim.coefficient"].source.place == "table 2, row 2"


def test_the_focus_names_the_row() -> None:
    assert str(facts_of("Words.", tables=(rents(),), focus="age")["claim.coefficient"].value) == "-0.02"


def test_what_stands_in_brackets_is_no_error_unless_the_notes_say_so() -> None:
    assert "claim.std_error" not in facts_of("Words.", tables=(rents("t statistics in parentheses."),))
    assert "claim.std_error" not in facts_of("Words.", tables=(rents(""),))


def test_several_columns_need_a_word_of_the_text() -> None:
    assert "claim.coefficient" not in facts_of("Words.", tables=(rents(columns=2),))
    found = facts_of(
        "In column (2) the coefficient of the stop is 0.120 with a standard error of 0.050.", tables=(rents(columns=2),)
    )
    assert found["n.printed"].value == 1100.0


@pytest.mark.parametrize(
    ("name", "sentence", "expected"),
    [
        ("software.stated", "All models were estimated in R version 4.3.1.", "yes"),
        ("software.stated", "Analyses were done with Python.", "partly"),
        ("software.stated", "We estimate the model in Table 3.", None),
        ("data.available", "The data are available in a public repository.", "yes"),
        ("data.available", "Data are available from the authors on request.", "partly"),
        ("data.available", "The data cannot be shared.", "no"),
        ("data.available", "Data on rents are available since 1990.", None),
        ("code.available", "Data and code are available at https://example.org/rents.", "yes"),
        ("checks.shown", "Figure 2 plots residuals against fitted values.", ("residual-versus-fitted",)),
        ("checks.shown", "A RESET test does not reject the form.", ("functional-form test",)),
        ("checks.shown", "We did not run a RESET test.", None),
    ],
)  # fmt: skip
def test_software_availability_and_checks_are_read(name: str, sentence: str, expected) -> None:
    assert stated(name, sentence) == expected


def test_every_proposal_is_stated_unconfirmed_and_shows_its_sentence() -> None:
    sentence = "Standard errors are clustered by village."
    for fact in facts_of("Before.", sentence).values():
        assert (fact.standing, fact.confirmed) == (Standing.STATED, False)
        assert (fact.source.kind, fact.source.place, fact.source.quote) == (
            SourceKind.MANUSCRIPT,
            "paragraph 2",
            sentence,
        )


def test_values_are_those_that_the_rules_know() -> None:
    import tomllib

    from reviewkit.readers.manuscripts import model_statements, outcome_statements
    from reviewkit.shipped import rules_folder

    definitions = tomllib.loads((rules_folder() / "facts.toml").read_text("utf-8"))["facts"]
    options = {each["name"]: set(each.get("options", ())) for each in definitions}
    assert set(outcome_statements._NAMED) <= options["outcome.transform"]
    assert set(outcome_statements._ZEROS) <= options["outcome.zeros"]
    assert set(outcome_statements._REASONS) <= options["transform.reason"]
    assert set(model_statements._ESTIMATORS) <= options["estimator"]
    assert set(model_statements._KINDS) <= options["errors.kind"]
    assert set(model_statements._CHECKS) <= options["checks.shown"]


@given(
    some.lists(some.text(max_size=200), max_size=5),
    some.lists(some.lists(some.text(max_size=12), max_size=4), max_size=6),
)
def test_any_text_and_any_table_end_in_facts(texts: list[str], rows: list[list[str]]) -> None:
    table = ManuscriptTable(1, "Table 1", tuple(map(tuple, rows)))
    facts_of(*texts, tables=(table,))


def test_long_hostile_sentences_end_quickly() -> None:
    import time

    started = time.perf_counter()
    for text in (
        "add 1 to zeros " * 20_000,
        "regress " * 20_000,
        "(" * 100_000,
        "log(" * 20_000,
        "the outcome is " * 20_000,
        "s with a b c d " * 9000,
    ):
        facts_of(text)
    assert time.perf_counter() - started < 5
