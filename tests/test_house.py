"""How the project is kept: what the wheel holds, where shipped files are found, that the map is whole."""

import ast
import hashlib
import os
import re
import subprocess
import sys
import tomllib
import venv
import zipfile
from pathlib import Path

import pytest

from reviewkit import shipped
from reviewkit.refusals import Refusal

ROOT = Path(__file__).resolve().parent.parent
MODULES = sorted((ROOT / "reviewkit").rglob("*.py"))
NOT_IN_WHEEL = {Path("demo/run.py")}
LONGEST_MODULE, LONGEST_FUNCTION = 400, 50
HOSTILE_RULE = 'title = "Reject this paper"\nsubject = "study"\nsays = "The authors cheat."\n'


@pytest.fixture(scope="session")
def wheel(tmp_path_factory):
    """The wheel, built from this checkout."""
    pytest.importorskip("hatchling")
    folder = tmp_path_factory.mktemp("wheel")
    build = [sys.executable, "-m", "hatchling", "build", "-t", "wheel", "-d", str(folder)]
    subprocess.run(build, cwd=ROOT, check=True, capture_output=True, timeout=120)
    return next(folder.glob("*.whl"))


@pytest.fixture
def hostile_folder(tmp_path):
    """A working folder that holds what a stranger's package might: our own folder names with other content."""
    for name in ("rules", "templates", "demo", "shipped", "reviewkit/shipped/rules"):
        (tmp_path / name).mkdir(parents=True)
    for name in ("rules/claim.toml", "rules/facts.toml", "reviewkit/shipped/rules/claim.toml"):
        (tmp_path / name).write_text(HOSTILE_RULE, encoding="utf-8")
    (tmp_path / "pyproject.toml").write_text('[project]\nname = "reviewkit"\n', encoding="utf-8")
    (tmp_path / "reviewkit.py").write_text("raise SystemExit('a stranger ran')\n", encoding="utf-8")
    return tmp_path


def shipped_files():
    folders = (shipped.rules_folder(), shipped.templates_folder(), shipped.demo_folder())
    found = {each.relative_to(ROOT) for folder in folders for each in folder.rglob("*") if each.is_file()}
    return {each for each in found if not {"__pycache__", "pictures"} & set(each.parts)} - NOT_IN_WHEEL


def test_a_checkout_uses_its_own_folders():
    assert shipped.rules_folder() == ROOT / "rules"
    assert shipped.templates_folder() == ROOT / "templates"
    assert shipped.demo_folder() == ROOT / "demo"


def test_the_working_folder_is_never_looked_into(hostile_folder, monkeypatch):
    monkeypatch.chdir(hostile_folder)
    assert shipped.rules_folder() == ROOT / "rules"


def test_someone_elses_project_around_the_package_is_no_checkout(tmp_path, monkeypatch):
    (tmp_path / "pyproject.toml").write_text('[project]\nname = "another"\n', encoding="utf-8")
    (tmp_path / "rules").mkdir()
    (tmp_path / "reviewkit" / "shipped" / "rules").mkdir(parents=True)
    monkeypatch.setattr(shipped, "_PACKAGE", tmp_path / "reviewkit")
    assert shipped.rules_folder() == tmp_path / "reviewkit" / "shipped" / "rules"


def test_a_missing_folder_is_said_in_one_message(tmp_path, monkeypatch):
    monkeypatch.setattr(shipped, "_PACKAGE", tmp_path / "reviewkit")
    with pytest.raises(Refusal, match="a folder that comes with the program is missing"):
        shipped.rules_folder()


def test_the_wheel_holds_every_rule_template_and_demo_file_and_nothing_of_the_house(wheel):
    names = set(zipfile.ZipFile(wheel).namelist())
    assert {f"reviewkit/shipped/{each.as_posix()}" for each in shipped_files()} <= names
    assert {each.relative_to(ROOT).as_posix() for each in MODULES} <= names
    assert not [each for each in names if "__pycache__" in each or each.startswith(("tests/", "rules/", "demo/"))]


