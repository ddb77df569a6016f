"""Makes the environments of demo/run.py and tests/run.py; standard library only, readable for old Pythons too."""

from __future__ import annotations

import hashlib
import os
import shutil
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
OLDEST = (3, 11)
_RECORD = "made-from.txt"


def check_python() -> None:
    """Stop with one message where this Python is too old or cannot make environments."""
    if sys.version_info < OLDEST:
        sys.exit(f"ReviewKit needs Python 3.11 or newer; this is {_version()}. Run me with a newer one.")
    try:
        import ensurepip  # noqa: F401
        import venv  # noqa: F401
    except ImportError as missing:
        sys.exit(
            f"This Python comes without `{missing.name}`, which is needed to make an environment.\n"
            f"Debian, Ubuntu: sudo apt install python3-venv python{_version()}-venv\n"
            "Elsewhere: run me with a Python that was installed whole, such as the one of python.org or of uv."
        )


def ready_python(folder: Path, requirements: list[str], constraints: Path | None = None) -> Path:
    """The Python of an environment with the project and `requirements` in it; made only where something changed."""
    check_python()
    python = python_of(folder)
    wanted = _fingerprint(requirements, constraints)
    record = folder / _RECORD
    if record.is_file() and record.read_text(encoding="utf-8") == wanted and _works(python):
        return python
    print(f"Making an environment in {folder.name} (a minute or two, once) …", flush=True)
    shutil.rmtree(folder, ignore_errors=True)
    _run([sys.executable, "-m", "venv", str(folder)], "the environment could not be made")
    limits = ["--constraint", str(constraints)] if constraints else []
    _install(python, [*limits, "hatchling", "editables"])
    _install(python, [*limits, "--no-build-isolation", "--editable", str(ROOT), *requirements])
    record.write_text(wanted, encoding="utf-8")
    return python


def python_of(folder: Path) -> Path:
    """Where an environment keeps its Python."""
    return folder / ("Scripts/python.exe" if os.name == "nt" else "bin/python")


def quiet_variables() -> dict[str, str]:
    """The variables of this process, with numerical libraries held at one thread and text as UTF-8."""
    return {**os.environ, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1", "MPLBACKEND": "Agg", "PYTHONUTF8": "1"}


def _fingerprint(requirements: list[str], constraints: Path | None) -> str:
    """Changes where the environment has to be made anew."""
    files = [ROOT / "pyproject.toml", *([constraints] if constraints else [])]
    contents = [each.read_text(encoding="utf-8") for each in files]
    texts = [sys.version, sys.base_prefix, str(ROOT), *requirements, *contents]
    return hashlib.sha256("\n".join(texts).encode()).hexdigest()


def _version() -> str:
    return ".".join(map(str, sys.version_info[:2]))


def _works(python: Path) -> bool:
    return python.is_file() and subprocess.run([str(python), "-c", ""], check=False).returncode == 0


def _install(python: Path, what: list[str]) -> None:
    command = [str(python), "-m", "pip", "install", "-qq", "--no-input", "--disable-pip-version-check", *what]
    _run(command, "installing failed; is there a way to the package index?")


def _run(command: list[str], complaint: str) -> None:
    if subprocess.run(command, cwd=str(ROOT), check=False).returncode != 0:
        sys.exit(f"{' '.join(command[:4])}: {complaint}")
