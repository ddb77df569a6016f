"""The command line: reads what was typed, calls the functions of a review, shows what they give."""

import os
import sys
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from reviewkit.refusals import Refusal

if TYPE_CHECKING:
    from reviewkit.review import Review
    from reviewkit.rules import Finding

FAILED = 3
INTERRUPTED = 130
"""What typer makes of Ctrl-C."""
app = typer.Typer(
    name="reviewkit",
    help="Evidence and neutral comments on regressions with a transformed outcome.",
    rich_markup_mode=None,
    add_completion=False,
    no_args_is_help=True,
    pretty_exceptions_enable=False,
)
rules_app = typer.Typer(help="The rule book: list, show, check.", rich_markup_mode=None, no_args_is_help=True)
app.add_typer(rules_app, name="rules")


class AlertOn(StrEnum):
    """From which importance on a raised point sets exit status 1."""

    NEVER = "never"
    MINOR = "minor"
    MAJOR = "major"


Case = Annotated[Path, typer.Argument(metavar="CASE", help="the case folder", show_default=False)]
Json = Annotated[bool, typer.Option("--json", help="one JSON object on standard output")]
Plain = Annotated[bool, typer.Option("--plain", help="no colour, boxes or overwritten lines")]
Alert = Annotated[AlertOn, typer.Option("--alert-on", help="exit status 1 if such a point is raised")]
OptionalPath = Path | None


@app.command()
def begin(
    case: Case,
    manuscript: Annotated[OptionalPath, typer.Option(help="the manuscript, .docx")] = None,
    package: Annotated[OptionalPath, typer.Option(help="a replication package")] = None,
    data: Annotated[OptionalPath, typer.Option(help="the data, .csv, .tsv or .dta")] = None,
    as_json: Json = False,
    plain: Plain = False,
) -> None:
    """Make the case folder and read what it is given."""
    from reviewkit import review, terminal
    from reviewkit.casefolder import Input

    given = {Input.MANUSCRIPT: manuscript, Input.PACKAGE: package, Input.DATA: data}
    folder, warnings = review.begin(case, {kind: path for kind, path in given.items() if path is not None})
    for warning in warnings:
        _aside(f"Note: {warning}")
    if sys.stdin.isatty() and not as_json:
        from reviewkit.interview_screen import ask_policy

        folder = ask_policy(folder, terminal.screen(plain, as_json))
    folder, said = review.read_inputs(folder)
    if as_json:
        _give({"format": 1, "case": case.name, "said": list(said), "warnings": list(warnings)})
        return
    for line in said:
        print(line)
    if len(folder.settings.policy) < len(review.POLICY_QUESTIONS):
        print("The journal's policy on software and confidentiality is not looked at yet; `begin` asks for it.")
    print(f"Next: reviewkit interview {_shown(case)}")


@app.command()
def interview(
    case: Case,
    answers: Annotated[OptionalPath, typer.Option(help="a file of answers, .toml or .jsonl; nothing is asked")] = None,
    again: Annotated[list[str] | None, typer.Option(help="a topic, rule or fact to ask anew")] = None,
    minutes: Annotated[int | None, typer.Option(min=1, help="ask only what major points wait on")] = None,
    as_json: Json = False,
    plain: Plain = False,
) -> None:
    """Ask what can still change a point; also builds the specification."""
    from reviewkit import casefolder, interview_screen, review, terminal, unattended

    folder, book = casefolder.open_case(case), None
    with casefolder.working_in(folder):
        if answers is not None:
            count = unattended.take_answers(folder, answers, _aside)
            _aside(f"{count} answers taken from {answers.name}.")
        else:
            screen = terminal.screen(plain, as_json)
            interview_screen.refresh(folder, screen)
            folder, asked = review.open_interview(case, minutes is not None, tuple(again or ()))
            interview_screen.closing(interview_screen.hold(folder, asked, screen), screen)
            book = asked.book
    _after(review.look(case, book), as_json)


@app.command()
def show(
    case: Case,
    every: Annotated[bool, typer.Option("--all", help="every fact, also those that no rule uses")] = False,
    as_json: Json = False,
    plain: Plain = False,
    alert_on: Alert = AlertOn.NEVER,
) -> None:
    """Say what is known, what disagrees, which points there are, what is open, and what comes next."""
    from reviewkit import overview, review, terminal

    looked = review.look(case)
    if as_json:
        _give(overview.overview_json(looked))
    else:
        screen = terminal.screen(plain, as_json)
        for part in overview.overview(looked, every):
            screen.strong(part.heading)
            for line in part.lines:
                screen.say(line, "  ", "    ")
            screen.write("")
    _alert(looked.findings, alert_on)


