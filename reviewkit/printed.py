"""A number as printed: its value, its digits, and the interval its rounding leaves open."""

import re
from dataclasses import dataclass

from reviewkit.refusals import Refusal

_PRINTED = re.compile(r"^[(\[]?\s*([+-]?)\s*(\d{0,15})(?:\.(\d{1,12}))?\s*(%?)\s*[)\]]?\s*([*†‡]{0,4})\s*[)\]]?$")
_MINUS_SIGNS = str.maketrans({"−": "-", "–": "-", "—": "-", "‐": "-", "‑": "-"})
_TOLERANCE = 1e-9  # of a printed unit: a float that lies on the rounding edge agrees


@dataclass(frozen=True, slots=True)
class Printed:
    """A printed figure: `0.10` means 0.10 ± 0.005."""

    text: str
    value: float
    decimals: int

    @property
    def half_unit(self) -> float:
        """Half a unit of the last printed digit, in units of the value."""
        return 0.5 * 10.0**-self.decimals

    @property
    def low(self) -> float:
        """The smallest number that rounds to this print."""
        return self.value - self.half_unit

    @property
    def high(self) -> float:
        """The largest number that rounds to this print."""
        return self.value + self.half_unit

    def agrees(self, number: float) -> bool:
        """Whether `number` rounds to this print, ties counted on either side."""
        return abs(number - self.value) <= self.half_unit * (1 + _TOLERANCE)

    def __str__(self) -> str:
        return self.text


def read_printed(text: str, where: str = "printed figure") -> Printed:
    """Read a figure as a manuscript prints it: `0.38`, `.38`, `−0.38`, `1,234`, `0,38`, `(0.11)`, `46 %`, `0.38***`."""
    found = _PRINTED.match(_plain(text))
    if found is None or not (found[2] or found[3]):
        raise Refusal(where, f"`{text[:40]}` is not a number", "digits with a decimal point or comma, such as 0.38")
    sign, whole, fraction = found[1], found[2] or "0", found[3] or ""
    value = float(f"{sign}{whole}.{fraction or '0'}")
    return Printed(text.strip(), value, len(fraction))


def _plain(text: str) -> str:
    """The text with ASCII minus signs, without blanks inside, and with a decimal point."""
    plain = re.sub(r"(?<=\d)[\s\u00a0\u2009\u202f'’](?=\d{3})", "", text.strip().translate(_MINUS_SIGNS))
    if re.search(r"\d,\d{3}(?:\D|$)", plain) and not re.search(r"(?:^|\D)0,\d{3}", plain):
        return re.sub(r",(?=\d{3})", "", plain)
    return plain.replace(",", ".") if plain.count(",") == 1 and "." not in plain else plain
