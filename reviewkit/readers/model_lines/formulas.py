"""Formulas of R and Python as terms of a specification."""

import re
from collections.abc import Iterator
from itertools import combinations

from reviewkit.readers.model_lines.outcomes import column_named, log_argument, read_outcome
from reviewkit.readers.model_lines.pieces import Pieces, plain_column, shown
from reviewkit.readers.model_lines.syntax import (
    Call,
    Name,
    Number,
    Operation,
    Prefix,
    Text,
    Tree,
    Unreadable,
    bare,
    parse,
    written,
)

_FUNCTIONS = {
    "log": "log", "ln": "log", "np.log": "log", "numpy.log": "log", "sqrt": "sqrt", "np.sqrt": "sqrt", "exp": "exp",
    "np.exp": "exp", "asinh": "asinh", "np.arcsinh": "asinh", "abs": "abs", "np.abs": "abs",
}  # fmt: skip
_FACTORS = ("factor", "as.factor", "C", "i", "ordered", "as_factor", "forcats::as_factor")
_LAGS = ("lag", "l", "d", "f", "L", "D", "F", "lead", "diff", "dplyr::lag", "shift")
_MOST_CROSSED = 4
_MOST_TERMS = 200


class Left(Exception):
    """A piece that cannot be carried over; the message says why."""


def read_formula(text: str, pieces: Pieces, square_in_formula: bool = False) -> None:
    """Add outcome, terms and absorbed effects of `y ~ a + b | f1 + f2`.

    `square_in_formula`: whether `x^2` means the square (elsewhere it means x crossed with itself).

    Raises:
        Unreadable: the text is no formula.
    """
    tree = parse(text)
    if not (isinstance(tree, Operation) and tree.operator == "~"):
        raise Unreadable("a formula has a `~` between outcome and terms")
    outcome = read_outcome(tree.left)
    pieces.outcome = dict(outcome.table)
    for piece, why in outcome.left:
        pieces.leave(piece, why)
    right, *parts = _between_bars(tree.right)
    _add_sum(right, pieces, square_in_formula)
    if parts:
        _add_absorbed(parts[0], pieces)
    for part in parts[1:]:
        if written(bare(part)) != "0":
            pieces.leave(
                f"| {written(part)}",
                "instruments are not covered" if "~" in written(part) else "a third part of the formula",
            )


def _between_bars(tree: Tree) -> list[Tree]:
    if isinstance(tree, Operation) and tree.operator == "|":
        return [*_between_bars(tree.left), tree.right]
    return [tree]


def added(tree: Tree) -> Iterator[tuple[str, Tree]]:
    """The summands of a sum with their signs, from left to right."""
    parts: list[tuple[str, Tree]] = []
    while isinstance(tree, Operation) and tree.operator in ("+", "-"):
        parts.append((tree.operator, tree.right))
        tree = tree.left
    if isinstance(tree, Prefix) and tree.operator in "+-":
        parts.append((tree.operator, tree.operand))
    else:
        parts.append(("+", tree))
    yield from reversed(parts)


def _add_sum(tree: Tree, pieces: Pieces, square_in_formula: bool) -> None:
    for sign, part in added(tree):
        match sign, bare(part):
            case "+", Number(1.0):
                continue
            case ("+", Number(0.0)) | ("-", Number(1.0)):
                pieces.leave(f"{sign} {written(part)}", "models without a constant are not covered")
                continue
            case "+", Operation("+" | "-", _, _):
                _add_sum(bare(part), pieces, square_in_formula)
                continue
            case "+", Call("offset", (("", offset),)):
                _add_offset(offset, pieces)
                continue
            case "+", Name("EntityEffects" | "TimeEffects" as effects):
                pieces.leave(effects, "name the column whose effects are absorbed")
                continue
        if sign == "-":
            pieces.leave(f"- {written(part)}", "taking a term out of a formula is not covered")
            continue
        try:
            pieces.add_terms(_terms(part, pieces, square_in_formula))
        except Left as why:
            pieces.leave(written(part), str(why))


def _add_offset(offset: Tree, pieces: Pieces) -> None:
    inner = log_argument(offset)
    column = column_named(inner) if inner is not None else None
    if column:
        pieces.model["exposure"] = column
    else:
        pieces.leave(f"offset({written(offset)})", "only the log of a column, the exposure, can be an offset")


def _add_absorbed(tree: Tree, pieces: Pieces) -> None:
    for _, part in added(tree):
        inner = bare(part)
        if isinstance(inner, Call) and inner.function in _FACTORS and len(inner.arguments) == 1:
            inner = bare(inner.arguments[0][1])
        column = column_named(inner)
        if column:
            pieces.absorb([column])
        elif not (isinstance(inner, Number) and inner.value in (0, 1)):
            pieces.leave(written(part), "absorbed effects must be columns; combined or sloped effects are not covered")


