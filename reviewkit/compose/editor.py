"""The note to the editor: the headline, whether it could be met, the alternative, and what settles it."""

from reviewkit import __version__
from reviewkit.clauses import Lookup
from reviewkit.compose.content import CaseContent
from reviewkit.compose.length import words_in
from reviewkit.compose.phrases import Phrases
from reviewkit.compose.points import points
from reviewkit.facts import Value
from reviewkit.note import Audience, Note, Paragraph, Section
from reviewkit.printed import Printed
from reviewkit.rules import State
from reviewkit.wording import clean, estimate, fixed, interval, percent, share, text


def editor_note(case: CaseContent, phrases: Phrases) -> Note:
    """At most a paragraph, the referee's own words for the editor, and a line on software."""
    model = _model(case)
    lookup = case.book.lookup(case.facts, model)
    own = clean(case.wishes.own_words.get("editor", ""))
    software = phrases.say("editor.software" if case.repeats else "editor.software_only", version=__version__)
    title = phrases.say("titles.editor", title=clean(case.title))
    for brief in (False, True):
        parts = [_claim(case, model, phrases), *_numbers(lookup, phrases, brief), *_what_follows(case, phrases)]
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


def _claim(case: CaseContent, model: str, phrases: Phrases) -> str:
    lookup = case.book.lookup(case.facts, model)
    estimator, transform = _words(lookup("estimator")), _words(lookup("outcome.transform"))
    if not estimator or not transform:
        return ""
    zero_share = lookup("outcome.zero_share")
    has_zeros = isinstance(zero_share, float) and zero_share > 0
    zeros = phrases.say("editor.zeros", share=share(zero_share)) if has_zeros else ""
    common = {"estimator": estimator, "transform": transform, "zeros": zeros}
    claimed = [case.facts.known("claim.percent", claim) for claim in case.facts.subjects("claim")]
    read = [fact.value for fact in claimed if fact is not None and isinstance(fact.value, Printed | float)]
    return (
        phrases.say("editor.claim", percent=percent(read[0]), **common)
        if read
        else phrases.say("editor.no_claim", **common)
    )


def _numbers(lookup: Lookup, phrases: Phrases, brief: bool) -> list[str]:
    if lookup("refit.conclusion") is None:
        return [phrases.say("editor.no_data")]
    return [
        _reproduced(lookup, phrases),
        _alternative(lookup, phrases, brief),
        _direction(lookup, phrases),
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
    ending, unit = ("_percent", "%") if in_percent else ("", "")
    value = lookup(f"refit.alternative{ending}")
    if not isinstance(value, float):
        return ""
    scale = _words(lookup("refit.scale"))
    named = phrases.say(f"scales.{scale}") if phrases.has(f"scales.{scale}") else scale
    shown = percent(value) if in_percent else f"{estimate(value)} ({named})"
    low, high = (lookup(f"refit.alternative{ending}_{end}") for end in ("low", "high"))
    if isinstance(low, float) and isinstance(high, float):
        shown = phrases.say("editor.with_interval", value=shown, level=_level(), interval=interval(low, high, unit))
    other = lookup(f"refit.submitted{ending}")
    own = percent(other) if in_percent else estimate(other)
    submitted = phrases.say("editor.submitted", value=own) if isinstance(other, float) and not brief else ""
    return phrases.say("editor.alternative", alternative=shown, submitted=submitted)


def _direction(lookup: Lookup, phrases: Phrases) -> str:
    match lookup("refit.sign_turns"):
        case "yes":
            return phrases.say("editor.sign_turns")
        case "no":
            return phrases.say("editor.same_sign")
        case _:
            return ""


def _conclusion(lookup: Lookup, phrases: Phrases) -> str:
    conclusion, bound = lookup("refit.conclusion"), lookup("refit.agree_within_percent")
    if conclusion == "unsettled":
        apart = lookup("refit.difference_excludes_zero") == "yes"
        conclusion = "unsettled" if apart else "unsettled_zero"
    if conclusion in ("agrees", "unsettled_zero") and not isinstance(bound, float):
        return ""
    why = _words(lookup("refit.why_no_conclusion"))
    if conclusion == "none" and not why:
        return ""
    from reviewkit.comparison import MATERIAL_SHARE

    material = fixed(100 * MATERIAL_SHARE, 0)
    return phrases.say(f"editor.{conclusion}", bound=percent(bound), why=why.rstrip("."), material=material)


def _what_follows(case: CaseContent, phrases: Phrases) -> list[str]:
    raised = bool(points(case))
    is_open = any(finding.state is State.OPEN for finding in case.findings)
    if raised:
        return [phrases.say("editor.settle"), *([phrases.say("editor.some_open")] if is_open else [])]
    return [phrases.say("editor.nothing_open" if is_open else "editor.nothing")]


def _level() -> str:
    from reviewkit.comparison import LEVEL

    return fixed(100 * LEVEL, 0)


def _words(value: Value | None) -> str:
    return text(value) if isinstance(value, str) else ""
