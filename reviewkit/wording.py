"""How values are put into words: closed formatters, one place for digits, nouns and lists."""

import math
import re
import unicodedata
from collections.abc import Callable, Iterable, Mapping, Sequence
from types import MappingProxyType
from typing import Protocol, runtime_checkable

NOT_AVAILABLE = "not available"
"""Stands where a number would be not a number."""

UNBOUNDED = "without bound"
"""Stands where a number would be infinite."""

_MOST_DECIMALS = 6
_WHOLE_FROM = 10.0  # percents of this size and more are given without decimals
_SMALLEST_P = 0.001


@runtime_checkable
class AsPrinted(Protocol):
    """A figure that keeps the digits it was printed with."""

    @property
    def value(self) -> float:
        """The number."""

    @property
    def decimals(self) -> int:
        """Digits after the point."""


# --- digits -----------------------------------------------------------------------------------------------------


def fixed(number: float, decimals: int) -> str:
    """The number with `decimals` digits after the point, thousands set apart, never a negative zero."""
    if not math.isfinite(number):
        return NOT_AVAILABLE if math.isnan(number) else UNBOUNDED
    shown = f"{number:,.{decimals}f}"
    return shown if re.search(r"[1-9]", shown) else shown.lstrip("-")


def decimals_for(number: float, digits: int) -> int:
    """Decimals that show `number` with `digits` significant digits, between 0 and 6."""
    if not math.isfinite(number) or number == 0:
        return digits
    place = math.floor(math.log10(abs(float(f"{number:.{digits - 1}e}"))))
    return min(max(digits - 1 - place, 0), _MOST_DECIMALS)


def significant(number: float, digits: int) -> str:
    """The number with that many significant digits; tiny numbers as `1.2e-9`, whole digits never cut."""
    if number and abs(number) < 10.0**-_MOST_DECIMALS:
        return re.sub(r"e-0*", "e-", f"{number:.{digits - 1}e}")
    return fixed(number, decimals_for(number, digits))


def estimate_with_error(estimate: float, error: float) -> str:
    """`0.380 (0.11)` would claim too much: the error has two significant digits, the estimate as many decimals."""
    decimals = decimals_for(error, 2)
    if not math.isfinite(error) or abs(error) < 10.0**-_MOST_DECIMALS:
        return f"{significant(estimate, 3)} ({significant(error, 2)})"
    return f"{fixed(estimate, decimals)} ({fixed(error, decimals)})"


def interval(low: float | None, high: float | None, unit: str = "") -> str:
    """`0.16 to 0.60`, `4 to 41 %`: both ends with the decimals that their distance calls for."""
    if low is None or high is None or not (math.isfinite(low) and math.isfinite(high)):
        return NOT_AVAILABLE
    decimals = decimals_for((high - low) / 4, 2)
    if unit == "%":
        decimals = 0 if max(abs(low), abs(high)) >= _WHOLE_FROM and high - low >= 1 else max(decimals - 1, 1)
    ends = f"{fixed(low, decimals)} to {fixed(high, decimals)}"
    return f"{ends} {unit}" if unit else ends


# --- formatters of one value ------------------------------------------------------------------------------------


def number(value: object) -> str:
    """A number in general: whole numbers whole, others with three significant digits."""
    return _shown(value, lambda one: fixed(one, 0) if one == int(one) else significant(one, 3))


def estimate(value: object) -> str:
    """An estimate without its error beside it: three significant digits."""
    return _shown(value, lambda one: significant(one, 3))


def std_error(value: object) -> str:
    """A standard error: two significant digits."""
    return _shown(value, lambda one: significant(one, 2))


def percent(value: object) -> str:
    """A value in percent: `21 %`, `4.2 %`, `0.31 %`."""
    return _with_unit(_shown(value, _percent_digits), "%")


def signed_percent(value: object) -> str:
    """A value in percent with its sign: `+21 %`, `-4.2 %`, `0 %`."""
    shown = percent(value)
    return f"+{shown}" if re.match(r"[\d.,]*[1-9]", shown) and (_number(value) or 0) > 0 else shown


def size_percent(value: object) -> str:
    """A value in percent without its sign, for sentences that say the direction in words."""
    found = _number(value)
    return percent(value) if found is None else percent(abs(found))


def share(value: object) -> str:
    """A share between 0 and 1 in percent: 0.31 becomes `31 %`."""
    found = _number(value)
    return percent(value if found is None else 100 * found)


def count(value: object) -> str:
    """A count: `3,412`."""
    return _shown(value, lambda one: fixed(one, 0))


def p_value(value: object) -> str:
    """`p < 0.001`, `p = 0.032`, `p = 0.32`."""
    return _shown(value, _p_digits)


