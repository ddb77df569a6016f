"""The interview on its screens: scripted, over a pipe, and in a real terminal."""

import math
import os
import re
import shutil
import subprocess
import sys
import threading
import time
from dataclasses import replace
from pathlib import Path

import pytest

from reviewkit import casefolder, data_columns, review
from reviewkit.answers import Act
from reviewkit.casefolder import Input, Policy
from reviewkit.interview import entries_for, next_prompt
from reviewkit.interview_screen import ask_policy, closing, hold
from reviewkit.printed import read_printed
from reviewkit.prompts import Form
from reviewkit.screen import Screen, telling
from reviewkit.shipped import demo_folder

DATA = demo_folder() / "drop-off-bays" / "landings.csv"
LISTS = ["", "", "netting_kg", "log of", "2 @ p. 4", "", "bay length years km_site area"]


class Scripted:
    """Replies one after another; looks at the disk whenever it is asked."""

    def __init__(self, replies, folder=None):
        self.replies, self.folder, self.written, self.on_disk = list(replies), folder, [], []

    def read(self, prompt):
        if self.folder is not None:
            self.on_disk.append(len(casefolder.read_entries(casefolder.open_case(self.folder))))
        if not self.replies:
            raise EOFError
        return self.replies.pop(0)

    def screen(self, width=80, styled=False):
        return Screen(self.read, self.written.append, width, styled)

    @property
    def text(self):
        return "\n".join(self.written)


@pytest.fixture
def folder(tmp_path):
    return casefolder.make_case(tmp_path / "case").path


def held(folder, replies, width=80, styled=False):
    script = Scripted(replies, folder)
    case, interview = review.open_interview(folder)
    done = hold(case, interview, script.screen(width, styled))
    return script, done


def test_every_answer_is_on_the_disk_before_the_next_question(folder):
    script, _ = held(folder, ["", "ns", "ns", "ns", "ns"])
    assert script.on_disk == [0, 1, 2, 3, 4, 5]


def test_leaving_and_coming_back_goes_on_where_one_left(folder):
    first, done = held(folder, ["", "log", "q"])
    assert done.left
    second, _ = held(folder, ["q"])
    assert "outcome transformed" in first.text
    assert "outcome transformed" not in second.text
    assert len(casefolder.read_entries(casefolder.open_case(folder))) == 2


def test_going_back_asks_again_and_keeps_the_trail(folder):
    script, _ = held(folder, ["", "log", "b", "square root", "q"])
    assert script.text.count("How is the outcome transformed") == 2
    acts = [each.act for each in casefolder.read_entries(casefolder.open_case(folder))]
    assert acts == [Act.ANSWER, Act.ANSWER, Act.UNDO, Act.ANSWER]
    known = review.look(folder).facts.known("outcome.transform", "model:main")
    assert known.value == "square root"


def test_help_says_where_to_look_why_and_what_waits(folder):
    script, _ = held(folder, ["", "?"])
    assert "Where to look" in script.text
    assert "Asked because" in script.text


def test_a_remark_is_kept_and_the_question_stays(folder):
    script, _ = held(folder, ["", "r units look odd", "q"])
    assert script.text.count("How is the outcome transformed") == 2
    assert [each.text for each in casefolder.read_entries(casefolder.open_case(folder)) if each.act is Act.REMARK] == [
        "units look odd"
    ]


def test_one_may_answer_everything_with_what_was_not_looked_at(folder):
    script, done = held(folder, [""] + ["s"] * 60)
    assert not done.left
    closing(done, script.screen())
    assert "never fine" in script.text


@pytest.mark.parametrize("width", [24, 40, 80, 200])
def test_lines_keep_to_the_width(folder, width):
    script, _ = held(folder, ["", "?", "log", "q"], width)
    long = [line for line in script.written if len(line) > max(width, 40) and " " in line.strip()]
    assert [line for line in long if not line.lstrip().startswith(("At any", "n the", "Behind"))] == []


def test_nothing_is_coloured_or_redrawn_unless_the_screen_can(folder):
    script, _ = held(folder, ["", "?", "log", "q"])
    assert "\033" not in script.text
    assert "\r" not in script.text


def test_a_styled_screen_says_the_same_words(folder, tmp_path):
    other = casefolder.make_case(tmp_path / "other").path
    plain, _ = held(folder, ["", "?", "log", "q"])
    styled, _ = held(other, ["", "?", "log", "q"], styled=True)
    assert re.sub(r"\033\[\d+m", "", styled.text) == plain.text


