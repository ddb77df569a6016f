"""A fitted model as its own table shows it: terms with errors by its convention, percents, and how prints agree."""

from collections.abc import Mapping
from contextlib import suppress
from dataclasses import dataclass, replace

from scipy import stats

from reviewkit.arithmetic import PercentReadings, no_percent, percent_readings
from reviewkit.design_matrix import CONSTANT, Design, DesignColumn, Level, part_columns
from reviewkit.estimators.covariance import Inference, infer
from reviewkit.estimators.fit import Fit
from reviewkit.expressions import Apply, Column, Node
from reviewkit.refusals import NotEstimable, Refusal
from reviewkit.specification import (
    ErrorKind,
    Errors,
    Estimator,
    Outcome,
    PerExposure,
    PrintedTerm,
    Specification,
    Transform,
    Zeros,
)
from reviewkit.wording import number, share


@dataclass(frozen=True, slots=True)
class TermRow:
    """One line of a model's table."""

    name: str
    estimate: float
    std_error: float
    statistic: float
    p: float
    interval: tuple[float, float]
    readings: PercentReadings


@dataclass(frozen=True, slots=True)
class ModelTable:
    """A model with what its table tells."""

    estimator: Estimator
    outcome: str
    """The outcome as regressed."""
    outcome_column: str
    observations: float
    dropped: tuple[tuple[str, int], ...]
    errors: Errors
    clusters: int
    df: float | None
    factor: float
    terms: tuple[TermRow, ...]
    collinear: tuple[str, ...]
    fit: Fit
    design: Design

    def term(self, name: str) -> TermRow | None:
        """The line of that name."""
        return next((row for row in self.terms if row.name == name), None)


@dataclass(frozen=True, slots=True)
class Agreement:
    """Whether a printed term is met to its digits; None where it was not printed."""

    term: str
    estimate: bool | None
    std_error: bool | None
    error_under: tuple[str, ...] = ()
    """Other common conventions under which the printed error is met, where it is not under the stated one."""


def model_table(
    spec: Specification, estimator: Estimator, fit: Fit, design: Design, left_out: tuple[str, ...]
) -> ModelTable:
    """The table of a fit under the specification's errors; `left_out` names collinear columns."""
    errors = spec.errors
    found = infer(fit, errors)
    rows = tuple(_term_row(place, spec, estimator, (fit, found, design)) for place in range(len(design.names)))
    return ModelTable(
        estimator,
        outcome_text(spec.outcome, spec.exposure) if estimator is Estimator.OLS else spec.outcome.column,
        spec.outcome.column,
        design.observations,
        design.dropped,
        errors,
        design.cluster_count,
        found.degrees_of_freedom,
        found.factor,
        rows,
        left_out,
        fit,
        design,
    )


def _term_row(place: int, spec: Specification, estimator: Estimator, made: tuple[Fit, Inference, Design]) -> TermRow:
    fit, found, design = made
    b, se = float(fit.coefficients[place]), float(found.std_errors[place])
    df = found.degrees_of_freedom
    tail = stats.norm if df is None else stats.t(df)
    half = float(tail.ppf(0.975)) * se
    statistic = b / se if se > 0 else float("nan")
    why = percent_why_not(spec.outcome, estimator, design.columns_of_x[place], design)
    classical = spec.errors.kind is ErrorKind.CLASSICAL and estimator is Estimator.OLS
    if why is None and not (0 < se <= 100 and abs(b) <= 100):
        why = "the estimate or its error is out of range"
    readings = no_percent(b, why) if why else _readings(b, se, df, fit.degrees_of_freedom if classical else None)
    return TermRow(
        design.names[place], b, se, statistic, float(2 * tail.sf(abs(statistic))), (b - half, b + half), readings
    )


def _readings(b: float, se: float, df: float | None, classical_df: float | None) -> PercentReadings:
    """Percents with the interval of the model's own convention; minimum variance under classical errors only."""
    found = percent_readings(b, se, df)
    if classical_df is None:
        return replace(found, minimum_variance_percent=None)
    return found


def percent_why_not(outcome: Outcome, estimator: Estimator, column: DesignColumn, design: Design) -> str | None:
    """Why a coefficient has no reading in percent; None where it has one."""
    if estimator is Estimator.OLS and outcome.transform is not Transform.LOG:
        return _transform_why_not(outcome, design)
    if estimator is Estimator.OLS and outcome.zeros is Zeros.REPLACED:
        return f"zeros were replaced by {number(outcome.replacement)} before the log, {_zeros(design)}"
    if column.name == CONSTANT:
        return "the constant has no change to read"
    part = column.parts[0]
    if len(column.parts) > 1 or not isinstance(part, Level | Column):
        logged = len(column.parts) == 1 and _is_logged(part)
        return "the covariate is in logs: the coefficient is an elasticity" if logged else "not a covariate by itself"
    own = part_columns(part)[0]
    holders = [each for each in design.columns_of_x if each.name != column.name and _uses(each, own)]
    others = [each.name for each in holders if not (isinstance(part, Level) and _is_class(each))]
    return f"{own} also stands in {others[0]}" if others else None


def _is_logged(part: Node | Level) -> bool:
    return isinstance(part, Apply) and part.function == "log" and isinstance(part.argument, Column)


def _is_class(column: DesignColumn) -> bool:
    return len(column.parts) == 1 and isinstance(column.parts[0], Level)


