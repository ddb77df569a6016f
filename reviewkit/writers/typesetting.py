"""Small things of typography that finished notes share: real minus signs, tied per cent signs, columns of numbers."""

import re
from collections.abc import Iterable

from reviewkit.wording import clean

_NUMERIC = re.compile(r"^[<>(]?\s*[-+−]?[\d,.]+(e-?\d+)?\)?$")
_EMPTY = ("", "–")


_NO_BREAK = "\u00a0"
_LISTED = re.compile(r"\b(exhibits?|Table|tables?|sections?) (\d+[a-z]?(?:(?:, | and )\d+[a-z]?)*)")


def typeset(text: str) -> str:
    """Clean text with real minus signs, its numbers tied as in `tied`."""
    return re.sub(r"(?<![\w.)\]-])-(?=[\d.]*\d)", "−", tied(text))


def tied(text: str) -> str:
    """Clean text in which no line can end between a number and its per cent sign, or within `exhibits 2 and 3`."""
    percents = re.sub(r"(\d) %", rf"\1{_NO_BREAK}%", clean(text))
    return _LISTED.sub(lambda found: found[0].replace(" ", _NO_BREAK), percents)


def is_numeric(cells: Iterable[str]) -> bool:
    """Whether a column's cells are numbers, empty ones aside, so that they are set to the right."""
    shown = [cell for cell in cells if cell not in _EMPTY]
    return bool(shown) and all(_NUMERIC.match(cell) for cell in shown)
