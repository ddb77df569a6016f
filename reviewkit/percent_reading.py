"""`reviewkit percent`: the readings of one coefficient, as an object and in lines."""

import math
from dataclasses import asdict, replace
from typing import Any

from reviewkit.arithmetic import GEOMETRIC, PercentReadings, no_percent, percent_readings
from reviewkit.printed import read_printed
from reviewkit.refusals import Refusal
from reviewkit.wording import interval, signed_percent


def read(b: str, se: str | None, df: float | None, constant: float, zeros: bool) -> PercentReadings:
    """The readings of a printed coefficient, or why a constant and zeros leave none."""
    coefficient = read_printed(b, "coefficient").value
    if constant < 0:
        raise Refusal("--constant", f"{constant:g} is not possible", "0, or the number added before the log")
    if zeros and constant:
        return no_percent(
            coefficient,
            f"with zeros and a constant ({constant:g}) it mixes whether and how much, and moves with the unit",
        )
    if zeros:
        return no_percent(coefficient, "a zero has no logarithm; say what became of the zeros")
    found = percent_readings(coefficient, 1.0 if se is None else read_printed(se, "standard error").value, df)
    if constant:
        why = f"the constant ({constant:g}) makes it a change of the outcome plus {constant:g}"
        return no_percent(coefficient, why)
    return (
        found if se is not None else replace(found, interval=None, kennedy_percent=None, minimum_variance_percent=None)
    )


def as_object(found: PercentReadings) -> dict[str, Any]:
    """The object that `--json` gives."""
    ends = found.interval and [end if math.isfinite(end) else None for end in found.interval]
    return {"format": 1, **asdict(found), "interval": ends}


def lines(found: PercentReadings) -> tuple[str, ...]:
    """The readings in words."""
    if found.percent is None:
        return ("No reading in percent: " + (found.percent_why_not or "it does not exist") + ".",)
    said = [
        f"{signed_percent(found.percent)}   100·(exp(b) − 1), of the geometric mean; of the mean in a Poisson model"
    ]
    if found.interval is not None:
        said.append(f"{interval(*found.interval, '%')}   its 95 % interval")
    if found.kennedy_percent is not None:
        said.append(f"{signed_percent(found.kennedy_percent)}   100·(exp(b − V/2) − 1)")
    if found.minimum_variance_percent is not None:
        said.append(
            f"{signed_percent(found.minimum_variance_percent)}   minimum variance, normal log errors of equal variance"
        )
    said.append(f"{signed_percent(found.coefficient_times_100)}   100·b, close to the first where b is small")
    return (*said, GEOMETRIC) if found.kennedy_percent is not None else tuple(said)
