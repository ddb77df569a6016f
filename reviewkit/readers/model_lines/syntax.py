"""Expressions of R, of formulas in Python and of .do scripts as trees: read, never evaluated."""

import re
from dataclasses import dataclass

LONGEST = 20_000
"""Characters that one line may have."""
DEEPEST = 40
_MOST_TOKENS = 6_000

_TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?L?)"
    r"|(?P<text>\"(?:[^\"\\]|\\.)*\"|'(?:[^'\\]|\\.)*')"
    r"|`(?P<quoted>[^`]+)`"
    r"|(?P<name>(?:[^\W\d]|\.(?!\d))[\w.]*(?:::?:?[^\W\d][\w.]*)?)"
    r"|(?P<sign>%[^%\s]{0,12}%|<-|->|\|>|\*\*|<=|>=|==|!=|~=|&&|\|\||\#\#|[-+*/^:()\[\]{},~|=<>&!$@\#;]))"
)

_PLAIN_NAME = re.compile(r"[\w.:]+")

_LEFT = {
    "->": (1, 2), "<-": (2, 1), "~": (3, 4), "||": (5, 6), "|": (5, 6), "&&": (7, 8), "&": (7, 8),
    "==": (11, 12), "!=": (11, 12), "~=": (11, 12), "<": (11, 12), ">": (11, 12), "<=": (11, 12), ">=": (11, 12),
    "+": (13, 14), "-": (13, 14), "*": (15, 16), "/": (15, 16), "|>": (17, 18), ":": (19, 20),
    "^": (24, 23), "**": (24, 23), "$": (31, 32), "@": (31, 32),
}  # fmt: skip
"""How strongly an operator binds to its left and its right, as R has it."""
_PREFIX = {"-": 21, "+": 21, "!": 9, "~": 4}
_PERCENT = (17, 18)


class Unreadable(Exception):
    """The text is no expression we know; the message says where it stopped."""


@dataclass(frozen=True, slots=True)
class Name:
    """A name, such as `sales` or `np.log`."""

    text: str


@dataclass(frozen=True, slots=True)
class Number:
    """A number as written."""

    value: float


@dataclass(frozen=True, slots=True)
class Text:
    """A text in quotes."""

    text: str


@dataclass(frozen=True, slots=True)
class Call:
    """`function(arguments)`; an argument without a name has the name ``."""

    function: str
    arguments: tuple[tuple[str, "Tree"], ...]

    def named(self, *names: str) -> "Tree | None":
        """The argument of that name."""
        return next((value for name, value in self.arguments if name in names), None)

    def unnamed(self) -> tuple["Tree", ...]:
        """Arguments without a name, in order."""
        return tuple(value for name, value in self.arguments if not name)


@dataclass(frozen=True, slots=True)
class Operation:
    """`left operator right`."""

    operator: str
    left: "Tree"
    right: "Tree"


@dataclass(frozen=True, slots=True)
class Prefix:
    """`operator operand`."""

    operator: str
    operand: "Tree"


@dataclass(frozen=True, slots=True)
class Bracket:
    """`(inner)`, kept since R's formulas tell `(a + b)` from `a + b`."""

    inner: "Tree"


@dataclass(frozen=True, slots=True)
class Pick:
    """`object[i, j]`."""

    of: "Tree"
    places: tuple["Tree | None", ...]


Tree = Name | Number | Text | Call | Operation | Prefix | Bracket | Pick


def parse(text: str) -> Tree:
    """The tree of one expression.

    Raises:
        Unreadable: the text is no expression, or too long or too deep.
    """
    parser = _Parser(text)
    tree = parser.expression(0)
    if not parser.done():
        raise Unreadable(f"`{parser.token()[1][:20]}` was not expected")
    return tree


def written(tree: "Tree | None") -> str:
    """The tree as text, for showing and for comparing."""
    match tree:
        case Name(text):
            return text if _PLAIN_NAME.fullmatch(text) else f"`{text}`"
        case Number(value):
            return f"{value:.12g}"
        case Text(text):
            escaped = re.sub(r'([\\"])', r"\\\1", text)
            return f'"{escaped}"'
        case Call(function, arguments):
            inner = ", ".join(f"{name} = {written(value)}" if name else written(value) for name, value in arguments)
            return f"{function}({inner})"
        case Operation(operator, left, right):
            gap = "" if operator in (":", "^", "**", "$", "@") else " "
            return f"{written(left)}{gap}{operator}{gap}{written(right)}"
        case Prefix(operator, operand):
            return f"{operator}{written(operand)}"
        case Bracket(inner_tree):
            return f"({written(inner_tree)})"
        case Pick(of, places):
            return f"{written(of)}[{', '.join(map(written, places))}]"
        case None:
            return ""


