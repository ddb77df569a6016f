"""Terms and row conditions of a specification: a closed grammar, read by our own parser and never evaluated as code."""

import re
from collections.abc import Callable
from dataclasses import dataclass

from reviewkit.refusals import Refusal

LONGEST = 300
"""Characters that an expression may have."""
DEEPEST = 20
"""Levels of nesting that an expression may have."""
FUNCTIONS = ("log", "sqrt", "exp", "asinh", "abs")


@dataclass(frozen=True, slots=True)
class Column:
    """A column of the data."""

    name: str

    def __str__(self) -> str:
        return self.name if _BARE.fullmatch(self.name) and self.name not in _WORDS else f"`{self.name}`"


@dataclass(frozen=True, slots=True)
class Literal:
    """A number or a text in quotes."""

    value: float | str

    def __str__(self) -> str:
        return _number_text(self.value) if isinstance(self.value, float) else _quoted(self.value, "'")


@dataclass(frozen=True, slots=True)
class Apply:
    """One of `FUNCTIONS` of an argument."""

    function: str
    argument: "Node"

    def __str__(self) -> str:
        return f"{self.function}({self.argument})"


@dataclass(frozen=True, slots=True)
class Binary:
    """Arithmetic, a comparison or a connective of two nodes."""

    operator: str
    left: "Node"
    right: "Node"

    def __str__(self) -> str:
        gap = "" if self.operator == "^" else " "
        return f"{_bracketed(self.left, self.operator)}{gap}{self.operator}{gap}{_bracketed(self.right, self.operator)}"


@dataclass(frozen=True, slots=True)
class Unary:
    """`-` or `not` before a node."""

    operator: str
    operand: "Node"

    def __str__(self) -> str:
        if self.operator == "not":
            return f"not {_bracketed(self.operand, 'not')}"
        return f"-{_bracketed(self.operand, '*')}"


@dataclass(frozen=True, slots=True)
class Member:
    """`column in ('a', 'b')`."""

    item: "Node"
    values: tuple[float | str, ...]

    def __str__(self) -> str:
        return f"{self.item} in ({', '.join(str(Literal(value)) for value in self.values)})"


Node = Column | Literal | Apply | Binary | Unary | Member


@dataclass(frozen=True, slots=True)
class Factor:
    """A column whose values are classes; `base` is the class that the others are compared with."""

    column: str
    base: float | str | None = None

    def __str__(self) -> str:
        if self.base is None:
            return f"factor({Column(self.column)})"
        base = _quoted(self.base, '"') if isinstance(self.base, str) else _number_text(self.base)
        return f"factor({Column(self.column)}, base={base})"


@dataclass(frozen=True, slots=True)
class Term:
    """A product of parts; one part for a plain term."""

    parts: tuple[Node | Factor, ...]

    def __str__(self) -> str:
        return ":".join(map(part_text, self.parts))


def read_terms(text: str, where: str) -> tuple[Term, ...]:
    """Read one entry of a list of terms; `a*b` gives a, b and a:b."""
    parser = _Parser(text, where)
    crossed = [parser.product_of_parts()]
    while parser.take("*"):
        crossed.append(parser.product_of_parts())
    parser.finish()
    terms: list[Term] = []
    for factor in crossed:
        terms += [factor, *(Term((*old.parts, *factor.parts)) for old in terms)]
    return tuple(dict.fromkeys(sorted(terms, key=lambda term: len(term.parts))))


def read_row_condition(text: str, where: str) -> Node:
    """Read a `where` expression such as `year >= 2015 and region != 'north'`."""
    parser = _Parser(text, where)
    node = parser.disjunction()
    parser.finish()
    return node


def read_column_expression(text: str, where: str) -> Node:
    """Read a numeric expression of columns, such as `log(herd + 1)`."""
    parser = _Parser(text, where)
    node = parser.sum()
    parser.finish()
    return node


