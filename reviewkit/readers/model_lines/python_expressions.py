"""Columns and sample conditions in the expressions of Python scripts."""

import ast
from collections.abc import Iterator

from reviewkit.readers.model_lines.pieces import Pieces
from reviewkit.readers.model_lines.row_conditions import add_condition


def text_in(node: ast.expr | None) -> str | None:
    """A text that stands in the line, parts joined by + included."""
    match node:
        case ast.Constant(str(value)):
            return value
        case ast.BinOp(left, ast.Add(), right):
            first, second = text_in(left), text_in(right)
            return None if first is None or second is None else first + second
    return None


def source(node: ast.AST | None) -> str:
    """The expression as text, for showing."""
    return ast.unparse(node) if node is not None else "(nothing)"


def last_name(node: ast.expr) -> str:
    """The last part of a dotted name."""
    match node:
        case ast.Attribute(_, name):
            return name
        case ast.Name(name):
            return name
    return ""


def formula_text(node: ast.expr | None) -> str | None:
    """`np.log(df["y"] + 1)` as `np.log(y + 1)`."""
    match node:
        case ast.Subscript(_, ast.Constant(str(name))) if "`" not in name and name:
            return f"`{name}`"
        case ast.Attribute(ast.Name(frame), name) if frame not in ("np", "numpy", "math"):
            return f"`{name}`"
        case ast.Name(name):
            return name
        case ast.Constant(int() | float() as value) if not isinstance(value, bool):
            return f"{value:.12g}"
        case ast.BinOp(left, operator, right):
            sign = {ast.Add: "+", ast.Sub: "-", ast.Mult: "*", ast.Div: "/", ast.Pow: "^"}.get(type(operator))
            first, second = formula_text(left), formula_text(right)
            return f"({first} {sign} {second})" if sign and first and second else None
        case ast.Call(function, [argument], []):
            inner = formula_text(argument)
            return f"{ast.unparse(function)}({inner})" if inner and _dotted(function) else None
    return None


def _dotted(node: ast.expr) -> bool:
    return isinstance(node, ast.Name) or (isinstance(node, ast.Attribute) and isinstance(node.value, ast.Name))


def columns_in(node: ast.expr | None) -> list[str] | None:
    """Columns of `sm.add_constant(df[["x", "z"]])`."""
    match node:
        case ast.Call(function, [inner, *_], _) if last_name(function) == "add_constant":
            return columns_in(inner)
        case ast.Subscript(_, ast.List(items) | ast.Tuple(items)):
            names = [text_in(item) for item in items]
            return None if any(name is None or "`" in name for name in names) else [name for name in names if name]
        case ast.Subscript(_, ast.Constant(str(name))) if "`" not in name:
            return [name]
        case ast.Attribute(ast.Name(_), name):
            return [name]
    return None


def column_in(node: ast.expr | None) -> str | None:
    """The column in `df["v"]`, `df.v` or `"v"`."""
    columns = columns_in(node)
    return columns[0] if columns and len(columns) == 1 else text_in(node)


def read_data(node: ast.expr | None, pieces: Pieces) -> None:
    """Conditions in `df[df["year"] > 2000]`, `df.query("year > 2000")`, `df.loc[…]`."""
    for _ in range(10):
        match node:
            case ast.Name(_) | None:
                return
            case ast.Subscript(inner, ast.Compare() | ast.BinOp() | ast.UnaryOp() | ast.Call() as condition):
                read_condition(condition, pieces)
                node = inner
            case ast.Call(ast.Attribute(inner, "query"), [ast.Constant(str(text))], _):
                add_condition(_query_words(text), pieces)
                node = inner
            case ast.Call(ast.Attribute(inner, "dropna" | "copy" | "reset_index"), [], []):
                node = inner
            case ast.Attribute(inner, "loc"):
                node = inner
            case _:
                pieces.leave(f"data={source(node)}", "what is done to the data here is not carried over")
                return


def _query_words(text: str) -> str:
    pieces = []
    for quoted in _quoted_parts(text):
        for word, sign in ((" and ", " & "), (" or ", " | "), ("not ", "!"), (" in [", " %in% c("), ("]", ")")):
            quoted = quoted if quoted[:1] in "\"'" else quoted.replace(word, sign)
        pieces.append(quoted)
    return "".join(pieces)


def _quoted_parts(text: str) -> Iterator[str]:
    part, quote = "", ""
    for letter in text:
        if quote:
            part += letter
            if letter == quote:
                yield part
                part, quote = "", ""
        elif letter in "\"'":
            yield part
            part, quote = letter, letter
        else:
            part += letter
    yield part


def read_condition(node: ast.expr, pieces: Pieces) -> None:
    """Add a sample condition such as `df["year"] > 2000`."""
    text = _condition_text(node)
    if text is None:
        pieces.leave(source(node), "this sample condition is not one a specification can hold")
    else:
        add_condition(text, pieces)


def _condition_text(node: ast.expr) -> str | None:
    match node:
        case ast.BinOp(left, ast.BitAnd() | ast.BitOr() as operator, right):
            first, second = _condition_text(left), _condition_text(right)
            sign = "&" if isinstance(operator, ast.BitAnd) else "|"
            return f"({first}) {sign} ({second})" if first and second else None
        case ast.UnaryOp(ast.Invert() | ast.Not(), inner):
            inside = _condition_text(inner)
            return f"!({inside})" if inside else None
        case ast.Compare(left, [operator], [right]):
            signs: dict[type[ast.cmpop], str] = {
                ast.Lt: "<",
                ast.LtE: "<=",
                ast.Gt: ">",
                ast.GtE: ">=",
                ast.Eq: "==",
                ast.NotEq: "!=",
            }
            compared, value, comparison = formula_text(left), _operand(right), signs.get(type(operator))
            return f"{compared} {comparison} {value}" if compared and value and comparison else None
        case ast.Call(ast.Attribute(inner, "isin"), [ast.List(items)], []):
            column, values = formula_text(inner), [_operand(item) for item in items]
            return None if column is None or None in values else f"{column} %in% c({', '.join(map(str, values))})"
    return formula_text(node)


def _operand(node: ast.expr) -> str | None:
    match node:
        case ast.Constant(str(text)):
            return f'"{text}"' if '"' not in text and "\\" not in text else None
        case ast.UnaryOp(ast.USub(), ast.Constant(int() | float() as value)):
            return f"-{value:.12g}"
    return formula_text(node)
