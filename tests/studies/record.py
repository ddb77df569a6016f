"""Writes what a study found, as .json and as tables to read, with what one needs to repeat it."""

import json
import platform
from datetime import date
from importlib.metadata import version
from pathlib import Path
from typing import Any

RESULTS = Path(__file__).parent / "results"
LIBRARIES = ("numpy", "scipy", "pandas", "statsmodels")


def save(name: str, how: dict[str, Any], tables: dict[str, list[dict[str, Any]]]) -> None:
    """Write results/NAME.json and results/NAME.md."""
    versions = {"python": platform.python_version(), **{each: version(each) for each in LIBRARIES}}
    record = {**how, "date": date.today().isoformat(), "versions": versions, **tables}
    RESULTS.mkdir(exist_ok=True)
    (RESULTS / f"{name}.json").write_text(json.dumps(record, indent=1, ensure_ascii=False) + "\n", "utf-8")
    (RESULTS / f"{name}.md").write_text(_text(name, record, tables), "utf-8")


def load(name: str) -> dict[str, Any]:
    """What results/NAME.json holds."""
    found: dict[str, Any] = json.loads((RESULTS / f"{name}.json").read_text("utf-8"))
    return found


def _text(name: str, record: dict[str, Any], tables: dict[str, list[dict[str, Any]]]) -> str:
    lines = [f"# Results of the study: {name}", ""]
    for key, value in record.items():
        if key not in tables:
            shown = ", ".join(f"{k} {v}" for k, v in value.items()) if isinstance(value, dict) else value
            lines.append(f"- {key}: {shown}")
    for title, rows in tables.items():
        lines += ["", f"## {title}", "", *_table(rows)]
    return "\n".join(lines) + "\n"


def _table(rows: list[dict[str, Any]]) -> list[str]:
    names = list(rows[0])
    lines = ["| " + " | ".join(name.replace("_", " ") for name in names) + " |", "|---" * len(names) + "|"]
    return lines + ["| " + " | ".join(_cell(row[name]) for name in names) + " |" for row in rows]


def _cell(value: Any) -> str:
    if isinstance(value, dict):
        return "; ".join(f"{key}: {_cell(inner)}" for key, inner in value.items())
    if value is None or isinstance(value, bool):
        return {None: "", True: "yes", False: "no"}[value]
    return f"{value:.4g}" if isinstance(value, float) else str(value)