def columns_of(node: Node | Factor | Term) -> tuple[str, ...]:
    """The columns that an expression uses, each once, in order."""
    match node:
        case Column(name) | Factor(name):
            found: tuple[str, ...] = (name,)
        case Term(parts):
            found = tuple(each for part in parts for each in columns_of(part))
        case Apply(_, inner) | Unary(_, inner) | Member(inner, _):
            found = columns_of(inner)
        case Binary(_, left, right):
            found = (*columns_of(left), *columns_of(right))
        case _:
            found = ()
    return tuple(dict.fromkeys(found))


_BARE = re.compile(r"[^\W\d][\w.]*")
_WORDS = ("and", "or", "not", "in")
_TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)|(?P<name>[^\W\d][\w.]*)|`(?P<quoted>[^`]+)`"
    r"|'(?P<single>[^']*)'|\"(?P<double>[^\"]*)\"|(?P<sign><=|>=|==|!=|[-+*/^:(),<>=\[\]]))"
)
_COMPARISONS = ("<", "<=", ">", ">=", "==", "!=")
_BINDING = {"or": 1, "and": 2, "not": 3, "+": 5, "-": 5, "*": 6, "/": 6, "^": 8} | dict.fromkeys(_COMPARISONS, 4)


def part_text(part: Node | Factor) -> str:
    """A part of a term as it is written and named: arithmetic in brackets."""
    bare = isinstance(part, Column | Apply | Factor) or (isinstance(part, Binary) and part.operator == "^")
    return str(part) if bare else f"({part})"


def _number_text(value: float) -> str:
    short = f"{value:.12g}"
    return short if float(short) == value else repr(value)


def _quoted(text: str, mark: str) -> str:
    other = "'" if mark == '"' else '"'
    return f"{other}{text}{other}" if mark in text else f"{mark}{text}{mark}"


def _bracketed(node: Node, operator: str) -> str:
    loose = isinstance(node, Binary | Unary) and _BINDING[node.operator] <= _BINDING[operator]
    return f"({node})" if loose else str(node)


class _Parser:
    """Recursive descent over tokens `(kind, text)`."""

    def __init__(self, text: str, where: str) -> None:
        self.text, self.where, self.place, self.depth = text, where, 0, 0
        if len(text) > LONGEST:
            raise Refusal(where, f"the expression has {len(text)} characters", f"at most {LONGEST}", "Split it")
        self.tokens = self._tokens()

    def _tokens(self) -> list[tuple[str, str]]:
        tokens, place = [], 0
        while self.text[place:].strip():
            found = _TOKEN.match(self.text, place)
            if found is None:
                raise self.refusal(f"`{self.text[place:].strip()[:1]}` has no meaning here")
            kind = found.lastgroup or ""
            word = kind == "name" and found[kind] in _WORDS
            tokens.append(("sign" if word else kind, found[kind]))
            place = found.end()
        return tokens

    def refusal(self, what: str) -> Refusal:
        return Refusal(
            self.where,
            f"{what} in `{self.text}`",
            "columns, numbers, + - * / ^, a:b, factor(column), " + ", ".join(f"{name}()" for name in FUNCTIONS),
            "Put a name with blanks in `backticks`",
        )

    def take(self, *signs: str) -> str | None:
        """The next sign, if it is one of `signs`."""
        if self.place < len(self.tokens) and self.tokens[self.place][0] == "sign":
            sign = self.tokens[self.place][1]
            if sign in signs:
                self.place += 1
                return sign
        return None

    def need(self, sign: str) -> None:
        if not self.take(sign):
            raise self.refusal(f"`{sign}` is missing")

    def finish(self) -> None:
        if self.place < len(self.tokens):
            raise self.refusal(f"`{self.tokens[self.place][1]}` is unexpected")

    def deeper(self) -> None:
        self.depth += 1
        if self.depth > DEEPEST:
            raise Refusal(self.where, "the expression is nested too deeply", f"{DEEPEST} levels", "Simplify it")

    def product_of_parts(self) -> Term:
        parts = [self.part()]
        while self.take(":"):
            parts.append(self.part())
        return Term(tuple(parts))

    def part(self) -> Node | Factor:
        following = self.tokens[self.place + 1 : self.place + 2]
        if self.tokens[self.place : self.place + 1] == [("name", "factor")] and following == [("sign", "(")]:
            self.place += 2
            return self.factor()
        node = self.power()
        condition = isinstance(node, Binary | Unary) and _BINDING[node.operator] < _BINDING["+"]
        if condition or isinstance(node, Literal | Member):
            raise self.refusal(f"`{node}` is not a term by itself")
        return node

    def factor(self) -> Factor:
        column, base = self.column(), None
        if self.take(","):
            if self.tokens[self.place : self.place + 1] != [("name", "base")]:
                raise self.refusal("only base= may follow the column of factor()")
            self.place += 1
            self.need("=")
            base = self.literal()
        self.need(")")
        return Factor(column, base)

    def column(self) -> str:
        if self.place < len(self.tokens) and self.tokens[self.place][0] in ("name", "quoted"):
            self.place += 1
            return self.tokens[self.place - 1][1]
        raise self.refusal("a column name is missing")

    def literal(self) -> float | str:
        negative = self.take("-") is not None
        if self.place < len(self.tokens):
            kind, text = self.tokens[self.place]
            self.place += 1
            if kind == "number":
                if float(text) == float("inf"):
                    raise self.refusal(f"`{text}` is too large")
                return -float(text) if negative else float(text)
            if kind in ("single", "double") and not negative:
                return text
        raise self.refusal("a number or a text in quotes is missing")

    def disjunction(self) -> Node:
        return self._chain(self.conjunction, "or")

    def conjunction(self) -> Node:
        return self._chain(self.negation, "and")

    def negation(self) -> Node:
        if self.take("not"):
            self.deeper()
            node = Unary("not", self.negation())
            self.depth -= 1
            return node
        return self.comparison()

    def comparison(self) -> Node:
        left = self.sum()
        if self.take("in"):
            return Member(left, self.values())
        if self.take("not"):
            self.need("in")
            return Unary("not", Member(left, self.values()))
        sign = self.take(*_COMPARISONS)
        return Binary(sign, left, self.sum()) if sign else left

    def values(self) -> tuple[float | str, ...]:
        closing = {"(": ")", "[": "]"}[self.take("(", "[") or "("]
        values = [self.literal()]
        while self.take(","):
            values.append(self.literal())
        if len({type(value) for value in values}) > 1:
            raise self.refusal("numbers and texts are mixed in one list")
        self.need(closing)
        return tuple(values)

    def sum(self) -> Node:
        return self._chain(self.product, "+", "-")

    def product(self) -> Node:
        return self._chain(self.signed, "*", "/")

    def signed(self) -> Node:
        if self.take("-"):
            self.deeper()
            node = Unary("-", self.signed())
            self.depth -= 1
            return node
        return self.power()

    def power(self) -> Node:
        base = self.atom()
        return Binary("^", base, Literal(self._exponent())) if self.take("^") else base

    def _exponent(self) -> float:
        value = self.literal()
        if isinstance(value, str):
            raise self.refusal("a power must be a number")
        return value

    def atom(self) -> Node:
        if self.take("("):
            self.deeper()
            node = self.disjunction()
            self.need(")")
            self.depth -= 1
            return node
        kind = self.tokens[self.place][0] if self.place < len(self.tokens) else ""
        if kind in ("number", "single", "double"):
            return Literal(self.literal())
        name = self.column()
        return self.call(name) if kind == "name" and self.take("(") else Column(name)

    def call(self, name: str) -> Node:
        if name not in FUNCTIONS:
            lag = name.lower() in ("lag", "l", "shift")
            reason = "lags need the data's order, which a specification does not hold; make a column" if lag else ""
            raise Refusal(
                self.where, f"`{name}()` is not known here", ", ".join(f"{each}()" for each in FUNCTIONS), reason
            )
        self.deeper()
        node = Apply(name, self.sum())
        self.need(")")
        self.depth -= 1
        return node

    def _chain(self, operand: Callable[[], Node], *signs: str) -> Node:
        node = operand()
        while sign := self.take(*signs):
            node = Binary(sign, node, operand())
        return node
