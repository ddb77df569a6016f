"""What a sentence says on the outcome: transform, constant, zeros, reason."""

import re

from reviewkit.readers.manuscripts.sentences import beside_the_point, denied

LOG = "log"
LOG_PLUS = "log of y plus a constant"
ASINH = "inverse hyperbolic sine"

_NUMBER_WORDS = {"one": 1.0, "two": 2.0, "a half": 0.5, "one half": 0.5, "one hundred": 100.0, "a hundred": 100.0}
_NUMBER = r"(\d[\d,]*(?:\.\d+)?|\.\d+|one half|one hundred|one|two|a half|a hundred)"
_LOG_WORDS = r"(?:natural\s+)?(?:log(?:arithm)?s?|ln)"
_NAMED = {
    ASINH: r"(?:inverse hyperbolic sine|\basinh\b|\barcsinh\b|\barsinh\b|\bIHS\b)",
    "square root": r"(?:square[- ]roots?\b|\bsqrt\s*\()",
    "logit of a fraction": r"(?:logit[- ]transform\w*"
    r"|\blogit of (?:the |its |this |their )?(?:share|fraction|proportion|rate)\w*"
    r"|log[- ]odds of the (?:share|fraction|proportion)|\blogit\s*\()",
    "arcsine root": r"(?:arc-?sine)",
    "Box-Cox": r"(?:Box[-–]Cox)",
    "rank": r"(?:\brank[- ]transform\w*|\branks? of the (?:outcome|dependent))",
    LOG: rf"(?:\b{_LOG_WORDS}\b|\blog[- ]transform\w*|\blogged\b|\blog\s*\(|\bln\s*\()",
}
_OUTCOME = (
    r"(?:outcomes?|dependent variables?|response(?: variables?)?|left[- ]hand[- ]side(?: variables?)?"
    r"|regressand|explained variable)"
)
_COVARIATES = re.compile(
    r"\b(?:control\w*|covariates?|regressors?|right[- ]hand|independent variables?|explanatory|predictors?)\b", re.I
)
_EQUATION = re.compile(
    r"(?:^|[\s:;,(])((?:log|ln|asinh|arcsinh|arsinh|sqrt|logit)\s*(?:\((?:[^()=]|\([^()=]*\)){1,80}\)"
    r"|\s[A-Za-z]\w{0,20}))\s*=(?!=)",
    re.I,
)
_DEPENDENT = re.compile(
    rf"\b{_OUTCOME}(?:\s+(?:in|of)\s+[^.:;]{{1,40}}?)?\s*(?::|\bis\b|\bare\b|\bwas\b|\bequals\b|,"
    rf"|=)\s*(?P<said>[^.;]{{1,120}})",
    re.I,
)
_AS_OUTCOME = re.compile(
    rf"(?P<said>[^.;]{{1,140}})\b(?:as|is|are|was|serves? as|forms?)\s+(?:the|our|a)?\s*(?:main "
    rf"|primary )?{_OUTCOME}\b",
    re.I,
)
_TRANSFORMED = re.compile(
    rf"\b(?:transform|log|logarithmi[sz]e|log[- ]transform)\w*\s+(?:the|our"
    rf"|this)\s+{_OUTCOME}\b(?P<said>[^.;]{{0,80}})",
    re.I,
)
_REGRESSED = re.compile(
    r"\bregress\w*\s+(?P<said>[^.;]{1,120}?)\s+on\b|(?P<taken>\b(?:take|took"
    r"|taking)\b[^.;]{1,120}?)\band\s+regress\w*\s+(?:it|them|this|the result)\b",
    re.I,
)
_PLUS = re.compile(rf"(?:\bplus|\+)\s*{_NUMBER}\b|\b{_NUMBER}\s*(?:\bplus\b|\+)|\badd(?:ing|ed)?\s+{_NUMBER}\b", re.I)
_SYMBOL = re.compile(r"(?:\bplus|\+)\s*(?:a (?:small )?constant\b|c\b|k\b)", re.I)


def transform_in(text: str) -> tuple[str, float | None] | None:
    """Transform and constant that a statement names of the outcome; None where it names none or several."""
    if beside_the_point(text):
        return None
    for pattern in (_EQUATION, _REGRESSED, _DEPENDENT, _TRANSFORMED, _AS_OUTCOME):
        for found in pattern.finditer(text):
            said = next((each for each in found.groups() if each), "")
            if pattern is _TRANSFORMED and found[0].lower().startswith("log"):
                said = found[0]
            if denied(text, found.start(), found.end()) or (pattern is not _EQUATION and _COVARIATES.search(said)):
                continue
            named = named_transform(said)
            if named:
                return named
    return None


def named_transform(said: str) -> tuple[str, float | None] | None:
    """The one transform that a piece of text names."""
    names = [name for name, shape in _NAMED.items() if re.search(shape, said, re.IGNORECASE)]
    if len(names) != 1:
        return None
    if names != [LOG]:
        return names[0], None
    constant = constant_in(said)
    if re.search(r"\blog\s*1p\b", said):
        constant = 1.0
    return (LOG_PLUS, constant) if constant is not None or _SYMBOL.search(said) else (LOG, None)


def constant_in(said: str) -> float | None:
    """The number added, as a digit or in words."""
    found = _PLUS.search(said)
    number = next((each for each in found.groups() if each), "").lower() if found else ""
    if not number:
        return None
    value = _NUMBER_WORDS[number] if number in _NUMBER_WORDS else float(number.replace(",", ""))
    return value if value > 0 else None


