"""Facts that follow from other facts: one small function each, with its source."""

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from statistics import NormalDist

from reviewkit.clauses import Lookup
from reviewkit.facts import NOT_STATED, Fact, Facts, NotStated, Source, SourceKind, Standing, Value
from reviewkit.printed import Printed
from reviewkit.wording import change, estimate, interval, joined, p_value, sign, size_percent

_LARGEST_EXPONENT = 700.0
_STEPS = {
    "weighting": "weighing observations by their size",
    "zeros": "observations with a zero outcome",
    "amounts": "the spread of the other observations",
    "constant": "what was added to the outcome",
}
_SIZE = 0.05  # of a test of the form; common practice, no source
_WITH_ZEROS = ("dropped", "replaced by a small value", "own part of a two-part model")


@dataclass(frozen=True, slots=True)
class Derivation:
    """How a fact about a kind of subject is worked out; `needs` are all of the facts it uses."""

    name: str
    about: str
    needs: tuple[str, ...]
    work_out: Callable[[Lookup], Value | None]


def forms_in_words(lookup: Lookup) -> Value | None:
    """What the tests of both means' forms say, both told alike; a lottery keeps a ratio of means whatever the form."""
    p, own = lookup("form.alternative_p"), lookup("form.submitted_p")
    if not isinstance(p, float) or not isinstance(own, float):
        return None
    found = [f"{'speaks' if each < _SIZE else 'does not speak'} against {name}" for name, each in _forms(p, own)]
    lottery = lookup("assignment.random") == "yes"
    kept = "; where a lottery assigned it, the ratio of means does not hang on the form" if lottery else ""
    return f"a test {found[0]} ({p_value(p)}) and {found[1]} ({p_value(own)}){kept if p < _SIZE else ''}"


def steps_in_words(lookup: Lookup) -> Value | None:
    """Every step of the account that is clearly off zero; what is left out is said to be left out."""
    amounts = {name: lookup(f"step.{name}") for name in _STEPS}
    clear = [name for name in _STEPS if lookup(f"step.{name}_off_zero") == "yes"]
    told = [f"{estimate(amounts[name])} from {_STEPS[name]}" for name in clear if isinstance(amounts[name], float)]
    if not told:
        return None
    return joined(told) + ("; the other parts are not clearly off zero" if len(clear) < len(_STEPS) else "")


def _forms(p: float, own: float) -> tuple[tuple[str, float], tuple[str, float]]:
    return ("the form of the model of the mean", p), ("that of the submitted model", own)


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


def percent_low(lookup: Lookup) -> Value | None:
    """The lower end of the 95 % interval of 100·(exp(b) − 1), from the printed error and the normal distribution."""
    return _percent_end(lookup, 0.025)


def percent_high(lookup: Lookup) -> Value | None:
    """The upper end of the 95 % interval of 100·(exp(b) − 1), from the printed error and the normal distribution."""
    return _percent_end(lookup, 0.975)


def _percent_end(lookup: Lookup, probability: float) -> float | None:
    b, error = _printed(lookup("claim.coefficient")), _printed(lookup("claim.std_error"))
    if b is None or error is None or error.value <= 0:
        return None
    end = b.value + NormalDist().inv_cdf(probability) * error.value
    return None if abs(end) > _LARGEST_EXPONENT else 100 * math.expm1(end)


# --- in words ---------------------------------------------------------------------------------------------------


def percent_interval(lookup: Lookup) -> Value | None:
    """That interval with the direction left to the sentence, where both ends have one."""
    return _interval_of_change(_percent_end(lookup, 0.025), _percent_end(lookup, 0.975))


def alternative_percent_interval(lookup: Lookup) -> Value | None:
    """The alternative's interval in percent, likewise."""
    return _interval_of_change(*(lookup(f"refit.alternative_percent_{end}") for end in ("low", "high")))


def _interval_of_change(low: Value | None, high: Value | None) -> str | None:
    if not isinstance(low, float) or not isinstance(high, float):
        return None
    return interval(-high, -low, "%") if low < high < 0 else interval(low, high, "%")


def percent_in_words(lookup: Lookup) -> Value | None:
    """The stated percent with its direction, which the coefficient tells where the text prints a fall without sign."""
    b, percent = _printed(lookup("claim.coefficient")), _printed(lookup("claim.percent"))
    falls = b is not None and percent is not None and b.value < 0 < percent.value
    return None if percent is None else f"a fall of {size_percent(percent)}" if falls else change(percent)


def percent_reading(lookup: Lookup) -> Value | None:
    """What the printed percent is, where it is 100·b and cannot be 100·(exp(b) − 1)."""
    read_off = percent_is_coefficient(lookup) == "yes" and percent_is_exact(lookup) == "no"
    return "a hundred times the coefficient" if read_off else None


def target_in_words(lookup: Lookup) -> Value | None:
    """What a claim is about, with its article: `a total`."""
    target = lookup("claim.target")
    return _TARGETS.get(target, target) if isinstance(target, str) else None