def test_policy_answers_are_kept_one_by_one(folder):
    script = Scripted(["n", "yes", "no", "q"])
    case = ask_policy(casefolder.open_case(folder), script.screen())
    assert case.settings.policy == {Policy.SOFTWARE: "yes", Policy.SHARING: "no"}
    assert casefolder.open_case(folder).settings == case.settings
    again = Scripted(["3"])
    case = ask_policy(case, again.screen())
    assert case.settings.policy[Policy.DECLARE] == "not stated"
    assert "May software" not in again.text


def test_where_software_is_not_allowed_the_manuscript_is_not_read(folder, tmp_path):
    paper = tmp_path / "paper.docx"
    paper.write_bytes(b"not even a document")
    case = casefolder.giving(casefolder.open_case(folder), Input.MANUSCRIPT, paper)
    case, said = review.read_inputs(casefolder.with_policy(case, Policy.SOFTWARE, "no"))
    assert "not read" in said[0]


def test_progress_is_silent_where_all_is_over_soon():
    said = []
    with telling(said.append) as tell:
        for number in range(50):
            tell(str(number))
    assert said == []


def test_progress_tells_of_a_step_that_takes_long_while_it_lasts():
    said, heard = [], threading.Event()

    def say(text):
        said.append(text)
        heard.set()

    with telling(say, 0.01) as tell:
        tell("fitting")
        assert heard.wait(10)
    assert said == ["fitting …"]


# --- the specification on the screen ------------------------------------------------------------------------------

FROM_LISTS = ["", "", "netting", "log_plus", "1", "bay length_m years km_site area", "bay", "", "cluster", "harbour"]
FIGURES = ["0.506", "0,064", "2,931"]


@pytest.fixture
def with_data(folder):
    case = casefolder.giving(casefolder.open_case(folder), Input.DATA, DATA)
    review.read_inputs(case)
    return folder


def test_lists_build_the_specification_and_what_the_data_show_is_not_asked(with_data):
    script, _ = held(with_data, [*FROM_LISTS, *FIGURES, "q"])
    spec = review.specification_of(casefolder.open_case(with_data))
    assert (spec.outcome.column, spec.errors.by, spec.printed_n.text) == ("netting_kg", ("harbour",), "2,931")
    assert "Re-estimated" in script.text
    assert "bay: estimate (error) 0.506 (0.064) from the data; printed: 0.506, 0,064." in script.text
    assert "2,931 rows used; printed: 2,931." in script.text
    known = review.look(with_data).facts
    assert known.known("outcome.zero_share", "model:main").value > 0.1
    assert known.known("claim.coefficient", "claim:main").value.text == "0.506"
    assert "How is the outcome transformed" not in script.text


def test_a_pasted_line_asks_only_for_the_rest(with_data):
    line = "reg lnkg bay length_m years km_site i.area, vce(cluster harbour)"
    script, _ = held(with_data, ["", line, "netting_kg", "log_plus", "1", "bay", *FIGURES, "q"])
    spec = review.specification_of(casefolder.open_case(with_data))
    assert "understood" in script.text
    assert (spec.outcome.column, str(spec.errors.kind), spec.focus) == ("netting_kg", "cluster", ("bay",))


def test_a_line_that_is_no_model_is_said_and_asked_again(with_data):
    _, done = held(with_data, ["", "make me a sandwich", "q"])
    assert done.left
    assert len(casefolder.read_entries(casefolder.open_case(with_data))) == 1


def test_a_data_file_that_is_not_there_is_one_line_and_asked_again(folder):
    script, _ = held(folder, ["no such.csv", "q"])
    assert casefolder.read_entries(casefolder.open_case(folder)) == ()
    assert "no such.csv" in script.text


LINE = "reg lnkg bay length_m years km_site i.area, vce(cluster harbour)"


@pytest.mark.parametrize("before", [[], [""], ["", ""], ["", "", "netting_kg", "log_plus", "1"]])
def test_a_pasted_line_is_taken_at_any_question_about_the_model(with_data, before):
    script, _ = held(with_data, [*before, LINE, "q"])
    entries = casefolder.read_entries(casefolder.open_case(with_data))
    assert entries[-1].name == "specification.line"
    assert entries[-1].understood["errors"]["by"] == ["harbour"]
    assert "understood: errors" in script.text
    assert "may already be a log" in script.text


