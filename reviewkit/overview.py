"""Where a case stands, in lines: what is known and from where, what disagrees, points, what is open, the next step."""

from dataclasses import dataclass

from reviewkit.casefolder import Input, Policy
from reviewkit.derived import needs
from reviewkit.facts import Fact, Standing
from reviewkit.interview import shown_value, where_from
from reviewkit.records import Json, fact_json
from reviewkit.review import POLICY_QUESTIONS, Review, needs_refit, next_step_of, specification_of
from reviewkit.rules import Finding, Importance, State
from reviewkit.wording import counted

MOST_MISSING = 3
"""Facts named behind an open point."""


MOST_RAISED = 8
"""Points named in a summary."""


@dataclass(frozen=True, slots=True)
class Part:
    """A heading with its lines; each line is a sentence or an entry of a list."""

    heading: str
    lines: tuple[str, ...]


_POLICY_WORDS = {
    Policy.SOFTWARE: "software on the manuscript",
    Policy.SHARING: "others may see it",
    Policy.DECLARE: "use to be declared",
    Policy.DELETE: "copies to be deleted",
}


def overview(review: Review, all_facts: bool = False) -> tuple[Part, ...]:
    """The parts of `show`, empty ones left out."""
    parts = (
        Part("Case", _case_lines(review)),
        Part("Known", _known_lines(review, all_facts)),
        Part("Disagreements", tuple(_disagreement_lines(review))),
        Part("Points raised", tuple(_finding_line(each) for each in _by_importance(review.in_state(State.RAISED)))),
        Part("Looked at and not raised", tuple(_clear_line(each) for each in review.in_state(State.CLEAR))),
        Part("Open", _open_lines(review)),
        Part("Your remarks (in no note)", tuple(each.text for each in review.entries if each.act == "remark")),
        Part("Next", (next_step_of(review),)),
    )
    return tuple(each for each in parts if each.lines)


def summary(review: Review) -> tuple[str, ...]:
    """What an interview found, in a few lines: the points raised, how many are open, the next command."""
    raised, waiting = _by_importance(review.in_state(State.RAISED)), review.in_state(State.OPEN)
    lines = [f"Raised so far: {counted(len(raised), 'point')}{'.' if not raised else ':'}"]
    lines += [f"  {each.importance.value}: {each.rule.title}" for each in raised[:MOST_RAISED]]
    lines += [f"  and {len(raised) - MOST_RAISED} more"] if len(raised) > MOST_RAISED else []
    by_data = sum(not any(_is_asked(review, name) for name in each.missing) for each in waiting)
    lines.append(f"Open: {len(waiting)}" + (f", {by_data} of them for want of data." if by_data else "."))
    return (*lines, f"Next: {next_step_of(review)}")


def overview_json(review: Review) -> Json:
    """The same as one object."""
    return {
        "format": 1,
        "title": review.case.title,
        "facts": [fact_json(each) for each in _counting(review)],
        "disagreements": [{"name": each.name, "subject": each.subject} for each in review.disagreements],
        "findings": findings_json(review.findings),
        "missing": sorted({name for each in review.in_state(State.OPEN) for name in each.missing}),
        "results_are_old": review.results is not None and review.results.is_old,
        "next": next_step_of(review),
    }


def findings_json(findings: tuple[Finding, ...]) -> Json:
    """Findings as `refit --json` lists them."""
    return [
        {
            "rule": each.rule.name,
            "subject": each.subject,
            "state": each.state.value,
            "importance": each.importance.value,
        }
        for each in findings
    ]


