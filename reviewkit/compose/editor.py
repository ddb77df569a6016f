"""The note to the editor: the headline, whether it could be met, the alternative, and what settles it."""

from reviewkit import __version__
from reviewkit.clauses import Lookup
from reviewkit.compose.content import CaseContent
from reviewkit.compose.length import words_in
from reviewkit.compose.phrases import Phrases
from reviewkit.compose.points import listed, missing_labels, points
from reviewkit.facts import Value
from reviewkit.note import Audience, Note, Paragraph, Section
from reviewkit.printed import Printed
from reviewkit.rules import Importance
from reviewkit.wording import change, clean, estimate, fixed, interval, joined, percent, share, text

_MOST_OPEN = 2


def editor_note(case: CaseContent, phrases: Phrases) -> Note:
    """At most a paragraph, the referee's own words for the editor, and a line on software."""
    model = _model(case)
    lookup = case.book.lookup(case.facts, model)
    own = clean(case.wishes.own_words.get("editor", ""))
    software = phrases.say("editor.software" if case.repeats else "editor.software_only", version=__version__)
    title = phrases.say("titles.editor", title=clean(case.title))
    for brief in (False, True):
        parts = [_claim(case, model, phrases, brief), *_numbers(lookup, phrases, brief), *_what_follows(case, phrases)]
        blocks = tuple(Paragraph(words) for words in (" ".join(filter(None, parts)), own, software) if words)
        note = Note(title, Audience.EDITOR, (Section("", blocks),))
        if words_in(note) <= phrases.limit("editor_words"):
            break
    return note


def _model(case: CaseContent) -> str:
    """The model that the headline rests on: the first that was estimated again, else the first."""
    models = case.facts.subjects("model") or ("study",)
    fitted = [each for each in models if case.facts.known("refit.conclusion", each) is not None]
    return (fitted or list(models))[0]


def _claim(case: CaseContent, model: str, phrases: Phrases, brief: bool) -> str:
    lookup = case.book.lookup(case.facts, model)
    estimator, transform = _words(lookup("estimator")), _words(lookup("outcome.transform"))
    if not estimator or not transform:
        return ""
    zero_share = lookup("outcome.zero_share")
    has_zeros = isinstance(zero_share, float) and zero_share > 0
    zeros = phrases.say("editor.zeros", share=share(zero_share)) if has_zeros else ""
    common = {"estimator": estimator, "transform": transform, "zeros": zeros}
    claims = case.facts.subjects("claim")
    read = [claim for claim in claims if isinstance(_value(case, "claim.percent", claim), Printed | float)]
    if not read:
        return phrases.say("editor.no_claim", **common)
    stated = _words(_value(case, "claim.percent_in_words", read[0])) or change(_value(case, "claim.percent", read[0]))
    reading = "" if brief else _reading(case.book.lookup(case.facts, read[0]), phrases)
    return phrases.say("editor.claim", percent=stated, reading=reading, **common)


def _reading(lookup: Lookup, phrases: Phrases) -> str:
    """What the stated percent is, with the ratio that the coefficient stands for where a log gives it one."""
    reading, exact = _words(lookup("claim.percent_reading")), lookup("claim.percent_exact")
    if not reading:
        return ""
    has_ratio = lookup("outcome.transform") == "log" and isinstance(exact, float)
    ratio = phrases.say("editor.ratio", percent=change(exact)) if has_ratio else ""
    return phrases.say("editor.reading", reading=reading, ratio=ratio)


def _value(case: CaseContent, name: str, subject: str) -> Value | None:
    fact = case.facts.known(name, subject)
    return None if fact is None else fact.value


def _numbers(lookup: Lookup, phrases: Phrases, brief: bool) -> list[str]:
    if lookup("refit.conclusion") is None:
        return [phrases.say("editor.no_data")]
    return [
        _reproduced(lookup, phrases),
        _alternative(lookup, phrases, brief),
        _conclusion(lookup, phrases),
    ]


