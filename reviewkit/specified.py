"""What a specification says, as facts: a person wrote or confirmed it, so it need not be asked again."""

from collections.abc import Mapping

from reviewkit.expressions import Apply, Column, Factor, Node, read_terms
from reviewkit.facts import Fact, Source, SourceKind, Standing, Value
from reviewkit.specification import ErrorKind, Estimator, PrintedTerm, Specification, Transform, Zeros

TRANSFORM_WORDS: Mapping[Transform, str] = {
    Transform.NONE: "none",
    Transform.LOG: "log",
    Transform.LOG_PLUS: "log of y plus a constant",
    Transform.ASINH: "inverse hyperbolic sine",
    Transform.SQRT: "square root",
    Transform.LOGIT: "logit of a fraction",
    Transform.ARCSINE: "arcsine root",
    Transform.BOX_COX: "Box-Cox",
    Transform.RANK: "rank",
    Transform.STANDARDISED: "standardised",
}
"""The values of the fact `outcome.transform`."""

ESTIMATOR_WORDS: Mapping[Estimator, str] = {
    Estimator.OLS: "least squares",
    Estimator.POISSON: "Poisson",
    Estimator.FRACTIONAL_LOGIT: "fractional logit",
    Estimator.NEGBIN: "negative binomial",
    Estimator.GAMMA: "gamma",
    Estimator.BETA: "beta",
    Estimator.LOGIT: "logit or probit",
    Estimator.PROBIT: "logit or probit",
}
"""The values of the fact `estimator`."""

ERROR_WORDS: Mapping[ErrorKind, str] = {
    ErrorKind.CLASSICAL: "classical",
    ErrorKind.ROBUST: "robust",
    ErrorKind.CLUSTER: "clustered",
}
"""The values of the fact `errors.kind`."""

_ZEROS_WORDS = {Zeros.DROPPED: "dropped", Zeros.REPLACED: "replaced by a small value"}
"""Zeros that are kept may not exist; the data tell."""


def specification_facts(spec: Specification, model: str, claim: str) -> tuple[Fact, ...]:
    """All that a specification settles about its model, and the printed figures of the claim's term."""
    source = Source(SourceKind.SPECIFICATION)
    held = [(name, value, model) for name, value in _of_model(spec).items()]
    held += [(name, value, claim) for name, value in _of_claim(spec).items()]
    return tuple(
        Fact(name, value, Standing.SETTLED, source, subject) for name, value, subject in held if value is not None
    )


def _of_model(spec: Specification) -> dict[str, Value | None]:
    outcome, errors = spec.outcome, spec.errors
    effects = _effects(spec)
    return {
        "outcome.transform": TRANSFORM_WORDS[outcome.transform],
        "outcome.constant": outcome.constant if outcome.transform is Transform.LOG_PLUS else None,
        "outcome.zeros": _ZEROS_WORDS.get(outcome.zeros),
        "estimator": ESTIMATOR_WORDS[spec.estimator],
        "errors.kind": ERROR_WORDS[errors.kind],
        "errors.type": errors.type or None,
        "errors.cluster_level": errors.by or None,
        "effects.absorbed": effects or None,
        "effects.unit": None if effects else "no",
        "exposure.used": "yes" if spec.exposure else None,
        "n.printed": spec.printed_n,
    }


def _effects(spec: Specification) -> tuple[str, ...]:
    """Columns with an effect for each of their values, but for that of the term in focus."""
    plain = (part for term in spec.terms if len(term.parts) == 1 for part in term.parts)
    classes = (part.column for part in plain if isinstance(part, Factor) and not _in_focus(part, spec))
    return tuple(dict.fromkeys((*spec.absorb, *classes)))


def _in_focus(part: Node | Factor, spec: Specification) -> bool:
    return bool(spec.focus) and isinstance(part, Factor) and spec.focus[0] == str(Factor(part.column))


def _of_claim(spec: Specification) -> dict[str, Value | None]:
    focus = spec.focus[0] if spec.focus else ""
    named = (term for name, term in spec.printed_terms if focus and (name == focus or name.startswith(f"{focus}[")))
    printed = next(named, PrintedTerm())
    return {"claim.coefficient": printed.estimate, "claim.std_error": printed.std_error}


def covariate_fact(spec: Specification, kinds: Mapping[str, str], claim: str) -> tuple[Fact, ...]:
    """What kind of covariate the term in focus is, by its form and the `kinds` of the columns; none where unclear."""
    terms = read_terms(spec.focus[0], "focus") if spec.focus else ()
    part = terms[0].parts[0] if len(terms) == 1 and len(terms[0].parts) == 1 else None
    value, column = "", ""
    match part:
        case Apply("log", Column(column)):
            value = "continuous, in logs"
        case Factor(column):
            value = "two-valued" if kinds.get(column) == "two-valued" else "several classes"
        case Column(column):
            words = {"two-valued": "two-valued", "number": "continuous", "whole number": "continuous"}
            value = words.get(kinds.get(column, ""), "")
    source = Source(SourceKind.COLUMN, f"column {column}")
    return (Fact("claim.covariate", value, Standing.DONE, source, claim),) if value else ()
