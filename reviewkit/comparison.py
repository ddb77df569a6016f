"""What a comparison concludes: only beyond a material share of the submitted number, and only where the data say so.

T+ and T- are the alternative less (1 + share) and (1 - share) times the submitted number. Both clearly on one side of
zero: the two differ. On opposite sides: they agree. Otherwise the data do not settle it, and two bounds say how much
they do say. The equivalence half is two one-sided tests: Schuirmann (1987), doi 10.1007/BF01068419.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from enum import StrEnum

from reviewkit.implied import Scale
from reviewkit.joint import FEW_ROWS, VERY_FEW_ROWS, Joint

MATERIAL_SHARE = 0.05
"""Default material share; common practice, no source."""
LEVEL = 0.95
MOST_FAILED = 0.05
"""Share of resamples that may fail before a conclusion is marked weak; common practice, no source."""
_WIDEST_SHARE = 10.0  # shares are looked for up to 1,000 %
_SAME = 1e-9  # relative gap under which two numbers are the same by construction
_ROUNDING = 1e-6  # of the two errors: a gap and an error of the gap below it are rounding


class Verdict(StrEnum):
    """What a comparison concludes."""

    DIFFERS = "differs"
    AGREES = "agrees"
    UNSETTLED = "unsettled"


class Kind(StrEnum):
    """What stands on the submission's side."""

    MODEL = "model"  # what the submitted model implies
    READING = "reading"  # the coefficient as a paper would read it


@dataclass(frozen=True, slots=True)
class Cautions:
    """What limits a comparison besides its numbers."""

    reproduced: bool = True
    few_clusters: str | None = None
    """Why the clusters are too few for more than *unsettled*."""


@dataclass(frozen=True, slots=True)
class Comparison:
    """The submitted and the alternative number of one term on one scale."""

    term: str
    kind: Kind
    scale: Scale | None
    rows: str
    """`common` for the same rows in both models, `own` for each model's own rows."""
    submitted: float | None = None
    submitted_interval: tuple[float, float] | None = None
    alternative: float | None = None
    alternative_interval: tuple[float, float] | None = None
    difference: float | None = None
    std_error: float | None = None
    interval: tuple[float, float] | None = None
    relative_percent: float | None = None
    relative_interval: tuple[float, float] | None = None
    conclusion: Verdict | None = None
    excludes_zero: bool | None = None
    agree_within_percent: float | None = None
    differ_by_at_least_percent: float | None = None
    method: str | None = None
    effective: float | None = None
    error_ratio: float | None = None
    sign_turns: bool | None = None
    printed_inside: bool | None = None
    """Whether the printed estimate lies inside the alternative's interval."""
    coefficient_in_percent: bool = False
    """Whether, on the scale of coefficients, both have a reading in percent."""
    weak: str | None = None
    why: str | None = None


def compare(joint: Joint, about: Comparison, cautions: Cautions, share: float = MATERIAL_SHARE) -> Comparison:
    """Fill `about` (term, kind, scale, rows) with the numbers and the conclusion of a pair."""
    difference, error = joint.contrast(1.0)
    half = joint.critical(1.0, LEVEL) * error
    same = _same(joint, difference, error)
    own, other = joint.interval_of(0, LEVEL), joint.interval_of(1, LEVEL)
    low, high = (None, None) if same else _relative(joint)
    verdict, why = _verdict(joint, share, same, cautions)
    return replace(
        about,
        submitted=joint.submitted,
        submitted_interval=own,
        alternative=joint.alternative,
        alternative_interval=other,
        difference=difference,
        std_error=error,
        interval=(difference - half, difference + half),
        relative_percent=None if low is None else 100 * difference / joint.submitted,
        relative_interval=None if low is None or high is None else (100 * low, 100 * high),
        conclusion=verdict,
        excludes_zero=None if same else abs(difference) > half,
        agree_within_percent=None if same else _percent(_least_share(joint)),
        differ_by_at_least_percent=None if same else _percent(_largest_share(joint)),
        method=joint.method,
        effective=joint.effective,
        error_ratio=float((joint.covariance[1, 1] / joint.covariance[0, 0]) ** 0.5) if joint.covariance[0, 0] else None,
        sign_turns=_off_zero(own) and _off_zero(other) and joint.submitted * joint.alternative < 0,
        weak=_weakness(joint),
        why=why,
    )


