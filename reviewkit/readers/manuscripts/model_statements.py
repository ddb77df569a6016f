"""What a sentence says on estimator, standard errors, checks, software and availability."""

import re

from reviewkit.readers.manuscripts.sentences import beside_the_point, denied

_ESTIMATORS = {
    "weighted least squares": r"\bweighted least squares\b|\bWLS\b",
    "least squares": r"\b(?:ordinary )?least squares\b|\bOLS\b|\blinear regressions?\b",
    "fractional logit": r"\bfractional (?:logit|response|regression)\w*",
    "Poisson": r"\bPoisson\b|\bPPML\b",
    "negative binomial": r"\bnegative binomial\b",
    "gamma": r"\bgamma (?:regression|model|GLM|distribution)\b",
    "beta": r"\bbeta regressions?\b",
    "tobit": r"\btobit\b",
    "two-part": r"\b(?:two|double)[- ](?:part|hurdle) models?\b|\bhurdle models?\b",
    "zero-inflated": r"\bzero[- ]inflated\b",
    "logit or probit": r"\b(?:logit|probit|logistic) (?:regressions?|models?)\b",
}
_ESTIMATES = re.compile(
    r"\b(?:estimat|regress|fit|fitted|model|run|ran|us(?:e|es|ed|ing)|obtain|comput|by|table)\w*\b", re.I
)


def estimator_in(text: str) -> str | None:
    """The one estimator that a sentence says was used."""
    if beside_the_point(text) or not (_ESTIMATES.search(text) or len(text) < 60):
        return None
    found, rest = [], text
    for name, shape in _ESTIMATORS.items():
        for each in re.finditer(shape, rest, re.IGNORECASE if name not in ("Poisson",) else 0):
            if denied(text, text.find(each[0]), text.find(each[0]) + len(each[0])):
                return None
            found.append(name)
        rest = re.sub(shape, "…", rest, flags=re.IGNORECASE)
    names = list(dict.fromkeys(found))
    return names[0] if len(names) == 1 else None


_ERRORS = r"(?:standard errors?|errors|inference|s\.e\.|SEs|confidence intervals|covariances?)"
_WORD = r"[A-Za-z][\w'’-]*"
_STOP = (
    r"(?!(?:in|are|is|and|to|because|since|which|where|with|the|for|as|throughout|level|levels|at|by|on|of|or"
    r"|that|from|were|was)\b)"
)
_GROUP = rf"{_STOP}{_WORD}(?:[ ]{_STOP}{_WORD}){{0,2}}"
_CLUSTERED = re.compile(
    rf"\bcluster(?:ed|ing|s)?\b(?:\s+{_ERRORS})?\s+(?:at|by|on"
    rf"|within)\s+(?:the\s+)?(?:level of (?:the\s+)?)?({_GROUP})(?:\s+and\s+(?:by\s+"
    rf"|the\s+)?({_GROUP}))?(?:[\s-]+levels?)?"
    rf"|\b({_WORD})[- ]clustered\s+{_ERRORS}",
    re.I,
)
_KINDS = {
    "bootstrap": rf"\bbootstrap\w*\s+{_ERRORS}|\b{_ERRORS}\b[^.;]{{0,40}}\bbootstrap\w*",
    "robust": rf"\b(?:heteroske\w+|hetersc\w+|heterosc\w+|white|huber)?[- ]?(?:robust|consistent)\s+{_ERRORS}"
    rf"|\b{_ERRORS}\b[^.;]{{0,30}}\b(?:robust|heterosk\w+[- ]consistent|HC[0-3])\b|\brobust (?:to"
    rf"|against) heterosk\w+",
    "classical": rf"\b(?:classical|conventional|homosk\w+|ordinary|usual)\s+(?:OLS\s+)?{_ERRORS}",
}


def errors_in(text: str) -> tuple[str, tuple[str, ...]] | None:
    """Kind of the standard errors and what they are clustered by, as a sentence says it."""
    if beside_the_point(text):
        return None
    clustered = _CLUSTERED.search(text)
    if clustered and re.search(_ERRORS, text, re.I) and not denied(text, clustered.start(), clustered.end()):
        if re.search(r"\b(?:two-step|k-means|hierarchical) cluster", text, re.I):
            return None
        levels = tuple(" ".join(each.lower().split()) for each in clustered.groups() if each)
        return "clustered", tuple(re.sub(r"[\s-]+levels?$", "", level) for level in levels)
    found = [
        name
        for name, shape in _KINDS.items()
        for each in re.finditer(shape, text, re.I)
        if not denied(text, each.start(), each.end())
    ]
    names = list(dict.fromkeys(found))
    return (names[0], ()) if len(names) == 1 and not re.search(r"\bcluster", text, re.I) else None


def clusters_in(text: str, levels: tuple[str, ...]) -> float | None:
    """The number of clusters: `88 clusters`, or the number of units that errors are clustered by."""
    for found in re.finditer(r"\b(\d[\d,]*)\s+clusters?\b", text):
        if not denied(text, found.start(), found.end()):
            return float(found[1].replace(",", ""))
    if len(levels) == 1 and re.search(r"\bcluster", text, re.I):
        found_level = re.search(rf"\b(\d[\d,]*)\s+{re.escape(plural(levels[0]))}\b", text, re.I)
        return float(found_level[1].replace(",", "")) if found_level else None
    return None