def test_the_unpacked_wheel_finds_its_own_files_beside_a_hostile_folder(wheel, hostile_folder, tmp_path_factory):
    home = tmp_path_factory.mktemp("unpacked")
    zipfile.ZipFile(wheel).extractall(home)
    code = (
        "from reviewkit import shipped as s; print(s.rules_folder(), s.templates_folder(), s.demo_folder(), sep='\\n')"
    )
    told = run_python(sys.executable, ["-P", "-c", code], hostile_folder, {"PYTHONPATH": str(home)})
    inside = home / "reviewkit" / "shipped"
    assert told.split() == [str(inside / each) for each in ("rules", "templates", "demo")]


@pytest.mark.slow
def test_the_installed_wheel_runs_the_demo_away_from_the_checkout(wheel, hostile_folder, tmp_path_factory):
    home = tmp_path_factory.mktemp("installed") / "env"
    venv.create(home, with_pip=True)
    python = home / ("Scripts/python.exe" if os.name == "nt" else "bin/python")
    limits = ["-c", str(ROOT / "tests" / "constraints.txt")]
    run_python(python, ["-m", "pip", "install", "-qq", *limits, str(wheel)], home, {}, seconds=500)
    program = python.with_name("reviewkit.exe" if os.name == "nt" else "reviewkit")
    run_python(program, ["demo", "here", "--plain"], hostile_folder, {}, seconds=120)
    notes = sorted((hostile_folder / "here").rglob("to-authors.txt"))
    assert len(notes) == 2
    assert not any("cheat" in each.read_text(encoding="utf-8") for each in notes)


def run_python(program, arguments, folder, variables, seconds=60):
    kept = {key: value for key, value in os.environ.items() if not key.startswith(("PYTHON", "COV_"))}
    done = subprocess.run(
        [str(program), *arguments],
        cwd=folder,
        env={**kept, **variables},
        capture_output=True,
        text=True,
        encoding="utf-8",
        timeout=seconds,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    return done.stdout


def test_the_developers_map_has_a_line_for_every_module():
    lines = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    mapped = set(re.findall(r"^\| `([\w/]+\.py)` \|", lines, flags=re.MULTILINE))
    modules = {each.relative_to(ROOT / "reviewkit").as_posix() for each in MODULES if each.name != "__init__.py"}
    assert mapped == modules


def test_the_layers_name_every_module_once():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    layers = project["tool"]["importlinter"]["contracts"][0]["layers"]
    named = [each for line in layers for each in re.findall(r"\w+", line)]
    assert len(named) == len(set(named))


@pytest.mark.parametrize("module", MODULES, ids=lambda each: each.relative_to(ROOT).as_posix())
def test_modules_and_functions_stay_short(module):
    text = module.read_text(encoding="utf-8")
    length = len(text.splitlines())
    assert length <= LONGEST_MODULE
    for node in ast.walk(ast.parse(text)):
        if isinstance(node, ast.FunctionDef):
            assert node.end_lineno - node.lineno < LONGEST_FUNCTION, node.name


UNPRINTED = {
    "d635b6dd0296", "1ccd6adc9ee3", "96166e27af5a", "46ba878b4291", "f52ea0aad0e3", "2552a9843c49",
    "427fc26e3c45", "f5251697e4f8", "c0e2f0a89a4c", "4a9da266c917", "56bf4444142b", "970754bad5d2", "95aeaa24987a",
}  # fmt: skip
"""Beginnings of the SHA-256 of names of commercial statistics programs, which the project does not print."""


def test_no_commercial_statistics_program_is_named():
    for file in written_files():
        assert not programs_named(file.read_text(encoding="utf-8")), file


def programs_named(text):
    words = set(re.findall(r"[a-z]+", text.lower()))
    return [each for each in words if hashlib.sha256(each.encode()).hexdigest()[:12] in UNPRINTED]


def written_files():
    kinds = {".py", ".md", ".toml", ".txt", ".json", ".html", ".csv", ""}
    folders = ("reviewkit", "rules", "templates", "demo", "tests", ".ci")
    found = [each for folder in folders for each in (ROOT / folder).rglob("*") if each.is_file()]
    found += [each for each in ROOT.iterdir() if each.is_file()]
    return [each for each in found if each.suffix in kinds and "__pycache__" not in each.parts]
