"""Which column another one is the transform of, found in the numbers alone."""

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import numpy
    import numpy.typing

    from reviewkit.readers.tables import Table

    Vector = numpy.typing.NDArray[numpy.float64]

_SCREENED = 300
"""Rows looked at before a candidate is checked on all rows."""
_FEWEST_VALUES = 8
"""Distinct values that must agree; two free constants fit fewer by chance."""
_RELATIVE = 2e-6
"""Largest relative error of a column stored in single precision, with a margin."""


@dataclass(frozen=True, slots=True)
class TracedTransform:
    """`column` equals a transform of `source` on every row where both are known."""

    column: str
    source: str
    transform: str
    """log, log_plus, asinh or sqrt, as a specification names them."""
    constant: float = 0.0
    """log_plus: log(source + constant) up to a shift, in units of `source`."""
    scale: float = 1.0
    """log, sqrt: the transform is of scale * source; asinh: asinh(scale * source)."""
    rows: int = 0
    """Rows on which the equality was checked."""
    zeros: str = "none present"
    """What became of rows where `source` is zero: none present, dropped, kept, replaced."""
    replacement: float | None = None
    """The value of `column` where zeros were replaced."""

    def sentence(self) -> str:
        """`equals log(sales + 1)`."""
        inner = self.source if self.scale == 1 else f"{self.scale:.6g} * {self.source}"
        if self.transform == "log_plus":
            inner = f"{self.source} + {self.constant:.6g}"
        shift = " up to a constant" if self.transform == "log_plus" and self.scale != 1 else ""
        name = {"log_plus": "log"}.get(self.transform, self.transform)
        return f"equals {name}({inner}){shift}"


def trace_transform(table: "Table", column: str) -> TracedTransform | None:
    """The column of which `column` is log(x), log(x + c), asinh(x) or sqrt(x), exact to rounding; None without one."""
    import numpy

    target = _numbers(table, column)
    if target is None or len(numpy.unique(target[numpy.isfinite(target)][:5000])) < _FEWEST_VALUES:
        return None
    coarse = _half_unit(target)
    for source in table.frame.columns:
        numbers = None if source == column else _numbers(table, str(source))
        found = None if numbers is None else _compared(target, numbers, coarse)
        if found:
            return TracedTransform(column, str(source), *found)
    return None


def _numbers(table: "Table", column: str) -> "Vector | None":
    import numpy
    import pandas

    values = table.frame[column]
    if not pandas.api.types.is_numeric_dtype(values):
        return None
    return values.to_numpy(dtype="float64", na_value=numpy.nan)


def _half_unit(target: "Vector") -> float:
    """Half a unit of the last decimal in which the column was written; 0 where it was written in full."""
    import numpy

    some = target[numpy.isfinite(target)][:_SCREENED]
    for decimals in range(2, 9):
        scaled = some * 10.0**decimals
        if (numpy.abs(scaled - numpy.round(scaled)) < 1e-6 * numpy.maximum(1, numpy.abs(scaled) * 1e-6)).all():
            return 0.5 * 10.0**-decimals
    return 0.0


Found = tuple[str, float, float, int, str, float | None]


def _compared(target: "Vector", source: "Vector", coarse: float) -> Found | None:
    """Transform, constant, scale, rows, zeros and replacement that turn `source` into `target`."""
    import numpy

    few_y, few_x = _screening_rows(target, source)
    if len(few_y) < _FEWEST_VALUES or not _rise_together(few_y, few_x) or len(numpy.unique(few_x)) < _FEWEST_VALUES:
        return None
    used = numpy.isfinite(target) & numpy.isfinite(source) & (source != 0)
    y, x = target[used], source[used]
    for form in _candidates(few_y, few_x, coarse):
        if _agrees(y, x, form, coarse):
            return *form, len(y), *_fate_of_zeros(target, source, form, coarse)
    return None