def _terms(tree: Tree, pieces: Pieces, square_in_formula: bool) -> list[str]:
    """Terms, as text of the specification's grammar, of one summand."""
    tree = bare(tree)
    match tree:
        case Operation("*", left, right):
            first, second = (_terms(each, pieces, square_in_formula) for each in (left, right))
            _check_count(len(first) * len(second))
            return [*first, *second, *(f"{a}:{b}" for a in first for b in second if a != b)]
        case Operation(":", left, right):
            first, second = (_terms(each, pieces, square_in_formula) for each in (left, right))
            _check_count(len(first) * len(second))
            return [f"{a}:{b}" if a != b else a for a in first for b in second]
        case Operation("^" | "**", base, power):
            return _power(tree, bare(base), bare(power), pieces, square_in_formula)
        case Operation("+", _, _):
            return [text for _, each in added(tree) for text in _terms(each, pieces, square_in_formula)]
        case _:
            return [_part(tree)]


def _check_count(count: int) -> None:
    if count > _MOST_TERMS:
        raise Left("crossing so many terms is not covered; write them out")


def _power(tree: Tree, base: Tree, power: Tree, pieces: Pieces, square: bool) -> list[str]:
    if not isinstance(power, Number):
        raise Left("a power must be a number")
    column = column_named(base)
    if square and column:
        return [f"{plain_column(column)}^{power.value:g}"]
    if column:
        pieces.hint(f"`{shown(written(tree))}` outside of I() is just `{column}` in such a formula, not its power")
        return [plain_column(column)]
    summands = [text for _, each in added(base) for text in _terms(each, pieces, square)]
    if power.value not in (2, 3) or len(summands) > _MOST_CROSSED:
        raise Left("crossing so many terms is not covered; write them out")
    sizes = range(1, int(power.value) + 1)
    return [":".join(chosen) for size in sizes for chosen in combinations(summands, size)]


def _part(tree: Tree) -> str:
    """One part of a term: a column, a transform, a power or a factor."""
    column = column_named(tree)
    if column == "." or (isinstance(tree, Name) and tree.text == "."):
        raise Left("`.` means all other columns; name those of the model")
    if column:
        return plain_column(column)
    match tree:
        case Call(function, _) if function in _LAGS:
            raise Left(
                "lags need the order of the data, which a specification does not hold; make a column of it first"
            )
        case Call(function, _) if function in _FACTORS or function in ("relevel", "stats::relevel"):
            return _factor(tree)
        case Call("I", (("", inner),)):
            return _arithmetic(inner)
        case Call(function, _) if function in _FUNCTIONS or function in ("log1p", "np.log1p"):
            return _arithmetic(tree)
    raise Left("this term is not one a specification can hold")


def _factor(tree: Call) -> str:
    """factor(r), C(r, Treatment("north")), relevel(factor(r), ref = "north"), i(r, ref = 3)."""
    first, *others = tree.arguments if tree.arguments else [("", Name("."))]
    inner = bare(first[1])
    if tree.function.endswith("relevel") and isinstance(inner, Call) and inner.function in _FACTORS:
        inner = bare(inner.arguments[0][1]) if len(inner.arguments) == 1 else inner
    column = column_named(inner)
    if not column or column == ".":
        raise Left("a factor must be of a column")
    base = None
    for name, value in others:
        reference = bare(value)
        if (
            isinstance(reference, Call)
            and reference.function in ("Treatment", "contr.treatment")
            and reference.arguments
        ):
            name, reference = "ref", bare(reference.arguments[0][1])
        if name not in ("ref", "reference") or not isinstance(reference, Text | Number):
            raise Left("of a factor's settings only the base class is covered")
        base = reference
    if isinstance(base, Text) and re.search(r"[\"'`]", base.text):
        raise Left("the base class has quotes in its name")
    return f"factor({plain_column(column)}{f', base={written(base)}' if base else ''})"


def _arithmetic(tree: Tree) -> str:
    """Arithmetic of columns in the specification's grammar, operators bracketed where they nest."""
    tree = bare(tree)
    column = column_named(tree)
    if column:
        return plain_column(column)
    match tree:
        case Number(value):
            return f"{value:.12g}"
        case Call("log1p" | "np.log1p", (("", inner),)):
            return f"log({_arithmetic(inner)} + 1)"
        case Call("I", (("", inner),)):
            return _arithmetic(inner)
        case Call(function, (("", inner),)) if function in _FUNCTIONS:
            return f"{_FUNCTIONS[function]}({_arithmetic(inner)})"
        case Operation("^" | "**", base, power) if isinstance(bare(power), Number):
            inside = _arithmetic(base)
            return f"{inside if column_named(base) else f'({inside})'}^{written(bare(power))}"
        case Operation("+" | "-" | "*" | "/" as operator, left, right):
            return f"({_arithmetic(left)} {operator} {_arithmetic(right)})"
    raise Left("this arithmetic is not one a specification can hold")
