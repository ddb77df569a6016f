"""Tables in plain text: encodings, separators, headers, and what counts as a number."""

import csv
import io
import re
import warnings
from itertools import islice
from typing import TYPE_CHECKING

from reviewkit.refusals import Refusal

if TYPE_CHECKING:
    import pandas

SEPARATORS = {",": "comma", ";": "semicolon", "\t": "tab", "|": "bar"}
LONGEST_LINE = 2_000_000
MOST_COLUMNS = 20_000
LONGEST_NAME = 200
MISSING = ("", "NA", "NaN", "nan", ".")
"""Cells that are missing in every column."""
_MISSING_AMONG_NUMBERS = re.compile(r"^(?:|\.[a-z]?|NA|N/A|n/a|#N/A|NULL|null|None|nan|NaN|-nan|<NA>|-)$")
_TRUTHS = {"TRUE": 1.0, "True": 1.0, "true": 1.0, "FALSE": 0.0, "False": 0.0, "false": 0.0}
_SAMPLE_ROWS = 60
_CONTROLS = bytes((*range(1, 9), *range(14, 32)))

_POINT = re.compile(r"^[+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?$")
_COMMA = re.compile(r"^[+-]?(?:\d*|\d{1,3}(?:\.\d{3})+),\d+(?:[eE][+-]?\d+)?$")
_GROUPED_BY_COMMA = re.compile(r"^[+-]?\d{1,3}(?:,\d{3})+(?:\.\d+)?$")
_GROUPED_BY_POINT = re.compile(r"^[+-]?\d{1,3}(?:\.\d{3}){2,}$")
_EITHER = re.compile(r"^[+-]?[1-9]\d{0,2},\d{3}$")  # 1,234: a decimal comma or a thousand


def parse_delimited(data: bytes, name: str) -> tuple["pandas.DataFrame", tuple[str, ...]]:
    """The table in `data` and remarks on what had to be decided; dates stay text."""
    _refuse_long_lines(data, name)
    text, encoding = _decoded(data, name)
    separator = _separator(text, name)
    header = _header(text, separator, name)
    columns, renamed = _usable_names(header)
    frame = _parsed(text, separator, name)
    if frame.empty:
        raise Refusal(name, "the file has a header and no rows", "at least one row below the header")
    frame.columns = list(columns)
    frame, decided = _with_numbers(frame)
    said = (f"The file is not UTF-8; it was read as {encoding}.",) if encoding != "utf-8" else ()
    return frame, (*said, *renamed, *decided)


def _refuse_long_lines(data: bytes, name: str) -> None:
    start = 0
    while start < len(data):
        end = data.find(b"\n", start, start + LONGEST_LINE + 1)
        end = data.find(b"\r", start, start + LONGEST_LINE + 1) if end < 0 else end
        if end < 0 and len(data) - start > LONGEST_LINE:
            raise Refusal(name, f"a line is longer than {LONGEST_LINE:,} bytes", "one row a line, with line ends")
        start = end + 1 if end >= 0 else len(data)


def _decoded(data: bytes, name: str) -> tuple[str, str]:
    """The text, and the encoding it turned out to be in."""
    for encoding in ("utf-8-sig", "cp1252", "latin-1"):
        try:
            text = data.decode(encoding)
        except UnicodeDecodeError:
            continue
        break
    if len(data) - len(data.translate(None, _CONTROLS)) > len(data) / 1000:
        raise Refusal(
            name, "the file is not plain text", "a table in plain text", "Save the table as .csv in UTF-8 and try again"
        )
    return text, "utf-8" if encoding == "utf-8-sig" else encoding


def _separator(text: str, name: str) -> str:
    """The separator under which most first rows are as wide as the header, the widest among equals."""
    first = "\t" if name.lower().endswith(".tsv") else ","
    candidates = sorted(SEPARATORS, key=lambda each: each != first)
    return max(candidates, key=lambda each: _fit(text, each))


def _fit(text: str, separator: str) -> tuple[bool, float, int]:
    widths = [len(row) for row in _sampled(text, separator)]
    if not widths:
        return (False, 0.0, 0)
    alike = sum(width == widths[0] for width in widths) / len(widths)
    return (widths[0] > 1, round(alike, 1), widths[0])


def _sampled(text: str, separator: str) -> list[list[str]]:
    beginning = text[: 2 * LONGEST_LINE]
    reader = csv.reader(io.StringIO(beginning, newline=""), delimiter=separator)
    try:
        rows = list(islice((row for row in reader if row), _SAMPLE_ROWS))
    except csv.Error:
        return []
    cut_short = len(beginning) < len(text) and 1 < len(rows) < _SAMPLE_ROWS
    return rows[:-1] if cut_short else rows


def _header(text: str, separator: str, name: str) -> list[str]:
    sampled = _sampled(text, separator)
    if not sampled:
        raise Refusal(
            name, "the header line cannot be read", "names separated by comma, semicolon, tab or bar, quotes closed"
        )
    header = [cell.strip() for cell in sampled[0]]
    if len(header) > MOST_COLUMNS:
        raise Refusal(
            name, f"the file has more than {MOST_COLUMNS:,} columns", remedy="Keep only the columns the models use"
        )
    if all(not cell or _POINT.match(cell) or _COMMA.match(cell) for cell in header):
        raise Refusal(name, "the first line holds numbers, not names", "a header line with a name for each column")
    if any(ord(letter) < 32 and letter not in "\t\r\n" for cell in header for letter in cell):
        raise Refusal(name, "the header line holds control characters", "names in plain text")
    return header