_ZERO_ROWS = (
    r"(?:zeros?\b(?:\s+(?:values|observations|outcomes|entries|cases|rows))?|(?:observations|rows|cases|values"
    r"|units|firms|households|persons|people|records|\w+s) (?:with|of|whose|reporting"
    r"|having)\s+(?:\w+\s+){0,4}?(?:zero|no)\b(?:\s+\w+){0,3}?)"
)
_ZEROS = {
    "dropped": re.compile(
        rf"{_ZERO_ROWS}\s+(?:(?:is|are|was|were|have been|has been)\s+)(?:therefore |thus |then "
        rf"|hence )?(?:dropped|excluded|removed|omitted|left out|discarded|lost)"
        rf"|\b(?:drop|exclude|remove|omit|discard|dropping|excluding|omitting|leave out)\s+(?:the |all "
        rf"|any )?{_ZERO_ROWS}",
        re.I,
    ),
    "constant added": re.compile(
        rf"\badd(?:s|ed|ing)?\s+(?:{_NUMBER}|a (?:small )?constant)\b[^.;]*\b(?:zeros?|before (?:taking"
        rf"|the)|prior to)\b"
        r"|\b(?:zeros?)\b[^.;]*\badd(?:s|ed|ing)?\s+(?:one|1|a (?:small )?constant)\b",
        re.I,
    ),
    "replaced by a small value": re.compile(
        r"\bzeros?\b(?:\s+\w+)?\s+(?:is|are|was|were)\s+(?:replaced|set|recoded|changed)\s+(?:by|with"
        r"|to)\b|\breplac(?:e|ed|ing)\s+(?:the |all |any )?zeros?\b\s+(?:by|with)\b",
        re.I,
    ),
    "inverse hyperbolic sine": re.compile(
        rf"{_NAMED[ASINH]}[^.;]*\b(?:defined (?:at|for) zero|(?:keep|retain|accommodat|handl|deal|preserv"
        rf"|includ)\w*[^.;]{{0,30}}\bzeros?\b)",
        re.I,
    ),
    "none present": re.compile(
        rf"\b(?:no zeros\b|there are no zeros|{_OUTCOME} (?:is|are) (?:always|strictly) positive"
        rf"|(?:contains?|has|have) no zeros)",
        re.I,
    ),
    "kept": re.compile(
        r"\bzeros?\b(?:\s+\w+)?\s+(?:is|are|were|was)\s+(?:kept|retained|included)\b|\bkeep(?:ing"
        r"|s)?\s+(?:the |all )?zeros?\b",
        re.I,
    ),
}


def zeros_in(text: str) -> str | None:
    """What a sentence says was done with zeros of the outcome; None where it says nothing plain."""
    if beside_the_point(text) or _COVARIATES.search(text):
        return None
    found = [
        name
        for name, shape in _ZEROS.items()
        for each in shape.finditer(text)
        if name == "none present" or not _denied(text, each)
    ]
    names = list(dict.fromkeys(found))
    if len(names) > 1 and "kept" in names:  # "we add 1 to keep zeros" says how
        names.remove("kept")
    return names[0] if len(names) == 1 else None


def _denied(text: str, found: re.Match[str]) -> bool:
    matched = re.sub(r"\bno\b", "", found[0], flags=re.I)  # "boats with no landings" denies nothing
    return denied(text[: found.start()] + matched, found.start(), found.start() + len(matched))


_REASONS = {
    "normality": r"\bnormality\b|\bnormally distributed\b|\bnormal distribution\b|\b(?:to|near|nearer|nearly"
    r"|approximately|closer?)\s+(?:to\s+)?(?:the |a )?normal\b",
    "unequal variance": r"\bhetero[sk]k?edastic\w*|\bstabili[sz]\w+ (?:the )?variance|\bunequal variances?"
    r"|\bvariance[- ]stabili[sz]ing",
    "outliers": r"\boutliers?\b|\bextreme (?:values|observations)\b|\bvery large (?:values|observations)\b",
    "percent reading": r"\b(?:interpret\w*|read)\b[^.;]{0,60}\b(?:percent|percentage|elasticit|semi-elasticit"
    r"|proportional)\w*",
    "theory of the mean": r"\bmultiplicative\b|\beffects? (?:are|is|act|acts|to be) proportional\b",
    "habit": r"\bas is (?:common|customary|usual|standard)\b|\bcommon(?:ly)? (?:practice|used)\b"
    r"|\bfollowing (?:common|standard|usual|earlier|previous)\b|\bas in (?:most|other|earlier) (?:work"
    r"|studies)",
}
_ANY_TRANSFORM = re.compile("|".join(_NAMED.values()) + r"|\btransform\w*", re.I)
_PURPOSE = re.compile(
    r"\b(?:because|since|so that|so as to|in order to|to (?:make|bring|reduce|achieve|ease|allow|limit"
    r"|improve|obtain|get|account|deal|stabili[sz]e)|which (?:brings?|makes?|reduces?|allows?"
    r"|stabili[sz]es?)|as (?:the|it|they|is)|due to|for (?:reasons? of|normality)|following|following"
    r"|owing to|brings?|reduces?|allows?)\b",
    re.I,
)


def reasons_in(text: str) -> tuple[str, ...]:
    """Reasons that a sentence gives for transforming; none where the sentence does not speak of it."""
    literature_only = re.sub(r"\b(?:previous|earlier|literature)\b", "", text, flags=re.I)
    if beside_the_point(literature_only) or not _ANY_TRANSFORM.search(text) or not _PURPOSE.search(text):
        return ()
    found = [(name, re.search(shape, text, re.I)) for name, shape in _REASONS.items()]
    return tuple(
        name
        for name, place in found
        if place and not denied(text, place.start(), place.end()) and not _of_errors(text, name)
    )


def _of_errors(text: str, reason: str) -> bool:
    """Whether unequal variance is met by the errors, not by the transform."""
    return reason == "unequal variance" and bool(re.search(r"\bstandard errors?\b|\brobust\b", text, re.I))
