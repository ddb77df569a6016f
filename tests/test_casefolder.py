"""The case folder: nothing finished is lost, whatever happens while it is written."""

import errno
import json
import os
import signal
import stat
import subprocess
import sys
import time
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from reviewkit import casefolder, safekeeping
from reviewkit.answers import Act, Entry, entry_from, entry_json
from reviewkit.casefolder import Input, Policy
from reviewkit.exhibit import BarFigure, Bin, BinnedFigure, Exhibit, Interval, IntervalFigure
from reviewkit.facts import NOT_STATED, Fact, Source, SourceKind, Standing
from reviewkit.printed import read_printed
from reviewkit.records import exhibit_from, exhibit_json, fact_from, fact_json
from reviewkit.refusals import NotEstimable, Refusal

POSIX = os.name != "nt"
AS_ROOT = POSIX and os.geteuid() == 0


@pytest.fixture
def case(tmp_path):
    return casefolder.make_case(tmp_path / "a case")


def one_line(refusal) -> str:
    message = refusal.value.message()
    assert "\n" not in message
    assert str(Path.cwd()) not in message
    return message


# --- making and opening -------------------------------------------------------------------------------------------


def test_a_new_case_can_be_opened_again(case):
    assert casefolder.open_case(case.path) == case


@pytest.mark.skipif(not POSIX, reason="modes are POSIX")
def test_only_the_owner_can_enter_a_case(case):
    assert stat.S_IMODE(case.path.stat().st_mode) == 0o700


@pytest.mark.parametrize("name", ["with blanks", "žluťoučký", "例", "it's", "a;b"])
def test_names_of_folders_may_hold_blanks_and_any_letters(tmp_path, name):
    case = casefolder.make_case(tmp_path / name)
    data = tmp_path / f"{name}.csv"
    data.write_text("a\n1\n")
    case = casefolder.giving(case, Input.DATA, data)
    assert casefolder.open_case(case.path).place(Input.DATA) == data


def test_a_folder_with_other_things_in_it_is_left_alone(tmp_path):
    (tmp_path / "thesis.txt").write_text("mine")
    with pytest.raises(Refusal) as refusal:
        casefolder.make_case(tmp_path)
    assert "no case folder" in one_line(refusal)
    assert [each.name for each in tmp_path.iterdir()] == ["thesis.txt"]


def test_what_is_no_case_is_said_with_the_way_out(tmp_path):
    with pytest.raises(Refusal) as refusal:
        casefolder.open_case(tmp_path / "gone")
    assert "reviewkit begin" in one_line(refusal)


@pytest.mark.parametrize("text", ["format = 7", "format = ", "", "format = 1\n[inputs.data]\nsha256 = 'x'", "\x00"])
def test_a_damaged_settings_file_is_one_message(case, text):
    (case.path / casefolder.SETTINGS).write_text(text)
    with pytest.raises(Refusal) as refusal:
        casefolder.open_case(case.path)
    one_line(refusal)


def test_policy_and_inputs_come_back_as_they_were_written(case, tmp_path):
    paper = tmp_path / 'a "quoted" \\ näme.docx'
    paper.write_bytes(b"x")
    case = casefolder.giving(case, Input.MANUSCRIPT, paper)
    case = casefolder.with_policy(case, Policy.SOFTWARE, "yes")
    again = casefolder.open_case(case.path)
    assert again.settings == case.settings
    assert again.given(Input.MANUSCRIPT).sha256 == safekeeping.checksum(b"x")
    assert not Path(again.given(Input.MANUSCRIPT).path).is_absolute()


# --- the log of answers -------------------------------------------------------------------------------------------

VALUES = st.one_of(
    st.text(),
    st.floats(),
    st.lists(st.text(), max_size=3).map(tuple),
    st.sampled_from(["0.38", "−0.38", "1,234", "0,38", "12 %"]).map(read_printed),
    st.just(NOT_STATED),
)
ENTRIES = st.builds(Entry, st.sampled_from(Act), st.text(), st.text(), VALUES, st.text(), st.text(), st.text())


@given(entry=ENTRIES)
def test_every_entry_comes_back_from_its_line(entry):
    line = json.dumps(entry_json(entry), allow_nan=False)
    assert repr(entry_from(json.loads(line), "line 1")) == repr(entry)


@given(value=VALUES, standing=st.sampled_from(Standing), kind=st.sampled_from(SourceKind), confirmed=st.booleans())
def test_every_fact_comes_back_from_its_record(value, standing, kind, confirmed):
    fact = Fact("a.b", value, standing, Source(kind, "p. 1", "quoted"), "model:main", confirmed)
    assert repr(fact_from(json.loads(json.dumps(fact_json(fact))))) == repr(fact)


