"""Percent readings of the focal terms in both models, or why there is none."""

from reviewkit.arithmetic import GEOMETRIC
from reviewkit.exhibit import Cell, Exhibit
from reviewkit.model_table import ModelTable


def percent_exhibit(submitted: ModelTable, alternative: ModelTable | None, focus: tuple[str, ...]) -> Exhibit:
    """One row a model and focal term."""
    rows = tuple(row for table in (submitted, alternative) if table for name in focus for row in _rows(table, name))
    read = any(row[2] is not None for row in rows)
    return Exhibit(
        "percent-readings",
        "The coefficients in percent",
        (
            "model",
            "term",
            "percent",
            "low percent",
            "high percent",
            "Kennedy percent",
            "minimum variance percent",
            "why none",
        ),
        rows,
        _sentence(rows) if read else "No focal coefficient has a reading in percent; the reason stands beside each.",
    )


def _sentence(rows: tuple[tuple[Cell, ...], ...]) -> str:
    told = (
        "A percent is 100 · (exp(b) - 1), its interval the transformed interval of b by the model's own errors; the "
        "intervals of a comparison are computed in another way and can be a little wider."
    )
    return f"{told} {GEOMETRIC}" if any(row[5] is not None for row in rows) else told


def _rows(table: ModelTable, name: str) -> list[tuple[Cell, ...]]:
    row = table.term(name)
    if row is None:
        return []
    found = row.readings
    low, high = found.interval or (None, None)
    model = f"least squares on {table.outcome}" if table.estimator == "ols" else f"Poisson, mean of {table.outcome}"
    return [
        (
            model,
            name,
            found.percent,
            low,
            high,
            found.kennedy_percent if table.estimator == "ols" else None,
            found.minimum_variance_percent,
            found.percent_why_not,
        )
    ]