def bare(tree: "Tree") -> "Tree":
    """The tree without brackets around it."""
    while isinstance(tree, Bracket):
        tree = tree.inner
    return tree


def tokens_of(text: str) -> list[tuple[str, str]]:
    """Kinds and texts of the tokens."""
    if len(text) > LONGEST:
        raise Unreadable("the text is too long")
    tokens: list[tuple[str, str]] = []
    place, end = 0, len(text.rstrip())
    while place < end:
        found = _TOKEN.match(text, place)
        if found is None or len(tokens) >= _MOST_TOKENS:
            raise Unreadable(f"`{text[place:].strip()[:12]}` has no meaning here")
        kind = found.lastgroup or ""
        tokens.append((kind, found[kind]))
        place = found.end()
    return tokens


class _Parser:
    """Precedence climbing over tokens, with a bound on depth."""

    def __init__(self, text: str) -> None:
        self.tokens, self.place, self.depth = tokens_of(text), 0, 0

    def done(self) -> bool:
        return self.place >= len(self.tokens)

    def token(self) -> tuple[str, str]:
        return ("end", "the end") if self.done() else self.tokens[self.place]

    def take(self, *signs: str) -> bool:
        if self.token()[0] == "sign" and self.token()[1] in signs:
            self.place += 1
            return True
        return False

    def need(self, sign: str) -> None:
        if not self.take(sign):
            raise Unreadable(f"`{sign}` is missing before `{self.token()[1][:20]}`")

    def expression(self, least: int) -> Tree:
        self.depth += 1
        if self.depth > DEEPEST:
            raise Unreadable("the expression is nested too deeply")
        left = self.operand()
        steps = 0
        while (binding := self.binding()) and binding[0] >= least and steps < 400:
            operator = self.token()[1]
            self.place += 1
            left = Operation(operator, left, self.expression(binding[1]))
            steps += 1
        self.depth -= 1
        return left

    def binding(self) -> tuple[int, int] | None:
        kind, text = self.token()
        if kind != "sign":
            return None
        return _PERCENT if text.startswith("%") else _LEFT.get(text)

    def operand(self) -> Tree:
        kind, text = self.token()
        self.place += 1
        match kind:
            case "number":
                return Number(float(text.rstrip("L")))
            case "text":
                return self.picked(Text(re.sub(r"\\(.)", r"\1", text[1:-1])))
            case "name" | "quoted":
                return self.picked(self.called(text) if kind == "name" and self.take("(") else Name(text))
        if kind == "sign" and text == "(":
            inner = self.expression(0)
            self.need(")")
            return self.picked(Bracket(inner))
        if kind == "sign" and text in _PREFIX:
            return Prefix(text, self.expression(_PREFIX[text]))
        raise Unreadable(f"`{text[:20]}` was not expected")

    def called(self, function: str) -> Tree:
        arguments: list[tuple[str, Tree]] = []
        while not self.take(")"):
            name = ""
            following = self.tokens[self.place + 1 : self.place + 2]
            if self.token()[0] in ("name", "quoted", "text") and following == [("sign", "=")]:
                name = self.token()[1].strip("\"'")
                self.place += 2
            if self.token() == ("sign", ","):
                raise Unreadable("an argument is empty")
            arguments.append((name, self.expression(0)))
            if not self.take(","):
                self.need(")")
                break
        return Call(function, tuple(arguments))

    def picked(self, tree: Tree) -> Tree:
        if not self.take("["):
            return tree
        double = self.take("[")
        places: list[Tree | None] = []
        while True:
            places.append(None if self.token() in (("sign", ","), ("sign", "]")) else self.expression(0))
            if not self.take(","):
                break
        self.need("]")
        if double:
            self.need("]")
        return self.picked(Pick(tree, tuple(places))) if len(places) < DEEPEST else tree