@app.command()
def refit(
    case_or_spec: Annotated[Path, typer.Argument(metavar="CASE|SPEC.toml", show_default=False)],
    model: Annotated[str, typer.Option(help="which model of the case")] = "main",
    as_json: Json = False,
    plain: Plain = False,
    alert_on: Alert = AlertOn.NEVER,
) -> None:
    """Re-estimate the submitted model and its quasi-ML alternative."""
    from reviewkit import casefolder, review, terminal

    if case_or_spec.suffix == ".toml" and not case_or_spec.is_dir():
        with terminal.progress(plain) as progress:
            estimated = review.reestimate_file(case_or_spec, progress)
        findings = review.findings_of(estimated)
        _show_refit(estimated, findings, as_json, plain)
        _fail_without_alternative(estimated)
        _alert(findings, alert_on)
        return
    folder = casefolder.open_case(case_or_spec)
    with casefolder.working_in(folder), terminal.progress(plain) as progress:
        estimated = review.refit(folder, model, progress)
    looked = review.look(case_or_spec)
    _show_refit(estimated, looked.findings, as_json, plain)
    if not as_json:
        _aside(f"Kept in {_shown(folder.path / casefolder.RESULTS)}. Next: {review.next_step_of(looked)}")
    _fail_without_alternative(estimated)
    _alert(looked.findings, alert_on)


@app.command()
def draft(
    case: Case,
    formats: Annotated[str, typer.Option("--as", help="of docx, md, txt, html, json, with commas")] = "docx,md,txt",
    request: Annotated[bool, typer.Option(help="instead, a short letter asking for what most points wait on")] = False,
    as_json: Json = False,
    plain: Plain = False,
    alert_on: Alert = AlertOn.NEVER,
) -> None:
    """Write the notes to authors and to editor, never joined."""
    from reviewkit import casefolder, drafting, review, terminal

    looked = review.look(case)
    if review.needs_refit(looked):
        _aside("Specification or data are newer than the results; re-estimating first.")
        with casefolder.working_in(looked.case), terminal.progress(plain) as progress:
            review.refit(looked.case, progress=progress)
    written = drafting.draft(case, tuple(each.strip() for each in formats.split(",") if each.strip()), request)
    if as_json:
        _give({"format": 1, "files": [path.name for path, _ in written]})
    for path, beside in written if not as_json else ():
        print(f"{_shown(path)}{'   (the earlier file was edited or is open, and is kept)' if beside else ''}")
    for owed in review.owed(looked.case) if not as_json else ():
        print(owed)
    _alert(review.look(case).findings, alert_on)


@app.command(context_settings={"ignore_unknown_options": True})  # -0.38 is a number
def percent(
    b: Annotated[str, typer.Argument(help="the coefficient, as printed", show_default=False)],
    se: Annotated[str | None, typer.Option(help="its standard error")] = None,
    df: Annotated[float | None, typer.Option(help="residual degrees of freedom")] = None,
    constant: Annotated[float, typer.Option(help="constant added before the log")] = 0.0,
    zeros: Annotated[bool, typer.Option("--zeros", help="the outcome has zeros")] = False,
    as_json: Json = False,
    plain: Plain = False,
) -> None:
    """Say what a coefficient of a log or quasi-ML model means in percent, or why it has no such reading."""
    from reviewkit import percent_reading

    found = percent_reading.read(b, se, df, constant, zeros)
    _give(percent_reading.as_object(found)) if as_json else print("\n".join(percent_reading.lines(found)))


@app.command()
def demo(
    folder: Annotated[Path, typer.Argument(metavar="[DIR]", help="where to put it")] = Path("reviewkit-demo"),
    as_json: Json = False,
    plain: Plain = False,
) -> None:
    """Run the invented studies from reading to note."""
    from reviewkit import demonstration

    written = demonstration.run(folder, _aside)
    if as_json:
        _give({"format": 1, "files": [path.as_posix() for path in written]})
        return
    print("\nThe notes:")
    for path in written:
        print(f"  {_shown(path)}")
    print("\nFor a paper of your own, with its data beside it:")
    print("  reviewkit begin my-review --manuscript paper.docx --data data.csv")


