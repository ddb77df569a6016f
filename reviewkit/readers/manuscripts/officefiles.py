"""Whether an office file can be opened without harm: sizes, kinds and document types of its parts."""

import io
import zipfile
import zlib

from reviewkit.refusals import Refusal

MOST_PARTS = 5_000
LARGEST_PART = 64 * 1024**2
LARGEST_TEXT = 256 * 1024**2
"""Bytes of all XML parts together, unpacked."""
_OLD_OFFICE = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"


def check_office_file(data: bytes, name: str) -> None:
    """Refuse what is no office file, is protected, or would unpack to more than a manuscript holds.

    Raises:
        Refusal: with what is wrong and what to do.
    """
    allowed = "a .docx file without a password"
    if data.startswith(_OLD_OFFICE):
        what = "the file is protected by a password or of the older .doc kind"
        raise Refusal(name, what, allowed, "Save it as .docx without a password")
    if not data.startswith(b"PK"):
        raise Refusal(name, "this is not a .docx file", allowed, "Save the manuscript as .docx and try again")
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            _check_parts(archive, name)
    except (zipfile.BadZipFile, EOFError, OSError, RuntimeError, NotImplementedError, ValueError, zlib.error):
        raise Refusal(
            name, "the .docx file is cut short or damaged", allowed, "Copy it again or save it anew"
        ) from None


def _check_parts(archive: zipfile.ZipFile, name: str) -> None:
    parts = archive.infolist()
    names = {part.filename for part in parts}
    if "word/document.xml" not in names and "[Content_Types].xml" not in names:
        raise Refusal(
            name, "the archive holds no document", "a .docx file", "Save the manuscript as .docx and try again"
        )
    xml = [part for part in parts if part.filename.lower().endswith((".xml", ".rels"))]
    sizes = [part.file_size for part in xml]
    if (
        len(parts) > MOST_PARTS
        or len(names) < len(parts)
        or max(sizes, default=0) > LARGEST_PART
        or sum(sizes) > LARGEST_TEXT
    ):
        what = "the file would unpack to more than a manuscript holds"
        raise Refusal(
            name, what, f"parts of at most {LARGEST_PART // 1024**2} MiB", "Ask for a plain copy of the manuscript"
        )
    if sum(part.file_size for part in parts) > 4 * LARGEST_TEXT:
        raise Refusal(name, "a picture or file inside is too large", remedy="Save the manuscript with smaller pictures")
    for part in parts:
        _check_declarations(archive, part, name)


def _check_declarations(archive: zipfile.ZipFile, part: zipfile.ZipInfo, name: str) -> None:
    """Refuse document type declarations, through which XML can grow without end or reach for other files."""
    if part.filename.lower().endswith((".svg", ".html", ".htm")):  # pictures and embedded pages: never parsed
        return
    with archive.open(part) as stream:
        text = stream.read(part.file_size + 1)
    plain = text.replace(b"\0", b"")  # so that UTF-16 cannot hide one
    if b"<!DOCTYPE" in plain or b"<!ENTITY" in plain:
        raise Refusal(
            name,
            "the file declares XML entities, which no .docx needs",
            "a plain .docx file",
            "Save the manuscript anew",
        )
