"""Reads conditions of rules: a closed one-line grammar over facts, never evaluated as code."""

import ast
import warnings
from collections.abc import Mapping
from dataclasses import dataclass, field

from reviewkit.clauses import (
    ARGUMENTS,
    And,
    Calculation,
    Clause,
    Comparison,
    Expression,
    Literal,
    Lookup,
    Name,
    Not,
    Or,
    Stated,
    decide,
    first_missing,
    missing,
    names_of,
    parts_of,
)
from reviewkit.refusals import Refusal
from reviewkit.vocabulary import Kind, Vocabulary, closest

LONGEST = 300
"""Characters that a condition may have."""
DEEPEST = 20
"""Levels of nesting that a condition may have."""


@dataclass(frozen=True, slots=True)
class Condition:
    """A condition that was read and type-checked."""

    text: str
    clause: Clause
    names: tuple[str, ...] = field(init=False)
    """The facts it names, settings left out."""

    def __post_init__(self) -> None:
        object.__setattr__(self, "names", tuple(dict.fromkeys(names_of(self.clause))))

    def decide(self, lookup: Lookup) -> bool | None:
        """True, false, or None where it is unknown."""
        return decide(self.clause, lookup)

    def missing(self, lookup: Lookup) -> tuple[str, ...]:
        """All facts that can still decide it; a comparison with one that is not stated waits on that one only."""
        return tuple(dict.fromkeys(missing(self.clause, lookup)))

    def first_missing(self, lookup: Lookup) -> tuple[str, ...]:
        """The facts of the first undecided clause that an answer can decide: later clauses may not matter."""
        return first_missing(self.clause, lookup)

    def comparisons(self) -> tuple[Comparison, ...]:
        """Its comparisons, in order."""
        return tuple(part for part in parts_of(self.clause) if isinstance(part, Comparison))


ALWAYS = Condition("True", True)


# --- reading ----------------------------------------------------------------------------------------------------

_GRAMMAR = (
    "facts, numbers, 'texts', [lists], setting.name, and, or, not, == != < <= > >=, in, + - * /, "
    "abs() min() max() exp() log() stated()"
)
_COMPARE = {
    ast.Eq: "==",
    ast.NotEq: "!=",
    ast.Lt: "<",
    ast.LtE: "<=",
    ast.Gt: ">",
    ast.GtE: ">=",
    ast.In: "in",
    ast.NotIn: "not in",
}
_ARITHMETIC = {ast.Add: "+", ast.Sub: "-", ast.Mult: "*", ast.Div: "/"}
_TYPES = {
    **dict.fromkeys((Kind.ONE, Kind.ANSWER, Kind.TEXT), "words"),
    **dict.fromkeys((Kind.SOME, Kind.NAMES), "a list of words"),
}


def read_condition(
    text: str, vocabulary: Vocabulary, settings: Mapping[str, float] | None = None, where: str = "condition"
) -> Condition:
    """Read a condition and check its types; a refusal names `where`, the clause, and what is allowed."""
    return Condition(text, _Reader(text, vocabulary, settings or {}, where).clause(_parsed(text, where), 0))


def _parsed(text: str, where: str) -> ast.expr:
    """The syntax tree of a text that is short, one line, and not nested too deeply."""
    if len(text) > LONGEST:
        raise Refusal(where, f"the condition has {len(text)} characters", f"at most {LONGEST}", "Split the rule")
    if not text.isprintable() or "\\" in text:
        raise Refusal(where, "the condition holds a line break, a backslash or an invisible character", _GRAMMAR)
    if _nesting(text) > DEEPEST:
        raise Refusal(where, "the condition is nested too deeply", f"{DEEPEST} levels", "Simplify it")
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            return ast.parse(text.strip(), mode="eval").body
    except (SyntaxError, ValueError, Warning, MemoryError, RecursionError):
        raise Refusal(where, f"`{text}` cannot be read as a condition", _GRAMMAR) from None


def _nesting(text: str) -> int:
    depth = deepest = 0
    for sign in text:
        depth += (sign in "([{") - (sign in ")]}")
        deepest = max(deepest, depth)
    return deepest


