"""Small things of typography that finished notes share: real minus signs, tied per cent signs, columns of numbers."""

import re
from collections.abc import Iterable

from reviewkit.wording import clean

_NUMERIC = re.compile(r"^[<>(]?\s*[-+−]?[\d,.]+(e-?\d+)?\)?$")
_EMPTY = ("", "–")


def typeset(text: str) -> str:
    """Clean text with real minus signs, and per cent signs tied to their numbers."""
    minus = re.sub(r"(?<![\w.)\]-])-(?=[\d.]*\d)", "−", clean(text))
    return re.sub(r"(\d) %", "\\1\u00a0%", minus)


def is_numeric(cells: Iterable[str]) -> bool:
    """Whether a column's cells are numbers, empty ones aside, so that they are set to the right."""
    shown = [cell for cell in cells if cell not in _EMPTY]
    return bool(shown) and all(_NUMERIC.match(cell) for cell in shown)
