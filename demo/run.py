"""From an invented manuscript and its data to the finished notes: `python3 demo/run.py`."""

from __future__ import annotations

import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT / ".ci"))

from environment import quiet_variables, ready_python  # noqa: E402

NOTES = "reviewkit-demo"


def main() -> int:
    """Set up, run `reviewkit demo`, say where the notes are and what to type for one's own paper."""
    python = ready_python(ROOT / ".demo-env", [])
    start = time.monotonic()
    command = [str(python), "-m", "reviewkit", "demo", _free_folder()]
    status = subprocess.run(command, env=quiet_variables(), check=False).returncode
    if status != 0:
        return status
    print(f"Done in {time.monotonic() - start:.0f} s. From this folder, the line for a paper of your own is:")
    print(f"\n  {_program(python)} begin my-review --manuscript paper.docx --data data.csv")
    return 0


def _free_folder() -> str:
    """A folder that does not exist yet, so that nothing of an earlier run is written over."""
    names = (NOTES, *(f"{NOTES}-{number}" for number in range(2, 1000)))
    return next(name for name in names if not Path(name).exists())


def _program(python: Path) -> Path:
    """The installed command, as one would type it from here."""
    program = python.with_name("reviewkit.exe" if python.suffix == ".exe" else "reviewkit")
    try:
        return Path(program).relative_to(Path.cwd())
    except ValueError:
        return program


if __name__ == "__main__":
    sys.exit(main())
