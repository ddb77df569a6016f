"""The case folder: plain files that survive a kill, each with one owner and one way of being written."""

import contextlib
import json
import os
import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from enum import StrEnum
from pathlib import Path
from typing import Any

from reviewkit import FORMAT, safekeeping
from reviewkit.answers import Entry, entry_from, entry_json
from reviewkit.facts import Fact
from reviewkit.records import Json, fact_from, fact_json
from reviewkit.refusals import Refusal

SETTINGS, ANSWERS, PROPOSALS, COLUMNS = "case.toml", "answers.jsonl", "proposals.json", "columns.json"
RESULTS, NOTE, WRITTEN, LOCK = "results", "note.toml", "written.json", "lock"
OWNERS_ONLY = 0o700

NOTE_TEMPLATE = f"""format = {FORMAT}
# How the note is shaped. Nothing here is changed by ReviewKit once the file exists.

order = []          # names of rules in the order you want, as `reviewkit show` lists them; the rest follows
own_points = []     # sentences of your own for the authors, each a point
voice = "we"        # or "I"

[dropped]           # rule-name = "why it is left out"; the reason stays with you

[own_words]         # opening, closing, editor, or a rule-name = "your words"
"""


class Input(StrEnum):
    """What a case may be given."""

    MANUSCRIPT = "manuscript"
    PACKAGE = "package"
    DATA = "data"


class Policy(StrEnum):
    """What the journal's policy says; each is yes, no or not stated."""

    SOFTWARE = "software_on_manuscript"
    SHARING = "others_may_see"
    DECLARE = "use_must_be_declared"
    DELETE = "files_must_go_afterwards"


@dataclass(frozen=True, slots=True)
class Given:
    """A file or folder that the case was given: where it lies and what it was at that time."""

    path: str
    """Relative to the case folder where possible."""
    sha256: str


@dataclass(frozen=True, slots=True)
class Settings:
    """What case.toml holds."""

    title: str = ""
    inputs: Mapping[Input, Given] = field(default_factory=dict)
    policy: Mapping[Policy, str] = field(default_factory=dict)
    models: tuple[str, ...] = ("main",)
    claims: tuple[str, ...] = ("main",)


@dataclass(frozen=True, slots=True)
class CaseFolder:
    """An existing case."""

    path: Path
    settings: Settings

    @property
    def title(self) -> str:
        """The manuscript's title, or the folder's name."""
        return self.settings.title or self.path.name

    def given(self, kind: Input) -> Given | None:
        """The input of that kind."""
        return self.settings.inputs.get(kind)

    def place(self, kind: Input) -> Path | None:
        """Where that input lies."""
        given = self.given(kind)
        return None if given is None else self.beside(given.path)

    def beside(self, path: str) -> Path:
        """A path of a file of this case, which may be relative to the folder."""
        return Path(os.path.normpath(self.path / path))

    def specification(self, model: str = "main") -> Path:
        """Where a model's specification stands."""
        return self.path / f"specification-{model}.toml"

    def results(self, model: str = "main") -> Path:
        """Where the results of its re-estimation stand."""
        return self.path / RESULTS / f"{model}.json"


def make_case(folder: Path) -> CaseFolder:
    """Make an empty case in a new or empty folder, or open the one that is there."""
    if is_case(folder):
        return open_case(folder)
    with safekeeping.refusing(folder, "made"):
        if folder.exists() and (not folder.is_dir() or any(folder.iterdir())):
            raise Refusal(folder.name, "this exists and is no case folder", remedy="Choose a new or an empty folder")
        folder.mkdir(mode=OWNERS_ONLY, parents=True, exist_ok=True)
        with contextlib.suppress(OSError):  # not every file system knows modes
            folder.chmod(OWNERS_ONLY)
    return save_settings(CaseFolder(folder, Settings()), Settings())


def is_case(folder: Path) -> bool:
    """Whether the folder holds a case."""
    return (folder / SETTINGS).is_file()


def open_case(folder: Path) -> CaseFolder:
    """The case in that folder."""
    if not is_case(folder):
        what = "there is no such folder" if not folder.exists() else "this is no case folder"
        raise Refusal(str(folder.name or folder), what, remedy=f"`reviewkit begin {_shell(folder)}` makes one")
    with safekeeping.refusing(folder / SETTINGS, "read"):
        content = (folder / SETTINGS).read_bytes()
    try:
        return CaseFolder(folder, _settings_from(tomllib.loads(content.decode("utf-8-sig"))))
    except (ValueError, KeyError, TypeError, AttributeError) as problem:
        raise Refusal(
            SETTINGS, f"this cannot be read ({problem})", remedy="Correct that line; the answers are safe"
        ) from None


