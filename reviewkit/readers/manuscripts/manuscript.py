"""A manuscript as text: paragraphs and tables, numbered as a reader counts them."""

import re
from dataclasses import dataclass

_LABEL = re.compile(r"^\s*(?:Table|Tab\.)\s+([A-Z]?\.?\d{1,3}[a-z]?|[IVX]{1,5})\b", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class ManuscriptParagraph:
    """One paragraph with text in it; numbers start at 1 and leave tables out."""

    number: int
    text: str
    heading: str
    """The heading it stands under; for a heading, its own text."""
    is_heading: bool = False

    @property
    def place(self) -> str:
        """`paragraph 12`."""
        return f"paragraph {self.number}"


@dataclass(frozen=True, slots=True)
class ManuscriptTable:
    """One table; a cell that spans several columns or rows has its text in the first of them."""

    number: int
    caption: str
    rows: tuple[tuple[str, ...], ...]
    notes: str = ""
    """The paragraph below it, where that holds notes."""

    @property
    def label(self) -> str:
        """The number in the caption, else its place among the tables."""
        found = _LABEL.match(self.caption)
        return found[1] if found else str(self.number)

    def place(self, row: int) -> str:
        """`table 3, row 2`; rows count from 1."""
        return f"table {self.label}, row {row}"


@dataclass(frozen=True, slots=True)
class Manuscript:
    """What was read of a manuscript."""

    paragraphs: tuple[ManuscriptParagraph, ...]
    tables: tuple[ManuscriptTable, ...]
    title: str = ""
