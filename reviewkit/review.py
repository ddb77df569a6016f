"""A review from its beginning to the notes, as functions; the command line and the screens only call these."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

from reviewkit import casefolder, data_columns, safekeeping, shipped
from reviewkit.answers import SPECIFYING, Entry
from reviewkit.casefolder import CaseFolder, Input, Policy
from reviewkit.decisions import Disagreement, decide, disagreements, next_question
from reviewkit.exhibit import Exhibit
from reviewkit.facts import Fact, Facts
from reviewkit.interview import Interview, facts_of, specifying
from reviewkit.records import Json, exhibit_from, exhibit_json, fact_from, fact_json
from reviewkit.refusals import Refusal
from reviewkit.rulefiles import read_rule_book
from reviewkit.rules import Finding, RuleBook, State
from reviewkit.specification import Specification, read_specification, specification_from, specification_text
from reviewkit.specification_parts import specification_values
from reviewkit.specified import covariate_fact, specification_facts
from reviewkit.specifying import next_step
from reviewkit.wording import counted, estimate_with_error

if TYPE_CHECKING:
    from reviewkit.readers.tables import Table
    from reviewkit.reestimation import Reestimation

Progress = Callable[[str], None]
"""Told in a few words what is being done."""

MAIN, CLAIM, DATA = "model:main", "claim:main", "data:main"

POLICY_QUESTIONS: Mapping[Policy, str] = {
    Policy.SOFTWARE: "May software be used on the manuscript?",
    Policy.SHARING: "May anyone besides you see the manuscript?",
    Policy.DECLARE: "Must the use of software be declared to the journal?",
    Policy.DELETE: "Must your copies be deleted after the review?",
}


@dataclass(frozen=True, slots=True)
class Results:
    """What the last re-estimation of a model left in the case folder."""

    exhibits: tuple[Exhibit, ...]
    facts: tuple[Fact, ...]
    content: Json
    """The model's part of `refit --json`."""
    is_old: bool
    """Whether specification or data changed since."""


@dataclass(frozen=True, slots=True)
class Review:
    """Where a case stands."""

    case: CaseFolder
    book: RuleBook
    facts: Facts
    findings: tuple[Finding, ...]
    disagreements: tuple[Disagreement, ...]
    results: Results | None
    entries: tuple[Entry, ...]

    def in_state(self, state: State) -> tuple[Finding, ...]:
        """The findings in that state."""
        return tuple(each for each in self.findings if each.state is state)


# --- begin ------------------------------------------------------------------------------------------------------


def begin(folder: Path, inputs: Mapping[Input, Path]) -> tuple[CaseFolder, tuple[str, ...]]:
    """Make or open the case and note what it is given; nothing is read yet. Also what to say about the place."""
    for path in inputs.values():
        casefolder.check_given(path)
    warnings = safekeeping.place_warnings(folder.absolute())
    case = casefolder.make_case(folder)
    with casefolder.working_in(case):
        for kind, path in inputs.items():
            case = casefolder.giving(case, kind, path)
    return case, warnings


def settle_policy(case: CaseFolder, policy: Policy, answer: str) -> CaseFolder:
    """Write one policy fact down."""
    with casefolder.working_in(case):
        return casefolder.with_policy(case, policy, answer)


def read_inputs(case: CaseFolder) -> tuple[CaseFolder, tuple[str, ...]]:
    """Read manuscript and data as far as policy allows; what was found, in sentences.

    Raises:
        Refusal: One of them cannot be read; the other was read all the same.
    """
    said: list[str] = []
    with casefolder.working_in(case):
        try:
            case, found = _manuscript_read(case)
            said += found
        finally:
            if (data := case.place(Input.DATA)) is not None:
                said.append(f"{data.name}: {counted(len(data_columns.describe(case, data)), 'column')} read.")
                said += data_columns.remarks(case)
    if case.given(Input.PACKAGE) is not None:
        said.append("The package was noted; this version does not read packages yet.")
    return case, tuple(said)


def _manuscript_read(case: CaseFolder) -> tuple[CaseFolder, list[str]]:
    manuscript = case.place(Input.MANUSCRIPT)
    if manuscript is None:
        return case, []
    if case.settings.policy.get(Policy.SOFTWARE) == "no":
        return case, ["The journal allows no software on the manuscript, so it was not read."]
    case, count = _read_manuscript(case, manuscript)
    return case, [f"{manuscript.name}: {counted(count, 'statement')} on the model found, for you to confirm."]


def _read_manuscript(case: CaseFolder, path: Path) -> tuple[CaseFolder, int]:
    from reviewkit.readers.manuscripts import proposed_facts, read_manuscript

    manuscript = read_manuscript(path)
    found = tuple(proposed_facts(manuscript))
    casefolder.save_proposals(case, found)
    if not case.settings.title and manuscript.title:
        case = casefolder.save_settings(case, replace(case.settings, title=manuscript.title[:200]))
    return case, len(found)


# --- where a case stands ------------------------------------------------------------------------------------------