@rules_app.command("list")
def list_rules(as_json: Json = False, plain: Plain = False) -> None:
    """List all rules by topic."""
    from reviewkit import rule_listing

    _give(rule_listing.listed()) if as_json else print("\n".join(rule_listing.lines()))


@rules_app.command("show")
def show_rule(
    name: Annotated[str, typer.Argument(show_default=False)], as_json: Json = False, plain: Plain = False
) -> None:
    """Show one rule: when it is raised, what it asks, its references."""
    from reviewkit import rule_listing

    _give(rule_listing.shown(name)) if as_json else print("\n".join(rule_listing.rule_lines(name)))


@rules_app.command("check")
def check_rules(
    folder: Annotated[Path, typer.Argument(metavar="DIR", show_default=False)],
    as_json: Json = False,
    plain: Plain = False,
) -> None:
    """Run the examples of a journal's own rules."""
    from reviewkit import rule_listing

    said, wrong = rule_listing.checked(folder)
    _give({"format": 1, "wrong": list(wrong)}) if as_json else print("\n".join((*wrong, said)))
    if wrong:
        raise typer.Exit(2)


# --- parts ------------------------------------------------------------------------------------------------------


def _after(looked: "Review", as_json: bool) -> None:
    from reviewkit import overview

    if as_json:
        _give(overview.overview_json(looked))
        return
    for line in overview.summary(looked):
        print(line)


def _alert(findings: "tuple[Finding, ...]", alert_on: AlertOn) -> None:
    from reviewkit.rules import State

    weights = {"minor": 1, "major": 2}
    raised = max((weights[each.importance.value] for each in findings if each.state is State.RAISED), default=0)
    if alert_on is not AlertOn.NEVER and raised >= weights[alert_on.value]:
        raise typer.Exit(1)


def _fail_without_alternative(estimated: Any) -> None:
    """Exit status 3 where an alternative was wanted and could not be estimated; the rest was written."""
    if estimated.alternative_why_not and estimated.specification.estimator != "poisson":
        raise typer.Exit(FAILED)


def _show_refit(estimated: Any, findings: "tuple[Finding, ...]", as_json: bool, plain: bool) -> None:
    if as_json:
        from reviewkit.writers.refit_json import refit_object

        _give(refit_object([estimated], findings))
        return
    from reviewkit import terminal
    from reviewkit.writers.refit_terminal import show_refit

    show_refit(estimated, plain=terminal.is_plain(plain))


def _give(content: Any) -> None:
    import json

    print(json.dumps(content, ensure_ascii=False, allow_nan=False, indent=2))


def _aside(text: str) -> None:
    print(text, file=sys.stderr)


def _shown(path: Path) -> str:
    return f'"{path}"' if " " in str(path) else str(path)


# --- the way in ---------------------------------------------------------------------------------------------------


def main() -> None:
    """Run a command; every way it can end is one message and an exit status."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    sys.exit(run(sys.argv[1:]))


def run(arguments: list[str]) -> int:
    """The exit status of a command; refusals and surprises become one line on standard error."""
    try:
        status = app(_completed(arguments), prog_name="reviewkit", standalone_mode=False)
        if status == INTERRUPTED:
            raise KeyboardInterrupt
        return status if isinstance(status, int) else 0
    except Refusal as refusal:
        _aside(f"reviewkit: {' '.join(refusal.message().split())}")
        return refusal.status
    except KeyboardInterrupt:
        _aside("reviewkit: interrupted; everything answered and written before is kept.")
        return FAILED
    except BrokenPipeError:
        sys.stderr.close()
        return 0
    except Exception as problem:
        return _of_exception(problem)


def _of_exception(problem: Exception) -> int:
    """Command-line errors by their own message; anything unexpected by one that tells nothing of the machine."""
    status = getattr(problem, "exit_code", None)
    if isinstance(status, int):
        message = problem.format_message() if hasattr(problem, "format_message") else ""
        if message:
            _aside(f"reviewkit: {' '.join(message.split())} `reviewkit --help` tells more.")
        return status
    if os.environ.get("REVIEWKIT_DEBUG"):
        import traceback

        traceback.print_exc()
    what = type(problem).__name__
    _aside(f"reviewkit: something unexpected happened ({what}); answers and files written before are kept.")
    return FAILED


def _completed(arguments: list[str]) -> list[str]:
    """`reviewkit CASE` is short for `reviewkit show CASE`."""
    first = arguments[0] if arguments else ""
    if first and not first.startswith("-") and (Path(first) / "case.toml").is_file():
        return ["show", *arguments]
    return arguments
