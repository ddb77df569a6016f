"""The command line as people and programs meet it: real processes, exit statuses, one message for each error."""

import json
import os
import shutil
import subprocess
import sys

import pytest

from reviewkit.cli import run
from reviewkit.shipped import demo_folder, rules_folder

ANSWERS = demo_folder() / "lending-desks" / "answers.toml"


def reviewkit(*arguments, typed="", **environment):
    """The finished process of a command."""
    return subprocess.run(
        [sys.executable, "-m", "reviewkit", *map(str, arguments)],
        input=typed,
        capture_output=True,
        encoding="utf-8",
        env={**os.environ, "PYTHONIOENCODING": "utf-8", **environment},
        timeout=60,
        check=False,
    )


@pytest.fixture
def case(tmp_path):
    folder = tmp_path / "a case"
    assert run(["begin", str(folder)]) == 0
    return folder


def answered(case):
    assert run(["interview", str(case), "--answers", str(ANSWERS)]) == 0
    return case


# --- help -------------------------------------------------------------------------------------------------------------


def test_help_comes_at_once():
    assert any(seconds_of_help() < 0.2 for _ in range(25))  # a busy machine gets several chances


def seconds_of_help():
    """Processor seconds, since the clock on the wall also counts what other programs do meanwhile."""
    before = os.times()
    assert reviewkit("--help").returncode == 0
    after = os.times()
    return after.children_user - before.children_user + after.children_system - before.children_system


def test_the_command_line_imports_nothing_numerical_and_nothing_that_draws():
    heavy = ("numpy", "pandas", "scipy", "statsmodels", "matplotlib", "docx", "rich")
    script = f"import sys, reviewkit.cli; print([each for each in {heavy} if each in sys.modules])"
    assert subprocess.check_output([sys.executable, "-c", script], text=True).strip() == "[]"


def test_an_interview_imports_nothing_numerical(case):
    heavy = ("numpy", "pandas", "scipy", "statsmodels", "matplotlib", "docx")
    script = "import sys; from reviewkit.cli import run; run(['interview', sys.argv[1]]); "
    script += f"print([each for each in {heavy} if each in sys.modules])"
    done = subprocess.run(
        [sys.executable, "-c", script, str(case)], input="\nq\n", capture_output=True, text=True, check=True
    )
    assert done.stdout.splitlines()[-1] == "[]"


@pytest.mark.parametrize("command", ["begin", "interview", "show", "refit", "draft", "percent", "demo", "rules"])
def test_every_command_has_a_help(command, capsys):
    assert run([command, "--help"]) == 0
    assert command in capsys.readouterr().out


