"""Reads the rule book: one TOML file a rule, facts, settings and references beside them."""

from pathlib import Path

from reviewkit.rules import RuleBook


def read_rule_book(folder: Path, house_folders: tuple[Path, ...] = ()) -> RuleBook:
    """The book in `folder`; rules of a house folder add to it, or replace those of the same name."""
    raise NotImplementedError
