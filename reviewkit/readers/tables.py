"""Data files as tables: .csv, .tsv and .dta, never anything that could run."""

import hashlib
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

from reviewkit.readers.columns import ColumnDescription, ColumnKind, describe_columns
from reviewkit.readers.traces import TracedTransform, trace_transform
from reviewkit.refusals import Refusal

__all__ = [
    "ColumnDescription",
    "ColumnKind",
    "Table",
    "TracedTransform",
    "describe_columns",
    "read_table",
    "trace_transform",
]

if TYPE_CHECKING:
    import pandas

ALLOWED = ".csv, .tsv or .dta"
LARGEST_FILE = 4 * 1024**3
"""Bytes; larger files would not fit the memory of an ordinary computer."""

_SIGNATURES = {
    b"PK\x03\x04": "a zip archive or an office file",
    b"%PDF": "a PDF",
    b"\x1f\x8b": "a compressed file",
    b"\x89HDF": "an HDF file",
    b"PAR1": "a parquet file",
    b"\xd0\xcf\x11\xe0": "an old office file",
    b"\xff\xfe": "text in UTF-16",
    b"\xfe\xff": "text in UTF-16",
}


@dataclass(frozen=True, slots=True)
class Table:
    """A data file that was read: columns in file order, numbers as numbers, missing values as NaN."""

    name: str
    frame: "pandas.DataFrame"
    sha256: str
    labels: dict[str, str]
    """What the file says a column is, where it says so."""
    value_labels: dict[str, dict[float, str]] = field(default_factory=dict)
    """Texts of coded values; the column itself keeps its numbers, as scripts see them."""
    dates: tuple[str, ...] = ()
    """Columns of a .dta file that are displayed as dates; they keep their numbers, as scripts see them."""
    remarks: tuple[str, ...] = ()
    """What reading had to decide: new column names, odd characters, number formats."""


def read_table(path: Path | str) -> Table:
    """Read a .csv, .tsv or .dta file.

    Raises:
        Refusal: the file is missing, empty, of another kind, damaged or not rectangular.
    """
    path = Path(path)
    data = _bytes_of(path)
    digest = hashlib.sha256(data).hexdigest()
    if path.suffix.lower() == ".dta":
        from reviewkit.readers.dta import parse_dta

        parts = parse_dta(data, path.name)
        return Table(path.name, parts.frame, digest, parts.labels, parts.value_labels, parts.dates, parts.remarks)
    from reviewkit.readers.delimited import parse_delimited

    frame, remarks = parse_delimited(data, path.name)
    return Table(path.name, frame, digest, {}, remarks=remarks)


def _bytes_of(path: Path) -> bytes:
    if path.suffix.lower() not in (".csv", ".tsv", ".dta"):
        raise Refusal(
            path.name, "this kind of file is not read as data", ALLOWED, "Save the table as .csv and try again"
        )
    try:
        if not path.exists():
            raise Refusal(path.name, "there is no such file", remedy=f"Looked in {path.parent}")
        if not path.is_file():
            raise Refusal(path.name, "is not a file", ALLOWED)
        if path.stat().st_size > LARGEST_FILE:
            raise Refusal(path.name, "the file is larger than 4 GiB", remedy="Keep only the columns the models use")
        data = path.read_bytes()
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or "its name or place cannot be used"
        raise Refusal(path.name, f"the file cannot be opened ({reason})") from None
    _refuse_wrong_content(path, data)
    return data


def _refuse_wrong_content(path: Path, data: bytes) -> None:
    if not data.strip():
        raise Refusal(path.name, "the file is empty", "a header line and at least one row")
    if path.suffix.lower() == ".dta":
        return
    kind = next((kind for start, kind in _SIGNATURES.items() if data.startswith(start)), None)
    if kind or b"\0" in data:
        what = f"the file is {kind}" if kind else "the file holds NUL bytes, so it is not plain text"
        raise Refusal(path.name, what, "plain text with a header line", "Save the table as .csv in UTF-8 and try again")