def test_every_exhibit_comes_back_to_the_last_bit():
    figures = (
        IntervalFigure("x", (Interval("a", 0.1 + 0.2, None, 1e-300),), None),
        BinnedFigure("x", "y", (Bin(1.0, 2.0, 0.5, 3.0, 12),), (0.1, 1 / 3)),
        BinnedFigure("x", "y", ()),
        BarFigure("x", "y", (("zeros", 31.4159),)),
    )
    fact = Fact("n.used", 12.0, Standing.DONE, Source(SourceKind.EXHIBIT))
    exhibit = Exhibit("sample", "Title", ("a", "b"), (("x", 1 / 3), (None, 7)), "One sentence.", figures, (fact,))
    assert exhibit_from(json.loads(json.dumps(exhibit_json(exhibit), allow_nan=False))) == exhibit


def test_entries_keep_their_order(case):
    given_order = [Entry(Act.ANSWER, f"fact.{number}", value=float(number)) for number in (3, 1, 2)]
    for entry in given_order:
        casefolder.record(case, entry)
    assert list(casefolder.read_entries(case)) == given_order


@pytest.mark.parametrize("torn", [b"{", b'{"act": "answer", "name": "x", "value": "1"}', b"\xc3", b'{"act": "ans'])
def test_a_torn_last_line_is_passed_over_and_then_cut_off(case, torn):
    casefolder.record(case, Entry(Act.ANSWER, "first", value="1"))
    with (case.path / casefolder.ANSWERS).open("ab") as log:
        log.write(torn)
    assert [each.name for each in casefolder.read_entries(case)] == ["first"]
    casefolder.record(case, Entry(Act.ANSWER, "second", value="2"))
    assert [each.name for each in casefolder.read_entries(case)] == ["first", "second"]


@given(entry=ENTRIES)
def test_every_entry_stays_one_line(entry):
    assert "\n" not in json.dumps(entry_json(entry), ensure_ascii=False)


def test_line_separators_and_broken_letters_in_a_remark_harm_nothing(case):
    for text in ("one\u2028two\x85three\x0b", "\udcff"):
        casefolder.record(case, Entry(Act.REMARK, text=text))
    assert [each.text for each in casefolder.read_entries(case)] == ["one\u2028two\x85three\x0b", "?"]


@pytest.mark.parametrize("line", ["nonsense", "[]", '{"act": "dance"}', "null", '{"value": {"a": 1}, "act": "answer"}'])
def test_a_damaged_line_in_the_middle_is_named(case, line):
    with (case.path / casefolder.ANSWERS).open("a") as log:
        log.write(line + "\n")
    casefolder.record(case, Entry(Act.ANSWER, "second", value="2"))
    with pytest.raises(Refusal) as refusal:
        casefolder.read_entries(case)
    assert "answers.jsonl, line 1" in one_line(refusal)


def test_a_full_disk_loses_no_earlier_answer(case, monkeypatch):
    casefolder.record(case, Entry(Act.ANSWER, "first", value="1"))

    def full(handle):
        raise OSError(errno.ENOSPC, "No space left on device")

    with monkeypatch.context() as patch:
        patch.setattr(os, "fsync", full)
        with pytest.raises(NotEstimable) as refusal:
            casefolder.record(case, Entry(Act.ANSWER, "second", value="2"))
    assert "disk is full" in one_line(refusal)
    assert [each.name for each in casefolder.read_entries(case)] == ["first"]


@pytest.mark.skipif(not POSIX or AS_ROOT, reason="root may write anywhere")
def test_a_folder_that_can_only_be_read_is_one_message_and_can_still_be_read(case):
    casefolder.record(case, Entry(Act.ANSWER, "first", value="1"))
    (case.path / casefolder.ANSWERS).chmod(0o400)
    case.path.chmod(0o500)
    try:
        for write in (
            lambda: casefolder.record(case, Entry(Act.SKIP)),
            lambda: casefolder.save_settings(case, case.settings),
        ):
            with pytest.raises(Refusal) as refusal:
                write()
            one_line(refusal)
        assert [each.name for each in casefolder.read_entries(casefolder.open_case(case.path))] == ["first"]
    finally:
        case.path.chmod(0o700)


@pytest.mark.parametrize("code", [errno.EROFS, errno.EACCES, errno.EBUSY, errno.ENOSPC, errno.EIO, errno.ENAMETOOLONG])
def test_whatever_the_system_says_becomes_one_message_and_the_old_file_stays(tmp_path, monkeypatch, code):
    path = tmp_path / "kept.txt"
    path.write_text("old")

    def fail(*_):
        raise OSError(code, os.strerror(code))

    monkeypatch.setattr(os, "replace", fail)
    with pytest.raises(Refusal) as refusal:
        safekeeping.write_atomically(path, "new")
    assert one_line(refusal).startswith("kept.txt: ")
    assert path.read_text() == "old"
    assert [each.name for each in tmp_path.iterdir()] == ["kept.txt"]


