"""Builds a specification from answers: which question comes next, and the tables that the answers make."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from reviewkit.answers import SPECIFYING
from reviewkit.expressions import columns_of, read_terms
from reviewkit.facts import Value
from reviewkit.printed import Printed
from reviewkit.prompts import Choice, Form, Prompt
from reviewkit.refusals import Refusal
from reviewkit.specification import ERROR_TYPES, ErrorKind, Transform, specification_from

MODEL = "model:main"
A_TERM_TO_COME = "x"
"""Stands for the terms while only what comes before them was answered."""


@dataclass(frozen=True, slots=True)
class DataColumn:
    """What a list of columns shows of one of them."""

    name: str
    detail: str = ""
    is_text: bool = False
    may_be_outcome: bool = True


@dataclass(frozen=True, slots=True)
class Specifying:
    """How far a specification has come."""

    answers: Mapping[str, Value]
    """By short name: `data`, `outcome`, …"""
    understood: Mapping[str, Any]
    """Tables of a specification that a pasted line gave."""
    columns: tuple[DataColumn, ...] = ()
    files: tuple[str, ...] = ()
    """Data files that the case was given."""

    def has(self, table: str, key: str) -> bool:
        """Whether the pasted line settled that key."""
        return key in self.understood.get(table, {})

    def part(self, table: str, key: str) -> Any:
        """What the pasted line says of that key."""
        return self.understood.get(table, {}).get(key)

    def outcome_has(self, key: str) -> bool:
        """Whether the line settled that key of the outcome; not where another transform was chosen since."""
        return self.has("outcome", key) and "transform" not in self.answers

    @property
    def without_data(self) -> bool:
        """Whether there is no data file, so that nothing can be re-estimated."""
        return self.answers.get("data") == ""


TRANSFORMS = {
    Transform.LOG_PLUS: "log of the outcome plus a constant",
    Transform.LOG: "log of the outcome",
    Transform.ASINH: "inverse hyperbolic sine",
    Transform.SQRT: "square root",
    Transform.NONE: "none: the outcome as it stands",
}
_ERRORS = {
    ErrorKind.ROBUST: "robust to unequal variance",
    ErrorKind.CLUSTER: "clustered",
    ErrorKind.CLASSICAL: "classical (the default of most programs)",
}
_ZEROS = {"kept": "kept, as they stand", "dropped": "left out", "replaced": "replaced by a small number"}


def next_step(state: Specifying) -> Prompt | None:
    """The next question about the model, or None where the specification is complete or there are no data."""
    if state.without_data:
        return None
    for name, step in _STEPS.items():
        if name not in state.answers:
            prompt = step(state)
            if prompt is not None:
                return prompt
    return None


def specification_values(state: Specifying) -> dict[str, Any]:
    """The tables of the specification file, as far as they are known."""
    model = {**state.understood.get("model", {}), **_said(state, "where")}
    model |= {
        key: [_as_term(state, each) for each in _several(state, key)]
        for key in ("terms", "focus")
        if key in state.answers
    }
    outcome = {
        **state.understood.get("outcome", {}),
        **_said(state, "transform", "constant", "scale", "zeros", "replacement"),
    }
    outcome |= {"column": str(state.answers["outcome"])} if "outcome" in state.answers else {}
    errors = {**state.understood.get("errors", {}), **_errors(state)}
    if errors.get("kind") == ErrorKind.CLUSTER and not errors.get("by"):
        del errors["kind"]  # until the next answer names the column
    if outcome.get("zeros") == "replaced" and "replacement" not in outcome:
        del outcome["zeros"]
    values: dict[str, Any] = {
        "data": state.answers.get("data", ""),
        "outcome": outcome,
        "model": model,
        "errors": errors,
    }
    printed = _printed(state, model)
    others = {key: each for key, each in state.understood.items() if key not in values and key != "format"}
    return {**others, **values, **({"printed": printed} if printed else {})}


def problem_with(state: Specifying) -> str:
    """Why the answers so far make no specification; empty where they do, or where too much is still missing."""
    values = specification_values(state)
    if not values["outcome"].get("column"):
        return ""
    model = values["model"] if values["model"].get("terms") else {**values["model"], "terms": [A_TERM_TO_COME]}
    try:
        specification_from({**values, "data": values["data"] or "data.csv", "model": model}, "The answer")
    except Refusal as refusal:
        return refusal.message()
    return ""


# --- one function a question --------------------------------------------------------------------------------------


def _data(state: Specifying) -> Prompt:
    files = tuple(Choice(each, each.rpartition("/")[2]) for each in state.files)
    return _prompt(
        "data",
        "Which data file was the model fitted on?",
        Form.COLUMN if files else Form.TEXT,
        choices=files,
        default=state.files[0] if len(state.files) == 1 else "",
        default_why="" if files else "without data",
        hint="a path to a .csv, .tsv or .dta file"
        + ("; `s` where there are no data" if files else "; Enter where there are none"),
        explains="With the data the printed numbers can be repeated. Nothing of the file leaves this computer.",
    )


def _line(state: Specifying) -> Prompt:
    return _prompt(
        "line",
        "Paste the one line of the script that fits the model, or press Enter to choose from lists.",
        Form.TEXT,
        default="",
        default_why="choose from lists",
        hint="a regression line of a .do script, of R or of Python",
        explains="The line is only read, never run. What is understood of it is shown, and the rest is asked for.",
    )


def _outcome(state: Specifying) -> Prompt | None:
    column, transform = state.part("outcome", "column"), state.part("outcome", "transform")
    known = {each.name for each in state.columns}
    if column in known and transform not in (None, Transform.NONE):
        return None
    return _prompt(
        "outcome",
        "Which column is the outcome before any transformation?",
        Form.COLUMN,
        choices=_listed(each for each in state.columns if each.may_be_outcome),
        default=column if column in known else None,
        default_why="as in the line" if column in known else "",
        hint="a number, or a part of the name",
        explains="The outcome is the dependent variable. If the script logs it, choose the column it logs.",
    )


def _transform(state: Specifying) -> Prompt | None:
    named = state.part("outcome", "column")
    if state.part("outcome", "transform") not in (None, Transform.NONE) and "outcome" not in state.answers:
        return None
    same = named is not None and state.answers.get("outcome") == named
    return _prompt(
        "transform",
        "What was done to the outcome before the regression?",
        Form.ONE,
        choices=tuple(Choice(value, label) for value, label in TRANSFORMS.items()),
        default="none" if same and state.part("outcome", "transform") == Transform.NONE else None,
        hint="a number, or the beginning of a word",
    )


def _constant(state: Specifying) -> Prompt | None:
    if _value(state, "transform") != Transform.LOG_PLUS or state.outcome_has("constant"):
        return None
    question = "Which constant was added before the log?"
    return _prompt("constant", question, Form.NUMBER, default=1.0, hint="a number, in the unit of the column")


def _scale(state: Specifying) -> Prompt | None:
    if _value(state, "transform") != Transform.ASINH or state.outcome_has("scale"):
        return None
    question = "By which number was the outcome multiplied inside the inverse hyperbolic sine?"
    return _prompt("scale", question, Form.NUMBER, default=1.0, hint="1 where it was taken of the column as it stands")


def _zeros(state: Specifying) -> Prompt | None:
    if _value(state, "transform") != Transform.LOG or state.outcome_has("zeros"):
        return None
    choices = tuple(Choice(value, label) for value, label in _ZEROS.items() if value != "kept")
    question = "A zero has no logarithm. What became of rows with a zero outcome?"
    return _prompt(
        "zeros", question, Form.ONE, choices=choices, default="dropped", default_why="what programs do unasked"
    )


def _replacement(state: Specifying) -> Prompt | None:
    if _value(state, "zeros") != "replaced" or state.outcome_has("replacement"):
        return None
    return _prompt(
        "replacement", "Which number stands for the zeros?", Form.NUMBER, hint="a number, in the unit of the column"
    )


def _terms(state: Specifying) -> Prompt | None:
    named = state.part("model", "terms") or ()
    known = {each.name for each in state.columns}
    missing = sorted({column for each in named for column in _columns_in(each) if column not in known})
    if named and not missing:
        return None
    about = f" (the line also names {', '.join(missing)}, which the file does not hold)" if missing else ""
    return _prompt(
        "terms",
        f"Which columns stand on the right-hand side?{about}",
        Form.TERMS,
        choices=_listed(state.columns),
        hint="numbers or names with blanks between; also log(x), factor(x), a:b, x^2",
        explains="All covariates with the one of interest. Columns of text enter as classes by themselves.",
    )


def _focus(state: Specifying) -> Prompt | None:
    if state.part("model", "focus"):
        return None
    terms = tuple(state.answers["terms"]) if "terms" in state.answers else tuple(state.part("model", "terms") or ())  # type: ignore[arg-type]
    return _prompt(
        "focus",
        "Which term does the paper's claim rest on?",
        Form.SEVERAL,
        choices=tuple(Choice(str(each)) for each in terms),
        default=(str(terms[0]),) if len(terms) == 1 else None,
        hint="a number; several with blanks between",
    )


def _where(state: Specifying) -> Prompt | None:
    if state.understood or state.has("model", "where"):
        return None
    hint = "such as year >= 2015 and region != 'north'; Enter for all rows"
    return _prompt(
        "where",
        "Was the model fitted on some of the rows only?",
        Form.TEXT,
        default="",
        default_why="all rows",
        hint=hint,
    )


def _kind_of_errors(state: Specifying) -> Prompt | None:
    if state.has("errors", "kind"):
        return None
    return _prompt(
        "errors",
        "Which standard errors does the paper use?",
        Form.ONE,
        choices=tuple(Choice(value, label) for value, label in _ERRORS.items()),
        hint="a number, or the beginning of a word",
        explains="Look below the table first. Where it is silent, most programs print classical errors.",
    )


def _type_of_errors(state: Specifying) -> Prompt | None:
    if state.answers.get("errors") != ErrorKind.ROBUST or state.has("errors", "type"):
        return None
    choices = tuple(Choice(each) for each in ERROR_TYPES[ErrorKind.ROBUST])
    question = "Which small-sample form do the robust errors have?"
    return _prompt("error_type", question, Form.ONE, choices=choices, default="HC1", default_why="the usual one")


def _clusters(state: Specifying) -> Prompt | None:
    if _value(state, "errors") != ErrorKind.CLUSTER or state.has("errors", "by"):
        return None
    question = "By which column are the errors clustered?"
    return _prompt("by", question, Form.COLUMN, choices=_listed(state.columns), hint="a number, or a part of the name")


def _printed_figure(name: str, what: str, optional: str) -> Callable[[Specifying], Prompt | None]:
    def ask(state: Specifying) -> Prompt | None:
        if "printed" in state.understood:
            return None
        model = specification_values(state)["model"]
        question = what.format(focus=(model.get("focus") or ["the focus"])[0])
        hint = f"as printed, such as {optional}; Enter to leave out"
        return _prompt(name, question, Form.PRINTED, default="", default_why="left out", hint=hint)

    return ask


_STEPS: Mapping[str, Callable[[Specifying], Prompt | None]] = {
    "data": _data,
    "line": _line,
    "outcome": _outcome,
    "transform": _transform,
    "constant": _constant,
    "scale": _scale,
    "zeros": _zeros,
    "replacement": _replacement,
    "terms": _terms,
    "focus": _focus,
    "where": _where,
    "errors": _kind_of_errors,
    "error_type": _type_of_errors,
    "by": _clusters,
    "estimate": _printed_figure("estimate", "Which coefficient does the paper print for {focus}?", "0.38"),
    "std_error": _printed_figure("std_error", "Which standard error does it print for {focus}?", "0.11"),
    "n": _printed_figure("n", "How many observations does the paper print for this model?", "3,412"),
}


# --- parts ------------------------------------------------------------------------------------------------------


def _prompt(name: str, question: str, form: Form, **more: Any) -> Prompt:
    return Prompt(SPECIFYING + name, question, form, MODEL, **more)


def _listed(columns: Any) -> tuple[Choice, ...]:
    return tuple(Choice(each.name, detail=each.detail) for each in columns)


def _value(state: Specifying, name: str) -> Any:
    """An answer, or what the line says under that name."""
    if name in state.answers:
        return state.answers[name]
    return state.part("errors", "kind") if name == "errors" else state.part("outcome", name)


def _said(state: Specifying, *names: str) -> dict[str, Any]:
    return {name: state.answers[name] for name in names if state.answers.get(name) not in (None, "")}


def _several(state: Specifying, name: str) -> tuple[str, ...]:
    value = state.answers[name]
    return value if isinstance(value, tuple) else (str(value),)


def _as_term(state: Specifying, text: str) -> str:
    """A bare column name as a term of the grammar; columns of text as classes."""
    column = next((each for each in state.columns if each.name == text), None)
    if column is None:
        return text
    name = text if text.isidentifier() else f"`{text}`"
    return f"factor({name})" if column.is_text else name


def _columns_in(term: str) -> tuple[str, ...]:
    try:
        return tuple(column for each in read_terms(term, "the line") for column in columns_of(each))
    except Refusal:
        return (term,)


def _errors(state: Specifying) -> dict[str, Any]:
    found: dict[str, Any] = {}
    found |= {"kind": state.answers["errors"]} if "errors" in state.answers else {}
    found |= {"type": state.answers["error_type"]} if "error_type" in state.answers else {}
    return found | ({"by": list(_several(state, "by"))} if "by" in state.answers else {})


def _printed(state: Specifying, model: Mapping[str, Any]) -> dict[str, Any]:
    keys = ("estimate", "std_error")
    figures = {key: _text(state.answers[key]) for key in keys if state.answers.get(key) not in (None, "")}
    found: dict[str, Any] = {"n": _text(state.answers["n"])} if state.answers.get("n") not in (None, "") else {}
    focus = model.get("focus") or []
    return found | ({"terms": {focus[0]: figures}} if figures and focus else {})


def _text(value: Value) -> str:
    return value.text if isinstance(value, Printed) else str(value)
