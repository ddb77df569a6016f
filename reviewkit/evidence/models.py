"""Both models side by side, with how the submitted one agrees with the print."""

from reviewkit.exhibit import Cell, Exhibit
from reviewkit.model_table import Agreement, ModelTable, errors_text
from reviewkit.printed import Printed
from reviewkit.wording import counted, joined, number

MOST_TERMS = 40
"""Terms shown; more are counted."""


def models_exhibit(
    submitted: ModelTable,
    alternative: ModelTable | None,
    agreement: tuple[Agreement, ...],
    first: tuple[str, ...],
    printed_n: Printed | None = None,
) -> Exhibit:
    """Terms with estimates and errors of both models, those in `first` before the others."""
    names = [*first, *(row.name for row in submitted.terms if row.name not in first)]
    rows = tuple(_row(name, submitted, alternative) for name in names[:MOST_TERMS])
    left = len(names) - len(rows)
    return Exhibit(
        "models",
        "The submitted model and the alternative",
        ("term", "submitted", "submitted error", "alternative", "alternative error"),
        rows,
        _sentence(submitted, alternative, agreement, printed_n)
        + (f" {counted(left, 'further term')} not shown." if left > 0 else ""),
    )


def _row(name: str, submitted: ModelTable, alternative: ModelTable | None) -> tuple[Cell, ...]:
    cells: list[Cell] = [name]
    for table in (submitted, alternative):
        row = table.term(name) if table else None
        cells += [None, None] if row is None else [row.estimate, row.std_error]
    return tuple(cells)


def _sentence(
    submitted: ModelTable, alternative: ModelTable | None, agreement: tuple[Agreement, ...], printed_n: Printed | None
) -> str:
    errors = errors_text(submitted.errors, submitted.clusters)
    parts = [f"Submitted: least squares on {submitted.outcome}, {number(submitted.observations)} observations"]
    if submitted.estimator != "ols":
        parts = [
            f"Submitted: {submitted.estimator} on {submitted.outcome}, {number(submitted.observations)} observations"
        ]
    if alternative:
        parts.append(
            f"alternative: Poisson quasi-maximum likelihood on {alternative.outcome}, "
            f"{number(alternative.observations)} observations"
        )
    if alternative and alternative.errors != submitted.errors:
        errors += f", those of the alternative {errors_text(alternative.errors)}"
    agrees = agreement_sentence(agreement, printed_n, submitted.observations)
    return f"{'; '.join(parts)}; errors {errors}. {agrees}".strip()


def agreement_sentence(agreement: tuple[Agreement, ...], printed_n: Printed | None, observations: float) -> str:
    """How the refit meets the print, in one sentence; empty where nothing was printed."""
    met: list[str] = []
    missed: list[str] = []
    if printed_n is not None and not printed_n.agrees(observations):
        missed.append(f"number of observations (printed {printed_n.text})")
    for each in agreement:
        for what, holds in (("estimate", each.estimate), ("error", each.std_error)):
            if holds is not None:
                under = f" (met with errors {joined(each.error_under, 'or')})" if each.error_under else ""
                under = under if what == "error" else ""
                (met if holds else missed).append(f"{what} of {each.term}{under}")
    parts = [f"to the printed digits: {joined(met)}"] if met else []
    parts += [f"not to the printed digits: {joined(missed)}"] if missed else []
    if met:
        return f"Met {'; '.join(parts)}."
    return f"Not met to the printed digits: {joined(missed)}." if missed else ""
