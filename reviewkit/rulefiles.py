"""Reads the rule book: one TOML file a rule, facts, settings and references beside them."""

import json
import re
import tomllib
from collections.abc import Collection, Iterator, Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from pathlib import Path
from typing import Any, TypeVar

from reviewkit.conditions import ALWAYS, Condition, read_condition
from reviewkit.facts import NOT_STATED, Value
from reviewkit.placeholders import check_template
from reviewkit.references import Citation, Side, Use, Work, read_work
from reviewkit.refusals import Refusal
from reviewkit.rules import TOPICS, Example, Importance, Rule, RuleBook, Setting, State
from reviewkit.vocabulary import FactDefinition, Kind, Place, Vocabulary, closest

COMMON_PRACTICE = "common practice, no source"
SUBJECTS = ("study", "data", "model", "claim")
UNKNOWN = "unknown"
"""Takes a fact of `[usual]` out of an example."""

_TEXTS = ("title", "says", "why", "best_case", "request", "short", "way", "stands", "clear")
_NEEDED = ("title", "subject", "importance", "when", "says", "why", "best_case", "request", "short", "examples")
_CONDITIONS = ("applies", "when", "stands_when", "major_when")
_RULE_KEYS = (
    *(*_TEXTS, *_CONDITIONS, "subject", "importance", "covered_by"),
    *("references", "basis", "facts", "usual", "examples"),
)
_FACT_KEYS = ("name", "about", "kind", "options", "question", "found_in", "explains", "unit", "label", "low", "high")

_EXAMPLES = re.compile(r"^\[usual\]|^\[\[examples\]\]", re.MULTILINE)
"""Where the last part of a rule file begins."""

Choice = TypeVar("Choice", bound=StrEnum)


@dataclass(frozen=True, slots=True)
class _Leaf:
    """One TOML file: its content, and what to call it in messages."""

    where: str
    content: Mapping[str, Any] = field(repr=False)
    examples: bool = True
    """False where the examples at the end of the file were left unread."""

    def only(self, table: Mapping[str, Any], allowed: tuple[str, ...], within: str = "") -> None:
        """Refuse keys that are not allowed."""
        for key in table:
            if key not in allowed:
                raise self.refusal(f"{within}there is no key `{key}`", ", ".join(allowed), closest(key, allowed))

    def refusal(self, what: str, allowed: str = "", remedy: str = "") -> Refusal:
        return Refusal(self.where, what, allowed, remedy)

    def text(self, table: Mapping[str, Any], key: str, default: str = "") -> str:
        value = table.get(key, default)
        if not isinstance(value, str):
            raise self.refusal(f"`{key}` is not a text", 'text in quotes, such as "…"')
        return " ".join(value.split())

    def choice(self, table: Mapping[str, Any], key: str, choices: type[Choice], default: str) -> Choice:
        value = self.text(table, key, default)
        if value not in list(choices):
            raise self.refusal(f"`{value}` is no {key}", ", ".join(choices))
        return choices(value)

    def names(self, key: str, known: Collection[str]) -> tuple[str, ...]:
        """A list of names, each of them known."""
        value = self.content.get(key, [])
        if not isinstance(value, list) or not all(isinstance(each, str) for each in value):
            raise self.refusal(f"`{key}` is not a list of names", f'{key} = ["…", "…"]')
        for name in value:
            if name not in known:
                raise self.refusal(f"{key}: there is no rule `{name}`", "", closest(name, tuple(known)))
        return tuple(value)

    def tables(self, key: str) -> tuple[Mapping[str, Any], ...]:
        value = self.content.get(key, [])
        if not isinstance(value, list) or not all(isinstance(each, dict) for each in value):
            raise self.refusal(f"`{key}` is not a list of tables", f"[[{key}]]")
        return tuple(value)


def read_rule_book(folder: Path, house_folders: tuple[Path, ...] = (), examples: bool = True) -> RuleBook:
    """The book in `folder`; a house folder adds rules, replaces those of the same name, and overrides settings.

    A house rule file that holds `silenced = true` alone takes the rule of its name out of the book. Reading is twice as
    fast without examples, which only `rules show`, `rules check` and the tests need.
    """
    folders = (folder, *house_folders)
    vocabulary = Vocabulary()
    settings: dict[str, Setting] = {}
    works: dict[str, Work] = {}
    leaves: dict[str, tuple[str, _Leaf]] = {}
    for each in folders:
        vocabulary = vocabulary.adding(_definitions(_optional(each / "facts.toml", each)))
        settings |= _settings(_optional(each / "settings.toml", each))
        works |= _works(each / "references.json")
        paths = sorted(each.glob("*/*.toml"))
        leaves |= {path.stem: (path.parent.name, _leaf(path, each, examples)) for path in paths}
    spoken = {name: leaf for name, leaf in leaves.items() if leaf[1].content.get("silenced") is not True}
    vocabulary = vocabulary.adding(definition for _, leaf in spoken.values() for definition in _definitions(leaf))
    reader = _RuleReader(vocabulary, {name: setting.value for name, setting in settings.items()}, works, tuple(leaves))
    rules = sorted((reader.rule(name, *leaf) for name, leaf in spoken.items()), key=_place_in_book)
    return RuleBook(tuple(rules), vocabulary, settings, works)


