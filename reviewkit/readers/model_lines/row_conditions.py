"""Sample conditions of R and .do scripts in the grammar of specifications."""

from collections.abc import Iterator

from reviewkit.expressions import Binary, Column, Literal, Member, Node, Unary
from reviewkit.readers.model_lines.outcomes import column_named
from reviewkit.readers.model_lines.pieces import Pieces
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

_COMPARISONS = {"==": "==", "!=": "!=", "~=": "!=", "<": "<", "<=": "<=", ">": ">", ">=": ">="}
_CONNECTIVES = {"&": "and", "&&": "and", "|": "or", "||": "or"}
_MISSING_CALLS = ("missing", "mi", "is.na", "pd.isna", "isna", "isnull")


class Untranslatable(Exception):
    """A condition, or a part of one, that a specification cannot hold; the message says why."""


def add_condition(text: str, pieces: Pieces) -> None:
    """Add each part of `a & b` that a specification can hold; leave the others."""
    try:
        tree = parse(text)
    except Unreadable as why:
        pieces.leave(text, f"this sample condition could not be read ({why})")
        return
    add_condition_tree(tree, pieces)


def add_condition_tree(tree: Tree, pieces: Pieces) -> None:
    """The same for a condition that is a tree already."""
    for part in _conjuncts(tree):
        try:
            pieces.add_condition(str(_condition(bare(part))))
        except Untranslatable as why:
            pieces.leave(written(part), str(why))


def _conjuncts(tree: Tree) -> Iterator[Tree]:
    tree = bare(tree)
    if isinstance(tree, Operation) and tree.operator in ("&", "&&"):
        yield from _conjuncts(tree.left)
        yield from _conjuncts(tree.right)
    else:
        yield tree


def _condition(tree: Tree) -> Node:
    match bare(tree):
        case Operation(operator, left, right) if operator in _CONNECTIVES:
            return Binary(_CONNECTIVES[operator], _condition(left), _condition(right))
        case Operation(operator, left, right) if operator in _COMPARISONS:
            return _comparison(_COMPARISONS[operator], bare(left), bare(right))
        case Operation("%in%", left, right):
            return Member(_value(left), _literals(bare(right)))
        case Prefix("!", operand):
            return _negated(bare(operand))
        case Call(function, arguments) if not any(name for name, _ in arguments):
            return _called(function, tuple(value for _, value in arguments))
        case Name("TRUE" | "FALSE" | "T" | "F"):
            raise Untranslatable("a condition without a column")
        case other:
            return Binary("!=", _value(other), Literal(0.0))


def _negated(operand: Tree) -> Node:
    if isinstance(operand, Call) and operand.function in _MISSING_CALLS:
        raise Untranslatable(
            "rows with a missing value are left out where the column is in the model; elsewhere that cannot be said"
        )
    if column_named(operand):
        return Binary("==", _value(operand), Literal(0.0))
    return Unary("not", _condition(operand))


def _comparison(operator: str, left: Tree, right: Tree) -> Node:
    if any(isinstance(each, Name) and each.text.startswith(".") and len(each.text) <= 2 for each in (left, right)):
        raise Untranslatable(
            "rows with a missing value are left out where the column is in the model; elsewhere that cannot be said"
        )
    return Binary(operator, _value(left), _value(right))


def _called(function: str, values: tuple[Tree, ...]) -> Node:
    match function, values:
        case "inlist", (item, first, *others):
            return Member(_value(item), tuple(_literal(each) for each in (first, *others)))
        case (("inrange" | "between"), (item, low, high)):
            inside = _value(item)
            return Binary("and", Binary(">=", inside, _value(low)), Binary("<=", inside, _value(high)))
        case name, _ if name in _MISSING_CALLS:
            raise Untranslatable("a condition on missing values cannot be said in a specification")
    raise Untranslatable(f"{function}() is not known in a sample condition")


def _literals(tree: Tree) -> tuple[float | str, ...]:
    match tree:
        case Call("c", arguments):
            return tuple(_literal(value) for _, value in arguments)
        case Operation(":", left, right):
            low, high = _literal(left), _literal(right)
            if isinstance(low, float) and isinstance(high, float) and 0 <= high - low <= 50:
                return tuple(low + step for step in range(int(high - low) + 1))
    return (_literal(tree),)


def _literal(tree: Tree) -> float | str:
    match bare(tree):
        case Number(value):
            return value
        case Prefix("-", Number(value)):
            return -value
        case Text(text) if "'" not in text and text:
            return text
    raise Untranslatable("a number or a text in quotes was expected")


def _value(tree: Tree) -> Node:
    tree = bare(tree)
    column = column_named(tree)
    if column and not column.startswith((".", "_")) and "::" not in column:
        return Column(column)
    match tree:
        case Operation("+" | "-" | "*" | "/" as operator, left, right):
            return Binary(operator, _value(left), _value(right))
        case Name(text):
            raise Untranslatable(f"`{text[:20]}` depends on the order of the rows or on what is not in this line")
    return Literal(_literal(tree))
