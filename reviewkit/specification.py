"""One regression as data: it names columns and holds no code."""

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from pathlib import Path
from typing import Any, TypeVar

from reviewkit import FORMAT
from reviewkit.expressions import Factor, Node, Term, read_row_condition, read_terms
from reviewkit.printed import Printed, read_printed
from reviewkit.refusals import Refusal

KEYS = {
    "": ("format", "name", "data", "outcome", "model", "errors", "alternative", "printed"),
    "outcome": ("column", "transform", "constant", "scale", "zeros", "replacement", "per_exposure"),
    "model": ("estimator", "terms", "absorb", "focus", "exposure", "where", "weights"),
    "model.weights": ("column", "kind"),
    "errors": ("kind", "type", "by", "small_sample"),
    "alternative": ("estimator",),
    "printed": ("n", "terms"),
    "printed.terms.…": ("estimate", "std_error"),
}
"""Every key that a specification file may hold, by table."""


class Transform(StrEnum):
    """What is done to the outcome before the regression."""

    NONE = "none"
    LOG = "log"
    LOG_PLUS = "log_plus"
    ASINH = "asinh"
    SQRT = "sqrt"
    LOGIT = "logit"
    ARCSINE = "arcsine"
    BOX_COX = "box_cox"
    RANK = "rank"
    STANDARDISED = "standardised"


class Zeros(StrEnum):
    """What is done with zeros of the outcome."""

    KEPT = "kept"
    DROPPED = "dropped"
    REPLACED = "replaced"


class PerExposure(StrEnum):
    """Whether a transformed outcome is divided by the exposure, and where the constant is added."""

    NO = "no"
    BEFORE_CONSTANT = "before_constant"  # log(y / exposure + c)
    AFTER_CONSTANT = "after_constant"  # log((y + c) / exposure)


class Estimator(StrEnum):
    """How a model is fitted."""

    OLS = "ols"
    POISSON = "poisson"
    FRACTIONAL_LOGIT = "fractional_logit"
    NEGBIN = "negbin"
    GAMMA = "gamma"
    BETA = "beta"
    LOGIT = "logit"
    PROBIT = "probit"


class WeightKind(StrEnum):
    """What a weight stands for."""

    FREQUENCY = "frequency"
    ANALYTIC = "analytic"
    PROBABILITY = "probability"


class ErrorKind(StrEnum):
    """Kind of the standard errors."""

    CLASSICAL = "classical"
    ROBUST = "robust"
    CLUSTER = "cluster"


ERROR_TYPES: Mapping[ErrorKind, tuple[str, ...]] = {
    ErrorKind.CLASSICAL: ("",),
    ErrorKind.ROBUST: ("HC1", "HC0", "HC2", "HC3"),
    ErrorKind.CLUSTER: ("CR1", "CR0"),
}
"""Types by kind; the first is the default."""

_FACTORS = ("default", "none")
SMALL_SAMPLE = {"classical": _FACTORS[:1], "robust": (*_FACTORS, "n/(n-1)"), "cluster": (*_FACTORS, "G/(G-1)")}
"""Conventions for the factor on the covariance by kind; `default` is that of the type."""


@dataclass(frozen=True, slots=True)
class Outcome:
    """The dependent variable and what is done to it."""

    column: str
    transform: Transform = Transform.NONE
    constant: float = 1.0
    scale: float = 1.0
    zeros: Zeros = Zeros.KEPT
    replacement: float | None = None
    per_exposure: PerExposure = PerExposure.NO


@dataclass(frozen=True, slots=True)
class Weights:
    """A column of weights of observations."""

    column: str
    kind: WeightKind


@dataclass(frozen=True, slots=True)
class Errors:
    """How standard errors are computed."""

    kind: ErrorKind = ErrorKind.ROBUST
    type: str = "HC1"
    by: tuple[str, ...] = ()
    small_sample: str = "default"


@dataclass(frozen=True, slots=True)
class PrintedTerm:
    """What the manuscript prints for one term."""

    estimate: Printed | None = None
    std_error: Printed | None = None