# --- files that people edit -----------------------------------------------------------------------------------------


def test_our_own_file_is_replaced(case):
    path = case.path / "to-authors.txt"
    assert casefolder.write_beside(case, path, b"one") == path
    assert casefolder.write_beside(case, path, b"two") == path
    assert path.read_bytes() == b"two"


def test_an_edited_file_is_kept_and_the_next_number_is_written(case):
    path = case.path / "to-authors.txt"
    casefolder.write_beside(case, path, b"one")
    path.write_bytes(b"one, and a remark of my own")
    second = casefolder.write_beside(case, path, b"two")
    assert (second.name, second.read_bytes()) == ("to-authors-2.txt", b"two")
    assert path.read_bytes() == b"one, and a remark of my own"
    assert casefolder.write_beside(case, path, b"three") == second


def test_a_file_that_was_there_before_us_is_kept(case):
    path = case.path / "to-editor.md"
    path.write_text("mine")
    assert casefolder.write_beside(case, path, b"ours").name == "to-editor-2.md"
    assert path.read_text() == "mine"


def test_a_file_that_is_open_elsewhere_is_kept(case, monkeypatch):
    path = case.path / "to-authors.docx"
    casefolder.write_beside(case, path, b"one")
    really = os.replace

    def held_open(source, target):
        if Path(target) == path:
            raise PermissionError(errno.EACCES, "in use")
        really(source, target)

    monkeypatch.setattr(os, "replace", held_open)
    assert casefolder.write_beside(case, path, b"two").name == "to-authors-2.docx"
    assert path.read_bytes() == b"one"


# --- the lock -------------------------------------------------------------------------------------------------------


def test_a_second_process_is_told_that_the_case_is_open(case):
    script = "import sys,time; from reviewkit import casefolder as c; from pathlib import Path\n"
    script += "with c.working_in(c.open_case(Path(sys.argv[1]))): print('held', flush=True); time.sleep(60)"
    holder = subprocess.Popen([sys.executable, "-c", script, str(case.path)], stdout=subprocess.PIPE, text=True)
    try:
        assert holder.stdout.readline() == "held\n"
        with pytest.raises(Refusal) as refusal, casefolder.working_in(case):
            pytest.fail("two hold one lock")
        assert str(holder.pid) in one_line(refusal)
    finally:
        holder.kill()
        holder.wait()
        holder.stdout.close()
    with casefolder.working_in(case):
        assert (case.path / casefolder.LOCK).read_text().startswith(str(os.getpid()))
    assert not (case.path / casefolder.LOCK).exists()


@pytest.mark.parametrize("left", ["999999999 1", "999999999", "not a lock", "-4", "0x10"])
def test_a_lock_left_by_a_crash_is_set_aside(case, left):
    (case.path / casefolder.LOCK).write_text(left)
    with casefolder.working_in(case):
        pass
    assert not list(case.path.glob("lock*"))


def test_a_lock_killed_before_it_was_written_is_set_aside_when_old(case):
    lock = case.path / casefolder.LOCK
    lock.touch()
    os.utime(lock, (time.time() - 60, time.time() - 60))
    with casefolder.working_in(case):
        assert lock.read_text(encoding="utf-8").startswith(str(os.getpid()))
    assert not lock.exists()


@pytest.mark.skipif(not Path("/proc/self/stat").exists(), reason="needs process start times")
def test_another_process_that_got_the_same_number_holds_no_lock(case):
    lock = case.path / casefolder.LOCK
    lock.write_text(f"{os.getpid()} 1")
    with casefolder.working_in(case):
        assert lock.read_text(encoding="utf-8") != f"{os.getpid()} 1"
    assert not lock.exists()


def test_of_many_processes_that_find_a_stale_lock_one_works_at_a_time(case):
    (case.path / casefolder.LOCK).write_text("999999999 1")
    script = """
import sys, time, os
from pathlib import Path
from reviewkit import casefolder as c
from reviewkit.refusals import Refusal
case, inside = c.open_case(Path(sys.argv[1])), Path(sys.argv[1]) / "inside"
for _ in range(40):
    try:
        with c.working_in(case):
            os.close(os.open(inside, os.O_CREAT | os.O_EXCL))
            time.sleep(0.002)
            os.unlink(inside)
    except Refusal:
        time.sleep(0.001)
"""
    runs = [subprocess.Popen([sys.executable, "-c", script, str(case.path)]) for _ in range(3)]
    assert [run.wait() for run in runs] == [0, 0, 0]


