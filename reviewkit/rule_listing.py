"""`reviewkit rules`: the rule book for reading, and a journal's own rules held to their examples."""

from pathlib import Path

from reviewkit.records import Json
from reviewkit.refusals import Refusal
from reviewkit.review import rule_book
from reviewkit.rules import Rule, RuleBook
from reviewkit.wording import counted


def lines() -> tuple[str, ...]:
    """All rules by topic, one a line."""
    said: list[str] = []
    topic = ""
    for rule in rule_book(examples=True).rules:
        if rule.topic != topic:
            topic = rule.topic
            said += ([""] if said else []) + [topic]
        said.append(f"  {rule.name}: {rule.title} ({rule.importance.value})")
    return tuple(said)


def listed() -> Json:
    """The same as one object."""
    keys = ("name", "topic", "title", "subject")
    rules = [
        {**{key: getattr(rule, key) for key in keys}, "importance": rule.importance.value}
        for rule in rule_book(examples=True).rules
    ]
    return {"format": 1, "rules": rules}


def rule_lines(name: str) -> tuple[str, ...]:
    """One rule in full."""
    book = rule_book(examples=True)
    rule = book.rule(name)
    parts = (
        ("title", rule.title),
        ("about", f"{rule.subject}; {rule.importance.value}"),
        ("applies", rule.applies.text),
        ("raised when", rule.when.text),
        ("major when", rule.major_when.text if rule.major_when else ""),
        ("stands when", rule.stands_when.text if rule.stands_when else ""),
        ("says", rule.says),
        ("why", rule.why),
        ("best case", rule.best_case),
        ("request", rule.request),
        ("a way", rule.way),
        ("settings", "; ".join(_settings(rule, book))),
        ("basis", rule.basis),
        ("references", "; ".join(_references(rule, book))),
        ("examples", str(len(rule.examples))),
    )
    return (rule.name, *(f"  {label}: {text}" for label, text in parts if text))


def shown(name: str) -> Json:
    """One rule as an object."""
    rule = rule_book(examples=True).rule(name)
    texts = {
        key: getattr(rule, key) for key in ("name", "topic", "title", "subject", "says", "why", "best_case", "request")
    }
    conditions = {"applies": rule.applies.text, "when": rule.when.text}
    return {"format": 1, **texts, **conditions, "importance": rule.importance.value, "examples": len(rule.examples)}


def _settings(rule: Rule, book: RuleBook) -> tuple[str, ...]:
    text = " ".join(condition.text for condition in rule.conditions)
    used = (each for name, each in book.settings.items() if f"setting.{name}" in text)
    return tuple(f"{each.name} = {each.value:g} {each.unit} ({each.origin})" for each in used)


def _references(rule: Rule, book: RuleBook) -> tuple[str, ...]:
    return tuple(str(getattr(each, "id", None) or getattr(each, "work", each)) for each in rule.references)


def checked(folder: Path) -> tuple[str, tuple[str, ...]]:
    """Read a house folder over the book and run the examples of its rules: a summary, and what is wrong."""
    if not folder.is_dir():
        raise Refusal(folder.name, "there is no such folder")
    book = rule_book((folder,), examples=True)
    own = {path.stem for path in folder.rglob("*.toml")}
    rules = [rule for rule in book.rules if rule.name in own]
    if not rules:
        raise Refusal(folder.name, "no rules are found in it", "files such as TOPIC/RULE.toml below it")
    wrong = [message for rule in rules for message in _failing(rule, book)]
    examples = sum(len(rule.examples) for rule in rules)
    return (
        f"{counted(len(rules), 'rule')} read, {counted(examples, 'example')} run, {len(wrong)} not as stated.",
        tuple(wrong),
    )


def _failing(rule: Rule, book: RuleBook) -> list[str]:
    from reviewkit.decisions import ending

    failing = []
    for number, example in enumerate(rule.examples, start=1):
        state, importance = ending(rule, example, book)
        if state is not example.state:
            failing.append(f"{rule.name}, example {number}: ends {state.value}, stated is {example.state.value}")
        elif example.importance not in (None, importance):
            stated = example.importance.value if example.importance else ""
            failing.append(f"{rule.name}, example {number}: is {importance.value}, stated is {stated}")
    return failing
