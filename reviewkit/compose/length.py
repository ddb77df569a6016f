"""How long a note is: words of its text, without exhibits and the specification."""

from typing import assert_never

from reviewkit.note import Block, Excerpt, Figure, Note, Paragraph, Points, ReferenceList, Table


def words_in(note: Note) -> int:
    """Words of headings, paragraphs, points and works cited."""
    return sum(_count(section.title) + sum(_words_of(block) for block in section.blocks) for section in note.sections)


def _words_of(block: Block) -> int:
    match block:
        case Paragraph():
            return _count(block.lead) + _count(block.text)
        case Points():
            return sum(map(_count, block.items))
        case ReferenceList():
            return sum(map(_count, block.entries))
        case Table() | Figure() | Excerpt():
            return 0
        case _:
            assert_never(block)


def _count(text: str) -> int:
    return len(text.split())
