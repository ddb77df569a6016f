"""A re-estimation for people: both models side by side, the comparison in words, what was left out and why."""

from rich.box import SIMPLE_HEAD
from rich.console import Console
from rich.table import Table
from rich.text import Text

from reviewkit.evidence.comparison import comparison_sentence
from reviewkit.evidence.models import MOST_TERMS, agreement_sentence
from reviewkit.model_table import ModelTable, TermRow, errors_text
from reviewkit.reestimation import Reestimation
from reviewkit.wording import clean, counted, estimate_with_error, interval, number, percent

_WIDEST = 100


def show_refit(found: Reestimation, plain: bool = False, console: Console | None = None) -> None:
    """Write a re-estimation to a terminal, or as lines without boxes and colour where `plain`."""
    to = console or (Console(no_color=True, highlight=False, width=_WIDEST) if plain else Console(highlight=False))
    focus = tuple(dict.fromkeys(each.term for each in found.comparison))
    _heading(to, f"{clean(found.data_name)}: {_models(found)}", plain)
    _table(to, found, focus, plain)
    printed_n = found.specification.printed_n
    if found.agreement or printed_n:
        _say(to, agreement_sentence(found.agreement, printed_n, found.submitted.observations))
    _heading(to, "Comparison", plain)
    for each in found.comparison:
        _say(to, f"• {clean(comparison_sentence(each))}")
        if each.weak:
            _say(to, f"  This conclusion is weak: {each.weak}.")
    _heading(to, "In percent", plain)
    for line in _percent_lines(found, focus):
        _say(to, line)
    _heading(to, "Rows", plain)
    _say(to, found.exhibits[0].sentence)
    for warning in found.warnings:
        _say(to, f"! {clean(warning)}")
    if found.alternative_why_not:
        _say(to, f"! No alternative: {clean(found.alternative_why_not)}")


def _say(to: Console, line: str) -> None:
    to.print(Text(line), soft_wrap=False)


def _heading(to: Console, line: str, plain: bool) -> None:
    to.print()
    to.print(Text(line, style="" if plain else "bold"))


def _models(found: Reestimation) -> str:
    table, other = found.submitted, found.alternative
    beside = f", those of the alternative {errors_text(other.errors)}" if other and other.errors != table.errors else ""
    how = "least squares" if table.estimator == "ols" else str(table.estimator)
    return (
        f"{how} on {clean(table.outcome)}, {number(table.observations)} observations, "
        f"errors {clean(errors_text(table.errors, table.clusters))}{beside}{_sample(found)}"
    )


def _sample(found: Reestimation) -> str:
    """Weights, exposure and sample condition, where there are any."""
    spec = found.specification
    parts = [f"{spec.weights.kind} weights {spec.weights.column}"] if spec.weights else []
    parts += [f"exposure {spec.exposure}"] if spec.exposure else []
    parts += [f"where {spec.where}"] if spec.where is not None else []
    return "".join(f", {clean(part)}" for part in parts)


def _table(to: Console, found: Reestimation, focus: tuple[str, ...], plain: bool) -> None:
    names = [*focus, *(row.name for row in found.submitted.terms if row.name not in focus)][:MOST_TERMS]
    shown = Table(box=None if plain else SIMPLE_HEAD, pad_edge=False, show_edge=False)
    shown.add_column("term", overflow="fold")
    models = ("submitted", "alternative (Poisson)") if found.alternative else ("submitted",)
    for model in models:
        shown.add_column(model, justify="right")
        shown.add_column("95 % interval", justify="right")
    for name in names:
        cells = _cells(found.submitted, name) + (_cells(found.alternative, name) if found.alternative else [])
        marked = Text(
            ("» " if name in focus else "  ") + clean(name), style="" if plain or name not in focus else "bold"
        )
        shown.add_row(marked, *(Text(cell) for cell in cells))
    to.print(shown)
    hidden = len(found.submitted.terms) - len(names)
    if hidden > 0:
        _say(to, f"{counted(hidden, 'further term')} not shown; --json has all.")


def _cells(table: ModelTable, name: str) -> list[str]:
    row = table.term(name)
    return ["–", "–"] if row is None else [estimate_with_error(row.estimate, row.std_error), interval(*row.interval)]


def _percent_lines(found: Reestimation, focus: tuple[str, ...]) -> list[str]:
    lines = []
    for label, table in (("submitted", found.submitted), ("alternative", found.alternative)):
        for name in focus if table else ():
            row = table.term(name) if table else None
            if row is not None:
                lines.append(f"{clean(name)}, {label}: {_reading(row)}")
    return lines


def _reading(row: TermRow) -> str:
    found = row.readings
    if found.percent is None or found.interval is None:
        return f"no reading in percent ({clean(found.percent_why_not or 'none exists')})"
    return f"{percent(found.percent)} ({interval(*found.interval, '%')})"
