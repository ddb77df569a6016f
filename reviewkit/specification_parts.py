"""What answers, a pasted line and the data say of a specification so far, and the tables that they make."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from reviewkit.facts import Value
from reviewkit.printed import Printed
from reviewkit.specification import ErrorKind, Transform


@dataclass(frozen=True, slots=True)
class Trace:
    """That a column equals a transform of another one, in the words of a specification's outcome."""

    sentence: str
    """`equals log(sales + 1)`."""
    outcome: Mapping[str, Any]
    """The table `outcome` that makes the column."""


@dataclass(frozen=True, slots=True)
class DataColumn:
    """What a list of columns shows of one of them."""

    name: str
    detail: str = ""
    is_text: bool = False
    may_be_outcome: bool = True
    kind: str = ""
    """number, whole number, two-valued, text, …"""
    trace: Trace | None = None


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
    def trace(self) -> Trace | None:
        """What the data show of the outcome that was chosen, or that the line names as it stands."""
        line = self.part("outcome", "column") if self.part("outcome", "transform") in (None, Transform.NONE) else None
        named = self.answers.get("outcome", line)
        return next((each.trace for each in self.columns if each.name == named), None)

    @property
    def is_traced(self) -> bool:
        """Whether it was confirmed that the outcome is what the data show."""
        return self.answers.get("traced") == "yes" and self.trace is not None

    @property
    def without_data(self) -> bool:
        """Whether there is no data file, so that nothing can be re-estimated."""
        return self.answers.get("data") == ""


def specification_values(state: Specifying) -> dict[str, Any]:
    """The tables of the specification file, as far as they are known."""
    model = {**state.understood.get("model", {}), **_said(state, "where", "estimator")}
    model |= {
        key: [_as_term(state, each) for each in _several(state, key)]
        for key in ("terms", "focus")
        if key in state.answers
    }
    outcome = _outcome(state)
    errors = {**state.understood.get("errors", {}), **_errors(state)}
    if errors.get("kind") == ErrorKind.CLUSTER and not errors.get("by"):
        del errors["kind"]  # until the next answer names the column
    values: dict[str, Any] = {
        "data": state.answers.get("data", ""),
        "outcome": outcome,
        "model": model,
        "errors": errors,
    }
    printed = _printed(state, model)
    others = {key: each for key, each in state.understood.items() if key not in values and key != "format"}
    return {**others, **values, **({"printed": printed} if printed else {})}


def column_from(record: Mapping[str, Any]) -> DataColumn:
    """The column that `dataclasses.asdict` made a record of."""
    trace = record.get("trace")
    return DataColumn(**{**record, "trace": Trace(**trace) if trace else None})


def _outcome(state: Specifying) -> dict[str, Any]:
    if state.is_traced and state.trace is not None:
        return dict(state.trace.outcome)
    said = _said(state, "transform", "constant", "scale", "zeros", "replacement")
    outcome = {**state.understood.get("outcome", {}), **said}
    outcome |= {"column": str(state.answers["outcome"])} if "outcome" in state.answers else {}
    if outcome.get("zeros") == "replaced" and "replacement" not in outcome:
        del outcome["zeros"]
    return outcome


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