# --- places ---------------------------------------------------------------------------------------------------------


def test_a_versioned_place_is_warned_of(tmp_path):
    (tmp_path / ".git").mkdir()
    assert any("versioned" in each for each in safekeeping.place_warnings(tmp_path / "deep" / "case"))


@pytest.mark.parametrize("name", ["CloudStorage", "my sync folder", "Dropbox"])
def test_a_synchronised_place_is_warned_of(tmp_path, name):
    assert any("other machines" in each for each in safekeeping.place_warnings(tmp_path / name / "case"))


def test_an_ordinary_place_is_not_warned_of():
    assert safekeeping.place_warnings(Path("/home/someone/reviews/case")) == ()


# --- kills ------------------------------------------------------------------------------------------------------------

WRITER = """
import sys
from pathlib import Path
from reviewkit import casefolder as c
from reviewkit.answers import Act, Entry
case = c.open_case(Path(sys.argv[1]))
with c.working_in(case):
    for number in range(int(sys.argv[2]), 10**6):
        c.record(case, Entry(Act.ANSWER, f"fact.{number}", value="x" * 200))
        print(number, flush=True)
        c.save_proposals(case, ())
        c.write_or_keep(case, case.path / "note.txt", str(number).encode() * 50)
"""


def killed_while_writing(case, start: int, seconds: float) -> int:
    """Run a writer, kill it after a while; the last answer that it said was finished."""
    run = subprocess.Popen(
        [sys.executable, "-c", WRITER, str(case.path), str(start)], stdout=subprocess.PIPE, text=True
    )
    first = run.stdout.readline()
    time.sleep(seconds)
    run.kill()
    said = [first, *run.stdout.read().splitlines()]
    run.wait()
    run.stdout.close()
    return int(said[-1])


def held_after(case) -> list[int]:
    opened = casefolder.open_case(case.path)
    casefolder.read_proposals(opened)
    casefolder.is_edited(opened, opened.path / "note.txt")
    return [int(each.name.removeprefix("fact.")) for each in casefolder.read_entries(opened)]


def check_kills(case, waits) -> None:
    start = 0
    for wait in waits:
        last = killed_while_writing(case, start, wait)
        held = held_after(case)
        assert held[: last + 1] == list(range(last + 1))
        assert len(held) <= last + 2
        start = len(held)


@pytest.mark.skipif(not POSIX, reason="needs SIGKILL")
def test_a_process_killed_at_any_moment_loses_no_finished_answer(case):
    check_kills(case, (0.0, 0.013, 0.05, 0.004))


@pytest.mark.slow
@pytest.mark.skipif(not POSIX, reason="needs SIGKILL")
def test_thirty_kills_lose_no_finished_answer(case):
    check_kills(case, [0.003 * number % 0.07 for number in range(30)])


KILLED_AT = """
import os, signal, sys
from pathlib import Path
from reviewkit import casefolder as c
from reviewkit.answers import Act, Entry
case, point, count = c.open_case(Path(sys.argv[1])), sys.argv[2], int(sys.argv[3])
seen = 0
really = getattr(os, point)
def dying(*arguments):
    global seen
    seen += 1
    if seen == count:
        os.kill(os.getpid(), signal.SIGKILL)
    return really(*arguments)
setattr(os, point, dying)
with c.working_in(case):
    for number in range(6):
        c.record(case, Entry(Act.ANSWER, f"fact.{number}", value="x"))
        print(number, flush=True)
        case = c.with_policy(case, c.Policy.SHARING, str(number))
        c.write_beside(case, case.path / "to-authors.txt", str(number).encode())
"""


@pytest.mark.skipif(not POSIX, reason="needs SIGKILL")
@pytest.mark.parametrize("point", ["fsync", "replace"])
@pytest.mark.parametrize("count", [1, 2, 3, 4, 5, 7, 9, 12])
def test_a_kill_at_a_chosen_write_loses_no_finished_answer(case, point, count):
    run = subprocess.run(
        [sys.executable, "-c", KILLED_AT, str(case.path), point, str(count)],
        capture_output=True,
        text=True,
        check=False,
    )
    assert run.returncode == -signal.SIGKILL
    said = [int(line) for line in run.stdout.split()]
    opened = casefolder.open_case(case.path)
    held = [each.name for each in casefolder.read_entries(opened)]
    assert held[: len(said)] == [f"fact.{number}" for number in said]
    assert len(held) <= len(said) + 1
    with casefolder.working_in(opened):
        casefolder.write_beside(opened, opened.path / "to-authors.txt", b"again")