def _usable_names(header: list[str]) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """A name of its own for every column, and a remark for each that was changed."""
    taken: dict[str, None] = {}
    remarks = []
    given = {cell for cell in header if cell}
    for place, cell in enumerate(header, start=1):
        plain = " ".join(cell.replace("`", "'").split())[:LONGEST_NAME] or f"column {place}"
        name, number = plain, 2
        while name in taken or (name != cell and name in given):
            name, number = f"{plain}_{number}", number + 1
        taken[name] = None
        if name != cell:
            shown = f"is named {cell[:40]!r}" if cell else "has no name"
            remarks.append(f"Column {place} {shown} in the file; here it is {name[:40]!r}.")
    return tuple(taken), tuple(remarks)


def _parsed(text: str, separator: str, name: str) -> "pandas.DataFrame":
    import pandas

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error", pandas.errors.ParserWarning)
            return pandas.read_csv(
                io.StringIO(text), sep=separator, index_col=False, na_values=list(MISSING), keep_default_na=False,
                low_memory=False, skipinitialspace=True,
            )  # fmt: skip
    except pandas.errors.ParserWarning:
        what = "rows have more fields than the header has names"
    except pandas.errors.ParserError as error:
        what = _parser_trouble(str(error))
    except Exception:  # hostile text: whatever else the parser raises, the file is no table
        what = "the rows cannot be read as a table"
    raise Refusal(
        name, what, "a name in the header for each field, quotes closed", "Mend the line or save the table anew"
    )


def _parser_trouble(message: str) -> str:
    found = re.search(r"Expected (\d+) fields in line (\d+), saw (\d+)", message)
    if found:
        return f"line {found[2]} has {found[3]} fields where the header has {found[1]}"
    return "a quoted field is not closed" if "EOF inside string" in message else "the rows cannot be read as a table"


def _with_numbers(frame: "pandas.DataFrame") -> tuple["pandas.DataFrame", tuple[str, ...]]:
    """The frame with texts turned to numbers where every cell is one; a file has one decimal mark."""
    import pandas

    texts = {column: frame[column] for column in frame.columns if not pandas.api.types.is_numeric_dtype(frame[column])}
    cells = {column: _distinct(values) for column, values in texts.items()}
    readable = {column: found for column, found in cells.items() if found and all(map(_numberlike, found))}
    comma_decimal = any(map(_surely_decimal_comma, readable.values()))
    comma_groups = any(map(_surely_grouped, readable.values()))
    replaced: dict[str, pandas.Series] = {}
    remarks = []
    for column, found in readable.items():
        meaning = _meaning(found, comma_decimal, comma_groups)
        if meaning is None:
            remarks.append(
                f"Column {column!r} could be thousands or decimals (such as {_shown(found)}); it stays text."
            )
        else:
            replaced[column] = texts[column].map({cell: _number(cell, meaning) for cell in found}).astype("float64")
    for column in map(str, frame.columns):
        values, truths = frame[column], cells.get(column, frozenset())
        if values.dtype == bool or (truths and truths <= set(_TRUTHS)):
            keys: dict[str | bool, float] = {True: 1.0, False: 0.0} | _TRUTHS
            replaced[column] = values.map(keys).astype("float64")
            remarks.append(f"Column {column!r} holds true and false; they are read as 1 and 0.")
    if comma_decimal:
        remarks.append("Decimal commas were read as decimal marks.")
        pointed = [str(column) for column, values in frame.items() if values.dtype.kind == "f" and (values % 1).any()]
        if pointed:
            remarks.append(
                f"Points were read as decimal marks in {', '.join(pointed[:5])}; thousands would need mending."
            )
    return frame.assign(**replaced) if replaced else frame, tuple(remarks)


def _distinct(values: "pandas.Series") -> frozenset[str]:
    return frozenset(str(each) for each in values.dropna().unique())


def _numberlike(cell: str) -> bool:
    plain = cell.strip()
    shapes = (_MISSING_AMONG_NUMBERS, _POINT, _COMMA, _GROUPED_BY_COMMA, _GROUPED_BY_POINT)
    return any(shape.match(plain) for shape in shapes)


def _surely_decimal_comma(found: frozenset[str]) -> bool:
    """Whether a cell can only be a decimal comma, such as 0,5 or 12,25."""
    return any(_COMMA.match(cell.strip()) and not _GROUPED_BY_COMMA.match(cell.strip()) for cell in found)


def _surely_grouped(found: frozenset[str]) -> bool:
    """Whether a cell can only be thousands, such as 1,234,567 or 1,234.5."""
    plain = [cell.strip() for cell in found]
    return any(_GROUPED_BY_COMMA.match(cell) and not _EITHER.match(cell) and not _COMMA.match(cell) for cell in plain)


def _meaning(found: frozenset[str], comma_decimal: bool, comma_groups: bool) -> str | None:
    """What commas and points mean in a column: `point` or `comma` is the decimal mark; None where it is open."""
    plain = [cell.strip() for cell in found]
    if not any("," in cell or _GROUPED_BY_POINT.match(cell) for cell in plain):
        return "point" if any(_POINT.match(cell) for cell in plain) else None
    own_decimal, own_groups = _surely_decimal_comma(found), _surely_grouped(found)
    if own_decimal and own_groups:
        return None
    if own_decimal or own_groups:
        return "comma" if own_decimal else "point"
    return None if comma_decimal == comma_groups else "comma" if comma_decimal else "point"


def _number(cell: str, decimal_mark: str) -> float:
    plain = cell.strip()
    if _MISSING_AMONG_NUMBERS.match(plain):
        return float("nan")
    if decimal_mark == "point":
        return float(plain.replace(",", ""))
    return float(plain.replace(".", "").replace(",", ".")) if not _POINT.match(plain) or "," in plain else float(plain)


def _shown(found: frozenset[str]) -> str:
    return min((cell for cell in found if "," in cell or "." in cell), default="")[:20]
