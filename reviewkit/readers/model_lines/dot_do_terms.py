"""Lists of variables in .do scripts: outcome, covariates, factor notation."""

import re
from itertools import combinations, product
from math import prod

from reviewkit.readers.model_lines.pieces import Pieces

_NAME = r"[^\W\d]\w*"
_PIECE = re.compile(rf"^(?:(?P<operators>[\w()]*)\.)?(?P<names>{_NAME}|\([\w.\s]+\))$")
_LAG = re.compile(r"(?:^|[#(\s])[cio]*[LFDS]\d*(?:\([^)]*\))?\.(?=[^\W\d(])", re.IGNORECASE)
_MOST_TERMS = 200
_BASE = re.compile(r"^i?b(\d+)$")


class Left(Exception):
    """A piece that is not carried over; the message says why."""


def read_varlist(body: str, pieces: Pieces) -> None:
    """Outcome and terms of `lny i.treat##c.x1 x2`; macros, ranges, wildcards and lags are left with a reason."""
    words = _words(body)
    if not words:
        pieces.leave("(nothing)", "neither outcome nor terms are named")
        return
    outcome, *others = words
    if re.fullmatch(_NAME, outcome):
        pieces.outcome = {"column": outcome, "transform": "none", "zeros": "kept"}
    else:
        pieces.leave(outcome, _why_left(outcome) or "the outcome is not a column")
    for word in others:
        try:
            pieces.add_terms(_terms(word))
        except Left as why:
            pieces.leave(word, str(why))


def _words(body: str) -> list[str]:
    """Words separated by blanks outside of brackets."""
    words: list[str] = []
    depth, word = 0, ""
    for letter in body:
        depth = max(0, depth + (letter == "(") - (letter == ")"))
        if letter.isspace() and depth == 0:
            words, word = [*words, word] if word else words, ""
        else:
            word += letter
    return [*words, word] if word else words


def _why_left(word: str) -> str:
    if "`" in word or "$" in word or "'" in word:
        return "what a macro holds is not in this line; name its columns"
    if "=" in word:
        return "instruments are not covered"
    if "|" in word:
        return "this old way of writing products is not covered; write both terms and the product"
    if _LAG.search(word):
        return "lags need the order of the data, which a specification does not hold; make a column of it first"
    if (
        word == "_all"
        or "?" in word
        or (re.search(r"(?:^|\w|\*)\*(?:$|\w*$)", word) and not re.search(r"^i\.\w+\*[\w.]", word))
    ):
        return "a wildcard stands for columns that are not named in this line; name them"
    if re.fullmatch(rf"{_NAME}-{_NAME}", word):
        return "a range stands for columns by their order in the data; name them"
    return ""


def _terms(word: str) -> list[str]:
    reason = _why_left(word)
    if reason:
        raise Left(reason)
    if "*" in word:  # the old way, i.a*x, where a name alone is a number
        word = "##".join(part if "." in part else f"c.{part}" for part in word.split("*"))
    crossed = [re.split(r"#", part) for part in re.split(r"##", word)]
    groups = [[_alternatives(piece, len(crossed) > 1 or len(group) > 1) for piece in group] for group in crossed]
    if len(groups) > 5 or prod(len(each) for group in groups for each in group) > _MOST_TERMS:
        raise Left("crossing so many terms is not covered; write them out")
    joined = [[tuple(chosen) for chosen in product(*group)] for group in groups]
    terms: list[str] = []
    for count in range(1, len(joined) + 1):
        for chosen_groups in combinations(joined, count):
            for chosen in product(*chosen_groups):
                terms.append(_product(tuple(part for parts in chosen for part in parts)))
    return list(dict.fromkeys(terms))


def _product(parts: tuple[str, ...]) -> str:
    """`x` twice is its square; a factor twice is itself."""
    counts = {part: parts.count(part) for part in parts}
    return ":".join(
        f"{part}^{count}" if count > 1 and not part.startswith("factor(") else part for part, count in counts.items()
    )


def _alternatives(piece: str, in_product: bool) -> list[str]:
    """A piece of a product as one or several parts."""
    found = _PIECE.match(piece)
    if found is None:
        raise Left("this piece is not understood")
    names = re.findall(rf"(?:(\w*)\.)?({_NAME})", found["names"])
    return [_part(own or found["operators"], name, in_product) for own, name in names]


def _part(operators: str | None, name: str, in_product: bool) -> str:
    if not operators:
        return f"factor({name})" if in_product else name
    if operators == "c":
        return name
    base = _BASE.match(operators)
    if operators == "i" or base:
        return f"factor({name}, base={base[1]})" if base else f"factor({name})"
    if operators.isdigit() or (operators.startswith("i") and operators[1:].isdigit()):
        raise Left("an indicator of a single class is not covered; make a column of it")
    raise Left("this choice of base or omitted classes is not covered; say factor(column, base=…)")
