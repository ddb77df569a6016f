"""Findings, facts and exhibits become a note; what is for the editor never meets what is for the authors."""

from dataclasses import replace
from typing import assert_never

from reviewkit.compose.authors import authors_note
from reviewkit.compose.content import CaseContent, NoteWishes, Repeat, Voice, wishes_from
from reviewkit.compose.editor import editor_note
from reviewkit.compose.phrases import phrases_for
from reviewkit.derived import derive
from reviewkit.note import Audience, Note

__all__ = ["CaseContent", "NoteWishes", "Repeat", "Voice", "compose", "wishes_from"]


def compose(case: CaseContent, audience: Audience) -> Note:
    """The note on this case for that audience."""
    complete = replace(case, facts=derive(case.facts))
    phrases = phrases_for(case.wishes.voice)
    match audience:
        case Audience.AUTHORS:
            return authors_note(complete, phrases)
        case Audience.EDITOR:
            return editor_note(complete, phrases)
        case _:
            assert_never(audience)
