"""The scripts that set themselves up: what they say where a Python will not do, and when they begin anew."""

import importlib.util
import sys
from pathlib import Path
from types import SimpleNamespace

import pytest

ROOT = Path(__file__).resolve().parent.parent


@pytest.fixture
def environment():
    spec = importlib.util.spec_from_file_location("environment", ROOT / ".ci" / "environment.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_a_python_without_venv_is_told_what_to_install(environment, monkeypatch):
    monkeypatch.setitem(sys.modules, "ensurepip", None)
    with pytest.raises(SystemExit, match="sudo apt install python3-venv"):
        environment.check_python()


def test_an_old_python_is_told_so(environment, monkeypatch):
    monkeypatch.setattr(environment, "sys", SimpleNamespace(version_info=(3, 9, 2), exit=sys.exit))
    with pytest.raises(SystemExit, match=r"3\.11 or newer; this is 3\.9"):
        environment.check_python()


def test_an_environment_is_made_anew_only_where_something_it_rests_on_changed(environment, tmp_path, monkeypatch):
    pins = tmp_path / "constraints.txt"
    pins.write_text("numpy==1\n", encoding="utf-8")
    calls = []

    def pretend(command, _):
        calls.append(command)
        python = environment.python_of(environment.ROOT / ".env")
        python.parent.mkdir(parents=True, exist_ok=True)
        python.touch()

    monkeypatch.setattr(environment, "ROOT", tmp_path)
    (tmp_path / "pyproject.toml").touch()
    monkeypatch.setattr(environment, "_run", pretend)
    monkeypatch.setattr(environment, "_works", lambda python: python.is_file())
    for _ in range(2):
        environment.ready_python(tmp_path / ".env", ["pytest"], pins)
    assert len(calls) == 3, "one environment, two installations, once"
    pins.write_text("numpy==2\n", encoding="utf-8")
    environment.ready_python(tmp_path / ".env", ["pytest"], pins)
    assert len(calls) == 6


@pytest.mark.parametrize("script", ["demo/run.py", "tests/run.py", ".ci/environment.py"])
def test_the_scripts_start_with_the_standard_library_alone(script):
    lines = (ROOT / script).read_text(encoding="utf-8").splitlines()
    named = [each.split()[1].split(".")[0] for each in lines if each.lstrip().startswith(("import ", "from "))]
    assert set(named) <= {*sys.stdlib_module_names, "environment"}
