"""Takes a whole interview from a file: answers, policy and the specification."""

from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

from reviewkit import casefolder, review
from reviewkit.answer_files import read_answer_file
from reviewkit.casefolder import CaseFolder, Input, Policy
from reviewkit.refusals import Refusal
from reviewkit.specification import ErrorKind, Estimator, Specification, specification_from


def take_answers(case: CaseFolder, path: Path, say: Callable[[str], None]) -> int:
    """Record all answers of a file and write the specification it holds; how many answers were taken.

    `say` is told what a line that fits the model holds and a specification does not.
    """
    read = read_answer_file(path, review.rule_book().vocabulary)
    unknown = [name for name in read.policy if name not in tuple(Policy)]
    if unknown:
        raise Refusal(f"{path.name}, policy.{unknown[0]}", "there is no such question", ", ".join(Policy))
    spec = _specification_from_answers(case, read.specification, path, say)
    for name, answer in read.policy.items():
        case = casefolder.with_policy(case, Policy(name), str(answer))
    if spec is not None and not review.write_specification(case, spec):
        raise Refusal(
            case.specification().name, "it was edited by hand and is kept", remedy="Move it away to take the file's"
        )
    for entry in read.entries:
        casefolder.record(case, entry)
    return len(read.entries)


def _specification_from_answers(
    case: CaseFolder, tables: Mapping[str, Any], path: Path, say: Callable[[str], None]
) -> Specification | None:
    if not tables:
        return None
    values = {key: each for key, each in tables.items() if key != "line"}
    if "line" in tables:
        values = _with_line(str(tables["line"]), values, f"{path.name}, specification", say)
    given = case.place(Input.DATA)
    named = path.parent / str(values.get("data", given.name if given is not None else ""))
    data = given if given is not None and given.name == named.name else named
    return specification_from({**values, "data": casefolder.relative(data, case.path)}, f"{path.name}, specification")


def _with_line(line: str, tables: Mapping[str, Any], where: str, say: Callable[[str], None]) -> dict[str, Any]:
    """The tables over what the line says; nothing that the line leaves open is taken for granted.

    Raises:
        Refusal: Neither line nor tables settle the estimator, or the kind of errors.
    """
    from reviewkit.readers.model_lines import read_model_line

    read = read_model_line(line)
    for remark in (*read.not_understood, *read.hints):
        say(f"{where}, line: {remark}")
    values = _over(read.understood, tables)
    for table, key, allowed in (("model", "estimator", Estimator), ("errors", "kind", ErrorKind)):
        if key not in values.get(table, {}):
            what = f"the line does not settle the {'estimator' if key == 'estimator' else 'kind of standard errors'}"
            raise Refusal(where, what, ", ".join(allowed), f"Add {table}.{key} = …")
    return values


def _over(below: Mapping[str, Any], above: Mapping[str, Any]) -> dict[str, Any]:
    """Both tables; where both have a value, that of `above`."""
    merged = dict(below)
    for key, value in above.items():
        old = merged.get(key)
        merged[key] = _over(old, value) if isinstance(old, Mapping) and isinstance(value, Mapping) else value
    return merged
