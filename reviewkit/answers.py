"""What was answered, in order: answers, what was skipped, undone, remarked; and the facts that follow."""

from collections.abc import Iterable
from dataclasses import dataclass
from enum import StrEnum

from reviewkit.facts import STUDY, Fact, Source, SourceKind, Standing, Value
from reviewkit.records import Json, value_from, value_json
from reviewkit.refusals import Refusal

SPECIFYING = "specification."
"""Answers whose name begins so build a specification; they are no facts."""


class Act(StrEnum):
    """What an entry of the log does."""

    ANSWER = "answer"
    REJECT = "reject"  # a proposal is wrong; the question is asked instead
    SKIP = "skip"  # not looked at: stays open
    UNDO = "undo"  # takes back the last of the three above
    REMARK = "remark"  # for the referee alone


_UNDOABLE = (Act.ANSWER, Act.REJECT, Act.SKIP)


@dataclass(frozen=True, slots=True)
class Entry:
    """One line of the log; `text` is a remark's, or for a specification the answer as it was typed."""

    act: Act
    name: str = ""
    subject: str = STUDY
    value: Value | None = None
    place: str = ""
    quote: str = ""
    text: str = ""
    understood: Json = None
    """For a pasted model line: what was understood of it, a part of a specification."""


def entry_json(entry: Entry) -> Json:
    """The entry as one object without its empty parts."""
    whole: dict[str, Json] = {"act": entry.act.value, "name": entry.name, "subject": entry.subject}
    if entry.value is not None:
        whole["value"] = value_json(entry.value)
    more = {"place": entry.place, "quote": entry.quote, "text": entry.text, "understood": entry.understood}
    return whole | {key: each for key, each in more.items() if each}


def entry_from(record: Json, where: str) -> Entry:
    """The entry that `entry_json` wrote."""
    try:
        value = value_from(record["value"], where) if "value" in record else None
        texts = {key: str(record.get(key, "")) for key in ("name", "place", "quote", "text")}
        return Entry(
            Act(record["act"]),
            subject=record.get("subject", STUDY),
            value=value,
            understood=record.get("understood"),
            **texts,
        )
    except (KeyError, TypeError, ValueError, AttributeError):
        raise Refusal(
            where, "this line is not one that ReviewKit wrote", remedy="Take the line out or restore it"
        ) from None


def standing_entries(entries: Iterable[Entry]) -> tuple[Entry, ...]:
    """The entries that still hold: undone ones are taken out, remarks stay."""
    held: list[Entry] = []
    for entry in entries:
        if entry.act is not Act.UNDO:
            held.append(entry)
            continue
        last = next((place for place in reversed(range(len(held))) if held[place].act in _UNDOABLE), None)
        if last is not None:
            del held[last]
    return tuple(held)


def latest_answers(entries: Iterable[Entry]) -> tuple[Entry, ...]:
    """The answer that holds for each subject and name, in an order that does not depend on when it was given."""
    last = {(each.subject, each.name): each for each in standing_entries(entries) if each.act is Act.ANSWER}
    return tuple(last[key] for key in sorted(last))


def settled_facts(entries: Iterable[Entry]) -> tuple[Fact, ...]:
    """The referee's word as facts; the same whatever the order of the answers."""
    return tuple(
        Fact(each.name, each.value, Standing.SETTLED, Source(SourceKind.ANSWER, each.place, each.quote), each.subject)
        for each in latest_answers(entries)
        if each.value is not None and not each.name.startswith(SPECIFYING)
    )


def rejected(entries: Iterable[Entry]) -> frozenset[tuple[str, str, str]]:
    """Subject, name and value (as text) of the proposals that were said to be wrong."""
    held = standing_entries(entries)
    return frozenset((each.subject, each.name, str(each.value)) for each in held if each.act is Act.REJECT)
