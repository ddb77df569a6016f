"""Runs the invented studies that come with the program the way a referee would, from reading to note."""

import shutil
import tomllib
from collections.abc import Callable
from pathlib import Path

from reviewkit import casefolder, drafting, review, shipped, unattended
from reviewkit.casefolder import Input
from reviewkit.refusals import Refusal
from reviewkit.safekeeping import refusing
from reviewkit.screen import telling

STUDY = "study.toml"


def run(folder: Path, say: Callable[[str], None]) -> tuple[Path, ...]:
    """Begin, interview, refit and draft for each study below a new folder; the notes that were written."""
    studies = sorted(each.parent for each in shipped.demo_folder().glob(f"*/{STUDY}"))
    ours = {study.name for study in studies}
    if folder.exists() and (not folder.is_dir() or any(each.name not in ours for each in folder.iterdir())):
        raise Refusal(folder.name, "this holds other things", "a new folder", "Name another: `reviewkit demo DIR`")
    return tuple(path for study in studies for path in _run_study(study, folder / study.name, say))


def _run_study(study: Path, folder: Path, say: Callable[[str], None]) -> tuple[Path, ...]:
    described = tomllib.loads((study / STUDY).read_text("utf-8"))
    materials, case_folder = folder / "received", folder / "case"
    with refusing(folder, "made"):
        materials.mkdir(parents=True, exist_ok=True)
    names = [described["manuscript"], described["answers"], *described.get("data", [])]
    for name in names:
        if not (materials / name).exists():
            shutil.copyfile(study / name, materials / name)
    say(f"{study.name}: begin, with {', '.join(name for name in names if name != described['answers'])}")
    given = {Input.MANUSCRIPT: materials / described["manuscript"]}
    if described.get("data"):
        given[Input.DATA] = materials / described["data"][0]
    case, _ = review.begin(case_folder, given)
    case, said = review.read_inputs(case)
    for line in said:
        say(f"{study.name}: {line}")
    return _answer_and_draft(case, materials / described["answers"], study.name, say)


def _answer_and_draft(
    case: casefolder.CaseFolder, answers: Path, name: str, say: Callable[[str], None]
) -> tuple[Path, ...]:
    with casefolder.working_in(case):
        say(f"{name}: interview, {unattended.take_answers(case, answers, say)} answers from {answers.name}")
        if review.specification_of(case) is not None:
            say(f"{name}: refit")
            with telling(lambda text: say(f"{name}: {text}")) as tell:
                review.refit(case, progress=tell)
    say(f"{name}: draft")
    return tuple(path for path, _ in drafting.draft(case.path))
