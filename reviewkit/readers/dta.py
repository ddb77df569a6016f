"""Tables in .dta files, versions 105 to 119."""

import io
import warnings
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from reviewkit.refusals import Refusal

if TYPE_CHECKING:
    import pandas

_OLDEST, _NEWEST = 105, 119


@dataclass(frozen=True, slots=True)
class DtaParts:
    """What a .dta file holds."""

    frame: "pandas.DataFrame"
    labels: dict[str, str]
    value_labels: dict[str, dict[float, str]]
    dates: tuple[str, ...]
    remarks: tuple[str, ...]


_OPENING, _CLOSING = b"<stata_dta><header><release>", b"</stata_dta>"
"""Tags that the published format begins and ends with, from version 117 on."""


def parse_dta(data: bytes, name: str) -> DtaParts:
    """Read the bytes of a .dta file; coded columns keep their numbers, all 27 missing codes are missing."""
    _check_version(data, name)
    try:
        with warnings.catch_warnings(record=True) as said:
            warnings.simplefilter("always")
            parts = _parse(data)
        if data.startswith(_OPENING) and _CLOSING not in data[-200:]:
            raise ValueError("the end is missing")
    except Exception:  # the parser meets hostile bytes: whatever it raises means that the file is damaged
        raise Refusal(
            name,
            "the .dta file is cut short or damaged",
            f"a whole .dta file of version {_OLDEST} to {_NEWEST}",
            "Copy it again, or save it as .csv",
        ) from None
    if parts.frame.empty:
        raise Refusal(name, "the file holds no rows", "at least one row")
    odd = any(issubclass(each.category, UnicodeWarning) for each in said)
    remarks = (
        ("Some texts are not in the encoding the file promises; they were read as Western European.",) if odd else ()
    )
    return DtaParts(parts.frame, parts.labels, parts.value_labels, parts.dates, remarks)


def _check_version(data: bytes, name: str) -> None:
    found = _version(data)
    if found is None or not _OLDEST <= found <= _NEWEST:
        what = "this is not a .dta file" if found is None else f"the .dta file is of version {found}"
        raise Refusal(
            name, what, f".dta files of version {_OLDEST} to {_NEWEST}", "Save the table as .csv and try again"
        )


def _version(data: bytes) -> int | None:
    """The format version the first bytes give; None where they give none."""
    if data.startswith(_OPENING):
        digits = data[len(_OPENING) : len(_OPENING) + 3]
        return int(digits) if digits.isdigit() else None
    looks_old = len(data) > 60 and 100 <= data[0] <= 116 and data[1] in (1, 2) and data[2] == 1
    return data[0] if looks_old else None


def _parse(data: bytes) -> DtaParts:
    import pandas

    with pandas.io.stata.StataReader(
        io.BytesIO(data), convert_dates=False, convert_categoricals=False, preserve_dtypes=False
    ) as reader:
        frame = reader.read()  # type: ignore[attr-defined]  # public, but unknown to the stubs
        labels = {column: text.strip() for column, text in reader.variable_labels().items() if text.strip()}
        tables = reader.value_labels()
        names, attached, formats = (_listed(reader, each) for each in ("_varlist", "_lbllist", "_fmtlist"))
    coded = {
        column: {float(code): str(text) for code, text in tables[table].items()}
        for column, table in zip(names, attached, strict=True)
        if table in tables
    }
    if len(set(names)) != len(names):
        raise ValueError("two columns of one name")
    dates = tuple(column for column, shown in zip(names, formats, strict=True) if shown.startswith(("%t", "%d", "%-t")))
    return DtaParts(_with_missing_texts(frame), labels, coded, dates, ())


def _listed(reader: Any, attribute: str) -> list[str]:
    """A list the library reads but offers no public name for (a test notices should it go)."""
    return [str(each) for each in getattr(reader, attribute)]


def _with_missing_texts(frame: "pandas.DataFrame") -> "pandas.DataFrame":
    """The frame with integers as floats and empty texts as missing, as the format means them."""
    import pandas

    columns = {}
    for column in frame.columns:
        values = frame[column]
        if pandas.api.types.is_numeric_dtype(values):
            columns[column] = values.astype("float64")
        else:
            columns[column] = values.where(values != "")
    return pandas.DataFrame(columns)