@contextlib.contextmanager
def working_in(case: CaseFolder) -> Iterator[None]:
    """Hold the case's lock, so that no second ReviewKit writes into it."""
    with safekeeping.locked(case.path / LOCK):
        yield


# --- settings ---------------------------------------------------------------------------------------------------


def save_settings(case: CaseFolder, settings: Settings) -> CaseFolder:
    """Write case.toml anew."""
    safekeeping.write_atomically(case.path / SETTINGS, _settings_text(settings))
    return replace(case, settings=settings)


def check_given(path: Path) -> None:
    """Refuse an input that is not there."""
    if not path.exists():
        raise Refusal(path.name, "there is no such file or folder", remedy="Check the path")


def giving(case: CaseFolder, kind: Input, path: Path) -> CaseFolder:
    """The case with that input noted, as a path from the case folder and its checksum."""
    check_given(path)
    sha256 = safekeeping.file_checksum(path) if path.is_file() else ""
    inputs = {**case.settings.inputs, kind: Given(relative(path, case.path), sha256)}
    return save_settings(case, replace(case.settings, inputs=inputs))


def with_policy(case: CaseFolder, policy: Policy, answer: str) -> CaseFolder:
    """The case with that policy fact written down at once."""
    return save_settings(case, replace(case.settings, policy={**case.settings.policy, policy: answer}))


def relative(path: Path, folder: Path) -> str:
    """The path as seen from the folder, with forward slashes; whole where they lie on different drives."""
    try:
        return Path(os.path.relpath(path.resolve(), folder.resolve())).as_posix()
    except ValueError:
        return path.resolve().as_posix()


def _settings_text(settings: Settings) -> str:
    lines = [f"format = {FORMAT}", f"title = {_quoted(settings.title)}"]
    lines += [f"models = {_listed(settings.models)}", f"claims = {_listed(settings.claims)}", "", "[policy]"]
    lines += [f"{name} = {_quoted(answer)}" for name, answer in settings.policy.items()]
    for kind, given in settings.inputs.items():
        lines += ["", f"[inputs.{kind}]", f"path = {_quoted(given.path)}", f"sha256 = {_quoted(given.sha256)}"]
    return "\n".join(lines) + "\n"


def _settings_from(values: dict[str, Any]) -> Settings:
    if values.get("format") != FORMAT:
        raise Refusal(SETTINGS, f"format {values.get('format')} is not known", str(FORMAT), "Use a newer ReviewKit")
    inputs = {Input(kind): Given(one["path"], one["sha256"]) for kind, one in values.get("inputs", {}).items()}
    policy = {Policy(name): str(answer) for name, answer in values.get("policy", {}).items()}
    names = (tuple(values.get("models", ["main"])), tuple(values.get("claims", ["main"])))
    return Settings(str(values.get("title", "")), inputs, policy, *names)


