"""Writes the generated files of the invented studies: `python demo/make.py [FOLDER]`, by default beside this file.

`python demo/make.py --notes` runs the demo and keeps its notes, in text, as those that a test expects; where soffice
and pdftoppm are installed it also draws the README's picture of a note anew.
"""

import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE))

import drop_off_bays  # noqa: E402
import lending_desks  # noqa: E402

PICTURE = HERE / "pictures" / "note.png"
PAGE_OF_MODELS = 3
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
        if shutil.which("soffice") and shutil.which("pdftoppm"):
            draw_note(Path(place) / "demo" / "drop-off-bays" / "case" / "to-authors.docx", Path(place))


def draw_note(note: Path, place: Path) -> None:
    """Draw the note's first page, and the one with both models, side by side."""
    from PIL import Image

    subprocess.run(["soffice", "--headless", "--convert-to", "pdf", "--outdir", place, note], check=True, timeout=120)
    subprocess.run(["pdftoppm", "-r", "75", "-png", place / "to-authors.pdf", place / "page"], check=True, timeout=60)
    pages = [Image.open(each) for each in sorted(place.glob("page-*.png"))]
    first, second = pages[0], pages[PAGE_OF_MODELS - 1]
    picture = Image.new("L", (first.width + second.width, int(0.92 * first.height)), "white")
    picture.paste(first, (0, 0))
    picture.paste(second, (first.width, 0))
    PICTURE.parent.mkdir(exist_ok=True)
    picture.quantize(16).save(PICTURE, optimize=True)


if __name__ == "__main__":
    if sys.argv[1:] == ["--notes"]:
        keep_notes()
    else:
        make(Path(sys.argv[1]) if len(sys.argv) > 1 else HERE)