def _place_in_book(rule: Rule) -> tuple[int, str, str]:
    known = TOPICS.index(rule.topic) if rule.topic in TOPICS else len(TOPICS)
    return known, rule.topic, rule.name


def _leaf(path: Path, folder: Path, examples: bool = True) -> _Leaf:
    where = path.relative_to(folder).as_posix()
    try:
        text = path.read_text(encoding="utf-8")
        return _Leaf(where, tomllib.loads(text if examples else _EXAMPLES.split(text)[0]), examples)
    except (tomllib.TOMLDecodeError, UnicodeDecodeError, RecursionError) as error:
        raise Refusal(where, f"this is not TOML: {error}") from None


def _optional(path: Path, folder: Path) -> _Leaf:
    return _leaf(path, folder) if path.exists() else _Leaf(path.name, {})


# --- facts, settings, works -------------------------------------------------------------------------------------


def _definitions(leaf: _Leaf) -> Iterator[FactDefinition]:
    for table in leaf.tables("facts"):
        name = leaf.text(table, "name")
        leaf.only(table, _FACT_KEYS, f"fact {name}: ")
        yield _definition(_Leaf(f"{leaf.where}, fact {name or 'without name'}", leaf.content), table)


def _definition(leaf: _Leaf, table: Mapping[str, Any]) -> FactDefinition:
    kind = leaf.choice(table, "kind", Kind, "")
    about = leaf.text(table, "about")
    if about not in SUBJECTS:
        raise leaf.refusal(f"`{about}` is no subject", ", ".join(SUBJECTS))
    options = tuple(table.get("options", ("yes", "no") if kind is Kind.ANSWER else ()))
    if kind in (Kind.ONE, Kind.SOME, Kind.ANSWER) and len(options) < 2:
        raise leaf.refusal("a choice needs at least two options", 'options = ["…", "…"]')
    question = leaf.text(table, "question")
    place = leaf.choice(table, "found_in", Place, Place.NOWHERE)
    if bool(question) == (place is Place.NOWHERE):
        raise leaf.refusal("a question needs a place where its answer is found", ", ".join(Place))
    return FactDefinition(
        name=leaf.text(table, "name"),
        about=about,
        kind=kind,
        question=question,
        options=options,
        found_in=place,
        explains=leaf.text(table, "explains"),
        unit=leaf.text(table, "unit"),
        label=leaf.text(table, "label", leaf.text(table, "name").replace(".", " ").replace("_", " ")),
        low=table.get("low"),
        high=table.get("high"),
    )


def _settings(leaf: _Leaf) -> dict[str, Setting]:
    found = {}
    for name, table in leaf.content.items():
        if not isinstance(table, dict) or not isinstance(table.get("value"), int | float):
            raise leaf.refusal(f"setting {name} has no number as its value", "value, unit, origin")
        leaf.only(table, ("value", "unit", "origin"), f"setting {name}: ")
        found[name] = Setting(name, float(table["value"]), leaf.text(table, "unit"), leaf.text(table, "origin"))
        if not found[name].origin:
            raise leaf.refusal(f"setting {name} does not say where it comes from", f"a work's id, or {COMMON_PRACTICE}")
    return found


def _works(path: Path) -> dict[str, Work]:
    if not path.exists():
        return {}
    try:
        entries = json.loads(path.read_text(encoding="utf-8"))
        return {entry["id"]: read_work(entry, path.name) for entry in entries}
    except (ValueError, TypeError, KeyError, AttributeError, RecursionError) as error:
        raise Refusal(path.name, f"this is no list of works: {error}") from None


