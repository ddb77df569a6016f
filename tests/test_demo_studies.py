"""The invented studies: files are what the generators give, and papers print what the data show."""

import csv
import re
import subprocess
import sys
import tomllib
import zipfile
from pathlib import Path

import numpy as np
import pandas as pd
import pyreadstat
import pytest
import statsmodels.api as sm

from reviewkit.shipped import demo_folder

DEMO = demo_folder()
STUDIES = ("drop-off-bays", "lending-desks")
PLACES = {"Ostrigg", "Pellenshore", "Varn", "Reach", "Ulmet", "Sorrin"}
TERMS_OF_THE_TRADE = {"Table", "N", "R"}


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    """The generated files, made anew."""
    folder = tmp_path_factory.mktemp("made")
    subprocess.run([sys.executable, DEMO / "make.py", folder], check=True, timeout=120)
    return folder


@pytest.fixture(scope="module")
def landings():
    with open(DEMO / "drop-off-bays" / "landings.csv", newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    return {name: np.array([row[name] for row in rows]) for name in rows[0]}


def paragraphs_and_table(study):
    from docx import Document

    document = Document(DEMO / study / "manuscript.docx")
    table = [[cell.text for cell in row.cells] for row in document.tables[0].rows]
    return [each.text for each in document.paragraphs], table


@pytest.mark.parametrize("file", ["drop-off-bays/landings.csv", *(f"{each}/manuscript.docx" for each in STUDIES)])
def test_the_generators_give_the_shipped_files_byte_for_byte(made, file):
    assert (made / file).read_bytes() == (DEMO / file).read_bytes()


def test_the_generators_give_the_shipped_dta_file_cell_by_cell(made):
    (one, about), (other, about_other) = (
        pyreadstat.read_dta(each / "drop-off-bays" / "landings.dta") for each in (made, DEMO)
    )
    pd.testing.assert_frame_equal(one, other, check_exact=True)
    assert about.column_names_to_labels == about_other.column_names_to_labels
    assert all(about.column_labels)


def test_both_data_files_hold_the_same_numbers(landings):
    dta, _ = pyreadstat.read_dta(DEMO / "drop-off-bays" / "landings.dta")
    assert list(dta.columns) == list(landings)
    for name in set(landings) - {"area"}:
        numbers = np.array([float(each) if each else np.nan for each in landings[name]])
        np.testing.assert_array_equal(numbers, dta[name].to_numpy(dtype=float))


def test_the_study_with_data_is_of_the_announced_kind(landings):
    kilograms, harbour, bay = (landings[name].astype(float) for name in ("netting_kg", "harbour", "bay"))
    assert 2_800 <= len(kilograms) <= 3_200
    assert len(set(harbour)) >= 60
    assert 0.30 <= np.mean(kilograms == 0) <= 0.40
    assert all(len(set(bay[harbour == each])) == 1 for each in set(harbour)), "a bay belongs to a harbour"


def test_the_printed_table_follows_from_the_shipped_data_by_plain_matrix_algebra(landings):
    used = landings["years"] != ""
    columns = {name: landings[name][used] for name in landings}
    terms = ("bay", "length_m", "years", "km_site")
    areas = [columns["area"] == each for each in sorted(set(columns["area"]))[1:]]
    x = np.column_stack([np.ones(used.sum()), *(columns[each].astype(float) for each in terms), *areas])
    y = np.log(columns["netting_kg"].astype(float) + 1)
    b, n, k = np.linalg.lstsq(x, y, rcond=None)[0], *x.shape
    scores = x * (y - x @ b)[:, None]
    sums = np.array([scores[columns["harbour"] == each].sum(axis=0) for each in set(columns["harbour"])])
    bread = np.linalg.inv(x.T @ x)
    factor = len(sums) / (len(sums) - 1) * (n - 1) / (n - k)
    errors = np.sqrt(factor * np.diag(bread @ (sums.T @ sums) @ bread))
    table = {row[0]: row[2] for row in paragraphs_and_table("drop-off-bays")[1] if row[0]}
    below = [row[2] for row in paragraphs_and_table("drop-off-bays")[1] if not row[0]][1:]
    for place, name in enumerate(("Drop-off bay", "Length (m)", "Skipper's years", "Distance (km)"), start=1):
        assert table[name].rstrip("*") == f"{b[place]:.3f}"
        assert below[place - 1] == f"({errors[place]:.3f})"
    assert table["N"] == f"{n:,}"
    assert table["Harbours"] == str(len(sums))


def test_the_mean_moves_by_far_less_than_the_paper_reads_off_its_coefficient(landings):
    used = landings["years"] != ""
    design = np.column_stack([np.ones(used.sum()), landings["bay"][used].astype(float)])
    model = sm.GLM(landings["netting_kg"][used].astype(float), design, family=sm.families.Poisson())
    fit = model.fit(cov_type="cluster", cov_kwds={"groups": landings["harbour"][used].astype(int)})
    low, high = np.expm1(fit.conf_int()[1])
    read = int(re.search(r"by (\d+) percent", " ".join(paragraphs_and_table("drop-off-bays")[0]))[1]) / 100
    assert 0 < low < high < 0.9 * read


def test_the_percent_in_each_abstract_is_the_printed_coefficient_times_100():
    for study, row in (("drop-off-bays", 2), ("lending-desks", 1)):
        text, table = paragraphs_and_table(study)
        printed = float(table[1][row].rstrip("*"))
        percents = set(re.findall(r"by (\d+) percent", " ".join(text)))
        assert len(percents) == 1
        assert abs(float(percents.pop()) - abs(100 * printed)) <= 0.55


def test_the_method_paragraph_gives_no_reason_for_the_constant():
    text = " ".join(paragraphs_and_table("drop-off-bays")[0])
    assert "log(kg + 1)" in text
    assert not re.search(r"(because|since|in order to|so that)[^.]*(constant|zero|logarithm|\+ 1)", text)


@pytest.mark.parametrize("study", STUDIES)
def test_no_name_in_a_manuscript_but_invented_places(study):
    text = paragraphs_and_table(study)[0]
    named = set()
    for sentence in re.split(r"(?<=[.:!?])\s+", "\n".join(text)):
        words = re.findall(r"[A-Za-z][\w'-]*", sentence)
        named |= {word for word in words[1:] if word[0].isupper()}
    starts = {re.sub(r"^[\d ]+", "", each).split()[0] for each in text}
    assert named - starts <= PLACES | TERMS_OF_THE_TRADE | {"Standard", "Dependent", "Least", "A"}


@pytest.mark.parametrize("study", STUDIES)
def test_a_manuscript_tells_neither_who_made_it_nor_when_nor_with_what(study):
    with zipfile.ZipFile(DEMO / study / "manuscript.docx") as package:
        assert "docProps/app.xml" not in package.namelist()
        about = package.read("docProps/core.xml").decode()
        moments = {each.date_time[:3] for each in package.infolist()}
    assert moments == {(2024, 1, 1)}
    assert set(re.findall(r">(20\d\d-[^<]+)<", about)) == {"2024-01-01T00:00:00Z"}
    assert not re.search(r"<(dc:creator|cp:lastModifiedBy)>[^<]", about)


@pytest.mark.parametrize("study", STUDIES)
def test_a_study_names_its_files_and_they_are_there(study):
    about = tomllib.loads((DEMO / study / "study.toml").read_text(encoding="utf-8"))
    files = [about["manuscript"], *about["data"], about["answers"]]
    assert all(Path(each).name == each and (DEMO / study / each).is_file() for each in files)
    assert about["title"] == paragraphs_and_table(study)[0][0]


def test_the_shipped_demo_is_small():
    assert sum(each.stat().st_size for each in DEMO.rglob("*") if "pictures" not in each.parts) < 1_000_000


def test_the_referees_answers_repeat_what_the_papers_print():
    for study, row in (("drop-off-bays", 2), ("lending-desks", 1)):
        answers = tomllib.loads((DEMO / study / "answers.toml").read_text(encoding="utf-8"))["claim"]["main"]["claim"]
        text, table = paragraphs_and_table(study)
        assert answers["coefficient"]["value"] == table[1][row].rstrip("*")
        assert f"({answers['std_error']['value']})" == table[2][row]
        assert f"by {answers['percent']['value'].lstrip('-')} percent" in text[2]


def test_the_referees_specification_repeats_the_printed_table():
    answers = tomllib.loads((DEMO / "drop-off-bays" / "answers.toml").read_text(encoding="utf-8"))
    printed, table = answers["specification"]["printed"], paragraphs_and_table("drop-off-bays")[1]
    assert printed["terms"]["bay"] == {"estimate": table[1][2].rstrip("*"), "std_error": table[2][2].strip("()")}
    assert printed["n"] == next(row[2] for row in table if row[0] == "N")
