"""Tables in .dta files, versions 105 to 119."""

import io
import re
import warnings
from dataclasses import dataclass
from typing import TYPE_CHECKING

from reviewkit.refusals import Refusal

if TYPE_CHECKING:
    import pandas
    from pyreadstat import metadata_container

_OLDEST, _NEWEST = 105, 119
_OPENING = re.compile(
    rb"<([a-z]+_dta)><header><release>(\d{3})</release><byteorder>([LM])SF</byteorder><K>(.{2}|.{4})</K>", re.DOTALL
)
"""How the published format begins from version 117 on: its tag, version, byte order, number of columns."""
_BYTES_A_COLUMN = 100
"""Every column takes more than that in the lists of names, labels and formats."""
_LENGTH_OF_A_TABLE = 4
"""Bytes; old files end without a mark, where the length of one more table of labels is looked for."""
_BYTE_FOR_BYTE = "ISO-8859-1"


@dataclass(frozen=True, slots=True)
class DtaParts:
    """What a .dta file holds."""

    frame: "pandas.DataFrame"
    labels: dict[str, str]
    value_labels: dict[str, dict[float, str]]
    dates: tuple[str, ...]
    remarks: tuple[str, ...]


def parse_dta(data: bytes, name: str) -> DtaParts:
    """Read the bytes of a .dta file; coded columns keep their numbers, all 27 missing codes are missing."""
    _check_version(data, name)
    try:
        _check_sizes(data)
        parts = _parse_in_either_encoding(data)
    except Exception:  # the parser meets hostile bytes: whatever it raises means that the file is damaged
        raise Refusal(
            name,
            "the .dta file is cut short or damaged",
            f"a whole .dta file of version {_OLDEST} to {_NEWEST}",
            "Copy it again, or save it as .csv",
        ) from None
    if parts.frame.empty:
        raise Refusal(name, "the file holds no rows", "at least one row")
    return parts


def _check_version(data: bytes, name: str) -> None:
    found = _version(data)
    if found is None or not _OLDEST <= found <= _NEWEST:
        what = "this is not a .dta file" if found is None else f"the .dta file is of version {found}"
        raise Refusal(
            name, what, f".dta files of version {_OLDEST} to {_NEWEST}", "Save the table as .csv and try again"
        )


def _version(data: bytes) -> int | None:
    """The format version the first bytes give; None where they give none."""
    tagged = re.match(rb"<[a-z]+_dta><header><release>(\d{3})</release>", data)
    if tagged:
        return int(tagged[1])
    looks_old = len(data) > 60 and 100 <= data[0] <= 116 and data[1] in (1, 2) and data[2] == 1
    return data[0] if looks_old else None


def _check_sizes(data: bytes) -> None:
    """Hold what the file promises against its length, before memory is set aside for it."""
    if data.startswith(b"<"):
        opening = _OPENING.match(data)
        if not opening or b"</" + opening[1] + b">" not in data[-200:]:
            raise ValueError("the beginning or the end is missing")
        columns = int.from_bytes(opening[4], "little" if opening[3] == b"L" else "big")
        if columns * _BYTES_A_COLUMN > len(data):
            raise ValueError("more columns than the file can hold")
    promised = _read(data, _BYTE_FOR_BYTE, metadataonly=True)[1]
    kinds = promised.readstat_variable_types
    row = sum(1 if kinds[each] == "string" else width for each, width in promised.variable_storage_width.items())
    if promised.number_rows is None or promised.number_rows * max(1, row) > len(data):
        raise ValueError("more rows than the file can hold")


def _parse_in_either_encoding(data: bytes) -> DtaParts:
    """The file in the encoding it promises, or else each text in the first encoding that fits it."""
    try:
        return _parts(*_read(data, None), remarks=())
    except Exception:  # read again byte for byte; if the encoding was not the reason, this fails too
        frame, about = _read(data, _BYTE_FOR_BYTE)
    remark = "Some texts are not in the encoding the file promises; they were read as Western European."
    return _with_texts_one_by_one(_parts(frame, about, remarks=(remark,)))


def _with_texts_one_by_one(parts: DtaParts) -> DtaParts:
    """What was read byte for byte, with every text that is UTF-8 as such."""
    frame = parts.frame.map(lambda cell: _text(cell) if isinstance(cell, str) else cell).rename(columns=_text)
    if frame.columns.has_duplicates:
        raise ValueError("two columns of one name")
    return DtaParts(
        frame,
        {_text(column): _text(label) for column, label in parts.labels.items()},
        {
            _text(column): {code: _text(label) for code, label in labels.items()}
            for column, labels in parts.value_labels.items()
        },
        tuple(_text(column) for column in parts.dates),
        parts.remarks,
    )


def _text(read_by_bytes: str) -> str:
    original = read_by_bytes.encode(_BYTE_FOR_BYTE)
    for encoding in ("utf-8", "cp1252"):
        try:
            return original.decode(encoding)
        except UnicodeDecodeError:
            continue
    return read_by_bytes


class _Watched(io.BytesIO):
    """Bytes that notice when fewer are left than were asked for: the parser forgives that at the end of old files."""

    ran_short = False

    def read(self, size: int | None = -1, /) -> bytes:
        found = super().read(size)
        whole_to_the_end = not found and (size or 0) <= _LENGTH_OF_A_TABLE
        self.ran_short |= len(found) < (size or 0) and not whole_to_the_end
        return found


def _read(
    data: bytes, encoding: str | None, metadataonly: bool = False
) -> "tuple[pandas.DataFrame, metadata_container]":
    import pandas
    import pyreadstat

    file = _Watched(data)
    with warnings.catch_warnings(record=True) as said:
        warnings.simplefilter("always")
        frame, about = pyreadstat.read_dta(
            file, encoding=encoding, metadataonly=metadataonly, disable_datetime_conversion=True
        )
    if file.ran_short or any("is duplicated" in str(each.message) for each in said):
        raise ValueError("cut short, or two columns of one name")
    return pandas.DataFrame(frame), about


def _parts(frame: "pandas.DataFrame", about: "metadata_container", remarks: tuple[str, ...]) -> DtaParts:
    named = {name: text.strip() for name, text in about.column_names_to_labels.items() if text}
    coded = {
        column: {float(code): text for code, text in labels.items() if isinstance(code, int | float)}
        for column, labels in about.variable_value_labels.items()
    }
    formats = about.original_variable_types.items()
    return DtaParts(
        _with_missing_texts(frame, about.readstat_variable_types),
        {name: text for name, text in named.items() if text},
        coded,
        tuple(column for column, shown in formats if (shown or "").startswith(("%t", "%d", "%-t", "%-d"))),
        remarks,
    )


def _with_missing_texts(frame: "pandas.DataFrame", kinds: dict[str, str]) -> "pandas.DataFrame":
    """The frame with integers as floats and empty texts as missing, as the format means them."""
    import pandas

    columns = {}
    for column in frame.columns:
        values = frame[column]
        columns[column] = values.where(values != "") if kinds[column] == "string" else values.astype("float64")
    return pandas.DataFrame(columns)