def _reproduced(lookup: Lookup, phrases: Phrases) -> str:
    state = lookup("refit.reproduced")
    if state not in ("yes", "partly", "no"):
        return phrases.say("editor.no_print")
    printed, error = lookup("refit.printed_estimate"), lookup("refit.printed_error")
    shown = f", {estimate(printed)}" if isinstance(printed, Printed) else ""
    shown += f" ({estimate(error)})" if shown and isinstance(error, Printed) else ""
    return phrases.say(f"editor.reproduced_{state}", figures=shown)


def _alternative(lookup: Lookup, phrases: Phrases, brief: bool) -> str:
    """What the model of the mean gives, in percent where that has a meaning, else on the comparison's scale."""
    in_percent = isinstance(lookup("refit.alternative_percent"), float)
    ending = "_percent" if in_percent else ""
    value = lookup(f"refit.alternative{ending}")
    if not isinstance(value, float):
        return ""
    scale = _words(lookup("refit.scale"))
    named = phrases.say(f"scales.{scale}") if phrases.has(f"scales.{scale}") else scale
    shown = change(value) if in_percent else f"{estimate(value)} ({named})"
    low, high = (lookup(f"refit.alternative{ending}_{end}") for end in ("low", "high"))
    if isinstance(low, float) and isinstance(high, float):
        ends = _words(lookup("refit.alternative_percent_interval")) if in_percent else interval(low, high)
        shown = phrases.say("editor.with_interval", value=shown, level=_level(), interval=ends)
    other = lookup(f"refit.submitted{ending}")
    own = change(other) if in_percent else estimate(other)
    submitted = phrases.say("editor.submitted", value=own) if isinstance(other, float) and not brief else ""
    return phrases.say("editor.alternative", alternative=shown, submitted=submitted)


def _conclusion(lookup: Lookup, phrases: Phrases) -> str:
    """Whether direction and size hold in both models, with the bound where they agree."""
    conclusion, turns = lookup("refit.conclusion"), lookup("refit.sign_turns")
    direction = phrases.say(f"editor.sign_{turns}") if turns in ("yes", "no") else ""
    if conclusion == "unsettled":
        apart = lookup("refit.difference_excludes_zero") == "yes"
        conclusion = "unsettled" if apart else "unsettled_zero"
    bound, why = lookup("refit.agree_within_percent"), _words(lookup("refit.why_no_conclusion"))
    has_no_bound = conclusion in ("agrees", "unsettled_zero") and not isinstance(bound, float)
    turned = conclusion == "differs" and turns == "yes"
    if turned or has_no_bound or (conclusion == "none" and not why):
        return direction
    size = phrases.say(f"editor.{conclusion}", bound=percent(bound), why=why.rstrip("."))
    return f"{direction} {size}".strip()


def _what_follows(case: CaseContent, phrases: Phrases) -> list[str]:
    """How many requests there are, and what is open."""
    found = points(case)
    open_labels = missing_labels(case)
    has_more = len(open_labels) > _MOST_OPEN
    opened = ", ".join(open_labels[:_MOST_OPEN]) if has_more else joined(open_labels)
    more = phrases.say("editor.more_open") if has_more else ""
    still_open = [phrases.say("editor.some_open", labels=opened, more=more)] if open_labels else []
    if not found:
        return [phrases.say("editor.nothing_open" if open_labels else "editor.nothing"), *still_open]
    majors = sum(point.finding.importance is Importance.MAJOR for point in found)
    minors = len(listed(found, phrases)) - majors
    counts = [(majors, "major"), (minors, "minor")]
    told = joined(f"{number} {importance}" for number, importance in counts if number)
    noun = "request" if majors + minors == 1 else "requests"
    return [phrases.say("editor.settle", requests=f"{told} {noun}"), *still_open]


def _level() -> str:
    from reviewkit.comparison import LEVEL

    return fixed(100 * LEVEL, 0)


def _words(value: Value | None) -> str:
    return text(value) if isinstance(value, str) else ""
