"""What the columns of a case's data hold: read once, then kept for the questions."""

import math
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Any

from reviewkit import casefolder, safekeeping
from reviewkit.casefolder import CaseFolder
from reviewkit.specification_parts import DataColumn, Trace, column_from

if TYPE_CHECKING:
    from reviewkit.readers.columns import ColumnDescription
    from reviewkit.readers.tables import TracedTransform


def describe(case: CaseFolder, path: Path) -> tuple[DataColumn, ...]:
    """What the columns of the data hold; read once, then kept."""
    sha256 = safekeeping.file_checksum(path)
    kept = casefolder.read_columns(case)
    if kept["sha256"] != sha256 or not kept["columns"]:
        from reviewkit.readers.columns import describe_columns
        from reviewkit.readers.tables import read_table

        table = read_table(path)
        columns = [asdict(_data_column(each)) for each in describe_columns(table)]
        casefolder.save_columns(case, columns, sha256, table.remarks)
    return known(case)


def known(case: CaseFolder) -> tuple[DataColumn, ...]:
    """The columns as they were described last; none before any data were read."""
    with casefolder.as_we_wrote_it(casefolder.COLUMNS):
        return tuple(column_from(each) for each in casefolder.read_columns(case)["columns"])


def remarks(case: CaseFolder) -> tuple[str, ...]:
    """What reading the data had to decide, such as new column names."""
    return tuple(casefolder.read_columns(case).get("remarks", ()))


def _data_column(described: "ColumnDescription") -> DataColumn:
    from reviewkit.wording import share

    filled = max(described.rows - described.missing, 1)
    parts = [described.label, str(described.kind)]
    parts += [f"{share(described.zeros / filled)} zeros"] if described.zeros and described.kind != "two-valued" else []
    parts += [f"{described.missing} missing"] if described.missing else []
    is_text = isinstance(described.smallest, str)
    detail = ", ".join([*filter(None, parts), *described.hints])
    trace = _trace(described.traced) if described.traced is not None else None
    return DataColumn(described.name, detail, is_text, described.is_number, str(described.kind), trace)


def _trace(found: "TracedTransform") -> Trace | None:
    """A trace as a specification's outcome; None where no specification can hold it."""
    if found.transform == "sqrt" and found.scale != 1:
        return None
    outcome: dict[str, Any] = {"column": found.source, "transform": found.transform, "zeros": "kept"}
    outcome |= {"constant": found.constant} if found.transform == "log_plus" else {}
    outcome |= {"scale": found.scale} if found.transform == "asinh" else {}
    if found.zeros == "dropped":
        outcome["zeros"] = "dropped"
    elif found.zeros == "replaced" and found.transform == "log" and found.replacement is not None:
        outcome |= {"zeros": "replaced", "replacement": math.exp(found.replacement) / found.scale}
    elif found.zeros == "replaced" or (found.zeros == "kept" and found.transform == "log"):
        return None
    return Trace(found.sentence(), outcome)
