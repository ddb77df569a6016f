"""What a model line was found to say, gathered piece by piece."""

import re
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any

from reviewkit.expressions import read_row_condition, read_terms
from reviewkit.refusals import Refusal

_LOGGED = re.compile(r"^(?:ln|log)(?:[_.]?\w)|[_.](?:ln|log)$|^l_\w", re.IGNORECASE)
_OTHER_TRANSFORM = re.compile(r"^(?:ihs|asinh|arcsinh|sqrt)_?\w", re.IGNORECASE)
_SHOWN = 80


@dataclass(frozen=True, slots=True)
class ModelLine:
    """One pasted line that fits a model, as far as it was understood."""

    language: str
    """.do script, R or Python."""
    understood: dict[str, Any]
    """Tables of a specification file: outcome, model, errors."""
    not_understood: tuple[str, ...]
    """Each piece that was not carried over, in plain words."""
    hints: tuple[str, ...] = ()
    """What was carried over, and is worth a look."""


@dataclass(slots=True)
class Pieces:
    """Gathers the parts of one line; the only mutable thing here."""

    language: str
    outcome: dict[str, Any] = field(default_factory=dict)
    model: dict[str, Any] = field(default_factory=dict)
    errors: dict[str, Any] = field(default_factory=dict)
    left: list[str] = field(default_factory=list)
    hints: list[str] = field(default_factory=list)

    def leave(self, piece: str, why: str) -> None:
        """Note a piece that is not carried over, and why."""
        self.left.append(f"`{shown(piece)}`: {why}")

    def hint(self, text: str) -> None:
        """Note what deserves a look."""
        self.hints.append(text)

    def add_terms(self, texts: Iterable[str]) -> None:
        """Add terms that the grammar of specifications holds; others are left."""
        for text in texts:
            try:
                read_terms(text, "model line")
            except Refusal:
                self.leave(text, "this term is not one a specification can hold")
                continue
            self.model["terms"] = list(dict.fromkeys([*self.model.get("terms", []), text]))

    def add_condition(self, text: str) -> None:
        """Narrow the sample; a condition beyond the grammar is left."""
        joined = f"({self.model['where']}) and ({text})" if "where" in self.model else text
        try:
            read_row_condition(joined, "model line")
        except Refusal:
            self.leave(text, "this sample condition is not one a specification can hold")
            return
        self.model["where"] = joined

    def absorb(self, columns: Iterable[str]) -> None:
        """Add absorbed effects."""
        self.model["absorb"] = list(dict.fromkeys([*self.model.get("absorb", []), *columns]))

    def robust(self, type_: str = "HC1", small_sample: str = "default") -> None:
        """Robust errors."""
        self.errors = {"kind": "robust", "type": type_} | self._factor(small_sample)

    def clustered(self, columns: Iterable[str], type_: str = "CR1", small_sample: str = "default") -> None:
        """Clustered errors."""
        self.errors = {"kind": "cluster", "type": type_, "by": list(columns)} | self._factor(small_sample)

    def _factor(self, small_sample: str) -> dict[str, str]:
        return {} if small_sample == "default" else {"small_sample": small_sample}

    def weigh(self, column: str, kind: str) -> None:
        """Weights of observations."""
        self.model["weights"] = {"column": column, "kind": kind}

    def finished(self) -> ModelLine:
        """The line as read, with hints on what a name alone suggests."""
        column = str(self.outcome.get("column", ""))
        if self.outcome.get("transform") == "none" and (_LOGGED.search(column) or _OTHER_TRANSFORM.match(column)):
            what = "a log" if _LOGGED.search(column) else "a transform"
            self.hint(
                f"`{shown(column)}` may already be {what} in the data; name the column it was made from, if there"
                " is one"
            )
        if self.model.get("exposure") and self.outcome.get("transform", "none") != "none":
            self.leave("exposure", "say whether the transformed outcome was divided by it (per_exposure)")
            del self.model["exposure"]
        parts = {"outcome": self.outcome, "model": self.model, "errors": self.errors}
        understood = {name: part for name, part in parts.items() if part}
        return ModelLine(self.language, understood, tuple(dict.fromkeys(self.left)), tuple(dict.fromkeys(self.hints)))


def shown(text: str) -> str:
    """A piece of the line, on one line and cut to a length that screens hold."""
    plain = " ".join("".join(each if each.isprintable() else " " for each in text).split())
    return plain if len(plain) <= _SHOWN else plain[: _SHOWN - 1] + "…"


def plain_column(name: str) -> str:
    """A column name as terms write it: in backticks where it needs them."""
    return name if re.fullmatch(r"[^\W\d][\w.]*", name) and name not in ("and", "or", "not", "in") else f"`{name}`"