def _screening_rows(target: "Vector", source: "Vector") -> tuple["Vector", "Vector"]:
    """Some rows spread over the table where both are known and the source is not zero."""
    import numpy

    step = max(1, len(target) // (4 * _SCREENED))
    y, x = target[::step], source[::step]
    used = numpy.flatnonzero(numpy.isfinite(y) & numpy.isfinite(x) & (x != 0))[:_SCREENED]
    return y[used], x[used]


def _rise_together(y: "Vector", x: "Vector") -> bool:
    """Whether the larger source never goes with the smaller target, as under every transform looked for."""
    import numpy

    order = numpy.argsort(x, kind="stable")
    steps = numpy.diff(y[order])
    return bool((steps[numpy.diff(x[order]) > 0] >= 0).all())


Form = tuple[str, float, float]


def _candidates(y: "Vector", x: "Vector", coarse: float) -> Iterator[Form]:
    """Forms that agree on the screened rows, the simplest constants first."""
    import numpy

    with numpy.errstate(all="ignore"):
        forms = [*_log_forms(y, x), *_one_factor("asinh", numpy.sinh(y), x)]
        forms += [*_one_factor("sqrt", y * y, x)] if (x > 0).all() and (y >= 0).all() else []
        yield from (form for form in forms if _agrees(y, x, form, coarse))


def _one_factor(transform: str, undone: "Vector", x: "Vector") -> Iterator[Form]:
    import numpy

    ratios = undone / x
    scale = float(numpy.median(ratios))
    if math.isfinite(scale) and scale > 0:
        yield from ((transform, 0.0, factor) for factor in _simpler(scale))


def _log_forms(y: "Vector", x: "Vector") -> Iterator[Form]:
    """exp(y) = scale * x + shift, weighted so that each row counts by its relative error."""
    import numpy

    if (y > 700).any():  # exp() would overflow: no log of a finite number
        return
    if (x > 0).all():
        yield from _one_factor("log", numpy.exp(y), x)
    inverse = numpy.exp(-y)
    design = numpy.column_stack((x * inverse, inverse))
    if not numpy.isfinite(design).all():
        return
    norms = numpy.linalg.norm(design, axis=0)
    scale, shift = (
        float(each) for each in numpy.linalg.lstsq(design / norms, numpy.ones(len(y)), rcond=None)[0] / norms
    )
    if scale > 0:
        for factor in _simpler(scale):
            yield from (("log_plus", constant, factor) for constant in _simpler(shift / scale) if constant)


def _simpler(number: float) -> Iterator[float]:
    """The number rounded to ever more digits: the roundest that fits is taken."""
    if number == 0 or not math.isfinite(number):
        return
    for digits in (1, 2, 3, 5, 8):
        yield float(f"{number:.{digits - 1}e}")
    yield number


def _apply(x: "Vector", form: Form) -> "Vector":
    import numpy

    transform, constant, scale = form
    with numpy.errstate(all="ignore"):
        if transform == "asinh":
            return numpy.asarray(numpy.arcsinh(scale * x))
        inner = scale * (x + constant)
        return numpy.asarray(numpy.sqrt(inner) if transform == "sqrt" else numpy.log(inner))


def _agrees(y: "Vector", x: "Vector", form: Form, coarse: float) -> bool:
    import numpy

    allowed = numpy.maximum(_RELATIVE * numpy.maximum(1.0, numpy.abs(y)), coarse * (1 + 1e-6))
    made = _apply(x, form)
    return bool(numpy.isfinite(made).all() and (numpy.abs(made - y) <= allowed).all())


def _fate_of_zeros(target: "Vector", source: "Vector", form: Form, coarse: float) -> tuple[str, float | None]:
    """What stands in `target` where `source` is zero."""
    import numpy

    values = target[source == 0]
    if not len(values):
        return "none present", None
    known = values[numpy.isfinite(values)]
    if not len(known):
        return "dropped", None
    if form[0] != "log" and _agrees(known, numpy.zeros(len(known)), form, coarse):
        return "kept", None
    return ("replaced", float(known[0])) if len(numpy.unique(known)) == 1 else ("kept", None)
