"""What a printed regression table says of the model: its first coefficient, its error, N and clusters."""

import re
from dataclasses import dataclass

from reviewkit.printed import Printed, read_printed
from reviewkit.readers.manuscripts.manuscript import ManuscriptTable
from reviewkit.readers.manuscripts.model_statements import plural
from reviewkit.refusals import Refusal

_COUNT_ROW = re.compile(
    r"^\s*(?:N|n|obs\.?|observations?|(?:no\.?|number|#) of (?:obs\.?|observations?)|sample size)\s*(?:\(.*\))?\s*$",
    re.I,
)
_CLUSTER_ROW = re.compile(r"^\s*(?:clusters?|(?:no\.?|number|#) of clusters?)\s*$", re.I)
_NOT_A_TERM = re.compile(
    r"^\s*(?:N|obs|observations?|r-?\s?(?:squared|2|²)|adj\w*|constant|intercept|\(?constant\)?"
    r"|f[- ]stat\w*|mean|sd|s\.d\.|clusters?|number|no\.|log[- ]likelihood|aic|bic)\b|effects?\b"
    r"|controls?\b",
    re.I,
)
_FIGURE = re.compile(r"^[-−–]?\s?\d{0,6}[.,]\d{1,6}\s*[*†‡]{0,4}$")
_BRACKETED = re.compile(r"^[(\[]\s*\d{0,6}[.,]\d{1,6}\s*[)\]]\s*[*†‡]{0,4}$")
_IN_CELL = re.compile(r"^([-−–]?\s?\d{0,6}[.,]\d{1,6}\s*[*†‡]{0,4})\s*[(\[]\s*(\d{0,6}[.,]\d{1,6})\s*[)\]]$")
_ERRORS_BELOW = re.compile(r"\b(?:standard errors?|s\.e\.)\b[^.;]*\b(?:parenthes[ei]s|brackets?)", re.I)
_OTHERS_BELOW = re.compile(
    r"\b(?:t[- ](?:statistics?|values?|ratios?)|p[- ]values?|z[- ]\w+"
    r"|confidence intervals?)\b[^.;]*\b(?:parenthes[ei]s|brackets?)",
    re.I,
)


@dataclass(frozen=True, slots=True)
class PrintedRow:
    """One coefficient of a table; rows count from 1, columns from 0."""

    term: str
    row: int
    column: int
    estimate: Printed
    std_error: Printed | None


def coefficient_rows(table: ManuscriptTable) -> tuple[PrintedRow, ...]:
    """Every printed coefficient, row by row."""
    found = []
    for place, row in enumerate(table.rows):
        if not row or not row[0] or _NOT_A_TERM.search(row[0]):
            continue
        below = table.rows[place + 1] if place + 1 < len(table.rows) else ()
        below = () if any(below[:1]) else below
        for column in range(1, len(row)):
            read = _read_cell(row[column], below[column] if column < len(below) else "", _errors_in_brackets(table))
            if read:
                found.append(PrintedRow(row[0], place + 1, column, *read))
    return tuple(found) if any(each.std_error for each in found) or _errors_in_brackets(table) else ()


def _errors_in_brackets(table: ManuscriptTable) -> bool:
    notes = f"{table.caption} {table.notes} {' '.join(cell for row in table.rows[-3:] for cell in row[:1])}"
    return bool(_ERRORS_BELOW.search(notes)) and not _OTHERS_BELOW.search(notes)


def _read_cell(cell: str, below: str, errors_in_brackets: bool) -> tuple[Printed, Printed | None] | None:
    both = _IN_CELL.match(cell.strip())
    estimate, bracket = (both[1], both[2]) if both else (cell.strip(), below.strip())
    if not both and not (_FIGURE.match(estimate) and _BRACKETED.match(bracket)):
        return None
    printed = _printed(estimate)
    return (printed, _printed(bracket) if errors_in_brackets else None) if printed else None


def _printed(text: str) -> Printed | None:
    """The figure without its brackets and stars."""
    plain = re.sub(r"[()\[\]*†‡\s]", "", text).replace("−", "-").replace("–", "-")
    try:
        return read_printed(plain)
    except Refusal:
        return None


def count_in_column(table: ManuscriptTable, column: int) -> tuple[float, int] | None:
    """N of a column, and its row."""
    return _labelled_count(table, column, _COUNT_ROW)


def clusters_in_column(table: ManuscriptTable, column: int, levels: tuple[str, ...]) -> tuple[float, int] | None:
    """Clusters of a column: from a row named so, or named by what the errors are clustered by."""
    found = _labelled_count(table, column, _CLUSTER_ROW)
    if found or len(levels) != 1:
        return found
    units = rf"^\s*(?:(?:no\.?|number) of )?{re.escape(plural(levels[0]))}\s*$"
    return _labelled_count(table, column, re.compile(units, re.I))


def _labelled_count(table: ManuscriptTable, column: int, label: re.Pattern[str]) -> tuple[float, int] | None:
    for place, row in enumerate(table.rows, start=1):
        if row and label.match(row[0]) and column < len(row):
            plain = re.sub(r"(?<=\d)[,.\s\u00a0\u2009\u202f'](?=\d{3}\b)", "", row[column].strip())
            return (float(plain), place) if plain.isdigit() and len(plain) < 12 else None
    return None