@dataclass(frozen=True, slots=True)
class _Reader:
    """Turns a syntax tree into clauses, and refuses whatever the grammar does not know."""

    text: str
    vocabulary: Vocabulary
    settings: Mapping[str, float]
    where: str

    def refusal(self, node: ast.AST, what: str, allowed: str = _GRAMMAR, remedy: str = "") -> Refusal:
        clause = ast.get_source_segment(self.text.strip(), node) or self.text
        return Refusal(self.where, f"in `{clause}`: {what}", allowed, remedy)

    def deeper(self, node: ast.AST, depth: int) -> int:
        if depth >= DEEPEST:
            raise Refusal(self.where, "the condition is nested too deeply", f"{DEEPEST} levels", "Simplify it")
        return depth + 1

    def clause(self, node: ast.expr, depth: int) -> Clause:
        depth = self.deeper(node, depth)
        match node:
            case ast.Constant(value=bool(value)):
                return value
            case ast.BoolOp(op=connective, values=values):
                parts = tuple(self.clause(value, depth) for value in values)
                return And(parts) if isinstance(connective, ast.And) else Or(parts)
            case ast.UnaryOp(op=ast.Not(), operand=operand):
                return Not(self.clause(operand, depth))
            case ast.Compare():
                return self.comparison(node, depth)
            case ast.Call(func=ast.Name(id="stated"), args=[argument], keywords=[]):
                fact = self.expression(argument, depth)
                if isinstance(fact, Name):
                    return Stated(fact)
        raise self.refusal(node, "this is neither true nor false", "a comparison, stated(fact), and, or, not")

    def comparison(self, node: ast.Compare, depth: int) -> Clause:
        sides = [self.expression(side, depth) for side in (node.left, *node.comparators)]
        signs = [_COMPARE.get(type(op), "") for op in node.ops]
        if not all(signs):
            raise self.refusal(node, "this comparison is not known here")
        pairs = tuple(Comparison(sign, *pair) for sign, *pair in zip(signs, sides, sides[1:], strict=False))
        for pair in pairs:
            self.check(node, pair)
        return pairs[0] if len(pairs) == 1 else And(pairs)

    def expression(self, node: ast.expr, depth: int) -> Expression:
        depth = self.deeper(node, depth)
        match node:
            case ast.Constant(value=bool()):
                raise self.refusal(node, "true and false stand alone, not in comparisons", "'yes', 'no'")
            case ast.Constant(value=int(value) | float(value)) if abs(value) < 1e300:
                return Literal(float(value))
            case ast.Constant(value=str(value)):
                return Literal(value)
            case ast.Name() | ast.Attribute():
                return self.name(node)
            case ast.List(elts=items) | ast.Tuple(elts=items):
                return self.listed(node, [self.expression(item, depth) for item in items])
            case ast.UnaryOp(op=ast.USub(), operand=operand):
                return self.calculation(node, "negative", [self.expression(operand, depth)])
            case ast.BinOp(left=left, op=op, right=right) if type(op) in _ARITHMETIC:
                both = [self.expression(side, depth) for side in (left, right)]
                return self.calculation(node, _ARITHMETIC[type(op)], both)
            case ast.Call(func=ast.Name(id=function), args=arguments, keywords=[]) if function in ARGUMENTS:
                return self.calculation(node, function, [self.expression(each, depth) for each in arguments])
        raise self.refusal(node, "this has no meaning here")

    def name(self, node: ast.expr) -> Expression:
        name = ast.unparse(node) if _dotted(node) else ""
        if name.startswith("setting."):
            short = name.removeprefix("setting.")
            if short not in self.settings:
                raise self.refusal(node, "there is no setting of that name", ", ".join(self.settings))
            return Literal(self.settings[short], name)
        definition = self.vocabulary.get(name)
        if definition is None:
            names = [each.name for each in self.vocabulary]
            raise self.refusal(node, "there is no fact of that name", "names in facts.toml", closest(name, names))
        return Name(definition)

    def listed(self, node: ast.expr, items: list[Expression]) -> Literal:
        values = tuple(item.value for item in items if isinstance(item, Literal) and not isinstance(item.value, tuple))
        if len(values) < len(items) or len({type(value) for value in values}) != 1:
            raise self.refusal(node, "a list holds texts only or numbers only", "['a', 'b'], [1, 2]")
        return Literal(values)

    def calculation(self, node: ast.expr, function: str, arguments: list[Expression]) -> Expression:
        least, most = ARGUMENTS.get(function, (1, 2))
        if not least <= len(arguments) <= most or any(_type(argument) != "a number" for argument in arguments):
            raise self.refusal(
                node, "this calculates with what is not a number, or with too many or too few", "numbers"
            )
        first = arguments[0]
        if function == "negative" and isinstance(first, Literal) and isinstance(first.value, float):
            return Literal(-first.value)
        return Calculation(function, tuple(arguments))

    def check(self, node: ast.expr, pair: Comparison) -> None:
        """Refuse a comparison of unlike things, and texts that are no option of the fact beside them."""
        left, right = _type(pair.left), _type(pair.right)
        if pair.sign in ("in", "not in"):
            suits = right == {"words": "a list of words", "a number": "a list of numbers"}.get(left)
        else:
            suits = left == right and (left == "a number" or (left == "words" and pair.sign in ("==", "!=")))
        if not suits:
            raise self.refusal(node, f"{left} and {right} cannot be compared with `{pair.sign}`", _COMPARABLE)
        self.check_options(node, pair.left, pair.right)
        self.check_options(node, pair.right, pair.left)

    def check_options(self, node: ast.expr, fact: Expression, other: Expression) -> None:
        if not (isinstance(fact, Name) and fact.definition.options and isinstance(other, Literal)):
            return
        values = other.value if isinstance(other.value, tuple) else (other.value,)
        for value in values:
            if value not in fact.definition.options:
                remedy = f"Write stated({fact.name})" if value == "not stated" else ""
                allowed = ", ".join(f"'{option}'" for option in fact.definition.options)
                raise self.refusal(node, f"'{value}' is no option of {fact.name}", allowed, remedy)


_COMPARABLE = "numbers with == != < <= > >=, words with == !=, words in a list, a number in a list of numbers"


def _dotted(node: ast.expr) -> bool:
    return isinstance(node, ast.Name) or (isinstance(node, ast.Attribute) and _dotted(node.value))


def _type(expression: Expression) -> str:
    match expression:
        case Name(definition):
            return _TYPES.get(definition.kind, "a number")
        case Literal(value=str()):
            return "words"
        case Literal(value=tuple() as values):
            return "a list of words" if isinstance(values[0], str) else "a list of numbers"
        case _:
            return "a number"
