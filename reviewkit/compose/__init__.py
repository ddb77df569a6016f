"""Findings, facts and exhibits become a note; what is for the editor never meets what is for the authors."""

from reviewkit.compose.content import CaseContent, NoteWishes, Repeat, Voice, wishes_from
from reviewkit.note import Audience, Note

__all__ = ["CaseContent", "NoteWishes", "Repeat", "Voice", "compose", "wishes_from"]


def compose(case: CaseContent, audience: Audience) -> Note:
    """The note on this case for that audience."""
    raise NotImplementedError
