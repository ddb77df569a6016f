"""Sentences of a manuscript with their places, and what makes one unfit as a statement on the main model."""

import re
from collections.abc import Iterator
from dataclasses import dataclass

from reviewkit.readers.manuscripts.manuscript import Manuscript

LONGEST_QUOTE = 300
LONGEST_SENTENCE = 2000
"""Characters of a sentence that are looked at."""
_ABBREVIATIONS = (
    r"(?<!\be\.g)(?<!\bi\.e)(?<!\bal)(?<!\bvs)(?<!\bcf)(?<!\bFig)(?<!\bEq)(?<!\bTab)(?<!\bNo)(?<!\bapprox)(?<!\b[A-Z])"
)
_END = re.compile(_ABBREVIATIONS + r"[.!?][\"”’)]?\s+(?=[\"“‘(]?[A-Z0-9])")
_NEGATION = re.compile(
    r"\b(?:not|never|no|without|nor|neither|cannot|rather than|instead of|n't|unlike|avoid\w*|refrain\w*"
    r"|abstain\w*)\b|n['’]t\b",
    re.I,
)
_BESIDE = re.compile(
    r"\brobustness\b|\balternativ\w+|\bappendix\b|\balso (?:estimate|fit|run|report|use)|\bas a check\b"
    r"|\bsensitiv\w+|\bfor comparison\b"
    r"|\bpreviou\w*|\bearlier\b|\bprior (?:work|stud|research|literature)|\bother (?:studies|authors"
    r"|papers|work)|\bliterature\b"
    r"|\bet al\b|\bone (?:could|might|may)\b|\bwould\b|\bcould (?:have|be|also)\b|\bif we\b|\bhad we\b|\?\s*$",
    re.IGNORECASE,
)
_CITATION = re.compile(r"\b[A-Z][\w'’-]+(?: (?:and|&) [A-Z][\w'’-]+)?,? \(?(?:19|20)\d\d[a-z]?\)")


@dataclass(frozen=True, slots=True)
class Sentence:
    """One sentence, its place and the heading it stands under."""

    text: str
    place: str
    heading: str

    @property
    def quote(self) -> str:
        """The sentence, cut to a length that a note can hold."""
        return self.text if len(self.text) <= LONGEST_QUOTE else self.text[: LONGEST_QUOTE - 1] + "…"


def sentences_of(manuscript: Manuscript) -> tuple[Sentence, ...]:
    """All sentences of paragraphs, captions and table notes, in reading order; reference lists are left out."""
    return tuple(_sentences(manuscript))


def _sentences(manuscript: Manuscript) -> Iterator[Sentence]:
    for paragraph in manuscript.paragraphs:
        listed = re.match(
            r"^(?:\d+\.?\s*)?(?:references|bibliography|works cited|literature)\b", paragraph.heading, re.I
        )
        if not paragraph.is_heading and not listed:
            yield from (Sentence(text, paragraph.place, paragraph.heading) for text in split(paragraph.text))


def split(text: str) -> tuple[str, ...]:
    """The sentences of a paragraph."""
    parts, start = [], 0
    for end in _END.finditer(text):
        parts.append(text[start : end.end()].strip())
        start = end.end()
    return tuple(part[:LONGEST_SENTENCE] for part in (*parts, text[start:].strip()) if part)


def denied(sentence: str, start: int, end: int) -> bool:
    """Whether a negation stands near `sentence[start:end]`, in its clause and before it, or within it."""
    clause = re.split(r"[;:]|, (?:but|and|while|whereas|which)\b", sentence[:start])[-1]
    return bool(_NEGATION.search(clause) or _NEGATION.search(sentence[start:end]))


def beside_the_point(sentence: str) -> bool:
    """Whether a sentence speaks of other work, of checks or of what might be, not of the main model."""
    return bool(_BESIDE.search(sentence) or _CITATION.search(sentence))