def test_a_number_of_observations_with_a_point_is_asked_again(with_data):
    script, _ = held(with_data, [*FROM_LISTS, "", "", "2.931", "q"])
    assert "`2.931` reads as 2.931" in script.text
    assert not casefolder.open_case(with_data).specification().exists()


def test_names_of_columns_are_no_model_line(with_data):
    held(with_data, ["", "", "netting_kg", "log_plus", "1", "bay length_m years", "q"])
    entries = casefolder.read_entries(casefolder.open_case(with_data))
    assert entries[-1].value == ("bay", "length_m", "years")


def test_a_logged_column_of_the_data_needs_one_enter(folder, tmp_path):
    rows = [f"{1 + each % 23 * 1.5},{math.log(2 + each % 23 * 1.5):.9f},{each % 2},{each % 5}" for each in range(60)]
    data = tmp_path / "shops.csv"
    data.write_text("\n".join(["sales,lnsales,desk,age", *rows]))
    case = casefolder.giving(casefolder.open_case(folder), Input.DATA, data)
    review.read_inputs(case)
    script, _ = held(folder, ["reg lnsales desk age, r", "", "", "desk", "", "", "", "q"])
    spec = review.specification_of(casefolder.open_case(folder))
    assert "The data show that lnsales equals log(sales + 1)." in script.text
    assert (spec.outcome.column, spec.outcome.constant) == ("sales", 1)
    known = review.look(folder).facts
    assert known.known("claim.covariate", "claim:main").value == "two-valued"


def test_what_reading_the_data_had_to_decide_is_said(folder, tmp_path):
    data = tmp_path / "shops.csv"
    data.write_text("sales;desk\n1,5;1\n2,5;0\n")
    case = casefolder.giving(casefolder.open_case(folder), Input.DATA, data)
    _, said = review.read_inputs(case)
    remarks = data_columns.remarks(case)
    assert remarks
    assert set(remarks) <= set(said)
    script, _ = held(folder, ["", "q"])
    assert remarks[0][:30] in script.text


def test_after_two_replies_of_no_use_the_choices_are_shown_again(with_data):
    script, _ = held(with_data, ["", "", "", "q"])
    once = script.text.count("netting_kg")
    script, _ = held(with_data, ["", "", "q"])
    assert script.text.count("netting_kg") == 2 * once


def test_no_question_repeats_what_the_specification_says(with_data):
    held(with_data, [*FROM_LISTS, *FIGURES, "q"])
    _, interview = review.open_interview(with_data)
    asked = []
    while (prompt := next_prompt(interview)) is not None:
        asked.append(prompt.name)
        value = plausible(prompt)
        interview = replace(interview, entries=(*interview.entries, *entries_for(prompt, value, "", interview)))
    settled = ("outcome.transform", "outcome.constant", "outcome.zeros", "estimator", "errors.", "n.printed")
    settled += ("claim.coefficient", "claim.std_error", "claim.covariate", "effects.")
    assert [each for each in asked if each.startswith(settled)] == []
    assert len(asked) <= 12


def plausible(prompt):
    """What a log model of an amount with zeros would be answered with."""
    known = {"outcome.kind": "amount with zeros", "claim.scale": "percent", "claim.target": "arithmetic mean"}
    known |= {"mean.form": "multiplicative", "transform.reason": ("normality",), "claim.percent": read_printed("46")}
    if prompt.name in known:
        return known[prompt.name]
    return () if prompt.form in (Form.SEVERAL, Form.CHECKLIST) else prompt.choices[-1].value


def test_a_specification_edited_by_hand_is_kept(with_data):
    held(with_data, [*FROM_LISTS, *FIGURES, "q"])
    path = casefolder.open_case(with_data).specification()
    mine = path.read_text().replace('"years", ', "")
    path.write_text(mine)
    assert review.needs_refit(review.look(with_data))
    script, _ = held(with_data, ["q"])
    assert path.read_text() == mine
    assert "Which data file" not in script.text


def test_results_come_back_without_estimating_again(with_data, monkeypatch):
    held(with_data, [*FROM_LISTS, *FIGURES, "q"])
    before = review.look(with_data)

    def fail(*_):
        raise AssertionError

    monkeypatch.setattr(review, "_reestimated", fail)
    after = review.look(with_data)
    assert after.results == before.results
    assert {each.name for each in after.results.exhibits} >= {"sample", "models", "comparison"}
    assert list((with_data / "results").glob("*.png"))


