"""Words on a terminal, a pipe or a screen reader: lines only, folded to the width, nothing redrawn."""

import textwrap
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from threading import Event, Thread

from reviewkit.interview import Interview, facts_of, shown_value, where_from
from reviewkit.prompts import Choice, Prompt

LIST_AT_ONCE = 15
WIDEST = 92
COMMANDS = (
    "At any question:  ? explains   b back   s not looked at   q leave, all is kept",
    "  n the paper doesn't say   r WORDS a remark for yourself, never for the authors",
    "  Behind an answer, ` @ p. 11` notes where you saw it.",
)


@dataclass(frozen=True, slots=True)
class Screen:
    """Where words go and replies come from; `read` raises EOFError where no more will come."""

    read: Callable[[str], str]
    write: Callable[[str], None]
    width: int = WIDEST
    styled: bool = False

    def say(self, text: str = "", indent: str = "", hanging: str | None = None) -> None:
        """Write a text, folded to the width; further lines hang below the first."""
        further = indent if hanging is None else hanging
        for line in _folded(text, min(self.width, WIDEST), indent, further):
            self.write(line)

    def strong(self, text: str) -> None:
        """Write a text that stands out where the terminal can."""
        for line in _folded(text, min(self.width, WIDEST)) or [""]:
            self.write(f"\033[1m{line}\033[0m" if self.styled else line)

    def quiet(self, line: str) -> None:
        """Write one line as it is, faint where the terminal can."""
        self.write(f"\033[2m{line}\033[0m" if self.styled else line)

    def faint(self, text: str, indent: str = "") -> None:
        """Write what may be passed over."""
        for line in _folded(text, min(self.width, WIDEST), indent, indent):
            self.quiet(line)


@contextmanager
def telling(say: Callable[[str], None], seconds: float = 2.0) -> Iterator[Callable[[str], None]]:
    """Says what is being done once it has taken that long, and then every so often; shorter work passes in silence."""
    latest, over = [""], Event()

    def tell() -> None:
        said = ""
        while not over.wait(seconds):
            if latest[0] != said:
                said = latest[0]
                say(f"{said} …")

    teller = Thread(target=tell, daemon=True)
    teller.start()
    try:
        yield lambda text: latest.__setitem__(0, text)
    finally:
        over.set()
        teller.join()


def show_prompt(prompt: Prompt, screen: Screen) -> None:
    """The question, its choices, and what may be typed."""
    screen.write("")
    screen.strong(prompt.question)
    if prompt.found_in:
        waits = len(prompt.waiting)
        points = f" {'1 point waits' if waits == 1 else f'{waits} points wait'} on it." if waits else ""
        screen.faint(f"Look in: {prompt.found_in}.{points}", "  ")
    shown = len(prompt.choices) if len(prompt.choices) <= LIST_AT_ONCE + 5 else LIST_AT_ONCE
    show_choices(prompt.choices, screen, shown)
    if prompt.hint:
        screen.faint(f"{prompt.hint[:1].upper()}{prompt.hint[1:]}.", "  ")
    if prompt.default is not None:
        screen.say(f"Enter: {_default(prompt)}", "  ")


def _default(prompt: Prompt) -> str:
    labels = {each.value: each.shown for each in prompt.choices}
    value = prompt.default
    if value in ("", ()) or value is None:
        return prompt.default_why or "nothing"
    shown = labels.get(value, "") if isinstance(value, str) else ""
    shown = shown or shown_value(prompt.definition, value)
    return f"{shown} ({prompt.default_why})" if prompt.default_why else shown


def show_choices(choices: tuple[Choice, ...], screen: Screen, count: int) -> None:
    """The first `count` choices, and how to find the others."""
    for number, choice in enumerate(choices[:count], start=1):
        show_choice(number, choice, screen)
    if len(choices) > count:
        screen.say(f"… and {len(choices) - count} more: type a part of a name to find it, or `all`.", "      ")


def show_choice(number: int, choice: Choice, screen: Screen) -> None:
    """One numbered choice."""
    words = f"{choice.shown}  ({choice.detail})" if choice.detail else choice.shown
    screen.say(words, f"  {number:>3}  ", "       ")


def explain(prompt: Prompt, interview: Interview, screen: Screen) -> None:
    """Where to look, what the words mean, which points wait, what is known so far."""
    if prompt.explains:
        screen.say(prompt.explains, "  ")
    if prompt.found_in:
        screen.say(f"Where to look: {prompt.found_in}.", "  ")
    if prompt.waiting:
        screen.say("Asked because these points wait on it:", "  ")
        for title in prompt.waiting[:6]:
            screen.say(title, "    - ", "      ")
        if len(prompt.waiting) > 6:
            screen.say(f"and {len(prompt.waiting) - 6} more", "    - ")
    for fact in facts_of(interview).every(prompt.name, prompt.subject):
        quote = f": “{fact.source.quote}”" if fact.source.quote else ""
        screen.say(
            f"Known so far: {shown_value(prompt.definition, fact.value)} ({where_from(fact)}{quote})", "  ", "    "
        )
    for line in COMMANDS:
        screen.write(f"  {line}")


def _folded(text: str, width: int, first: str = "", further: str = "") -> list[str]:
    """The text in lines of that width; long words such as paths stay whole."""
    wrap = textwrap.TextWrapper(
        width, initial_indent=first, subsequent_indent=further, break_long_words=False, break_on_hyphens=False
    )
    return wrap.wrap(text)
