"""Finds what comes with the program, in a checkout and in an installed wheel, never in the working folder."""

import tomllib
from pathlib import Path

from reviewkit.refusals import Refusal

_PACKAGE = Path(__file__).resolve().parent
_PROJECT = "reviewkit"


def rules_folder() -> Path:
    """The rule book."""
    return _folder("rules")


def templates_folder() -> Path:
    """Wording, order and styles of notes."""
    return _folder("templates")


def demo_folder() -> Path:
    """The invented studies and the files generated for them."""
    return _folder("demo")


def _folder(name: str) -> Path:
    root = _PACKAGE.parent if _is_checkout(_PACKAGE.parent) else _PACKAGE / "shipped"
    folder = root / name
    if not folder.is_dir():
        raise Refusal(str(folder), "a folder that comes with the program is missing", remedy="Install ReviewKit again")
    return folder


def _is_checkout(folder: Path) -> bool:
    """Whether the folder that holds the package is our own project, not someone's site-packages."""
    try:
        project = tomllib.loads((folder / "pyproject.toml").read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return False
    return bool(project.get("project", {}).get("name") == _PROJECT)
