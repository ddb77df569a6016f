"""Sentences that read an effect as a percent or print a coefficient."""

import re

from reviewkit.printed import Printed, read_printed
from reviewkit.readers.manuscripts.sentences import beside_the_point, denied
from reviewkit.refusals import Refusal

_FIGURE = r"(?P<figure>\d{1,4}(?:[.,]\d{1,3})?)\s*(?:%|percent\b|per cent\b)(?!\s*-?points?)(?!age)"
_UP = r"(?:increas|rais|grow|grew|boost|lift|improv|expand|rise|rose|gain|add|lengthen)\w*"
_DOWN = r"(?:decreas|reduc|lower|cut|shorten|shrink|shrank|declin|fall|fell|drop|diminish|lessen|curb)\w*"
_MORE = r"(?:higher|more|larger|greater|longer|bigger)"
_LESS = r"(?:lower|less|smaller|shorter|fewer)"
_SHAPES = (
    (
        re.compile(
            rf"\b(?:{_UP})\b[^.;]{{0,80}}?\bby (?:about |around |roughly |some |an average of "
            rf"|approximately |nearly |almost )?{_FIGURE}",
            re.I,
        ),
        "",
    ),
    (
        re.compile(
            rf"\b(?:{_DOWN})\b[^.;]{{0,80}}?\bby (?:about |around |roughly |some |an average of "
            rf"|approximately |nearly |almost )?{_FIGURE}",
            re.I,
        ),
        "-",
    ),
    (re.compile(rf"{_FIGURE}\s+(?:{_MORE}\b|(?:increase|rise|gain|growth)\b)", re.I), ""),
    (re.compile(rf"{_FIGURE}\s+(?:{_LESS}\b|(?:decrease|reduction|decline|fall|drop|cut)\b)", re.I), "-"),
)
_NO_CLAIM = re.compile(
    r"\b(?:median|share|sample|respondents|response rate|minimum detectable|power|between (?:19|20)\d\d"
    r"|from (?:19|20)\d\d|since (?:19|20)\d\d"
    r"|quartile|percentile|inflation|standard deviation|confidence|significan\w+|level of)\b"
    r"|\blast (?:year|decade)\b|\b(?:needs?|aims?|targets?|planned|hope|expect(?:s|ed)? to)\b",
    re.I,
)


def percent_claim(text: str) -> Printed | None:
    """The percent that a sentence claims as an effect, with a minus sign for a fall; None for any other percent."""
    if beside_the_point(text) or re.search(r"\b(?:whether|if|could|might|may)\b", text, re.I):
        return None
    found = [
        (place, sign)
        for shape, sign in _SHAPES
        for place in shape.finditer(text)
        if not denied(text, place.start(), place.end())
    ]
    figures = {f"{sign}{place['figure']}" for place, sign in found}
    if len(figures) != 1 or _NO_CLAIM.search(text):
        return None
    return _printed(figures.pop())


_NUMBER = r"[-−–]?\s?\d{0,4}[.,]\d{1,6}"
_STATED = re.compile(
    rf"\bcoefficients?\b[^.;]{{0,80}}?(?:\bis\b|\bequals\b|\bof\b|\bat\b|=)\s*(?P<b>{_NUMBER})\*{{0,3}}"
    rf"(?:\s*(?:,|\(|with)?\s*(?:a |its )?(?:robust |clustered )?(?:standard error|s\.?e\.?|SE)s?\s*(?:of"
    rf"|is|=|:)?\s*(?P<se>{_NUMBER}))?",
    re.I,
)


def stated_coefficient(text: str) -> tuple[Printed, Printed | None] | None:
    """Coefficient and standard error that a sentence prints."""
    if beside_the_point(text):
        return None
    found = list(_STATED.finditer(text))
    if len(found) != 1 or denied(text, found[0].start("b"), found[0].start("b") + 1):
        return None
    estimate = _printed(found[0]["b"])
    error = _printed(found[0]["se"]) if found[0]["se"] else None
    return (estimate, error) if estimate is not None else None


def _printed(text: str) -> Printed | None:
    plain = text.replace("−", "-").replace("–", "-").replace(" ", "")
    try:
        return read_printed(plain)
    except Refusal:
        return None