def direction(value: object) -> str:
    """`higher`, `lower` or `unchanged`, by the sign of a number."""
    return _by_sign(value, ("lower", "unchanged", "higher"))


def change(value: object) -> str:
    """A change in percent with its direction in words: `a fall of 29 %`, `a rise of 46 %`."""
    found = _number(value)
    if found is None or not math.isfinite(found) or found == 0:
        return percent(value)
    return f"a {'fall' if found < 0 else 'rise'} of {size_percent(value)}"


def sign(value: object) -> str:
    """`positive`, `negative` or `zero`."""
    return _by_sign(value, ("negative", "zero", "positive"))


def text(value: object) -> str:
    """A value as running text: names joined, numbers with three digits, nothing that breaks a line or a file."""
    if isinstance(value, tuple):
        return joined(tuple(text(one) for one in value))
    found = _number(value)
    if found is None or isinstance(value, AsPrinted):
        return clean(str(value))
    return number(value)


def counted(amount: float, noun: str, plural: str = "") -> str:
    """`1 row`, `3,412 rows`, `0 rows`; give `plural` where adding an s is wrong."""
    shown = fixed(amount, 0)
    return f"{shown} {noun}" if shown == "1" else f"{shown} {plural or noun + 's'}"


def joined(items: Iterable[str], last: str = "and") -> str:
    """`a`, `a and b`, `a, b and c`."""
    all_items = [item for item in items if item]
    return f" {last} ".join([", ".join(all_items[:-1]), all_items[-1]]) if len(all_items) > 1 else "".join(all_items)


def some_of(items: Sequence[str], most: int = 5) -> str:
    """`a, b and c`; of more than `most` the first, and how many more there are."""
    left = len(items) - most
    return joined(items if left <= 1 else (*items[:most], f"{left} more"))


def sentence(words: str) -> str:
    """The words with a capital letter and a full stop."""
    tidy = words.strip()
    ended = tidy if not tidy or tidy[-1] in ".?!" else tidy + "."
    return ended[:1].upper() + ended[1:]


def clean(words: str) -> str:
    """The words without control, direction-turning and other characters that a document may not hold."""
    spaced = re.sub(r"[\t\n\r\v\f\u0085\u2028\u2029]+", " ", words)
    return "".join(one for one in spaced if unicodedata.category(one) not in {"Cc", "Cf", "Cs", "Co", "Cn"})


def _counting(noun: str) -> Callable[[object], str]:
    return lambda value: _shown(value, lambda one: counted(one, noun))


FORMATTERS: Mapping[str, Callable[[object], str]] = MappingProxyType(
    {
        "percent": percent,
        "signed_percent": signed_percent,
        "size_percent": size_percent,
        "change": change,
        "share": share,
        "number": number,
        "estimate": estimate,
        "std_error": std_error,
        "count": count,
        "rows": _counting("row"),
        "clusters": _counting("cluster"),
        "values": _counting("value"),
        "p": p_value,
        "direction": direction,
        "sign": sign,
        "text": text,
        "list": text,
    }
)
"""All formatters that a placeholder `{fact|formatter}` may name; each takes one value and never fails."""


# --- parts ------------------------------------------------------------------------------------------------------


def _number(value: object) -> float | None:
    if isinstance(value, AsPrinted):
        return float(value.value)
    return float(value) if isinstance(value, int | float) else None


def _shown(value: object, digits: Callable[[float], str]) -> str:
    """The number in `digits`; a printed figure with its own digits; anything else as text."""
    if isinstance(value, AsPrinted):
        return fixed(value.value, value.decimals)
    found = _number(value)
    if found is None:
        return text(value)
    return digits(found) if math.isfinite(found) else fixed(found, 0)


def _with_unit(shown: str, unit: str) -> str:
    return f"{shown} {unit}" if re.search(r"\d$", shown) else shown


def _percent_digits(one: float) -> str:
    if one == 0:
        return "0"
    rounded_up = abs(float(f"{one:.1e}"))
    return fixed(one, 0) if rounded_up >= _WHOLE_FROM else significant(one, 2)


def _p_digits(one: float) -> str:
    if one < _SMALLEST_P:
        return f"p < {_SMALLEST_P}"
    decimals = 3 if one < 0.1 else 2
    return "p > 0.99" if one > 0.99 else f"p = {fixed(one, decimals)}"


def _by_sign(value: object, words: Sequence[str]) -> str:
    found = _number(value)
    if found is None or math.isnan(found):
        return NOT_AVAILABLE if found is not None else text(value)
    return words[1 + (found > 0) - (found < 0)]
