"""Manuscripts: one module a format, and the statements found in any of them."""

from pathlib import Path

from reviewkit.readers.manuscripts.manuscript import Manuscript, ManuscriptParagraph, ManuscriptTable
from reviewkit.readers.manuscripts.statements import proposed_facts
from reviewkit.refusals import Refusal

__all__ = ["Manuscript", "ManuscriptParagraph", "ManuscriptTable", "proposed_facts", "read_manuscript"]

LARGEST_FILE = 512 * 1024**2


def read_manuscript(path: Path | str) -> Manuscript:
    """Read a .docx manuscript; nothing in it is run or fetched.

    Raises:
        Refusal: the file is missing, protected, damaged, dangerous or of another kind.
    """
    path = Path(path)
    if path.suffix.lower() != ".docx":
        raise Refusal(
            path.name, "this kind of file is not read as a manuscript", ".docx", "Save the manuscript as .docx"
        )
    try:
        if not path.is_file():
            raise Refusal(path.name, "there is no such file", remedy=f"Looked in {path.parent}")
        if path.stat().st_size > LARGEST_FILE:
            raise Refusal(
                path.name, "the file is larger than 512 MiB", remedy="Save the manuscript with smaller pictures"
            )
        data = path.read_bytes()
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or "its name or place cannot be used"
        raise Refusal(path.name, f"the file cannot be opened ({reason})") from None
    if not data:
        raise Refusal(path.name, "the file is empty", "a .docx manuscript")
    from reviewkit.readers.manuscripts.docx import read_docx

    return read_docx(data, path.name)