def _quoted(text: str) -> str:
    """A TOML basic string; JSON's escapes are TOML's, but for one character."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _listed(texts: tuple[str, ...]) -> str:
    return f"[{', '.join(map(_quoted, texts))}]"


def _shell(path: Path) -> str:
    return f'"{path}"' if " " in str(path) else str(path)


# --- answers ----------------------------------------------------------------------------------------------------


def record(case: CaseFolder, entry: Entry) -> None:
    """Add one entry to the log; when this returns, it is on the disk."""
    safekeeping.append_line(case.path / ANSWERS, json.dumps(entry_json(entry), ensure_ascii=False, allow_nan=False))


def read_entries(case: CaseFolder) -> tuple[Entry, ...]:
    """All entries in the order in which they came."""
    found = []
    for number, line in enumerate(safekeeping.read_lines(case.path / ANSWERS), start=1):
        where = f"{ANSWERS}, line {number}"
        try:
            found.append(entry_from(json.loads(line), where))
        except ValueError:
            raise Refusal(where, "this line is not readable", remedy="Take the line out or restore it") from None
    return tuple(found)


# --- proposals, columns, results --------------------------------------------------------------------------------


def save_proposals(case: CaseFolder, facts: tuple[Fact, ...]) -> None:
    """Keep what the readers of manuscript and scripts propose."""
    _save_json(case.path / PROPOSALS, {"format": FORMAT, "facts": [fact_json(each) for each in facts]})


def read_proposals(case: CaseFolder) -> tuple[Fact, ...]:
    """What was proposed."""
    with as_we_wrote_it(PROPOSALS):
        return tuple(fact_from(each) for each in _read_json(case.path / PROPOSALS, {"facts": []})["facts"])


def save_columns(case: CaseFolder, columns: Json, sha256: str, remarks: tuple[str, ...] = ()) -> None:
    """Keep what the columns of the data hold, so that questions need not read the file again."""
    content = {"format": FORMAT, "sha256": sha256, "columns": columns, "remarks": list(remarks)}
    _save_json(case.path / COLUMNS, content)


def read_columns(case: CaseFolder) -> Json:
    """The columns as they were kept, or an empty list."""
    return _read_json(case.path / COLUMNS, {"columns": [], "sha256": ""})


def save_results(case: CaseFolder, model: str, results: Json) -> Path:
    """Keep the results of one re-estimation."""
    path = case.results(model)
    with safekeeping.refusing(path.parent, "made"):
        path.parent.mkdir(mode=OWNERS_ONLY, exist_ok=True)
    _save_json(path, {"format": FORMAT, **results})
    return path


def read_results(case: CaseFolder, model: str = "main") -> Json | None:
    """The results of that model's last re-estimation, if there are any."""
    return _read_json(case.results(model), None)


@contextlib.contextmanager
def as_we_wrote_it(name: str) -> Iterator[None]:
    """Turn a file of ours that holds something else into one message."""
    try:
        yield
    except (KeyError, TypeError, ValueError, AttributeError):
        raise Refusal(name, "this is not as ReviewKit wrote it", remedy="Delete it and repeat the command") from None


def _save_json(path: Path, content: Json) -> None:
    safekeeping.write_atomically(path, json.dumps(content, ensure_ascii=False, allow_nan=False, indent=1) + "\n")


def _read_json(path: Path, otherwise: Json) -> Json:
    if not path.exists():
        return otherwise
    content: Json = safekeeping.read_json(path)
    if not isinstance(content, dict) or content.get("format") != FORMAT:
        raise Refusal(path.name, "this was not written by this version", remedy="Repeat the command that made it")
    return content


# --- files that people edit -------------------------------------------------------------------------------------


def is_edited(case: CaseFolder, path: Path) -> bool:
    """Whether the file differs from what we last wrote there, so that it is someone's work now."""
    if not path.exists():
        return False
    return _written(case).get(path.name) != safekeeping.file_checksum(path)


def write_or_keep(case: CaseFolder, path: Path, content: bytes) -> bool:
    """Write the file unless somebody edited it; whether it was written."""
    if path.exists() and path.read_bytes() != content and is_edited(case, path):
        return False
    _remember(case, path, content)
    safekeeping.write_atomically(path, content)
    return True


def write_beside(case: CaseFolder, path: Path, content: bytes) -> Path:
    """Write the file, or under the next free number where it was edited or is open elsewhere; where it stands."""
    for candidate in _numbered(path):
        try:
            if write_or_keep(case, candidate, content):
                return candidate
        except Refusal:
            if not candidate.exists():
                raise
    raise Refusal(path.name, "ninety-nine versions stand beside it", remedy="Move some of them away")


def _numbered(path: Path) -> Iterator[Path]:
    yield path
    for number in range(2, 100):
        yield path.with_name(f"{path.stem}-{number}{path.suffix}")


def _written(case: CaseFolder) -> dict[str, str]:
    with as_we_wrote_it(WRITTEN):
        return dict(_read_json(case.path / WRITTEN, {"files": {}})["files"])


def _remember(case: CaseFolder, path: Path, content: bytes) -> None:
    """Note the checksum before the file is replaced: after a kill in between, the old one is kept as edited."""
    files = {**_written(case), path.name: safekeeping.checksum(content)}
    _save_json(case.path / WRITTEN, {"format": FORMAT, "files": files})


def note_wishes_text(case: CaseFolder) -> str:
    """The text of note.toml; the file is made with an explanation where there is none."""
    path = case.path / NOTE
    if not path.exists():
        safekeeping.write_atomically(path, NOTE_TEMPLATE)
    with safekeeping.refusing(path, "read"):
        return path.read_text("utf-8-sig")
