"""One pasted line that fits a model, read as far as it goes; nothing in it is ever run."""

from reviewkit.readers.model_lines.dot_do import read_dot_do, starts_like_dot_do
from reviewkit.readers.model_lines.pieces import ModelLine
from reviewkit.readers.model_lines.python import looks_like_python, read_python
from reviewkit.readers.model_lines.r import looks_like_r, read_r
from reviewkit.readers.model_lines.syntax import LONGEST, Unreadable
from reviewkit.refusals import Refusal

__all__ = ["ModelLine", "read_model_line"]

_ALLOWED = "one regression line of a .do script, R or Python, such as: lm(log(y + 1) ~ x, data = d)"


def read_model_line(text: str) -> ModelLine:
    """What the line says of outcome, terms, sample and errors, as tables of a specification.

    Raises:
        Refusal: the text is empty, too long, or no regression line that is known.
    """
    if not text.strip():
        raise Refusal("model line", "the line is empty", _ALLOWED)
    if len(text) > LONGEST:
        raise Refusal(
            "model line",
            f"the text has {len(text):,} characters",
            f"at most {LONGEST:,}",
            "Paste the one line that fits the model",
        )
    try:
        found = _read(text)
    except Unreadable as why:
        raise Refusal("model line", f"the line could not be read ({why})", _ALLOWED, "Paste the whole line") from None
    except RecursionError:
        raise Refusal("model line", "the line is nested too deeply", _ALLOWED) from None
    if found is None:
        raise Refusal("model line", "no regression was found in it", _ALLOWED, "Or answer the questions one by one")
    return found


def _read(text: str) -> ModelLine | None:
    if starts_like_dot_do(text):
        return read_dot_do(text)
    if looks_like_python(text):
        return read_python(text)
    return read_r(text) if looks_like_r(text) else None
