"""Files of answers: a whole interview without questions, as TOML or as lines of JSON."""

import json
import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from reviewkit.answers import Act, Entry
from reviewkit.facts import NOT_STATED, Value
from reviewkit.refusals import Refusal
from reviewkit.safekeeping import refusing
from reviewkit.vocabulary import FactDefinition, Kind, Vocabulary

SUBJECTS = ("study", "data", "model", "claim")


@dataclass(frozen=True, slots=True)
class AnswerFile:
    """What a file of answers holds."""

    entries: tuple[Entry, ...]
    specification: Mapping[str, Any]
    """Tables of a specification, or `line`, the one line of a script that fits the model; empty where not given."""
    policy: Mapping[str, str]


def read_answer_file(path: Path, vocabulary: Vocabulary) -> AnswerFile:
    """Read answers by fact name; names may stand below `[model.main]`, `[claim.main]`, `[study]`, or alone."""
    with refusing(path, "read"):
        content = path.read_bytes()
    try:
        text = content.decode("utf-8-sig")
        values = _from_lines(text) if path.suffix == ".jsonl" else tomllib.loads(text)
    except (ValueError, RecursionError) as problem:
        raise Refusal(path.name, f"this is no readable file of answers ({problem})", "TOML, or .jsonl") from None
    answers = {key: each for key, each in values.items() if key not in ("format", "specification", "policy")}
    entries = tuple(_entry(parts, value, path.name, vocabulary) for parts, value in _leaves(answers, vocabulary))
    return AnswerFile(entries, _table(values, "specification", path), _table(values, "policy", path))


def _from_lines(text: str) -> dict[str, Any]:
    """Lines such as {"name": "outcome.transform", "value": "log", "subject": "model:main", "place": "p. 11"}."""
    values: dict[str, Any] = {}
    for line in filter(str.strip, text.splitlines()):
        one = json.loads(line)
        if not isinstance(one, dict) or "name" not in one or "value" not in one:
            raise ValueError("each line needs a name and a value")
        key = f"{one['subject'].replace(':', '.')}.{one['name']}" if "subject" in one else one["name"]
        values[key] = {"value": one["value"], "place": one.get("place", "")}
    return values


def _table(values: Mapping[str, Any], key: str, path: Path) -> Mapping[str, Any]:
    found = values.get(key, {})
    if not isinstance(found, Mapping):
        raise Refusal(f"{path.name}, {key}", "a single value stands where a table belongs", f"[{key}] with its keys")
    return found


def _leaves(values: Mapping[str, Any], vocabulary: Vocabulary, above: str = "") -> Iterator[tuple[str, Any]]:
    """Dotted names with what they hold, in the file's order."""
    for key, value in values.items():
        name = f"{above}.{key}" if above else key
        if isinstance(value, Mapping) and not ("value" in value and not isinstance(value["value"], Mapping)):
            yield from _leaves(value, vocabulary, name)
        else:
            yield name, value


def _entry(dotted: str, held: Any, where: str, vocabulary: Vocabulary) -> Entry:
    subject, name = _subject_and_name(dotted, vocabulary)
    definition = vocabulary.get(name)
    if definition is None:
        return _refused(where, name, vocabulary)
    value, place = (held["value"], str(held.get("place", ""))) if isinstance(held, Mapping) else (held, "")
    return Entry(Act.ANSWER, name, subject, _value(definition, value, f"{where}, {name}"), place)


def _refused(where: str, name: str, vocabulary: Vocabulary) -> Entry:
    try:
        vocabulary[name]
    except Refusal as refusal:
        raise Refusal(f"{where}, {name}", refusal.what, remedy=refusal.remedy) from None
    raise AssertionError(name)


def _subject_and_name(dotted: str, vocabulary: Vocabulary) -> tuple[str, str]:
    definition = vocabulary.get(dotted)
    if definition is not None:
        return (definition.about if definition.about == "study" else f"{definition.about}:main"), dotted
    kind, _, rest = dotted.partition(".")
    if kind == "study":
        return kind, rest
    which, _, name = rest.partition(".")
    return (f"{kind}:{which}", name) if kind in SUBJECTS and name in vocabulary else ("study", dotted)


def _value(definition: FactDefinition, value: Any, where: str) -> Value:
    if value == str(NOT_STATED):
        return NOT_STATED
    match value:
        case str():
            return definition.read(value, where)
        case list():
            return definition.checked(tuple(str(each) for each in value), where)
        case bool():
            return definition.checked("yes" if value else "no", where)
        case int() | float() if definition.kind is Kind.PRINTED:
            raise Refusal(where, f"`{value}` has lost its printed digits", 'the figure in quotes, such as "0.40"')
        case int() | float():
            return definition.checked(float(value), where)
        case _:
            raise Refusal(where, "this value is of no use here", definition.options_in_words)