@dataclass(frozen=True, slots=True)
class Specification:
    """A regression as submitted, and the alternative if one is named."""

    data: str
    outcome: Outcome
    terms: tuple[Term, ...]
    name: str = "main"
    estimator: Estimator = Estimator.OLS
    absorb: tuple[str, ...] = ()
    focus: tuple[str, ...] = ()
    exposure: str | None = None
    where: Node | None = None
    weights: Weights | None = None
    errors: Errors = Errors()
    alternative: Estimator | None = None
    printed_n: Printed | None = None
    printed_terms: tuple[tuple[str, PrintedTerm], ...] = ()


def read_specification(path: Path) -> Specification:
    """Read a specification file (TOML).

    Raises:
        Refusal: The file cannot be read, or a key or value is not one that is allowed.
    """
    try:
        text = path.read_text("utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        raise Refusal(path.name, "the file cannot be read as text", "a specification in UTF-8") from error
    try:
        values = tomllib.loads(text)
    except (ValueError, RecursionError) as error:  # ValueError: also a whole number of too many digits
        raise Refusal(path.name, f"not valid TOML ({error})", remedy="Correct that line") from error
    return specification_from(values, path.name)


def specification_from(values: Mapping[str, Any], where: str) -> Specification:
    """Build a specification from the tables of a specification file; `where` names it in messages."""
    _check_keys(values, where)
    table = _Table(values, where, "")
    if values.get("format", FORMAT) != FORMAT:
        raise Refusal(where, f"format {values['format']} is not known", str(FORMAT), "Use a newer ReviewKit")
    model = table.table("model")
    terms = tuple(
        dict.fromkeys(term for text in model.texts("terms") for term in read_terms(text, f"{where}, model.terms"))
    )
    row_condition = model.text("where")
    alternative = table.table("alternative").choice("estimator", Estimator)
    printed = table.table("printed")
    _check_exposure(table.table("outcome"), model)
    return Specification(
        data=table.required("data"),
        name=table.text("name") or "main",
        outcome=_outcome(table.table("outcome")),
        terms=terms,
        estimator=model.choice("estimator", Estimator) or Estimator.OLS,
        absorb=model.texts("absorb"),
        focus=tuple(_focus(text, where) for text in model.texts("focus")),
        exposure=model.text("exposure"),
        where=read_row_condition(row_condition, f"{where}, model.where") if row_condition else None,
        weights=_weights(model.table("weights")),
        errors=_errors(table.table("errors")),
        alternative=alternative,
        printed_n=printed.printed("n"),
        printed_terms=_printed_terms(printed.table("terms")),
    )


def specification_text(spec: Specification) -> str:
    """The specification as TOML, one key a line, for reading and editing."""
    lines = [f"format = {FORMAT}", f"name = {_quoted(spec.name)}", f"data = {_quoted(spec.data)}", ""]
    lines += ["[outcome]", f"column = {_quoted(spec.outcome.column)}", f"transform = {_quoted(spec.outcome.transform)}"]
    if spec.outcome.transform is Transform.LOG_PLUS:
        lines.append(f"constant = {spec.outcome.constant!r}")
    if spec.outcome.transform is Transform.ASINH:
        lines.append(f"scale = {spec.outcome.scale!r}")
    lines.append(f"zeros = {_quoted(spec.outcome.zeros)}")
    if spec.outcome.replacement is not None:
        lines.append(f"replacement = {spec.outcome.replacement!r}")
    if spec.exposure:
        lines.append(f"per_exposure = {_quoted(spec.outcome.per_exposure)}")
    lines += ["", "[model]", f"estimator = {_quoted(spec.estimator)}", f"terms = {_listed(map(str, spec.terms))}"]
    lines += [f"{key} = {_listed(names)}" for key, names in (("absorb", spec.absorb), ("focus", spec.focus)) if names]
    if spec.exposure:
        lines.append(f"exposure = {_quoted(spec.exposure)}")
    if spec.where is not None:
        lines.append(f"where = {_quoted(str(spec.where))}")
    if spec.weights:
        lines.append(f"weights = {{ column = {_quoted(spec.weights.column)}, kind = {_quoted(spec.weights.kind)} }}")
    return "\n".join([*lines, "", *_error_lines(spec.errors), *_alternative_lines(spec), *_printed_lines(spec)]) + "\n"


def _error_lines(errors: Errors) -> list[str]:
    lines = ["[errors]", f"kind = {_quoted(errors.kind)}"]
    lines += [f"type = {_quoted(errors.type)}"] if errors.type else []
    lines += [f"by = {_listed(errors.by)}"] if errors.by else []
    lines += [f"small_sample = {_quoted(errors.small_sample)}"] if errors.small_sample != "default" else []
    return lines


def _alternative_lines(spec: Specification) -> list[str]:
    return ["", "[alternative]", f"estimator = {_quoted(spec.alternative)}"] if spec.alternative else []


def _printed_lines(spec: Specification) -> list[str]:
    lines = ["", "[printed]"] if spec.printed_n or spec.printed_terms else []
    lines += [f"n = {_quoted(spec.printed_n.text)}"] if spec.printed_n else []
    lines += ["", "[printed.terms]"] if spec.printed_terms else []
    for name, term in spec.printed_terms:
        shown = (("estimate", term.estimate), ("std_error", term.std_error))
        inner = ", ".join(f"{key} = {_quoted(figure.text)}" for key, figure in shown if figure)
        lines.append(f"{_quoted(name)} = {{ {inner} }}")
    return lines


def _quoted(text: str) -> str:
    plain = "".join(each if each >= " " and each != "\x7f" else " " for each in text)
    return '"' + plain.replace("\\", "\\\\").replace('"', '\\"') + '"'


def _listed(texts: Any) -> str:
    return "[" + ", ".join(_quoted(text) for text in texts) + "]"


_Choice = TypeVar("_Choice", bound=StrEnum)


class _Table:
    """One table of the file with its name, for messages that say where."""

    def __init__(self, values: Mapping[str, Any], where: str, path: str) -> None:
        self.values, self.file, self.path = values, where, path

    def place(self, key: str) -> str:
        return f"{self.file}, {self.path + '.' if self.path else ''}{key}"

    def table(self, key: str) -> "_Table":
        value = self.values.get(key, {})
        if not isinstance(value, Mapping):
            raise Refusal(self.place(key), "a single value stands where a table belongs", f"[{key}] with its keys")
        return _Table(value, self.file, f"{self.path}.{key}" if self.path else key)

    def text(self, key: str) -> str | None:
        value = self.values.get(key)
        if value is None or (isinstance(value, str) and value.strip()):
            return value
        raise Refusal(self.place(key), f"`{value}` is not a text", "a text in quotes")

    def required(self, key: str) -> str:
        value = self.text(key)
        if value is None:
            raise Refusal(self.place(key), "this is missing", "a text in quotes", f"Add {key} = …")
        return value

    def texts(self, key: str) -> tuple[str, ...]:
        value = self.values.get(key, [])
        listed = [value] if isinstance(value, str) else value
        if isinstance(listed, list) and all(isinstance(each, str) and each.strip() for each in listed):
            return tuple(listed)
        raise Refusal(self.place(key), "this is not a list of texts", 'a list such as ["a", "b"]')

    def positive(self, key: str) -> float | None:
        value = self.values.get(key)
        if value is None:
            return None
        if isinstance(value, bool) or not isinstance(value, int | float) or not 0 < value < 1e300:
            raise Refusal(self.place(key), f"`{str(value)[:40]}` is not possible here", "a number above 0")
        return float(value)

    def choice(self, key: str, choices: type[_Choice]) -> _Choice | None:
        value = self.text(key)
        if value is None:
            return None
        if value not in tuple(choices):
            raise Refusal(self.place(key), f"`{value}` is not known", ", ".join(choices))
        return choices(value)

    def printed(self, key: str) -> Printed | None:
        return read_printed(str(self.values[key]), self.place(key)) if key in self.values else None


def _check_keys(values: Mapping[str, Any], where: str) -> None:
    model = values.get("model", {})
    tables = [("", values), ("model.weights", model.get("weights") if isinstance(model, Mapping) else None)]
    tables += [(key, values.get(key)) for key in ("outcome", "model", "errors", "alternative", "printed")]
    for name, table in tables:
        unknown = [key for key in table if key not in KEYS[name]] if isinstance(table, Mapping) else []
        if unknown:
            place = f"{where}, {name + '.' if name else ''}{unknown[0]}"
            raise Refusal(place, "this key is not known", ", ".join(KEYS[name]), "Check its spelling")


def _outcome(table: _Table) -> Outcome:
    zeros = table.choice("zeros", Zeros) or Zeros.KEPT
    replacement = table.positive("replacement")
    if (zeros is Zeros.REPLACED) != (replacement is not None):
        raise Refusal(table.place("replacement"), 'it goes with zeros = "replaced"', "both or neither")
    return Outcome(
        column=table.required("column"),
        transform=table.choice("transform", Transform) or Transform.NONE,
        constant=table.positive("constant") or 1.0,
        scale=table.positive("scale") or 1.0,
        zeros=zeros,
        replacement=replacement,
        per_exposure=table.choice("per_exposure", PerExposure) or PerExposure.NO,
    )


def _check_exposure(outcome: _Table, model: _Table) -> None:
    least_squares = model.choice("estimator", Estimator) in (None, Estimator.OLS)
    if not model.text("exposure") and outcome.text("per_exposure") not in (None, PerExposure.NO):
        raise Refusal(outcome.place("per_exposure"), "no exposure is named", "no", "Add exposure = … to [model]")
    if model.text("exposure") and least_squares and "per_exposure" not in outcome.values:
        raise Refusal(
            outcome.place("per_exposure"),
            "with an exposure and least squares this must be said",
            ", ".join(PerExposure),
            "Say whether the outcome was divided by the exposure, and whether before or after a constant was added",
        )


def _weights(table: _Table) -> Weights | None:
    if not table.values:
        return None
    kind = table.choice("kind", WeightKind)
    if kind is None:
        raise Refusal(table.place("kind"), "this is missing", ", ".join(WeightKind), "Say what the weight stands for")
    return Weights(table.required("column"), kind)


def _errors(table: _Table) -> Errors:
    kind = table.choice("kind", ErrorKind) or ErrorKind.ROBUST
    type_ = table.text("type") or ERROR_TYPES[kind][0]
    by = table.texts("by")
    if (kind is ErrorKind.CLUSTER) != bool(by):
        raise Refusal(table.place("by"), "columns of clusters go with clustered errors", "both or neither")
    small_sample = table.text("small_sample") or "default"
    for key, value, allowed in (("type", type_, ERROR_TYPES[kind]), ("small_sample", small_sample, SMALL_SAMPLE[kind])):
        if value not in allowed:
            raise Refusal(table.place(key), f"`{value}` does not go with {kind} errors", ", ".join(allowed))
    return Errors(kind, type_, by, small_sample)


def _focus(text: str, where: str) -> str:
    terms = read_terms(text, f"{where}, model.focus")
    if len(terms) != 1:
        raise Refusal(f"{where}, model.focus", f"`{text}` stands for several terms", "one term an entry")
    return str(Term(tuple(Factor(p.column) if isinstance(p, Factor) else p for p in terms[0].parts)))


def _printed_terms(table: _Table) -> tuple[tuple[str, PrintedTerm], ...]:
    found = []
    for name in table.values:
        term = table.table(name)
        unknown = [key for key in term.values if key not in KEYS["printed.terms.…"]]
        if unknown:
            raise Refusal(term.place(unknown[0]), "this key is not known", ", ".join(KEYS["printed.terms.…"]))
        found.append((name, PrintedTerm(term.printed("estimate"), term.printed("std_error"))))
    return tuple(found)
