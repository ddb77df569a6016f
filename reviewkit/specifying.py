"""Builds a specification from answers: which question comes next, and whether the answers hold together."""

from collections.abc import Callable, Mapping
from typing import Any

from reviewkit.answers import SPECIFYING
from reviewkit.expressions import columns_of, read_terms
from reviewkit.printed import Printed
from reviewkit.prompts import Choice, Form, Prompt
from reviewkit.refusals import Refusal
from reviewkit.specification import ERROR_TYPES, ErrorKind, Estimator, Transform, specification_from
from reviewkit.specification_parts import Specifying, specification_values

MODEL = "model:main"
A_TERM_TO_COME = "x"
"""Stands for the terms while only what comes before them was answered."""


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
_ESTIMATORS = {
    Estimator.OLS: "least squares",
    Estimator.POISSON: "Poisson (quasi-maximum likelihood)",
    Estimator.NEGBIN: "negative binomial",
    Estimator.GAMMA: "gamma",
    Estimator.FRACTIONAL_LOGIT: "fractional logit",
    Estimator.BETA: "beta",
    Estimator.LOGIT: "logit",
    Estimator.PROBIT: "probit",
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


def problem_with(state: Specifying) -> str:
    """Why the answers so far make no specification; empty where they do, or where too much is still missing."""
    values, n = specification_values(state), state.answers.get("n")
    if isinstance(n, Printed) and n.value != int(n.value):
        return f"`{n.text}` reads as {n.value:g}, and a number of observations is whole: type it without a point."
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


def _traced(state: Specifying) -> Prompt | None:
    if state.trace is None:
        return None
    named = state.answers.get("outcome", state.part("outcome", "column"))
    made = state.trace.outcome
    zeros = {"dropped": " Its zeros were left out.", "replaced": " Its zeros were replaced by a small number."}
    return _prompt(
        "traced",
        f"The data show that {named} {state.trace.sentence}.{zeros.get(made['zeros'], '')} Is that the outcome?",
        Form.ONE,
        choices=(
            Choice("yes", f"yes: outcome {made['column']}, {TRANSFORMS[made['transform']]}"),
            Choice("no", "no, I choose column and transform myself"),
        ),
        default="yes",
        default_why="the numbers agree on every row",
        explains="The outcome before its transformation is needed to fit a model of its mean beside the submitted one.",
    )


def _outcome(state: Specifying) -> Prompt | None:
    if state.is_traced:
        return None
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
    if state.is_traced:
        return None
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
    if state.is_traced or _value(state, "transform") != Transform.LOG_PLUS or state.outcome_has("constant"):
        return None
    question = "Which constant was added before the log?"
    return _prompt("constant", question, Form.NUMBER, default=1.0, hint="a number, in the unit of the column")


def _scale(state: Specifying) -> Prompt | None:
    if state.is_traced or _value(state, "transform") != Transform.ASINH or state.outcome_has("scale"):
        return None
    question = "By which number was the outcome multiplied inside the inverse hyperbolic sine?"
    return _prompt("scale", question, Form.NUMBER, default=1.0, hint="1 where it was taken of the column as it stands")


def _zeros(state: Specifying) -> Prompt | None:
    if state.is_traced or _value(state, "transform") != Transform.LOG or state.outcome_has("zeros"):
        return None
    choices = tuple(Choice(value, label) for value, label in _ZEROS.items() if value != "kept")
    question = "A zero has no logarithm. What became of rows with a zero outcome?"
    return _prompt(
        "zeros", question, Form.ONE, choices=choices, default="dropped", default_why="what programs do unasked"
    )


def _replacement(state: Specifying) -> Prompt | None:
    if state.is_traced or _value(state, "zeros") != "replaced" or state.outcome_has("replacement"):
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


def _estimator(state: Specifying) -> Prompt | None:
    transform = specification_values(state)["outcome"].get("transform")
    if state.has("model", "estimator") or (not state.understood and transform != Transform.NONE):
        return None
    return _prompt(
        "estimator",
        "How is the model estimated?" + (" The line does not settle it." if state.understood else ""),
        Form.ONE,
        choices=tuple(Choice(value, label) for value, label in _ESTIMATORS.items()),
        default=Estimator.OLS.value,
        default_why="what a regression is unless the paper says otherwise",
        hint="a number, or the beginning of a word",
        explains="This version re-estimates least squares and Poisson; of others it knows what you answer.",
    )


def _kind_of_errors(state: Specifying) -> Prompt | None:
    if state.has("errors", "kind"):
        return None
    by_line = bool(state.understood)
    return _prompt(
        "errors",
        "Which standard errors does the paper use?" + (" The line does not settle it." if by_line else ""),
        Form.ONE,
        choices=tuple(Choice(value, label) for value, label in _ERRORS.items()),
        default=ErrorKind.CLASSICAL.value if by_line else None,
        default_why="what most programs do unless told otherwise" if by_line else "",
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
    "traced": _traced,
    "outcome": _outcome,
    "transform": _transform,
    "constant": _constant,
    "scale": _scale,
    "zeros": _zeros,
    "replacement": _replacement,
    "terms": _terms,
    "focus": _focus,
    "where": _where,
    "estimator": _estimator,
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


def _columns_in(term: str) -> tuple[str, ...]:
    try:
        return tuple(column for each in read_terms(term, "the line") for column in columns_of(each))
    except Refusal:
        return (term,)
