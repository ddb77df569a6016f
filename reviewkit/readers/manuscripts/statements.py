"""Facts that a manuscript states, each with its place and sentence, for a person to confirm.

Precision before recall: where a text says several things of one fact, none is proposed.
"""

import re
from collections.abc import Callable, Iterable, Iterator
from typing import TypeVar

from reviewkit.facts import STUDY, Fact, Source, SourceKind, Standing, Value
from reviewkit.readers.manuscripts.claims import percent_claim, stated_coefficient
from reviewkit.readers.manuscripts.manuscript import Manuscript, ManuscriptTable
from reviewkit.readers.manuscripts.model_statements import (
    available_in,
    checks_in,
    clusters_in,
    errors_in,
    estimator_in,
    software_in,
)
from reviewkit.readers.manuscripts.outcome_statements import (
    LOG,
    LOG_PLUS,
    named_transform,
    reasons_in,
    transform_in,
    zeros_in,
)
from reviewkit.readers.manuscripts.sentences import Sentence, sentences_of, split
from reviewkit.readers.manuscripts.table_statements import (
    PrintedRow,
    clusters_in_column,
    coefficient_rows,
    count_in_column,
)

MODEL, CLAIM = "model:main", "claim:main"
Seen = TypeVar("Seen")
Reading = tuple[Seen, Sentence]


def proposed_facts(manuscript: Manuscript, focus: str = "") -> tuple[Fact, ...]:
    """What the manuscript states of its main model and claim; `focus` names the row of the table that matters.

    All are stated and unconfirmed; facts of the model have the subject `model:main`, of the claim `claim:main`.
    """
    sentences = (*sentences_of(manuscript), *_table_sentences(manuscript))
    errors = _agreed(_readings(sentences, errors_in))
    levels = errors[0][1] if errors else ()
    found = (
        *_on_outcome(manuscript, sentences),
        *_on_model(sentences, errors),
        *_on_claim(manuscript, sentences, (focus, levels)),
        *_on_study(sentences),
    )
    return tuple(_once(found))


def _fact(name: str, value: Value, sentence: Sentence, subject: str = MODEL) -> Fact:
    source = Source(SourceKind.MANUSCRIPT, sentence.place, sentence.quote)
    return Fact(name, value, Standing.STATED, source, subject, confirmed=False)


def _once(facts: Iterable[Fact]) -> Iterator[Fact]:
    """The first fact of each name and subject."""
    seen: set[tuple[str, str]] = set()
    for fact in facts:
        if (fact.name, fact.subject) not in seen:
            seen.add((fact.name, fact.subject))
            yield fact


def _table_sentences(manuscript: Manuscript) -> Iterator[Sentence]:
    """Sentences that stand inside a table, in rows of a single text."""
    for table in manuscript.tables:
        for number, row in enumerate(table.rows, start=1):
            filled = [cell for cell in row if cell]
            if len(filled) == 1 and len(filled[0]) > 40:
                yield from (Sentence(text, table.place(number), "") for text in split(filled[0]))


def _readings(sentences: Iterable[Sentence], reader: Callable[[str], Seen | None]) -> list[Reading[Seen]]:
    pairs = ((reader(sentence.text), sentence) for sentence in sentences)
    return [(value, sentence) for value, sentence in pairs if value]


def _agreed(readings: list[Reading[Seen]]) -> Reading[Seen] | None:
    """The first reading, if no other contradicts it."""
    return readings[0] if readings and len({value for value, _ in readings}) == 1 else None


def _on_outcome(manuscript: Manuscript, sentences: tuple[Sentence, ...]) -> Iterator[Fact]:
    transforms = _readings(sentences, transform_in) + list(_table_heads(manuscript))
    chosen = _agreed(_most_exact(transforms))
    if chosen:
        (name, constant), sentence = chosen
        yield _fact("outcome.transform", name, sentence)
        if constant is not None:
            yield _fact("outcome.constant", constant, sentence)
    zeros = _agreed(_readings(sentences, zeros_in))
    if zeros:
        yield _fact("outcome.zeros", zeros[0], zeros[1])
    reasons = _readings(_with_next(sentences), reasons_in)
    if reasons:
        yield _fact("transform.reason", reasons[0][0], reasons[0][1])


def _most_exact(readings: list[Reading[tuple[str, float | None]]]) -> list[Reading[tuple[str, float | None]]]:
    """Without plain logs where a log with a constant is stated too, and without unsaid constants where one is said."""
    named = [each for each in readings if each[0][0] == LOG_PLUS]
    if named and all(each[0][0] in (LOG, LOG_PLUS) for each in readings):
        exact = [each for each in named if each[0][1] is not None]
        return exact or named
    return readings


def _with_next(sentences: tuple[Sentence, ...]) -> Iterator[Sentence]:
    """Sentences; one that begins with `This` or `It` together with the one before it."""
    before: Sentence | None = None
    for sentence in sentences:
        goes_on = before is not None and before.place == sentence.place
        if goes_on and before and re.match(r"(?:This|It|Doing so|The transformation)\b", sentence.text):
            yield Sentence(f"{before.text} {sentence.text}", sentence.place, sentence.heading)
        else:
            yield sentence
        before = sentence