# --- rules ------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _RuleReader:
    """Turns the content of a rule file into a rule."""

    vocabulary: Vocabulary
    settings: Mapping[str, float]
    works: Mapping[str, Work]
    names: tuple[str, ...]
    """Of all rules, silenced ones too."""

    def rule(self, name: str, topic: str, leaf: _Leaf) -> Rule:
        """The rule in one file."""
        leaf.only(leaf.content, _RULE_KEYS)
        if list(leaf.content)[-1] not in ("usual", "examples") and leaf.examples:
            raise leaf.refusal(
                "examples stand at the end of the file", "[[references]], [[facts]], then [usual], [[examples]]"
            )
        for key in _NEEDED:
            if key not in leaf.content and (key != "examples" or leaf.examples):
                raise leaf.refusal(f"`{key}` is missing", ", ".join(_NEEDED))
        subject = leaf.text(leaf.content, "subject")
        if subject not in SUBJECTS:
            raise leaf.refusal(f"`{subject}` is no subject", ", ".join(SUBJECTS))
        references, basis = self.references(leaf)
        return Rule(
            name=name,
            topic=topic,
            subject=subject,
            importance=leaf.choice(leaf.content, "importance", Importance, ""),
            references=references,
            basis=basis,
            covered_by=leaf.names("covered_by", self.names),
            examples=tuple(self.examples(leaf)),
            applies=self.condition(leaf, "applies") or ALWAYS,
            when=self.condition(leaf, "when") or ALWAYS,
            stands_when=self.condition(leaf, "stands_when"),
            major_when=self.condition(leaf, "major_when"),
            **{key: self.template(leaf, key) for key in _TEXTS},
        )

    def condition(self, leaf: _Leaf, key: str) -> Condition | None:
        if key not in leaf.content:
            return None
        return read_condition(leaf.text(leaf.content, key), self.vocabulary, self.settings, f"{leaf.where}, {key}")

    def template(self, leaf: _Leaf, key: str) -> str:
        text = leaf.text(leaf.content, key)
        return check_template(text, self.vocabulary, self.settings, f"{leaf.where}, {key}")

    def references(self, leaf: _Leaf) -> tuple[tuple[Citation, ...], str]:
        basis = leaf.text(leaf.content, "basis")
        citations = tuple(self.citation(leaf, table) for table in leaf.tables("references"))
        if bool(citations) == bool(basis) or basis not in ("", COMMON_PRACTICE):
            raise leaf.refusal(
                "a rule rests on works or on common practice", f'[[references]], basis = "{COMMON_PRACTICE}"'
            )
        return citations, basis

    def citation(self, leaf: _Leaf, table: Mapping[str, Any]) -> Citation:
        leaf.only(table, ("id", "use", "side"), "references: ")
        work = self.works.get(leaf.text(table, "id"))
        if work is None:
            raise leaf.refusal(f"the work `{table.get('id')}` is not in references.json", ", ".join(self.works))
        use = leaf.choice(table, "use", Use, Use.SEE)
        if use is Use.SHOWS and not work.text_seen:
            raise leaf.refusal(
                f"the text of {work.id} was not read, so it cannot be said to show anything", 'use = "see"'
            )
        return Citation(work.id, use, leaf.choice(table, "side", Side, Side.FOR))

    def examples(self, leaf: _Leaf) -> Iterator[Example]:
        usual = dict(_flat(leaf.content.get("usual", {})))
        for place, table in enumerate(leaf.tables("examples"), 1):
            within = _Leaf(f"{leaf.where}, example {place}", leaf.content)
            within.only(table, ("state", "importance", "facts"))
            facts = {**usual, **dict(_flat(table.get("facts", {})))}
            importance = within.choice(table, "importance", Importance, "minor") if "importance" in table else None
            yield Example(
                tuple((name, self.value(within, name, each)) for name, each in facts.items() if each != UNKNOWN),
                within.choice(table, "state", State, ""),
                importance,
            )

    def value(self, leaf: _Leaf, name: str, value: object) -> Value:
        definition = self.vocabulary.get(name)
        if definition is None:
            raise leaf.refusal(f"there is no fact {name}", "", closest(name, [each.name for each in self.vocabulary]))
        if value == str(NOT_STATED):
            return NOT_STATED
        if isinstance(value, list):
            return definition.checked(tuple(str(each) for each in value), leaf.where)
        if isinstance(value, int | float) and not isinstance(value, bool):
            return definition.checked(float(value), leaf.where)
        return definition.read(str(value), leaf.where)


def _flat(table: Mapping[str, Any], before: str = "") -> Iterator[tuple[str, object]]:
    """`{"outcome": {"zeros": …}}` as `outcome.zeros`."""
    for key, value in table.items():
        if isinstance(value, dict):
            yield from _flat(value, f"{before}{key}.")
        else:
            yield before + key, value