# --- errors -----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "arguments",
    [
        ["nonsense"],
        ["show"],
        ["show", "no such folder"],
        ["interview", "no such folder"],
        ["draft", "no such folder"],
        ["refit", "no-such.toml"],
        ["refit", "no such folder"],
        ["percent", "b"],
        ["percent", "0.3", "--se", "0"],
        ["percent", "0.3", "--se", "0.1", "--df", "many"],
        ["percent", "0.3", "--constant", "-1"],
        ["rules", "show", "no-such-rule"],
        ["rules", "check", "no such folder"],
        ["begin", "new", "--manuscript", "no-such.docx"],
        ["begin", "new", "--data", "no-such.csv"],
        ["begin", "new", "--colour", "red"],
        ["interview", "x", "--minutes", "0"],
        ["show", "x", "--alert-on", "sometimes"],
    ],
)
def test_wrong_input_is_one_line_on_standard_error_and_status_2(arguments, tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    assert run(arguments) == 2
    said = capsys.readouterr()
    assert said.out == ""
    lines = said.err.strip().splitlines()
    assert len([each for each in lines if not each.startswith("Note: ")]) == 1
    assert str(tmp_path) not in said.err
    assert "Traceback" not in said.err


def test_a_surprise_is_one_line_without_path_or_traceback_and_status_3(case, monkeypatch, capsys):
    from reviewkit import review

    def fail(*_, **__):
        raise RuntimeError(f"{case}/secret")

    monkeypatch.setattr(review, "look", fail)
    monkeypatch.delenv("REVIEWKIT_DEBUG", raising=False)
    assert run(["show", str(case)]) == 3
    said = capsys.readouterr().err
    assert len(said.strip().splitlines()) == 1
    assert "secret" not in said
    assert str(case) not in said


def test_interrupting_is_status_3_and_one_line(case, monkeypatch, capsys):
    from reviewkit import review

    def interrupted(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr(review, "look", interrupted)
    assert run(["show", str(case)]) == 3
    assert len(capsys.readouterr().err.strip().splitlines()) == 1


@pytest.mark.parametrize(
    ("content", "words"),
    [
        ("outcome.transform = ", "readable"),
        ("outcome.transfrom = 'log'", "outcome.transform"),
        ("outcome.transform = 'cube root'", "cube root"),
        ("claim.percent = 46.0", "in quotes"),
        ("[policy]\ncolour = 'red'", "policy.colour"),
        ("[model.main]\noutcome.zero_share = 31", "0 to 1"),
        ("specification = 3", "table"),
        ("[specification]\nline = 'hello'", ""),
    ],
)
def test_a_wrong_file_of_answers_records_nothing(case, tmp_path, content, words, capsys):
    answers = tmp_path / "answers.toml"
    answers.write_text(content)
    capsys.readouterr()
    assert run(["interview", str(case), "--answers", str(answers)]) == 2
    said = capsys.readouterr().err
    assert words in said
    assert len(said.strip().splitlines()) == 1
    assert not (case / "answers.jsonl").exists()


# --- the way through a case -------------------------------------------------------------------------------------------


def test_a_case_from_files_alone_gives_both_notes(case, capsys):
    answered(case)
    assert run(["draft", str(case)]) == 0
    for name in ("to-authors", "to-editor"):
        for ending in ("docx", "md", "txt"):
            assert (case / f"{name}.{ending}").stat().st_size > 100


def test_a_page_and_data_are_drafted_where_they_are_asked_for(case, capsys):
    answered(case)
    assert run(["draft", str(case), "--as", "html, json"]) == 0
    for name in ("to-authors", "to-editor"):
        assert (case / f"{name}.html").read_bytes().startswith(b"<!DOCTYPE html>")
        assert json.loads((case / f"{name}.json").read_bytes())["audience"] == name.removeprefix("to-")
    assert not (case / "to-authors.docx").exists()


def test_a_case_alone_is_shown(case, capsys):
    run(["show", str(case)])
    shown = capsys.readouterr().out
    run([str(case)])
    assert capsys.readouterr().out == shown


def test_json_is_one_object_on_standard_output_and_nothing_else(case):
    for arguments in (
        ["show", case],
        ["interview", case, "--answers", ANSWERS],
        ["draft", case],
        ["percent", "0.38", "--se", "0.11"],
        ["rules", "list"],
    ):
        done = reviewkit(*arguments, "--json")
        assert done.returncode == 0, done.stderr
        assert json.loads(done.stdout)["format"] == 1


def test_an_asked_interview_with_json_keeps_its_questions_off_standard_output(case):
    done = reviewkit("interview", case, "--json", typed="\nlog\nq\n")
    assert json.loads(done.stdout)["format"] == 1
    assert "outcome transformed" in done.stderr


def test_a_raised_point_sets_the_status_only_where_asked(case):
    answered(case)
    assert run(["show", str(case)]) == 0
    assert run(["show", str(case), "--alert-on", "major"]) == 1
    assert run(["draft", str(case), "--alert-on", "minor"]) == 1


def test_an_edited_note_is_kept_and_said(case, capsys):
    answered(case)
    run(["draft", str(case), "--as", "txt"])
    (case / "to-authors.txt").write_text("my own words")
    capsys.readouterr()
    assert run(["draft", str(case), "--as", "txt"]) == 0
    assert "to-authors-2.txt" in capsys.readouterr().out
    assert (case / "to-authors.txt").read_text() == "my own words"
    assert (case / "to-authors-2.txt").exists()


def test_dropped_points_of_note_toml_are_not_in_the_note(case):
    answered(case)
    run(["draft", str(case), "--as", "txt"])
    before = (case / "to-authors.txt").read_text()
    (case / "note.toml").write_text('[dropped]\nsoftware-not-stated = "asked by another referee"\n')
    run(["draft", str(case), "--as", "txt"])
    after = (case / "to-authors.txt").read_text()
    assert len(after) < len(before)
    assert "another referee" not in after


def test_a_broken_note_toml_is_one_message(case, capsys):
    answered(case)
    (case / "note.toml").write_text("order = [")
    capsys.readouterr()
    assert run(["draft", str(case)]) == 2
    assert "note.toml" in capsys.readouterr().err


def test_the_request_asks_for_what_is_open(case):
    assert run(["draft", str(case), "--request", "--as", "txt"]) == 0
    text = (case / "request.txt").read_text()
    assert "grateful" in text
    assert len(text.split()) < 200


def test_remarks_reach_no_file_for_the_authors(case):
    from reviewkit import casefolder
    from reviewkit.answers import Act, Entry

    answered(case)
    casefolder.record(
        casefolder.open_case(case), Entry(Act.REMARK, "errors.kind", "model:main", text="sentinel-remark")
    )
    run(["draft", str(case)])
    for file in case.glob("to-authors.*"):
        assert b"sentinel-remark" not in file.read_bytes()


def test_order_of_answers_changes_no_note(tmp_path, case):
    import tomllib

    values = tomllib.loads(ANSWERS.read_text())
    other = tmp_path / "another" / "a case"
    run(["begin", str(other)])
    lines = [
        json.dumps({"name": name, "subject": subject, **_plain(value)})
        for subject, table in (
            ("study", values["study"]),
            ("model:main", values["model"]["main"]),
            ("claim:main", values["claim"]["main"]),
        )
        for name, value in _flat(table)
    ]
    (tmp_path / "answers.jsonl").write_text("\n".join(reversed(lines)))
    assert run(["interview", str(other), "--answers", str(tmp_path / "answers.jsonl")]) == 0
    answered(case)
    for folder in (case, other):
        run(["draft", str(folder)])
    for name in ("to-authors.docx", "to-authors.md", "to-editor.txt"):
        assert (case / name).read_bytes() == (other / name).read_bytes()


def _flat(table, above=""):
    for key, value in table.items():
        name = f"{above}.{key}" if above else key
        if isinstance(value, dict) and "value" not in value:
            yield from _flat(value, name)
        else:
            yield name, value


def _plain(value):
    return value if isinstance(value, dict) else {"value": value}


# --- re-estimation ------------------------------------------------------------------------------------------------

SPECIFICATION = """
data = "shops.csv"
[outcome]
column = "sales"
transform = "log"
[model]
terms = ["staff"]
focus = ["staff"]
[errors]
kind = "robust"
type = "HC1"
"""


@pytest.fixture
def specification(tmp_path):
    rows = [f"{50 + 7 * (row % 5) + 3 * row % 11},{row % 2}" for row in range(60)]
    (tmp_path / "shops.csv").write_text("sales,staff\n" + "\n".join(rows) + "\n")
    path = tmp_path / "shops.toml"
    path.write_text(SPECIFICATION)
    return path


def messages(said):
    """The lines without those that only tell what is being done."""
    return [line for line in said.strip().splitlines() if not line.endswith(" …")]


def test_a_lone_specification_is_re_estimated(specification):
    done = reviewkit("refit", specification, "--json")
    assert done.returncode == 0, done.stderr
    found = json.loads(done.stdout)
    assert found["models"][0]["submitted"]["n"] == 60
    assert {each["subject"] for each in found["findings"]} >= {"model:main", "claim:main"}


def without_alternative(specification):
    """A submission that can be estimated, with negative values that no Poisson model can have."""
    text = specification.read_text().replace('"log"', '"asinh"')
    specification.write_text(text)
    data = specification.parent / "shops.csv"
    data.write_text(data.read_text().replace("50,0", "-50,0", 1))
    return specification


@pytest.mark.parametrize("more", [[], ["--json"], ["--json", "--alert-on", "minor"]])
def test_a_wanted_alternative_that_cannot_be_estimated_is_status_3_and_the_rest_is_written(specification, more, capsys):
    assert run(["refit", str(without_alternative(specification)), *more]) == 3
    said = capsys.readouterr().out
    assert "staff" in said
    assert not more or json.loads(said)["models"][0]["submitted"]["n"] == 60


def test_a_poisson_submission_wants_no_alternative(specification):
    text = specification.read_text().replace('"log"', '"none"').replace("[model]", '[model]\nestimator = "poisson"')
    specification.write_text(text)
    assert run(["refit", str(specification), "--json"]) == 0


def test_progress_is_silent_in_a_short_refit(specification):
    done = reviewkit("refit", specification, "--plain")
    assert done.returncode == 0
    assert done.stderr == ""


@pytest.mark.parametrize(
    ("line", "missing", "settled"),
    [
        ("xtreg sales staff, mle", "estimator", '[specification.model]\nestimator = "ols"\n'),
        ("glm(sales ~ staff, family = tweedie)", "estimator", '[specification.model]\nestimator = "ols"\n'),
    ],
)
def test_a_line_in_a_file_of_answers_is_never_completed_in_silence(case, specification, line, missing, settled, capsys):
    answers = specification.parent / "answers.toml"
    answers.write_text(f"[specification]\ndata = 'shops.csv'\nline = '{line}'\n")
    assert run(["interview", str(case), "--answers", str(answers)]) == 2
    said = capsys.readouterr().err
    assert f"does not settle the {missing}" in said
    errors = "[specification.errors]\nkind = 'robust'\n"
    answers.write_text(answers.read_text() + settled + errors)
    assert run(["interview", str(case), "--answers", str(answers)]) == 0


def test_the_summary_names_the_points_the_open_and_the_next_command(case, capsys):
    answered(case)
    said = capsys.readouterr().out
    assert "Raised so far:" in said
    assert "  major: " in said or "  minor: " in said
    assert "Open: " in said
    assert "Next: reviewkit " in said


def test_a_wrong_specification_is_one_line_and_status_2(specification, capsys):
    specification.write_text(SPECIFICATION.replace("staff", "stuff"))
    assert run(["refit", str(specification)]) == 2
    assert len(messages(capsys.readouterr().err)) == 1


def test_what_cannot_be_estimated_is_one_line_and_status_3(specification, capsys):
    (specification.parent / "shops.csv").write_text("sales,staff\n" + "5,1\n5,0\n" * 20)
    assert run(["refit", str(specification)]) == 3
    assert len(messages(capsys.readouterr().err)) == 1


def test_interrupting_a_re_estimation_keeps_the_earlier_results(case, specification, monkeypatch, tmp_path):
    from reviewkit import review

    (case / "specification-main.toml").write_text(SPECIFICATION.replace("shops.csv", "../shops.csv"))
    assert run(["refit", str(case)]) == 0
    before = (case / "results" / "main.json").read_bytes()

    def interrupted(*_):
        raise KeyboardInterrupt

    monkeypatch.setattr(review, "_reestimated", interrupted)
    assert run(["refit", str(case)]) == 3
    assert (case / "results" / "main.json").read_bytes() == before
    assert not (case / "lock").exists()


def test_results_are_old_once_the_specification_changes_and_draft_re_estimates(case, specification, capsys):
    path = case / "specification-main.toml"
    path.write_text(SPECIFICATION.replace("shops.csv", "../shops.csv"))
    run(["refit", str(case)])
    path.write_text(path.read_text().replace("HC1", "HC3"))
    capsys.readouterr()
    run(["show", str(case)])
    assert "older" in capsys.readouterr().out
    run(["draft", str(case), "--as", "txt"])
    assert "re-estimating" in capsys.readouterr().err
    run(["show", str(case)])
    assert "older" not in capsys.readouterr().out


# --- percent ----------------------------------------------------------------------------------------------------------


def test_percent_gives_the_keys_that_are_promised(capsys):
    assert run(["percent", "0.38", "--se", "0.11", "--df", "20", "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert found["percent"] == pytest.approx(46.2285, abs=1e-4)
    assert set(found) >= {
        "percent",
        "interval",
        "kennedy_percent",
        "minimum_variance_percent",
        "coefficient_times_100",
        "percent_why_not",
    }


def test_percent_without_an_error_gives_no_interval(capsys):
    run(["percent", "0.38", "--json"])
    found = json.loads(capsys.readouterr().out)
    assert (found["interval"], found["kennedy_percent"]) == (None, None)


def test_a_negative_coefficient_can_be_typed(capsys):
    for arguments in (["percent", "-0.38", "--se", "0.11"], ["percent", "--se", "0.11", "--", "-0.38"]):
        assert run([*arguments, "--json"] if "--" not in arguments else ["percent", "--json", *arguments[1:]]) == 0
        assert json.loads(capsys.readouterr().out)["percent"] == pytest.approx(-31.6139, abs=1e-4)


def test_a_specification_that_is_not_there_is_told_as_such(tmp_path, capsys):
    assert run(["refit", str(tmp_path / "nowhere.toml")]) == 2
    assert "nowhere.toml: there is no such file" in capsys.readouterr().err


@pytest.mark.parametrize("options", [["--zeros"], ["--constant", "1"], ["--constant", "1", "--zeros"]])
def test_zeros_or_a_constant_leave_no_percent_and_say_why(options, capsys):
    run(["percent", "0.38", "--json", *options])
    found = json.loads(capsys.readouterr().out)
    assert found["percent"] is None
    assert found["percent_why_not"]


# --- rules ------------------------------------------------------------------------------------------------------------


def test_rules_are_listed_shown_and_checked(tmp_path, capsys):
    assert run(["rules", "list"]) == 0
    name = next(line.split(":")[0].strip() for line in capsys.readouterr().out.splitlines() if line.startswith("  "))
    assert run(["rules", "show", name]) == 0
    assert "raised when" in capsys.readouterr().out
    assert run(["rules", "check", str(tmp_path)]) == 2
    assert "no rules are found in it" in capsys.readouterr().err


@pytest.mark.parametrize("wish", ['order = ["no-such-rule"]', '[dropped]\nno-such-rule = "mine"'])
def test_a_wish_about_a_rule_that_does_not_exist_is_refused(wish, case, capsys):
    (case / "note.toml").write_text(f"format = 1\n{wish}\n", encoding="utf-8")
    assert run(["draft", str(case)]) == 2
    assert "note.toml: there is no rule `no-such-rule`" in capsys.readouterr().err


def test_a_demo_where_nothing_may_be_written_is_refused_in_one_line(tmp_path, monkeypatch, capsys):
    def denied(*_, **__):
        raise PermissionError(13, "no")

    monkeypatch.setattr("pathlib.Path.mkdir", denied)
    assert run(["demo", str(tmp_path / "demo")]) == 2
    assert "it cannot be made" in capsys.readouterr().err


def test_one_rule_is_told_in_the_singular(tmp_path, capsys):
    (tmp_path / "topic").mkdir()
    shutil.copy(rules_folder() / "outcome" / "zeros-dropped.toml", tmp_path / "topic" / "a-rule-of-our-own.toml")
    assert run(["rules", "check", str(tmp_path)]) == 0
    assert capsys.readouterr().out.startswith("1 rule read, ")


def test_an_input_that_is_not_there_leaves_no_case_behind(tmp_path, capsys):
    assert run(["begin", str(tmp_path / "case"), "--data", str(tmp_path / "nope.csv")]) == 2
    assert "nope.csv" in capsys.readouterr().err
    assert not (tmp_path / "case").exists()
