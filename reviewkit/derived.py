"""Facts that follow from other facts: one small function each, with its source."""

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass

from reviewkit.clauses import Lookup
from reviewkit.facts import NOT_STATED, Fact, Facts, NotStated, Source, SourceKind, Standing, Value
from reviewkit.printed import Printed

_LARGEST_EXPONENT = 700.0
_WITH_ZEROS = ("dropped", "replaced by a small value", "own part of a two-part model")


@dataclass(frozen=True, slots=True)
class Derivation:
    """How a fact about a kind of subject is worked out; `needs` are all of the facts it uses."""

    name: str
    about: str
    needs: tuple[str, ...]
    work_out: Callable[[Lookup], Value | None]


def percent_of_coefficient(lookup: Lookup) -> Value | None:
    """100·b, the percent that reading a coefficient of a log model directly gives."""
    b = _printed(lookup("claim.coefficient"))
    return None if b is None else 100 * b.value


def percent_exact(lookup: Lookup) -> Value | None:
    """100·(exp(b) − 1), the ratio that a coefficient b of a log model stands for (Halvorsen and Palmquist 1980)."""
    b = _printed(lookup("claim.coefficient"))
    return None if b is None or b.value > _LARGEST_EXPONENT else 100 * math.expm1(b.value)


def percent_is_coefficient(lookup: Lookup) -> Value | None:
    """Whether the printed percent is 100·b within the rounding of both prints."""
    return _percent_matches(lookup, lambda b: 100 * b)


def percent_is_exact(lookup: Lookup) -> Value | None:
    """Whether the printed percent is 100·(exp(b) − 1) within the rounding of both prints."""
    return _percent_matches(lookup, lambda b: 100 * math.expm1(min(b, _LARGEST_EXPONENT)))


def inside_alternative(lookup: Lookup) -> Value | None:
    """Whether any number that rounds to the claimed percent lies in the alternative's interval; else the coefficient.

    Where the claim has no percent, the re-estimation's own reading of the printed coefficient stands in.
    """
    percent, low, high = (lookup(name) for name in _INSIDE[:3])
    if not isinstance(percent, Printed):
        return lookup("refit.printed_reading_inside")
    if isinstance(low, (int, float)) and isinstance(high, (int, float)):
        first, last = _with_sign_of(lookup("claim.coefficient"), percent)
        return _yes(first <= high and low <= last)
    return NOT_STATED if isinstance(low, NotStated) or isinstance(high, NotStated) else None


def has_zeros(lookup: Lookup) -> Value | None:
    """Whether the outcome has zeros, from their share, else from what was done with them."""
    share, zeros = lookup("outcome.zero_share"), lookup("outcome.zeros")
    if isinstance(share, (int, float)):
        return _yes(share > 0)
    if zeros == "none present":
        return "no"
    return "yes" if zeros in _WITH_ZEROS else None


def smaller_arm(lookup: Lookup) -> Value | None:
    """The number of treated or of untreated clusters, whichever is smaller."""
    treated, untreated = lookup("refit.treated_clusters"), lookup("refit.untreated_clusters")
    if isinstance(treated, (int, float)) and isinstance(untreated, (int, float)):
        return float(min(treated, untreated))
    return None


def spread_is_steady(lookup: Lookup) -> Value | None:
    """Whether the log model suffices for a ratio of means: shown where both models agree on the data."""
    return "yes" if lookup("refit.conclusion") == "agrees" else None


def scale_in_words(lookup: Lookup) -> Value | None:
    """The scale of a comparison as a reader writes it: `log ratio of means`."""
    scale = lookup("refit.scale")
    return scale.replace("_", " ") if isinstance(scale, str) else None


_PERCENT = ("claim.coefficient", "claim.percent")
_INSIDE = (
    "claim.percent",
    "refit.alternative_percent_low",
    "refit.alternative_percent_high",
    "claim.coefficient",
    "refit.printed_reading_inside",
)
DERIVATIONS = (
    Derivation("claim.percent_of_coefficient", "claim", ("claim.coefficient",), percent_of_coefficient),
    Derivation("claim.percent_exact", "claim", ("claim.coefficient",), percent_exact),
    Derivation("claim.percent_is_coefficient", "claim", _PERCENT, percent_is_coefficient),
    Derivation("claim.percent_is_exact", "claim", _PERCENT, percent_is_exact),
    Derivation("claim.inside_alternative", "claim", _INSIDE, inside_alternative),
    Derivation("outcome.has_zeros", "model", ("outcome.zero_share", "outcome.zeros"), has_zeros),
    Derivation("spread.steady", "model", ("refit.conclusion",), spread_is_steady),
    Derivation("refit.scale_in_words", "model", ("refit.scale",), scale_in_words),
    Derivation("clusters.smaller_arm", "model", ("refit.treated_clusters", "refit.untreated_clusters"), smaller_arm),
)
"""In an order in which none needs a later one."""


def derive(facts: Facts) -> Facts:
    """The facts and all that follows from them; what is known with as much weight already is kept."""
    for derivation in DERIVATIONS:
        facts = facts.adding(tuple(_derived(facts, derivation)))
    return facts


def needs(name: str) -> tuple[str, ...]:
    """What a derived fact is worked out from; nothing for any other fact."""
    return next((each.needs for each in DERIVATIONS if each.name == name), ())


def _derived(facts: Facts, derivation: Derivation) -> Iterator[Fact]:
    for subject in facts.subjects(derivation.about):
        used = [fact for name in derivation.needs if (fact := facts.known(name, subject)) is not None]
        value = _worked_out(derivation, used)
        if value is None:
            continue
        standing = min((fact.standing for fact in used), key=tuple(Standing).index)
        known = facts.known(derivation.name, subject)
        if known is None or tuple(Standing).index(known.standing) < tuple(Standing).index(standing):
            place = ", ".join(dict.fromkeys(fact.name for fact in used))
            confirmed = all(fact.confirmed for fact in used)
            source = Source(SourceKind.DERIVED, place)
            yield Fact(derivation.name, value, standing, source, subject, confirmed)


def _worked_out(derivation: Derivation, used: list[Fact]) -> Value | None:
    """The derived value; not stated where what it was to be worked out from is not stated."""
    values = {fact.name: _finite(fact.value) for fact in used}
    value = derivation.work_out(values.get)
    silent = len(used) == len(derivation.needs) and any(isinstance(each, NotStated) for each in values.values())
    return NOT_STATED if value is None and silent else value


def _finite(value: Value) -> Value | None:
    return None if isinstance(value, float) and not math.isfinite(value) else value


def _percent_matches(lookup: Lookup, percent_of: Callable[[float], float]) -> Value | None:
    b, percent = _printed(lookup("claim.coefficient")), _printed(lookup("claim.percent"))
    if b is None or percent is None:
        return None
    low, high = _with_sign_of(b, percent)
    return _yes(low <= percent_of(b.high) + _SLACK and percent_of(b.low) - _SLACK <= high)


_SLACK = 1e-9  # percent; edges of two roundings that touch count as a match


def _with_sign_of(b: Value | None, percent: Printed) -> tuple[float, float]:
    """The rounding interval of a percent that is printed without its sign, as in `falls by 12 %`."""
    falls = isinstance(b, Printed) and b.value < 0 < percent.value
    return (-percent.high, -percent.low) if falls else (percent.low, percent.high)


def _printed(value: Value | None) -> Printed | None:
    return value if isinstance(value, Printed) else None


def _yes(truth: bool) -> str:
    return "yes" if truth else "no"