def _transform_why_not(outcome: Outcome, design: Design) -> str:
    match outcome.transform:
        case Transform.LOG_PLUS:
            return f"constant added, {_zeros(design)}"
        case Transform.ASINH:
            return f"inverse hyperbolic sine, {_zeros(design)}"
        case Transform.NONE:
            return "the outcome is in its own unit"
    return f"a {outcome.transform} is not read in percent"


def _zeros(design: Design) -> str:
    zeros = design.share(design.y == 0)
    return f"{share(zeros)} zeros" if zeros else "no zeros"


def _uses(column: DesignColumn, name: str) -> bool:
    return any(name in part_columns(part) for part in column.parts)


_OUTCOME_TEXTS: Mapping[Transform, str] = {
    Transform.NONE: "{}",
    Transform.LOG: "log({})",
    Transform.ASINH: "asinh({})",
    Transform.SQRT: "sqrt({})",
}


def outcome_text(outcome: Outcome, exposure: str | None = None) -> str:
    """The outcome as regressed, such as `log(sales + 1)`."""
    per, y = outcome.per_exposure, str(Column(outcome.column))
    if per is PerExposure.BEFORE_CONSTANT:
        y = f"{y} / {exposure}"
    if outcome.zeros is Zeros.REPLACED:
        y = f"max({y}, {outcome.replacement:g})"
    if outcome.transform is Transform.ASINH and outcome.scale != 1:
        y = f"{outcome.scale:g} * {y}"
    inner = f"{y} + {outcome.constant:g}" if outcome.transform is Transform.LOG_PLUS else y
    if per is PerExposure.AFTER_CONSTANT:
        inner = f"({inner}) / {exposure}"
    if outcome.transform is Transform.LOG_PLUS:
        return f"log({inner})"
    return _OUTCOME_TEXTS.get(outcome.transform, outcome.transform + "({})").format(inner)


_OTHER_CONVENTIONS = (
    Errors(ErrorKind.CLASSICAL, ""),
    Errors(ErrorKind.ROBUST, "HC1"),
    Errors(ErrorKind.ROBUST, "HC0"),
    Errors(ErrorKind.ROBUST, "HC2"),
    Errors(ErrorKind.ROBUST, "HC3"),
    Errors(ErrorKind.ROBUST, "HC0", small_sample="n/(n-1)"),
)


def named_prints(spec: Specification, names: tuple[str, ...]) -> tuple[tuple[str, PrintedTerm], ...]:
    """The printed terms under the names of the design; a factor with one class besides its base needs no class.

    Raises:
        Refusal: A printed term is not among the model's terms.
    """
    found = []
    for name, printed in spec.printed_terms:
        meant = [each for each in names if each == name] or [each for each in names if _is_class_of(each, name)]
        if len(meant) != 1:
            allowed = ", ".join(meant or names[:12])
            raise Refusal(f"printed.terms.{name}", "it is not one of the model's terms", allowed, "Check its spelling")
        found.append((meant[0], printed))
    return tuple(found)


def _is_class_of(name: str, factor: str) -> bool:
    """Whether a column is that of one class of a factor, and no product with it."""
    return name.startswith(f"{factor}[") and name.endswith("]") and "]:" not in name


def agreements(spec: Specification, table: ModelTable) -> tuple[Agreement, ...]:
    """How each printed term agrees with the refit, and under which other convention a printed error would."""
    return tuple(_agreement(name, printed, spec, table) for name, printed in spec.printed_terms)


def reproduced(spec: Specification, agreement: tuple[Agreement, ...], table: ModelTable) -> str | None:
    """yes, partly or no: whether estimates, errors and n are met as printed; None where nothing was printed."""
    met = [holds for each in agreement for holds in (each.estimate, each.std_error) if holds is not None]
    met += [] if spec.printed_n is None else [spec.printed_n.agrees(table.observations)]
    if not met:
        return None
    return "yes" if all(met) else "partly" if any(met) else "no"


def _agreement(name: str, printed: PrintedTerm, spec: Specification, table: ModelTable) -> Agreement:
    row = table.term(name)
    assert row is not None  # noqa: S101
    estimate = printed.estimate.agrees(row.estimate) if printed.estimate else None
    error = printed.std_error.agrees(row.std_error) if printed.std_error else None
    under = _met_under(printed, table.design.names.index(name), spec, table) if error is False else ()
    return Agreement(name, estimate, error, under)


def _met_under(printed: PrintedTerm, place: int, spec: Specification, table: ModelTable) -> tuple[str, ...]:
    by = spec.errors.by
    clustered = tuple(
        Errors(ErrorKind.CLUSTER, type_, by, factor)
        for type_, factor in (("CR1", "default"), ("CR0", "default"), ("CR0", "G/(G-1)"))
        if by
    )
    met = []
    for errors in (*_OTHER_CONVENTIONS, *clustered):
        with suppress(NotEstimable):
            error = float(infer(table.fit, errors).std_errors[place])
            if printed.std_error and printed.std_error.agrees(error):
                met.append(errors_text(errors))
    return tuple(met)


def errors_text(errors: Errors, clusters: int = 0) -> str:
    """The errors in words, such as `clustered by village (CR1)`."""
    factor = "" if errors.small_sample == "default" else f", factor {errors.small_sample}"
    match errors.kind:
        case ErrorKind.CLASSICAL:
            return "classical"
        case ErrorKind.ROBUST:
            return f"heteroskedasticity-robust ({errors.type}{factor})"
    count = f", {clusters:,} clusters" if clusters else ""
    return f"clustered by {' and '.join(errors.by)} ({errors.type}{factor}{count})"