def plural(noun: str) -> str:
    """villages, counties, branches."""
    if re.search(r"[^aeiou]y$", noun):
        return noun[:-1] + "ies"
    return noun + ("es" if re.search(r"(?:s|x|ch|sh)$", noun) else "s")


_CHECKS = {
    "residual-versus-fitted": r"\bresiduals? (?:against|versus|vs\.?|on|by) (?:the )?(?:fitted|predicted)\b"
    r"|\bresidual[- ]versus[- ]fitted\b",
    "added-variable": r"\b(?:added[- ]variable|partial[- ]regression) plots?\b",
    "functional-form test": r"\bRESET\b|\blink tests?\b|\bfunctional[- ]form tests?\b|\btests? (?:of"
    r"|for) (?:the )?functional form\b",
}


def checks_in(text: str) -> tuple[str, ...]:
    """Diagnostics that a sentence says are shown."""
    if re.search(r"\bwould\b|\bcould\b|\bmight\b|\bfuture\b|\bet al\b", text):
        return ()
    found = [
        (name, re.search(shape, text, re.I if name != "functional-form test" else 0)) for name, shape in _CHECKS.items()
    ]
    return tuple(name for name, place in found if place and not denied(text, place.start(), place.end()))


_TOOL = re.compile(
    r"\b(?:in|with|using|by)\s+(?:the (?:software|program|package)\s+)?(?!(?:Table|Tables|Figure|Fig|Column"
    r"|Columns|Model|Models|Section|Panel|Equation|Appendix|Wave|Round|Chapter|Step|January|February|March"
    r"|April|May|June|July|August|September|October|November|December|Spring|Summer|Autumn|Winter|Phase|Stage"
    r"|Part)\b)([A-Z][\w+-]*)(?:\s+(?:software|package))?,?\s*\(?(?:version|v\.?"
    r"|release)?\s*(\d+(?:\.\d+)*)?\b"
)
_ANALYSED = re.compile(
    r"\b(?:analys|analyz|estimat|comput|calculat|fitted|statistical software|software|package|script)\w*\b", re.I
)
_KNOWN = ("R", "Python", "Julia")


def software_in(text: str) -> str | None:
    """yes where a sentence names software with its version, partly where without."""
    if not _ANALYSED.search(text) or beside_the_point(text):
        return None
    for found in _TOOL.finditer(text):
        by_name = found[1] in _KNOWN or re.search(r"\b(?:software|program|package|version)\b", found[0], re.I)
        if (
            found[2]
            and (by_name or "." in found[2] or re.search(r"\bsoftware\b", text, re.I))
            and not re.fullmatch(r"(?:19|20)\d\d", found[2])
        ):
            return "yes"
        if found[1] in _KNOWN:
            return "partly"
    return None


_AVAILABLE = re.compile(
    r"\b(?:is|are|will be|were|have been|made)\s+(?:made |freely |publicly |openly |all )*(?:available"
    r"|deposited|archived|posted)\b|\bcan be (?:downloaded|obtained|found)\b",
    re.I,
)
_THINGS = {
    "data.available": r"\b(?:data|data ?sets?|microdata)\b",
    "code.available": r"\b(?:codes?|scripts?|do-files?|replication (?:files?|package|materials?))\b",
}
_REFUSED = re.compile(
    r"\b(?:cannot|can not|may not|must not)\s+be\s+(?:shared|made|published|released|disclosed)\b|\b(?:is"
    r"|are)\s+not\s+(?:publicly |openly |freely )?available\b",
    re.I,
)
_ON_REQUEST = re.compile(
    r"\b(?:up)?on (?:reasonable |written )?request\b|\bfrom the (?:corresponding )?authors?\b", re.I
)


def available_in(text: str) -> tuple[tuple[str, str], ...]:
    """data.available and code.available, as a sentence says them."""
    things = [name for name, shape in _THINGS.items() if re.search(shape, text, re.I)]
    refused, offered = _REFUSED.search(text), _AVAILABLE.search(text)
    about_others = re.search(r"\b(?:data|codes?|scripts?) (?:on|for|from|about)\b", text, re.I)
    if (
        not things
        or (refused and offered and _ON_REQUEST.search(text) is None)
        or (about_others and not re.search(r"\bstudy|paper|article|analys", text, re.I))
    ):
        return ()
    if refused:
        return tuple((name, "no") for name in things)
    if offered is None or re.search(r"\bif\b|\bwere available\b", text):
        return ()
    places = re.search(
        r"\brepositor\w+|\barchive\b|https?:|\bwww\.|\bdoi\b|\bonline\b|\bsupplement\w*|\bwebsite\b"
        r"|\bpublic\w*\b|\bdeposited\b",
        text,
        re.I,
    )
    if _ON_REQUEST.search(text):
        return tuple((name, "partly") for name in things)
    return tuple((name, "yes") for name in things) if places else ()