def rule_book(house_folders: tuple[Path, ...] = (), examples: bool = False) -> RuleBook:
    """The rules that come with the program, and those of house folders; with their examples where they are shown."""
    return read_rule_book(shipped.rules_folder(), house_folders, examples)


def look(folder: Path, book: RuleBook | None = None) -> Review:
    """Where the case in `folder` stands; `book` where it was read already."""
    case, book = casefolder.open_case(folder), book or rule_book()
    results, entries = read_results(case), casefolder.read_entries(case)
    facts = facts_of(Interview(given_facts(case, results), book, entries))
    return Review(case, book, facts, decide(facts, book), disagreements(facts), results, entries)


def given_facts(case: CaseFolder, results: Results | None) -> Facts:
    """What machines found, and what the specification's author typed, linked from claim to model to data."""
    facts = Facts(casefolder.read_proposals(case)).linked(CLAIM, MAIN).linked(MAIN, DATA)
    specification = specification_of(case)
    current = results.facts if results is not None and not results.is_old else ()
    if specification is None:
        return facts.adding(current)
    kinds = {each.name: each.kind for each in data_columns.known(case)}
    written = specification_facts(specification, MAIN, CLAIM)
    return facts.adding(written).adding(covariate_fact(specification, kinds, CLAIM)).adding(current)


def open_interview(folder: Path, only_major: bool = False, again: tuple[str, ...] = ()) -> tuple[CaseFolder, Interview]:
    """The interview of a case, resumed where it stood."""
    case, book = casefolder.open_case(folder), rule_book()
    entries = casefolder.read_entries(case)
    data = case.place(Input.DATA)
    columns = data_columns.known(case)
    return case, Interview(
        given_facts(case, read_results(case)),
        book,
        entries,
        start=len(entries),
        columns=columns,
        files=(casefolder.relative(data, case.path),) if data is not None else (),
        only_major=only_major,
        again=names_of_topic(again, book),
        specified=_is_specified_by_hand(case, entries),
    )


def names_of_topic(topics: tuple[str, ...], book: RuleBook) -> tuple[str, ...]:
    """The facts that a topic asks for: a topic's name, a rule's name, or the beginning of a fact's name."""
    names: list[str] = []
    for topic in topics:
        rules = [each for each in book.rules if topic in (each.topic, each.name)]
        used = [name for rule in rules for condition in rule.conditions for name in condition.names]
        found = used or [each.name for each in book.vocabulary if each.name.startswith(topic) and each.asked]
        if not found:
            topics_known = ", ".join(dict.fromkeys(each.topic for each in book.rules))
            raise Refusal(topic, "there is no such topic", f"{topics_known}, a rule's name, or the name of a fact")
        names += found
    return tuple(dict.fromkeys(names))


def _is_specified_by_hand(case: CaseFolder, entries: tuple[Entry, ...]) -> bool:
    path = case.specification()
    typed = any(each.name.startswith(SPECIFYING) for each in entries)
    return path.exists() and (not typed or casefolder.is_edited(case, path))


# --- specification and re-estimation -------------------------------------------------------------------------------


def specification_of(case: CaseFolder, model: str = "main") -> Specification | None:
    """The model's specification, if there is one."""
    path = case.specification(model)
    return read_specification(path) if path.exists() else None


def specify(case: CaseFolder, interview: Interview) -> bool:
    """Write the specification that the answers make; False where a hand-edited file was kept instead."""
    state = specifying(interview)
    if state.without_data or next_step(state) is not None:
        return False
    return write_specification(case, specification_from(specification_values(state), "The answers"))


def write_specification(case: CaseFolder, spec: Specification) -> bool:
    """Write a specification unless its file was edited by hand; whether it was written."""
    return casefolder.write_or_keep(case, case.specification(spec.name), specification_text(spec).encode())


def load_numbers() -> None:
    """Load what estimates and draws, so that only the work itself counts as time taken."""
    from reviewkit.readers import tables  # noqa: F401
    from reviewkit.reestimation import reestimate  # noqa: F401
    from reviewkit.writers import pictures  # noqa: F401


def reestimate_file(path: Path, progress: Progress | None = None) -> "Reestimation":
    """Re-estimate a lone specification file; its data lie beside it."""
    if not path.exists():
        raise Refusal(path.name, "there is no such file", remedy="Check the path")
    spec = read_specification(path)
    table = _table(path.parent / spec.data, progress)
    estimated = _reestimated(spec, table, progress)
    return replace(estimated, warnings=(*table.remarks, *estimated.warnings))


def refit(case: CaseFolder, model: str = "main", progress: Progress | None = None) -> "Reestimation":
    """Re-estimate a model of the case, keep exhibits, facts, pictures; old results stay till the new are whole."""
    spec = specification_of(case, model)
    if spec is None:
        raise Refusal(
            case.path.name,
            f"there is no specification of `{model}` yet",
            remedy="`reviewkit interview` builds it, or says why not",
        )
    table = _table(case.beside(spec.data), progress)
    estimated = _reestimated(spec, table, progress)
    content = {
        "specification_sha256": safekeeping.file_checksum(case.specification(model)),
        "data_sha256": table.sha256,
        "exhibits": [exhibit_json(each) for each in estimated.exhibits],
        "facts": [fact_json(each) for each in estimated.facts],
        "content": _refit_content(estimated),
    }
    casefolder.save_results(case, model, content)
    _save_pictures(case, model, estimated.exhibits, progress)
    return estimated