def _case_lines(review: Review) -> tuple[str, ...]:
    case = review.case
    lines = [case.title]
    for kind in Input:
        place = case.place(kind)
        if place is not None:
            lines.append(f"{kind.value}: {place.name}{'' if place.exists() else ' (no longer there)'}")
    spec = specification_of(case)
    lines.append("specification: " + (case.specification().name if spec else "none yet"))
    if review.results is not None:
        lines.append("results: older than specification or data" if review.results.is_old else "results: current")
    elif needs_refit(review):
        lines.append("results: none yet")
    policy = case.settings.policy
    if not policy:
        return (*lines, "journal's policy: not looked at; `reviewkit begin` asks for it")
    lines.append(
        "journal's policy: "
        + "; ".join(f"{_POLICY_WORDS[each]}: {policy.get(each, 'not looked at')}" for each in POLICY_QUESTIONS)
    )
    return tuple(lines)


def _counting(review: Review) -> tuple[Fact, ...]:
    """For each subject and name the fact that counts."""
    seen = dict.fromkeys((each.subject, each.name) for each in review.facts)
    found = (review.facts.known(name, subject) for subject, name in seen)
    return tuple(each for each in found if each is not None)


def _known_lines(review: Review, all_facts: bool) -> tuple[str, ...]:
    used = {name for rule in review.book.rules for condition in rule.conditions for name in condition.names}
    shown = [each for each in _counting(review) if all_facts or (each.name in used and not _is_detail(each.name))]
    lines = [_fact_line(review, each) for each in shown]
    hidden = len(_counting(review)) - len(shown)
    return (*lines, *((f"and {hidden} more; `--all` lists them",) if hidden else ()))


def _is_detail(name: str) -> bool:
    """Whether `refit` shows it better than a list of facts."""
    return name.startswith("refit.") and name not in ("refit.reproduced", "refit.conclusion")


def _fact_line(review: Review, fact: Fact) -> str:
    definition = review.book.vocabulary.get(fact.name)
    label = definition.label if definition is not None and definition.label else fact.name
    mark = "" if fact.confirmed or fact.standing is Standing.SETTLED else ", not confirmed yet"
    return f"{label}: {shown_value(definition, fact.value)}  ({where_from(fact)}{mark})"


def _disagreement_lines(review: Review) -> list[str]:
    lines = []
    for each in review.disagreements:
        definition = review.book.vocabulary.get(each.name)
        label = definition.label if definition is not None and definition.label else each.name
        said = "; ".join(f"{shown_value(definition, fact.value)} ({where_from(fact)})" for fact in each.facts)
        lines.append(f"{label}: {said}")
    return lines


def _by_importance(findings: tuple[Finding, ...]) -> tuple[Finding, ...]:
    return tuple(sorted(findings, key=lambda each: each.importance is not Importance.MAJOR))


def _finding_line(finding: Finding) -> str:
    return f"{finding.importance.value}: {finding.rule.title}  [{finding.rule.name}]"


def _clear_line(finding: Finding) -> str:
    return f"{finding.rule.title}: {finding.reason}" if finding.reason else finding.rule.title


def _open_lines(review: Review) -> tuple[str, ...]:
    """What waits for answers, a line each; what waits for data alone, in one line."""
    lines, for_data = [], []
    for finding in _by_importance(review.in_state(State.OPEN)):
        asked = [name for name in finding.missing if _is_asked(review, name)]
        if asked or not finding.missing:
            lines.append(f"{finding.importance.value}: {finding.rule.title}{_waiting(review, asked)}")
        else:
            for_data.append(finding.rule.title)
    return (*lines, *((f"need data that can be re-estimated: {'; '.join(for_data)}",) if for_data else ()))


def _is_asked(review: Review, name: str) -> bool:
    """Whether a person can answer for it, rather than data alone."""
    needed = (review.book.vocabulary.get(each) for each in (name, *needs(name)))
    return any(each is not None and each.asked for each in needed)


def _waiting(review: Review, names: list[str]) -> str:
    labels = [_label(review, name) for name in names[:MOST_MISSING]]
    more = len(names) - len(labels)
    labels += [f"{more} more"] if more > 0 else []
    return f"; waits for: {', '.join(labels)}" if labels else ""


def _label(review: Review, name: str) -> str:
    definition = review.book.vocabulary.get(name)
    return definition.label if definition is not None and definition.label else name
