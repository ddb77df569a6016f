"""Writes the generated files of the invented studies: `python demo/make.py [FOLDER]`, by default beside this file.

`python demo/make.py --notes` runs the demo and keeps its notes, in text, as those that a test expects.
"""

import shutil
import sys
import tempfile
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


def keep_notes() -> None:
    """Run the demo from start to end and keep what it drafts in `expected/`, one folder a study."""
    from reviewkit import demonstration

    with tempfile.TemporaryDirectory() as place:
        demonstration.run(Path(place) / "demo", print)
        for name in STUDIES:
            (HERE / name / "expected").mkdir(exist_ok=True)
            for note in (Path(place) / "demo" / name / "case").glob("to-*.txt"):
                shutil.copyfile(note, HERE / name / "expected" / note.name)


if __name__ == "__main__":
    if sys.argv[1:] == ["--notes"]:
        keep_notes()
    else:
        make(Path(sys.argv[1]) if len(sys.argv) > 1 else HERE)
