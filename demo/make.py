"""Writes the generated files of the invented studies: `python demo/make.py [FOLDER]`, by default beside this file."""

import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE))

import drop_off_bays  # noqa: E402
import lending_desks  # noqa: E402

STUDIES = {"drop-off-bays": drop_off_bays, "lending-desks": lending_desks}


def make(folder: Path) -> None:
    """Write data and manuscripts of every study below `folder`."""
    for name, study in STUDIES.items():
        (folder / name).mkdir(parents=True, exist_ok=True)
        study.write_study(folder / name)


if __name__ == "__main__":
    make(Path(sys.argv[1]) if len(sys.argv) > 1 else HERE)
