"""The object that `refit --json` gives: contract of keys in DEVELOPERS.md, schema in tests/schemas."""

import math
from collections.abc import Iterable, Sequence
from typing import Any

from reviewkit import FORMAT, __version__
from reviewkit.comparison import LEVEL, MATERIAL_SHARE, Comparison
from reviewkit.exhibit import Cell, Exhibit
from reviewkit.model_table import Agreement, ModelTable, TermRow
from reviewkit.reestimation import Reestimation
from reviewkit.rules import Finding


def refit_object(estimated: Sequence[Reestimation], findings: Iterable[Finding]) -> dict[str, Any]:
    """All that a re-estimation found as plain data; what does not exist is null beside its reason."""
    first = estimated[0]
    return {
        "format": FORMAT,
        "reviewkit": __version__,
        "level": LEVEL,
        "material_percent": 100 * MATERIAL_SHARE,
        "data": {"name": first.data_name, "sha256": first.data_sha256, "rows": first.data_rows},
        "models": [_model(each) for each in estimated],
        "findings": [
            {
                "rule": each.rule.name,
                "subject": each.subject,
                "state": str(each.state),
                "importance": str(each.importance),
            }
            for each in findings
        ],
    }


def _model(each: Reestimation) -> dict[str, Any]:
    return {
        "name": each.name,
        "submitted": {**_table(each.submitted), "printed": {found.term: _agreement(found) for found in each.agreement}},
        "alternative": _table(each.alternative) if each.alternative else None,
        "alternative_why_not": each.alternative_why_not,
        "comparison": [_comparison(one) for one in each.comparison],
        "exhibits": [_exhibit(one) for one in each.exhibits],
        "warnings": list(each.warnings),
    }


def _table(table: ModelTable) -> dict[str, Any]:
    return {
        "estimator": str(table.estimator),
        "outcome": table.outcome,
        "n": round(table.observations),
        "dropped": [{"why": why, "rows": rows} for why, rows in table.dropped],
        "errors": {
            "kind": str(table.errors.kind),
            "type": table.errors.type or None,
            "clusters": table.clusters or None,
            "by": list(table.errors.by),
            "degrees_of_freedom": _number(table.df),
            "factor": _number(table.factor),
        },
        "terms": [_term(row) for row in table.terms],
    }


def _term(row: TermRow) -> dict[str, Any]:
    found = row.readings
    return {
        "name": row.name,
        "estimate": _number(row.estimate),
        "std_error": _number(row.std_error),
        "statistic": _number(row.statistic),
        "p": _number(row.p),
        "interval": _ends(row.interval),
        "percent": _number(found.percent),
        "percent_interval": _ends(found.interval),
        "percent_why_not": found.percent_why_not,
    }


def _agreement(found: Agreement) -> dict[str, Any]:
    return {
        "estimate_agrees": found.estimate,
        "std_error_agrees": found.std_error,
        "std_error_agrees_under": " or ".join(found.error_under) or None,
    }


def _comparison(one: Comparison) -> dict[str, Any]:
    return {
        "term": one.term,
        "kind": str(one.kind),
        "scale": str(one.scale) if one.scale else None,
        "rows": one.rows,
        "submitted": _number(one.submitted),
        "submitted_interval": _ends(one.submitted_interval),
        "alternative": _number(one.alternative),
        "alternative_interval": _ends(one.alternative_interval),
        "difference": _number(one.difference),
        "std_error": _number(one.std_error),
        "interval": _ends(one.interval),
        "relative_difference_percent": _number(one.relative_percent),
        "relative_interval_percent": _ends(one.relative_interval),
        "conclusion": str(one.conclusion) if one.conclusion else None,
        "difference_excludes_zero": one.excludes_zero,
        "agree_within_percent": _number(one.agree_within_percent),
        "differ_by_at_least_percent": _number(one.differ_by_at_least_percent),
        "printed_inside_alternative": one.printed_inside,
        "sign_turns": one.sign_turns,
        "error_ratio": _number(one.error_ratio),
        "method": one.method,
        "effective": _number(one.effective),
        "weak": one.weak,
        "why": one.why,
    }


def _exhibit(one: Exhibit) -> dict[str, Any]:
    return {
        "name": one.name,
        "title": one.title,
        "columns": list(one.columns),
        "rows": [[_cell(cell) for cell in row] for row in one.rows],
        "figure": None,
        "sentence": one.sentence,
    }


def _cell(cell: Cell) -> Cell:
    return _number(cell) if isinstance(cell, float) else cell


def _number(value: float | None) -> float | None:
    """The number, or null where it is none: JSON knows neither nan nor infinity."""
    return float(value) if value is not None and math.isfinite(value) else None


def _ends(ends: tuple[float, float] | None) -> list[float | None] | None:
    return None if ends is None else [_number(end) for end in ends]
