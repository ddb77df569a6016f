"""Texts of rules: `{fact|formatter}` placeholders, and parts that give way where a fact is not known.

A placeholder stands in double square brackets: `[[The share of zeros is {outcome.zero_share|share}. || The share of
zeros is not known to us.]]` gives the first alternative whose facts are all known, or nothing. Only settings may stand
outside, so that no text can show a placeholder that was not filled in.
"""

import math
import re
from collections.abc import Iterator, Mapping

from reviewkit.clauses import Lookup
from reviewkit.facts import NotStated, Value
from reviewkit.refusals import Refusal
from reviewkit.vocabulary import Kind, Vocabulary, closest
from reviewkit.wording import FORMATTERS

_PART = re.compile(r"\[\[(.*?)\]\]", re.DOTALL)
_PLACEHOLDER = re.compile(r"\{([a-z0-9_.]+)(?:\|([a-z_]+))?\}")
_FOR_WORDS = ("text", "list")
_NUMERIC = (Kind.NUMBER, Kind.PRINTED)


def render(template: str, lookup: Lookup) -> str:
    """The text with its placeholders filled in; parts whose facts are unknown give way to their alternatives."""
    pieces = _PART.split(
        template
    )  # outside, part, outside, part, …; each filled in once, so that no value is read again
    chosen = (
        _first_known(piece, lookup) if place % 2 else _filled(piece, lookup) for place, piece in enumerate(pieces)
    )
    return _tidy("".join(piece or "" for piece in chosen))


def placeholders(template: str) -> tuple[str, ...]:
    """The facts and settings that a text names, in order."""
    return tuple(dict.fromkeys(found[1] for found in _PLACEHOLDER.finditer(template)))


def check_template(template: str, vocabulary: Vocabulary, settings: Mapping[str, float], where: str) -> str:
    """The template itself; refused where a placeholder is unknown, unsuited, or outside of double brackets."""
    for name, formatter in _PLACEHOLDER.findall(template):
        _check_placeholder(name, formatter or "text", vocabulary, settings, where)
    outside = _PART.sub("", template)
    loose = [name for name in placeholders(outside) if not name.startswith("setting.")]
    if loose:
        remedy = f"Write [[… {{{loose[0]}}} … || words without it]]"
        raise Refusal(where, f"{{{loose[0]}}} stands outside of double brackets, but may be unknown", "", remedy)
    left = _PLACEHOLDER.sub("", outside + " ".join(_PART.findall(template)))
    if re.search(r"[{}]|\[\[|\]\]", left):
        raise Refusal(where, "a bracket is not closed, or a placeholder is misspelt", "{fact|formatter}, [[ … || … ]]")
    return template


def _check_placeholder(
    name: str, formatter: str, vocabulary: Vocabulary, settings: Mapping[str, float], where: str
) -> None:
    if formatter not in FORMATTERS:
        raise Refusal(where, f"there is no formatter `{formatter}`", ", ".join(FORMATTERS))
    if name.startswith("setting."):
        if name.removeprefix("setting.") not in settings:
            raise Refusal(where, f"there is no setting {name}", ", ".join(settings))
        return
    definition = vocabulary.get(name)
    if definition is None:
        names = [each.name for each in vocabulary]
        raise Refusal(where, f"there is no fact {name}", "names in facts.toml", closest(name, names))
    if definition.kind not in _NUMERIC and formatter not in _FOR_WORDS:
        raise Refusal(where, f"{name} is not a number, `{formatter}` cannot show it", ", ".join(_FOR_WORDS))


def _first_known(part: str, lookup: Lookup) -> str:
    """The first alternative whose facts are known."""
    return next((filled for each in part.split("||") if (filled := _filled(each, lookup)) is not None), "")


def _filled(text: str, lookup: Lookup) -> str | None:
    """The text with all placeholders filled in, or None where one of its facts is unknown."""
    values = {name: lookup(name) for name in placeholders(text)}
    if not all(_showable(value) for value in values.values()):
        return None
    return _PLACEHOLDER.sub(lambda found: FORMATTERS[found[2] or "text"](values[found[1]]), text)


def _showable(value: Value | None) -> bool:
    if value is None or value in ((), "") or isinstance(value, NotStated):
        return False
    return not isinstance(value, float) or math.isfinite(value)


def _tidy(text: str) -> str:
    """One blank between words, none before a comma or full stop."""
    return re.sub(r" +([.,;:?!])(?=\s|$)", r"\1", re.sub(r"\s+", " ", text)).strip()


def sentences(text: str) -> Iterator[str]:
    """The sentences of a text, split after a full stop or question mark before a capital letter."""
    yield from (part for part in re.split(r"(?<=[.?!])\s+(?=[A-Z“\"])", text) if part)
