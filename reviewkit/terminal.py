"""What kind of terminal there is, and how one asks and tells on it."""

import os
import shutil
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from typing import TextIO

from reviewkit import review
from reviewkit.screen import Screen, telling


@contextmanager
def progress(plain: bool) -> Iterator[Callable[[str], None]]:
    """Says what takes over two seconds: one line that changes on a terminal, elsewhere a line each."""
    review.load_numbers()
    if is_plain(plain, sys.stderr):
        with telling(lambda text: print(text, file=sys.stderr)) as tell:
            yield tell
        return
    try:
        with telling(lambda text: print(f"\r\033[K{text}", end="", file=sys.stderr, flush=True)) as tell:
            yield tell
    finally:
        print("\r\033[K", end="", file=sys.stderr, flush=True)


def is_plain(plain: bool, stream: TextIO | None = None) -> bool:
    """Whether nothing but lines of text may be written."""
    unstyled = "NO_COLOR" in os.environ or os.environ.get("TERM", "") == "dumb"
    return plain or unstyled or not (stream or sys.stdout).isatty()


def screen(plain: bool, as_json: bool) -> Screen:
    """The screen that questions are asked on; not standard output where that holds one object."""
    out = sys.stderr if as_json else sys.stdout

    def write(text: str) -> None:
        print(text, file=out, flush=True)

    def read(prompt: str) -> str:
        if sys.stdin.isatty() and out.isatty():
            with suppress(ImportError):
                import readline  # noqa: F401 – gives `input` its line editing where there is one
            return input(prompt)
        print(prompt, end="", file=out, flush=True)
        line = sys.stdin.readline()
        if not line:
            raise EOFError
        return line

    return Screen(read, write, shutil.get_terminal_size((80, 24)).columns, not is_plain(plain, out))
