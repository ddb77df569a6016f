"""The left side of a formula: which column, transformed how."""

from dataclasses import dataclass
from typing import Any

from reviewkit.readers.model_lines.syntax import Call, Name, Number, Operation, Prefix, Text, Tree, bare, written

_LOGS = ("log", "ln", "np.log", "numpy.log")
_LOG1P = ("log1p", "np.log1p", "numpy.log1p")
_ASINH = ("asinh", "np.arcsinh", "numpy.arcsinh", "arcsinh")
_SQRT = ("sqrt", "np.sqrt", "numpy.sqrt")
_LOGIT = ("qlogis", "logit", "car::logit")
_ARCSINE = ("asin", "np.arcsin", "numpy.arcsin")
_WRAPPERS = ("I", "as.numeric", "as.integer", "Q")


@dataclass(frozen=True, slots=True)
class OutcomeReading:
    """The outcome as a specification's table, and what was left."""

    table: dict[str, Any]
    left: tuple[tuple[str, str], ...] = ()


def read_outcome(tree: Tree) -> OutcomeReading:
    """The outcome that the left side of a formula names."""
    tree = unwrapped(tree)
    found = _transformed(tree)
    if found:
        return OutcomeReading(found)
    columns = _columns(tree)
    left = ((written(tree), "this outcome is not a transform that a specification can hold; say column and transform"),)
    return OutcomeReading({"column": columns[0]} if len(columns) == 1 else {}, left)


def unwrapped(tree: Tree) -> Tree:
    """The tree without brackets and without calls that change nothing."""
    while True:
        tree = bare(tree)
        if not (isinstance(tree, Call) and tree.function in _WRAPPERS and len(tree.arguments) == 1):
            return tree
        tree = tree.arguments[0][1]
        if isinstance(tree, Text):
            return Name(tree.text)


def column_named(tree: Tree) -> str | None:
    """The column that a tree is: `y`, `d$y`, `Q("y")`; None for anything else."""
    match unwrapped(tree):
        case Name(text) if text not in (".",):
            return text
        case Operation("$", _, Name(text)):
            return text
        case _:
            return None


def log_argument(tree: Tree) -> Tree | None:
    """x of log(x), where the base is e."""
    match unwrapped(tree):
        case Call(function, (("", inner),)) if function in _LOGS:
            return unwrapped(inner)
        case _:
            return None


def column_plus(tree: Tree) -> tuple[str, float] | None:
    """Column and constant of `y + 1` or `1 + y`."""
    match unwrapped(tree):
        case Operation("+", left, right):
            for name, number in ((left, right), (right, left)):
                column, constant = column_named(name), bare(number)
                if column and isinstance(constant, Number):
                    return column, constant.value
    return None


def column_scaled(tree: Tree) -> tuple[str, float] | None:
    """Column and factor of `y`, `1000 * y` or `y / 1000`."""
    column = column_named(tree)
    if column:
        return column, 1.0
    match unwrapped(tree):
        case Operation("*", left, right):
            for name, number in ((left, right), (right, left)):
                column, factor = column_named(name), bare(number)
                if column and isinstance(factor, Number):
                    return column, factor.value
        case Operation("/", left, right):
            column, divisor = column_named(left), bare(right)
            if column and isinstance(divisor, Number) and divisor.value:
                return column, 1 / divisor.value
    return None


def _transformed(tree: Tree) -> dict[str, Any] | None:
    column = column_named(tree)
    if column:
        return {"column": column, "transform": "none", "zeros": "kept"}
    inner = log_argument(tree)
    if inner is not None:
        return _logged(inner)
    match tree:
        case Call(function, (("", argument), *_)) if len(tree.arguments) == 1:
            return _called(function, argument)
        case _:
            return None


def _called(function: str, argument: Tree) -> dict[str, Any] | None:
    column, scaled = column_named(argument), column_scaled(argument)
    if function in _LOG1P and column:
        return {"column": column, "transform": "log_plus", "constant": 1.0, "zeros": "kept"}
    if function in _ASINH and scaled and scaled[1] > 0:
        factor = {} if scaled[1] == 1 else {"scale": scaled[1]}
        return {"column": scaled[0], "transform": "asinh", **factor, "zeros": "kept"}
    if function in _ARCSINE:
        root = unwrapped(argument)
        inside = column_named(root.arguments[0][1]) if isinstance(root, Call) and root.function in _SQRT else None
        return {"column": inside, "transform": "arcsine", "zeros": "kept"} if inside else None
    plain = {**dict.fromkeys(_SQRT, "sqrt"), **dict.fromkeys(_LOGIT, "logit"), "scale": "standardised", "rank": "rank"}
    return {"column": column, "transform": plain[function], "zeros": "kept"} if column and function in plain else None


def _logged(inner: Tree) -> dict[str, Any] | None:
    column = column_named(inner)
    if column:
        return {"column": column, "transform": "log", "zeros": "dropped"}
    plus = column_plus(inner)
    if plus and plus[1] > 0:
        return {"column": plus[0], "transform": "log_plus", "constant": plus[1], "zeros": "kept"}
    text = written(inner).replace(" ", "").replace("**", "^").replace("np.", "")
    for name in _columns(inner):
        square = (f"({name}^2+1)", f"(1+{name}^2)", f"({name}*{name}+1)")
        if text in {f"{name}+sqrt{each}" for each in square} | {f"{name}+{each}^0.5" for each in square}:
            return {"column": name, "transform": "asinh", "zeros": "kept"}
        if text in (f"{name}/(1-{name})", f"({name})/(1-{name})"):
            return {"column": name, "transform": "logit", "zeros": "kept"}
    return None


def _columns(tree: Tree) -> tuple[str, ...]:
    """Names a tree uses, functions left out."""
    match tree:
        case Name(text):
            found: tuple[str, ...] = (text,)
        case Operation("$", _, Name(text)):
            found = (text,)
        case Call(_, arguments):
            found = tuple(name for _, value in arguments for name in _columns(value))
        case Operation(_, left, right):
            found = (*_columns(left), *_columns(right))
        case Prefix(_, inner):
            found = _columns(inner)
        case _ if bare(tree) is not tree:
            found = _columns(bare(tree))
        case _:
            found = ()
    return tuple(dict.fromkeys(found))