# --- pipes and terminals ------------------------------------------------------------------------------------------


def environment(**more):
    return {**os.environ, "PYTHONIOENCODING": "utf-8", **more}


def test_an_interview_works_over_a_pipe(folder):
    command = [sys.executable, "-m", "reviewkit", "interview", str(folder)]
    done = subprocess.run(
        command,
        input="\nlog @ p. 3\nq\n",
        capture_output=True,
        encoding="utf-8",
        env=environment(),
        check=True,
        timeout=60,
    )
    assert "\033" not in done.stdout
    known = review.look(folder).facts.known("outcome.transform", "model:main")
    assert (known.value, known.source.place) == ("log", "p. 3")


def test_a_broken_off_input_keeps_everything(folder):
    command = [sys.executable, "-m", "reviewkit", "interview", str(folder)]
    done = subprocess.run(
        command, input="\nlog\n", capture_output=True, encoding="utf-8", env=environment(), check=False
    )
    assert done.returncode == 0
    assert len(casefolder.read_entries(casefolder.open_case(folder))) == 2


@pytest.mark.skipif(not Path("/proc/self/stat").exists(), reason="needs process times")
def test_the_first_question_comes_within_half_a_second(folder):
    assert any(seconds_to_first_question(folder) < 0.5 for _ in range(15))  # a busy machine gets several chances


def seconds_to_first_question(folder):
    """Processor seconds, since the clock on the wall also counts what other programs do meanwhile."""
    command = [sys.executable, "-m", "reviewkit", "interview", str(folder)]
    run = subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, env=environment())
    seen = b""
    while b"\n> " not in seen:
        part = run.stdout.read1(100)
        assert part
        seen += part
    ticks = Path(f"/proc/{run.pid}/stat").read_text().rpartition(")")[2].split()[11:13]
    run.communicate(b"q\n")
    return sum(map(int, ticks)) / os.sysconf("SC_CLK_TCK")


class Terminal:
    """A tmux session; text is typed, and what stands on the screen is read."""

    def __init__(self, name):
        self.socket = name
        self("-f", "/dev/null", "new-session", "-d", "-x", "80", "-y", "200", "env PS1='$ ' sh")

    def __call__(self, *arguments):
        return subprocess.run(
            ["tmux", "-L", self.socket, *arguments],
            capture_output=True,
            encoding="utf-8",
            env=environment(LC_ALL="C.UTF-8"),
            check=False,
        )

    def type(self, text):
        self("send-keys", "-l", text)
        self("send-keys", "Enter")

    def waits_for(self, words, seconds=20.0):
        end = time.monotonic() + seconds
        while time.monotonic() < end:
            shown = self("capture-pane", "-p", "-S", "-500").stdout
            if words in shown:
                return shown
            time.sleep(0.1)
        raise AssertionError(f"{words!r} did not come:\n{shown}")


@pytest.fixture
def terminal(tmp_path):
    session = Terminal(f"reviewkit-test-{os.getpid()}")
    yield session
    session("kill-server")


@pytest.mark.skipif(shutil.which("tmux") is None, reason="needs tmux")
def test_a_real_interview_in_a_real_terminal(folder, terminal):
    terminal.type(f"'{sys.executable}' -m reviewkit interview '{folder}'")
    terminal.waits_for("Which data file")
    terminal.type("")
    terminal.waits_for("How is the outcome transformed")
    terminal.type("?")
    terminal.waits_for("Where to look")
    terminal.type("log @ p. 2")
    terminal.waits_for("= log")
    terminal("send-keys", "C-c")
    shown = terminal.waits_for("every answer is kept")
    assert "Traceback" not in shown
    assert [each.name for each in casefolder.read_entries(casefolder.open_case(folder))][1:] == ["outcome.transform"]
    assert not (folder / casefolder.LOCK).exists()


def test_a_killed_interview_resumes(folder):
    command = [sys.executable, "-m", "reviewkit", "interview", str(folder)]
    run = subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, encoding="utf-8", env=environment())
    run.stdin.write("\nlog\n")
    run.stdin.flush()
    end = time.monotonic() + 20
    while len(casefolder.read_entries(casefolder.open_case(folder))) < 2:
        assert time.monotonic() < end
        time.sleep(0.05)
    run.kill()
    run.communicate()
    assert len(casefolder.read_entries(casefolder.open_case(folder))) == 2
    _, done = held(folder, ["q"])
    assert done.left
