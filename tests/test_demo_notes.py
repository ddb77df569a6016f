"""The demo from reading to note: the notes expected, the same everywhere, with every number resting on the data."""

import os
import re
import subprocess
import sys
import time
import zipfile
from pathlib import Path

import pytest

from reviewkit import demonstration
from reviewkit.shipped import demo_folder

STUDIES = ("drop-off-bays", "lending-desks")
NOTES = ("to-authors", "to-editor")
FORMATS = ("docx", "md", "txt")
SECONDS = 60


@pytest.fixture(scope="session")
def demo(tmp_path_factory):
    """The demo run in this process."""
    folder = tmp_path_factory.mktemp("run") / "demo"
    start = time.monotonic()
    demonstration.run(folder, lambda _: None)
    assert time.monotonic() - start < SECONDS
    return folder


@pytest.fixture(scope="session")
def demo_elsewhere(tmp_path_factory):
    """The demo run by command under another hash seed, locale, time zone, width and folder."""
    folder = tmp_path_factory.mktemp("a place with blanks")
    odd = {"PYTHONHASHSEED": "4711", "LC_ALL": "C", "TZ": "Pacific/Chatham", "COLUMNS": "41", "USER": "sentinel-person"}
    command = [sys.executable, "-m", "reviewkit", "demo", "here", "--plain"]
    done = subprocess.run(
        command, cwd=folder, env={**os.environ, **odd}, capture_output=True, timeout=2 * SECONDS, check=False
    )
    assert done.returncode == 0, done.stderr.decode()
    return folder / "here"


def note(folder, study, name, ending="txt"):
    return folder / study / "case" / f"{name}.{ending}"


@pytest.mark.parametrize("study", STUDIES)
@pytest.mark.parametrize("name", NOTES)
def test_the_demo_gives_the_expected_notes(demo, study, name):
    expected = demo_folder() / study / "expected" / f"{name}.txt"
    assert note(demo, study, name).read_text(encoding="utf-8") == expected.read_text(encoding="utf-8")


@pytest.mark.parametrize("study", STUDIES)
@pytest.mark.parametrize("name", NOTES)
@pytest.mark.parametrize("ending", FORMATS)
def test_the_same_bytes_under_another_hash_seed_locale_time_zone_width_and_folder(
    demo, demo_elsewhere, study, name, ending
):
    here, there = (note(each, study, name, ending).read_bytes() for each in (demo, demo_elsewhere))
    assert here == there


def test_nobody_and_no_place_shows_in_what_leaves_the_desk(demo_elsewhere):
    traces = ("sentinel-person", str(demo_elsewhere.parent), demo_elsewhere.parent.name)
    for file in demo_elsewhere.rglob("to-*"):
        content = whole_text(file)
        assert not any(trace in content for trace in traces), file


def whole_text(file: Path) -> str:
    if file.suffix != ".docx":
        return file.read_bytes().decode("utf-8", errors="replace")
    with zipfile.ZipFile(file) as package:
        return "\n".join(package.read(each).decode("utf-8", errors="replace") for each in package.namelist())


def test_the_notes_on_the_study_with_data_set_the_mean_beside_the_coefficient(demo):
    authors, editor = (note(demo, "drop-off-bays", each).read_text(encoding="utf-8") for each in NOTES)
    assert "0.506 (0.064)" in editor
    assert all(re.search(r"\b17(\.\d)?\s%", each) for each in (authors, editor)), "the mean model's percent"
    assert "log(netting_kg + 1)" in authors


def test_the_note_without_data_says_so_and_what_could_not_be_looked_at(demo):
    told = " ".join(note(demo, "lending-desks", "to-authors").read_text(encoding="utf-8").split())
    assert "nothing was estimated again" in told
    assert re.search(r"Not looked at[^.]*On the following we say nothing", told)
    assert "Exhibit" not in told


def test_no_single_row_of_the_data_stands_in_a_note(demo):
    data = (demo_folder() / "drop-off-bays" / "landings.csv").read_text(encoding="utf-8").splitlines()[1:]
    told = "\n".join(
        note(demo, "drop-off-bays", each, ending).read_text("utf-8") for each in NOTES for ending in ("md", "txt")
    )
    largest = max(float(each.rsplit(",", 1)[1]) for each in data)
    assert f"{largest:g}" not in told