def _table_heads(manuscript: Manuscript) -> Iterator[Reading[tuple[str, float | None]]]:
    """Transforms in the heads of regression tables, where all heads name the same one."""
    for table in manuscript.tables:
        if not coefficient_rows(table):
            continue
        head = table.rows[0][1:]
        named = {named_transform(cell) for cell in head if re.search(r"[A-Za-z]{3}", cell)}
        if len(named) == 1 and (only := named.pop()) is not None:
            yield only, Sentence(" | ".join(cell for cell in head if cell), table.place(1), "")


def _on_model(sentences: tuple[Sentence, ...], errors: Reading[tuple[str, tuple[str, ...]]] | None) -> Iterator[Fact]:
    estimator = _agreed(_readings(sentences, estimator_in))
    if estimator:
        yield _fact("estimator", estimator[0], estimator[1])
    if errors:
        (kind, levels), sentence = errors
        yield _fact("errors.kind", kind, sentence)
        if levels:
            yield _fact("errors.cluster_level", levels, sentence)
        counts = _agreed(_readings(sentences, lambda text: clusters_in(text, levels)))
        if counts:
            yield _fact("errors.clusters", counts[0], counts[1])
    checks = _readings(sentences, checks_in)
    if checks:
        every = tuple(dict.fromkeys(name for names, _ in checks for name in names))
        yield _fact("checks.shown", every, checks[0][1])


def _on_claim(
    manuscript: Manuscript, sentences: tuple[Sentence, ...], about: tuple[str, tuple[str, ...]]
) -> Iterator[Fact]:
    focus, levels = about
    percents = _readings(sentences, percent_claim)
    abstract = [each for each in percents if re.search(r"\babstract\b|\bsummary\b", each[1].heading, re.I)]
    headline = _agreed_print(abstract or percents)
    if headline:
        yield _fact("claim.percent", headline[0], headline[1], CLAIM)
        yield _fact("claim.scale", "percent", headline[1], CLAIM)
    stated = _readings(sentences, stated_coefficient)
    row = _row_of(manuscript, focus, stated[0][0][0].text if len(stated) == 1 else "")
    if len(stated) == 1 and (not focus or row is None):
        (estimate, error), sentence = stated[0]
        yield _fact("claim.coefficient", estimate, sentence, CLAIM)
        if error:
            yield _fact("claim.std_error", error, sentence, CLAIM)
    if row:
        yield from _on_row(*row, levels)


def _agreed_print(readings: list[Reading[Seen]]) -> Reading[Seen] | None:
    return readings[0] if readings and len({str(value) for value, _ in readings}) == 1 else None


def _row_of(manuscript: Manuscript, focus: str, stated: str) -> tuple[ManuscriptTable, PrintedRow] | None:
    """The printed coefficient that matters: the stated one, that of the focus, or the first of a one-column table."""
    rows = [(table, row) for table in manuscript.tables for row in coefficient_rows(table)]
    if stated:
        alike = [each for each in rows if str(each[1].estimate.value) == str(float(_plain(stated)))]
        return alike[0] if len(alike) == 1 else None
    if focus:
        named = [each for each in rows if _words(focus) <= _words(each[1].term)]
        return named[0] if len({each[1].estimate.text for each in named}) == 1 else None
    first = [each for each in rows if each[0] is rows[0][0] and each[1].row == rows[0][1].row]
    several = len({id(table) for table, _ in rows}) > 1
    return first[0] if len(first) == 1 and not several else None


def _plain(figure: str) -> str:
    return re.sub(r"[^\d.,-]", "", figure.replace("−", "-").replace("–", "-")).replace(",", ".") or "nan"


def _words(text: str) -> set[str]:
    return set(re.findall(r"\w+", text.lower()))


def _on_row(table: ManuscriptTable, row: PrintedRow, levels: tuple[str, ...]) -> Iterator[Fact]:
    shown = Sentence(f"{row.term}: {row.estimate.text}", table.place(row.row), "")
    yield _fact("claim.coefficient", row.estimate, shown, CLAIM)
    if row.std_error:
        yield _fact(
            "claim.std_error", row.std_error, Sentence(f"{shown.text} ({row.std_error.text})", shown.place, ""), CLAIM
        )
    for name, counted in (
        ("n.printed", count_in_column(table, row.column)),
        ("errors.clusters", clusters_in_column(table, row.column, levels)),
    ):
        if counted:
            quote = " ".join(
                cell for cell in (table.rows[counted[1] - 1][0], table.rows[counted[1] - 1][row.column]) if cell
            )
            yield _fact(name, counted[0], Sentence(quote, table.place(counted[1]), ""))


def _on_study(sentences: tuple[Sentence, ...]) -> Iterator[Fact]:
    software = _readings(sentences, software_in)
    if software:
        best = next((each for each in software if each[0] == "yes"), software[0])
        yield _fact("software.stated", best[0], best[1], STUDY)
    available = [(name, value, sentence) for sentence in sentences for name, value in available_in(sentence.text)]
    for name in ("data.available", "code.available"):
        found = [(value, sentence) for each, value, sentence in available if each == name]
        agreed = _agreed(found)
        if agreed:
            yield _fact(name, agreed[0], agreed[1], STUDY)