def as_printed(lookup: Lookup) -> Value | None:
    """Words for a coefficient that came out of the data to the printed digits."""
    return "as printed" if lookup("refit.reproduced") == "yes" else None


def relative_in_words(lookup: Lookup) -> Value | None:
    """By how much the alternative is smaller or larger, where it has the same sign."""
    size = lookup("refit.relative_percent")
    if not isinstance(size, float) or lookup("refit.sign_turns") == "yes" or size <= -100:
        return None
    if lookup("refit.difference_excludes_zero") != "yes":
        return None
    words = f"about {size_percent(size)} {'smaller' if size < 0 else 'larger'} than the first"
    words += ", compared in logs" if lookup("refit.scale") == "log_ratio_of_means" else ""
    ends = [lookup(f"refit.relative_{end}") for end in ("smallest", "largest")]
    low, high = (end if isinstance(end, float) else None for end in ends)
    return words if low is None or high is None else f"{words}, with a 95 % interval of {interval(low, high, '%')}"


def direction_holds(lookup: Lookup) -> Value | None:
    """Words where both estimates have the same sign."""
    first, second = _signs(lookup)
    return f"both estimates are {first}" if first and first == second else None


def signs_differ(lookup: Lookup) -> Value | None:
    """Words where the two estimates have different signs."""
    first, second = _signs(lookup)
    return f"the first is {first}, the second {second}" if first != second else None


def _signs(lookup: Lookup) -> tuple[str, str]:
    """The signs of both estimates in words, empty where one of them is not known."""
    found = [lookup(name) for name in ("refit.submitted", "refit.alternative")]
    first, second = (sign(one) if isinstance(one, float) and one else "" for one in found)
    return (first, second) if first and second else ("", "")


def no_difference_found(lookup: Lookup) -> Value | None:
    """Words where the interval of the difference takes in zero."""
    return "no sign of a difference" if lookup("refit.difference_excludes_zero") == "no" else None


def selected_after_lottery(lookup: Lookup) -> Value | None:
    """What leaving out outcomes does to a comparison that was assigned at random."""
    at_random = lookup("assignment.random") in ("yes", "within strata")
    return "the assignment at random no longer protects the comparison of those that remain" if at_random else None


_TARGETS = {
    "arithmetic mean": "the mean",
    "total or aggregate": "a total",
    "ratio of means": "a ratio of means",
    "geometric mean": "the geometric mean",
    "average proportional change": "the average proportional change",
    "median": "the median",
    "growth of a unit": "the growth of a unit",
    "direction only": "the direction only",
}
_PERCENT = ("claim.coefficient", "claim.percent")
_PERCENT_ENDS = ("claim.coefficient", "claim.std_error")
_RELATIVE = (
    *("refit.relative_percent", "refit.relative_smallest", "refit.relative_largest"),
    *("refit.scale", "refit.sign_turns", "refit.difference_excludes_zero"),
)
_ALTERNATIVE_ENDS = ("refit.alternative_percent_low", "refit.alternative_percent_high")
_BOTH = ("refit.submitted", "refit.alternative")
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
    Derivation("claim.percent_low", "claim", _PERCENT_ENDS, percent_low),
    Derivation("claim.percent_high", "claim", _PERCENT_ENDS, percent_high),
    Derivation("claim.percent_interval", "claim", _PERCENT_ENDS, percent_interval),
    Derivation("claim.percent_in_words", "claim", _PERCENT, percent_in_words),
    Derivation("claim.percent_reading", "claim", _PERCENT, percent_reading),
    Derivation("claim.target_in_words", "claim", ("claim.target",), target_in_words),
    Derivation("claim.inside_alternative", "claim", _INSIDE, inside_alternative),
    Derivation("outcome.has_zeros", "model", ("outcome.zero_share", "outcome.zeros"), has_zeros),
    Derivation("spread.steady", "model", ("refit.conclusion",), spread_is_steady),
    Derivation("refit.scale_in_words", "model", ("refit.scale",), scale_in_words),
    Derivation("refit.as_printed", "model", ("refit.reproduced",), as_printed),
    Derivation("refit.relative_in_words", "model", _RELATIVE, relative_in_words),
    Derivation("refit.alternative_percent_interval", "model", _ALTERNATIVE_ENDS, alternative_percent_interval),
    Derivation("refit.direction_holds", "model", _BOTH, direction_holds),
    Derivation("refit.signs_differ", "model", _BOTH, signs_differ),
    Derivation("refit.no_difference_found", "model", ("refit.difference_excludes_zero",), no_difference_found),
    Derivation(
        "step.in_words",
        "model",
        tuple(f"step.{name}{ending}" for name in _STEPS for ending in ("", "_off_zero")),
        steps_in_words,
    ),
    Derivation(
        "form.in_words", "model", ("form.alternative_p", "form.submitted_p", "assignment.random"), forms_in_words
    ),
    Derivation("assignment.after_selection", "study", ("assignment.random",), selected_after_lottery),
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