def _same(joint: Joint, difference: float, error: float) -> bool:
    """Whether the numbers differ by rounding only, as those of two saturated models do."""
    rounding = _ROUNDING * float(joint.covariance.trace()) ** 0.5
    return abs(difference) <= _SAME * max(abs(joint.submitted), abs(joint.alternative)) or (
        abs(difference) <= rounding and error <= rounding
    )


def differs(joint: Joint, share: float) -> bool:
    """Whether both contrasts lie beyond their 97.5 % points on the same side."""
    above, below = _standardised(joint, share, LEVEL)
    return above * below > 0 and min(abs(above), abs(below)) > 1


def agrees(joint: Joint, share: float) -> bool:
    """Whether the contrasts lie beyond their 95 % points on opposite sides."""
    above, below = _standardised(joint, share, 2 * LEVEL - 1)
    return above * below < 0 and min(abs(above), abs(below)) > 1


def _standardised(joint: Joint, share: float, level: float) -> tuple[float, float]:
    """Both contrasts in units of their critical value."""
    found = []
    for ratio in (1 + share, 1 - share):
        gap, error = joint.contrast(ratio)
        found.append(gap / (joint.critical(ratio, level) * error) if error > 0 else 0.0)
    return found[0], found[1]


def _verdict(joint: Joint, share: float, same: bool, cautions: Cautions) -> tuple[Verdict | None, str | None]:
    if same:
        return None, "both models give the same number by construction"
    if not cautions.reproduced:
        return None, "the printed figures were not reproduced"
    if _not_resampled(joint):
        return Verdict.UNSETTLED, "few rows carry the error, and the model is too large to resample"
    if cautions.few_clusters:
        return Verdict.UNSETTLED, cautions.few_clusters
    if differs(joint, share):
        return Verdict.DIFFERS, None
    return (Verdict.AGREES, None) if agrees(joint, share) else (Verdict.UNSETTLED, None)


def _not_resampled(joint: Joint) -> bool:
    return joint.method == "robust" and joint.effective < FEW_ROWS


def _weakness(joint: Joint) -> str | None:
    if joint.failed_draws > MOST_FAILED * (joint.failed_draws + len(joint.draws if joint.draws is not None else ())):
        return f"{joint.failed_draws:,} resamples could not be fitted"
    if joint.method == "bootstrap-t" and joint.effective < VERY_FEW_ROWS:
        return f"about {joint.effective:.0f} rows carry the error"
    return None


def _least_share(joint: Joint) -> float | None:
    """The least share for which the two would be said to agree; None where there is none."""
    return _edge(lambda share: agrees(joint, share))


def _largest_share(joint: Joint) -> float | None:
    """The largest share for which the two would be said to differ; None where there is none."""
    if not differs(joint, 0.0):
        return None
    edge = _edge(lambda share: not differs(joint, share))
    return _WIDEST_SHARE if edge is None else edge


def _edge(holds: Callable[[float], bool]) -> float | None:
    """Where a property of the share begins to hold: doubled until it does, then halved to nine digits."""
    low, high = 0.0, 1e-4
    while not holds(high):
        if high >= _WIDEST_SHARE:
            return None
        low, high = high, min(2 * high, _WIDEST_SHARE)
    while high - low > 1e-9 * high:
        middle = (low + high) / 2
        low, high = (low, middle) if holds(middle) else (middle, high)
    return high


def _relative(joint: Joint) -> tuple[float | None, float | None]:
    """The interval of alternative / submitted - 1 by Fieller's method; None where the submitted number may be zero."""
    if not _off_zero(joint.interval_of(0, LEVEL)):
        return None, None
    centre = joint.alternative / joint.submitted

    def end(direction: float) -> float | None:
        reach = direction * max(1.0, abs(centre))
        outside = _edge(lambda gap: _beyond(joint, centre + reach * gap))
        return None if outside is None else centre + reach * outside - 1

    low, high = end(-1.0), end(1.0)
    return (None, None) if low is None or high is None else (low, high)


def _beyond(joint: Joint, ratio: float) -> bool:
    gap, error = joint.contrast(ratio)
    return abs(gap) > joint.critical(ratio, LEVEL) * error


def _off_zero(interval: tuple[float, float]) -> bool:
    return interval[0] > 0 or interval[1] < 0


def _percent(share: float | None) -> float | None:
    return None if share is None else 100 * share
