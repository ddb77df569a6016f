"""Expressions worked out over columns: values, slopes, and where a row condition holds."""

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from reviewkit.expressions import Apply, Binary, Column, Literal, Member, Node, Unary, columns_of
from reviewkit.refusals import Refusal

Array = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]
Columns = Mapping[str, npt.NDArray[Any]]
"""Columns by name, each (n,): floats with nan, or texts with None for what is missing."""


def numeric_values(node: Node, columns: Columns) -> Array:
    """The values of a numeric expression, (n,); nan where it is not defined."""
    with np.errstate(all="ignore"):
        match node:
            case Column(name):
                if columns[name].dtype == object:
                    raise Refusal(f"column `{name}`", "it holds text where numbers are needed", "a numeric column")
                return np.asarray(columns[name], dtype=float)
            case Literal(value) if isinstance(value, float):
                return np.asarray(value)
            case Apply(function, argument):
                return _FUNCTIONS[function](numeric_values(argument, columns))
            case Unary("-", operand):
                return -numeric_values(operand, columns)
            case Binary(sign, left, right) if sign in _ARITHMETIC:
                return _ARITHMETIC[sign](numeric_values(left, columns), numeric_values(right, columns))
    raise Refusal("model.terms", f"`{node}` is a condition where a number belongs", "columns, functions, + - * / ^")


def condition_holds(node: Node, columns: Columns) -> Mask:
    """Where a row condition holds, (n,); a missing value makes the whole comparison false."""
    match node:
        case Binary("and", left, right):
            return condition_holds(left, columns) & condition_holds(right, columns)
        case Binary("or", left, right):
            return condition_holds(left, columns) | condition_holds(right, columns)
        case Unary("not", operand):
            return ~condition_holds(operand, columns) & _all_present(node, columns)
        case Member(item, values):
            return np.isin(_comparable(item, columns, values[0]), np.array(values, dtype=object)) & _all_present(
                node, columns
            )
        case Binary(sign, left, right) if sign in _COMPARISONS:
            other = right.value if isinstance(right, Literal) else left.value if isinstance(left, Literal) else 0.0
            sides = [_without_gaps(_comparable(each, columns, other)) for each in (left, right)]
            holds = _COMPARISONS[sign](*sides)
            return np.asarray(holds, dtype=bool) & _all_present(node, columns)
    raise Refusal("model.where", f"`{node}` is not a condition", "comparisons joined by and, or, not")


_FUNCTIONS: Mapping[str, Callable[[Array], Array]] = {
    "log": np.log,
    "sqrt": np.sqrt,
    "exp": np.exp,
    "asinh": np.arcsinh,
    "abs": np.abs,
}
_FUNCTION_SLOPES: Mapping[str, Callable[[Array], Array]] = {
    "log": lambda v: 1 / v,
    "sqrt": lambda v: 0.5 / np.sqrt(v),
    "exp": np.exp,
    "asinh": lambda v: 1 / np.sqrt(1 + v * v),
    "abs": np.sign,
}
_ARITHMETIC: Mapping[str, Callable[[Array, Array], Array]] = {
    "+": np.add,
    "-": np.subtract,
    "*": np.multiply,
    "/": np.divide,
    "^": np.power,
}
_COMPARISONS: Mapping[str, Callable[[Any, Any], Any]] = {
    "<": np.less,
    "<=": np.less_equal,
    ">": np.greater,
    ">=": np.greater_equal,
    "==": np.equal,
    "!=": np.not_equal,
}


def slope_values(part: Node, focal: str, columns: Columns) -> Array:
    """The derivative of a numeric expression by the column `focal`, (n,) or a scalar."""
    with np.errstate(all="ignore"):
        match part:
            case Column(name):
                return np.asarray(1.0 if name == focal else 0.0)
            case Apply(function, argument):
                outer = _FUNCTION_SLOPES[function](numeric_values(argument, columns))
                return outer * slope_values(argument, focal, columns)
            case Unary("-", operand):
                return -slope_values(operand, focal, columns)
            case Binary(sign, left, right) if sign in _ARITHMETIC:
                return _binary_slope(sign, (left, right), focal, columns)
    return np.asarray(0.0)


def _binary_slope(sign: str, operands: tuple[Node, Node], focal: str, columns: Columns) -> Array:
    left, right = (numeric_values(each, columns) for each in operands)
    d_left, d_right = (slope_values(each, focal, columns) for each in operands)
    match sign:
        case "+":
            return d_left + d_right
        case "-":
            return d_left - d_right
        case "*":
            return d_left * right + left * d_right
        case "/":
            return (d_left * right - left * d_right) / (right * right)
    return right * np.power(left, right - 1) * d_left


def _comparable(node: Node, columns: Columns, other: object) -> npt.NDArray[Any]:
    """The values of one side of a comparison: texts where the other side is a text."""
    if isinstance(node, Literal):
        return np.asarray(node.value, dtype=object if isinstance(node.value, str) else float)
    text = isinstance(node, Column) and columns[node.name].dtype == object
    if text != isinstance(other, str):
        kind, wanted = ("text", "a text in quotes") if text else ("numbers", "a number")
        raise Refusal("model.where", f"`{node}` holds {kind} and is compared with something else", wanted)
    return columns[node.name] if isinstance(node, Column) else numeric_values(node, columns)


def _without_gaps(values: npt.NDArray[Any]) -> npt.NDArray[Any]:
    """The values with an empty text where a text is missing, so that texts have an order."""
    return np.where(values == None, "", values) if values.dtype == object else values  # noqa: E711


def _all_present(node: Node, columns: Columns) -> Mask:
    found = [present(columns[name]) for name in columns_of(node)]
    return np.asarray(np.logical_and.reduce(found)) if found else np.asarray(True)


def present(values: npt.NDArray[Any]) -> Mask:
    """Where a column has a value, (n,)."""
    if values.dtype == object:
        return np.array([value is not None for value in values], dtype=bool)
    return np.asarray(np.isfinite(values))