def findings_of(estimated: "Reestimation") -> tuple[Finding, ...]:
    """What the rules make of a re-estimation alone, with nothing known of the paper but its printed figures."""
    linked = Facts().linked(CLAIM, MAIN).linked(MAIN, DATA)
    return decide(
        linked.adding(specification_facts(estimated.specification, MAIN, CLAIM)).adding(estimated.facts), rule_book()
    )


def beside_print(estimated: "Reestimation") -> tuple[str, ...]:
    """What the data give for the term in focus and the number of rows, beside what the paper prints."""
    spec, lines = estimated.specification, []
    for name, printed in spec.printed_terms:
        row = estimated.submitted.term(name)
        figures = [figure.text for figure in (printed.estimate, printed.std_error) if figure is not None]
        if row is not None and figures:
            found = estimate_with_error(row.estimate, row.std_error)
            lines.append(f"{name}: estimate (error) {found} from the data; printed: {', '.join(figures)}.")
    if spec.printed_n is not None:
        used = counted(estimated.submitted.observations, "row")
        lines.append(f"{used} used; printed: {spec.printed_n.text}.")
    return tuple(lines)


def _table(path: Path, progress: Progress | None) -> "Table":
    from reviewkit.readers.tables import read_table

    _say(progress, f"Reading {path.name}")
    return read_table(path)


def _reestimated(spec: Specification, table: "Table", progress: Progress | None) -> "Reestimation":
    from reviewkit.reestimation import reestimate

    return reestimate(spec, table, progress)


def _refit_content(estimated: "Reestimation") -> Json:
    from reviewkit.writers.refit_json import refit_object

    return refit_object([estimated], ())


def _save_pictures(case: CaseFolder, model: str, exhibits: tuple[Exhibit, ...], progress: Progress | None) -> None:
    from reviewkit.writers.pictures import draw

    _say(progress, "Drawing")
    for exhibit in exhibits:
        for number, figure in enumerate(exhibit.figures, start=1):
            ending = f"-{number}" if len(exhibit.figures) > 1 else ""
            path = case.path / casefolder.RESULTS / f"{model}-{exhibit.name}{ending}.png"
            safekeeping.write_atomically(path, draw(figure, 14.0))


def read_results(case: CaseFolder, model: str = "main") -> Results | None:
    """What the last re-estimation left, without estimating again."""
    kept = casefolder.read_results(case, model)
    if kept is None:
        return None
    with casefolder.as_we_wrote_it(case.results(model).name):
        exhibits = tuple(exhibit_from(each) for each in kept["exhibits"])
        facts = tuple(fact_from(each) for each in kept["facts"])
        return Results(exhibits, facts, kept["content"], _is_old(case, model, kept))


def _is_old(case: CaseFolder, model: str, kept: Json) -> bool:
    path = case.specification(model)
    if not path.exists() or safekeeping.file_checksum(path) != kept["specification_sha256"]:
        return True
    data = case.beside(read_specification(path).data)
    return data.is_file() and safekeeping.file_checksum(data) != kept["data_sha256"]


def _say(progress: Progress | None, text: str) -> None:
    if progress is not None:
        progress(text)


# --- what comes next ---------------------------------------------------------------------------------------------


def needs_refit(review: Review) -> bool:
    """Whether the case has data and a specification whose results are missing or older than these."""
    return is_stale(review.case)


def is_stale(case: CaseFolder, model: str = "main") -> bool:
    """Whether there are data and a specification, and no results or older ones."""
    spec = specification_of(case, model)
    if spec is None or not case.beside(spec.data).is_file():
        return False
    kept = casefolder.read_results(case, model)
    return kept is None or _is_old(case, model, kept)


def next_step_of(review: Review) -> str:
    """The command that brings the case on, with its reason."""
    case = _shown_path(review.case.path)
    if needs_refit(review):
        return f"reviewkit refit {case}"
    if next_question(review.facts, review.book) is None:
        return f"reviewkit draft {case}"
    return f"reviewkit interview {case}   (or, as it stands: reviewkit draft {case})"


def owed(case: CaseFolder) -> tuple[str, ...]:
    """What the journal's policy leaves to do once the notes are written."""
    policy = case.settings.policy
    said = []
    if policy.get(Policy.DECLARE) == "yes":
        said.append("To do: the journal wants the use of software declared; the note to the editor says it.")
    if policy.get(Policy.DELETE) == "yes":
        said.append("To do: the journal wants your copies deleted after the review; this folder is one of them.")
    return tuple(said)


def _shown_path(path: Path) -> str:
    return f'"{path}"' if " " in str(path) else str(path)
