"""Notes: order, length, tone, what may be in them, and that every number has a source."""

import os
import re
import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace

import pytest
from finished_notes import (
    BOOK,
    CLAIM,
    DEFAULTS,
    MODEL,
    PRIVATE,
    case_with,
    done,
    everything_in,
    evidence,
    numbers_without_source,
    settled,
    shown_text,
    write_all,
)
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from reviewkit.compose import CaseContent, NoteWishes, Voice, compose, wishes_from
from reviewkit.compose.length import words_in
from reviewkit.compose.phrases import phrases_for
from reviewkit.compose.points import listed, points
from reviewkit.decisions import decide
from reviewkit.facts import STUDY, Facts
from reviewkit.note import Audience, Figure, Note, Paragraph, Section, Table
from reviewkit.refusals import Refusal
from reviewkit.rules import Finding, Importance, State
from reviewkit.writers.text import text_of


def authors(case: CaseContent) -> str:
    return " ".join(text_of(compose(case, Audience.AUTHORS)).split())


def editor(case: CaseContent) -> str:
    return " ".join(text_of(compose(case, Audience.EDITOR)).split())


def section(note: Note, title: str) -> Section:
    return next(each for each in note.sections if each.title == title)


# --- numbers ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("audience", list(Audience))
@pytest.mark.parametrize("ending", ["docx", "md", "txt", "html", "json"])
def test_every_number_of_a_finished_file_has_a_source(tmp_path, audience, ending):
    case = case_with()
    write_all(case, tmp_path, (ending,))
    text = shown_text(tmp_path / f"to-{audience}.{ending}")
    assert numbers_without_source(text, case, compose(case, audience)) == []


def test_the_check_of_numbers_finds_a_wrong_digit(tmp_path):
    case = case_with()
    write_all(case, tmp_path, ("txt",))
    text = shown_text(tmp_path / "to-authors.txt")
    note = compose(case, Audience.AUTHORS)
    for right, wrong in (("48 %", "47 %"), ("0.411", "0.412"), ("2,418", "2,428"), ("(exhibit 1)", "(0.777)")):
        assert right in text
        assert numbers_without_source(text.replace(right, wrong), case, note) != []


NUMBER = st.floats(min_value=-3, max_value=3).filter(lambda one: abs(one) > 1e-6)
PERCENT = st.floats(min_value=-95, max_value=4000)


@settings(max_examples=15, phases=(Phase.explicit, Phase.generate))  # shrinking whole notes takes minutes
@given(
    st.fixed_dictionaries(
        {
            "refit.submitted": NUMBER,
            "refit.alternative": NUMBER,
            "refit.submitted_percent": PERCENT,
            "refit.alternative_percent": PERCENT,
            "refit.alternative_percent_low": PERCENT,
            "refit.alternative_percent_high": PERCENT,
            "refit.differ_by_at_least_percent": st.floats(min_value=5, max_value=99),
            "outcome.zero_share": st.floats(min_value=0.001, max_value=0.999),
            "refit.coefficient_error": st.floats(min_value=1e-5, max_value=10),
        }
    )
)
def test_every_number_has_a_source_whatever_the_data_say(numbers):
    case = case_with(numbers)
    for audience in Audience:
        note = compose(case, audience)
        text = text_of(note)
        assert numbers_without_source(text, case, note) == []
        assert not [word for word in ("nan", "inf", "None") if word in text.split()]
        assert "-0 " not in text


# --- length and order -------------------------------------------------------------------------------------------


def test_both_notes_keep_to_their_words():
    case = case_with()
    assert words_in(compose(case, Audience.AUTHORS)) <= 900
    assert words_in(compose(case, Audience.EDITOR)) <= 120


def all_raised() -> CaseContent:
    """The invented case with every rule raised, as no real case will have it."""
    case = case_with()
    subjects = {"study": STUDY, "data": "data:main", "model": MODEL, "claim": CLAIM}
    found = tuple(
        Finding(rule, subjects[rule.subject], State.RAISED, rule.importance, case.findings[0].facts)
        for rule in BOOK.rules
    )
    return replace(case, findings=found)


def test_a_note_on_everything_still_keeps_to_its_words_and_tells_at_most_five_points_in_full():
    note = compose(all_raised(), Audience.AUTHORS)
    assert words_in(note) <= 900
    assert sum(each.level == 2 for each in note.sections) <= 5
    told = sum(each.level == 2 for each in note.sections)
    further = section(note, "Further requests").blocks  # there are majors among them
    numbers = [block.lead for block in further if isinstance(block, Paragraph)]
    assert numbers == [f"{at}." for at in range(told + 1, told + 1 + len(further))]
    assert told + len(further) == len(listed(points(all_raised()), phrases_for(Voice.WE)))


def test_a_major_point_stands_in_full_where_words_allow_and_never_under_smaller_points():
    for case in (case_with(), all_raised()):
        note = compose(case, Audience.AUTHORS)
        smaller = [block for each in note.sections if each.title == "Smaller points" for block in each.blocks]
        assert not any("(major)" in block.text for block in smaller if isinstance(block, Paragraph))
        full = [each for each in note.sections if each.level == 2]
        assert full
        assert all("(major)" in each.title for each in full)


def test_points_are_numbered_on_through_the_note():
    note = compose(case_with(wishes=NoteWishes(own_points=("what is a season",))), Audience.AUTHORS)
    numbers = [each.title.partition(".")[0] for each in note.sections if each.level == 2]
    for each in note.sections:
        numbers += [
            block.lead[:-1] for block in each.blocks if isinstance(block, Paragraph) and block.lead[:1].isdigit()
        ]
    assert numbers == [str(at) for at in range(1, len(numbers) + 1)]
    assert len(numbers) > 3


def test_what_another_point_covers_is_not_told_again():
    one_constant = (settled("constants.varied", "no"),)
    told = {point.rule.name for point in points(case_with(more=one_constant))}
    raised = {each.rule.name for each in case_with(more=one_constant).findings if each.state is State.RAISED}
    assert "percent-of-a-shifted-log" in told
    assert "constant-added" in raised - told
    wishes = NoteWishes(dropped={"percent-of-a-shifted-log": "another referee asks for it"})
    uncovered = case_with(wishes=wishes, more=one_constant)
    assert "constant-added" in {point.rule.name for point in points(uncovered)}


def test_a_point_about_another_model_covers_nothing():
    case = case_with(more=(settled("constants.varied", "no"),))
    covering = next(each for each in case.findings if each.rule.name == "percent-of-a-shifted-log")
    elsewhere = replace(covering, subject="claim:elsewhere")
    moved = tuple(elsewhere if each is covering else each for each in case.findings)
    assert "constant-added" in {point.rule.name for point in points(replace(case, findings=moved))}


def test_what_could_not_be_found_is_asked_in_one_line():
    names = ("data-or-code-not-available", "software-not-stated")
    found = tuple(Finding(BOOK.rule(name), STUDY, State.RAISED, Importance.MINOR) for name in names)
    case = case_with(has_data=False)
    text = authors(replace(case, findings=(*case.findings, *found)))
    assert "We could not find where data and scripts can be reached or the software with its version (minor)." in text


def test_major_points_come_before_minor_ones_and_those_with_evidence_first():
    found = points(all_raised())
    weights = [point.finding.importance is Importance.MAJOR for point in found]
    assert weights == sorted(weights, reverse=True)
    majors = [bool(point.exhibits) for point in found if point.finding.importance is Importance.MAJOR]
    assert majors == sorted(majors, reverse=True)


def test_the_order_of_findings_does_not_change_the_note():
    case = case_with()
    by_name = sorted(case.findings, key=lambda finding: finding.rule.name)
    first = points(replace(case, findings=tuple(by_name)))
    assert {point.rule.name for point in first} == {point.rule.name for point in points(case)}


def test_the_case_for_the_authors_stands_before_the_numbers_against_it():
    note = compose(case_with(), Audience.AUTHORS)
    told = next(each for each in note.sections if "which average is meant" in each.title)
    leads = [block.lead for block in told.blocks if isinstance(block, Paragraph)]
    assert leads.index("In favour of this choice.") < leads.index("From the numbers.")


def test_a_point_names_its_exhibits_and_exhibits_follow_the_text():
    note = compose(case_with(), Audience.AUTHORS)
    assert [each.title for each in note.sections[-2:]] == ["Exhibits", "Computing the numbers again"]
    blocks = section(note, "Exhibits").blocks
    assert isinstance(blocks[0], Paragraph)
    assert "Exhibit 4 belongs to no single request" in blocks[0].text
    assert [block.caption[:9] for block in blocks if isinstance(block, Table)] == [f"Exhibit {at}" for at in (1, 2, 3)]
    assert all(block.alt for block in blocks if isinstance(block, Figure))
    assert "(exhibits 2 and 3)" in authors(case_with())


def test_wishes_set_the_order_drop_points_and_add_words():
    first = points(case_with())
    assert len(first) >= 3
    wishes = NoteWishes(
        order=(first[-1].rule.name,),
        dropped={first[0].rule.name: "raised by another referee"},
        own_points=("please state the season",),
        own_words={first[1].rule.name: "A figure would do as well.", "opening": "A pleasure to read."},
    )
    case = case_with(wishes=wishes)
    found = points(case)
    assert found[0].rule.name == first[-1].rule.name
    assert first[0].rule.name not in [point.rule.name for point in found]
    text = authors(case)
    assert "Please state the season." in text
    assert "A figure would do as well." in text
    assert "A pleasure to read." in text
    assert "another referee" not in text + editor(case)


def test_a_single_referee_says_i_and_several_say_we():
    single = authors(case_with(wishes=NoteWishes(voice=Voice.I)))
    several = authors(case_with())
    assert " we " not in single
    assert "I ask" in single
    assert "We ask" in several


# --- what is said, and what is not ------------------------------------------------------------------------------


def test_every_missing_fact_is_listed_as_not_looked_at():
    case = case_with()
    text = authors(case)
    missing = {name for finding in case.findings if finding.state is State.OPEN for name in finding.missing}
    assert missing
    for name in missing:
        assert case.book.vocabulary[name].label.removesuffix(" (needs data)") in text


def test_without_data_the_note_says_that_nothing_was_estimated_again():
    case = case_with(has_data=False)
    assert "nothing was estimated again" in authors(case)
    assert "nothing was estimated again" in editor(case)
    assert "Exhibit" not in authors(case)


def test_a_machine_reading_is_marked_until_someone_confirms_it():
    marked = authors(case_with())
    assert "read by machine, not confirmed" in marked
    more = [
        settled("outcome.transform", "log of y plus a constant", "methods, paragraph 14"),
        settled("outcome.constant", 1.0, "methods, paragraph 14"),
    ]
    assert "read by machine" not in authors(case_with(more=more))


def test_a_paper_without_points_gets_a_short_note_that_says_so_with_the_bound():
    case = case_with()
    exhibits = evidence({**DEFAULTS, "refit.agree_within_percent": 3.8}, "agrees")
    facts = Facts(tuple(fact for exhibit in exhibits for fact in exhibit.facts)).linked(CLAIM, MODEL)
    clear = tuple(replace(one, state=State.CLEAR, missing=()) for one in case.findings)
    fine = replace(case, facts=facts, exhibits=exhibits, findings=clear)
    text = authors(fine)
    assert "we have nothing to raise" in text
    assert "agree to within 3.8 %" in text
    assert "Requests" not in text
    assert words_in(compose(fine, Audience.AUTHORS)) < 450
    assert "We raise nothing." in editor(fine)


def test_nothing_raised_but_something_open_is_not_called_fine():
    case = case_with()
    quiet = replace(case, findings=tuple(one for one in case.findings if one.state is State.OPEN))
    assert "nothing to raise. Thank" not in authors(quiet)
    assert "what could not is listed below" in authors(quiet)
    assert "could not be looked at" in editor(quiet)


def test_the_editor_learns_headline_reproduction_alternative_direction_and_conclusion():
    text = editor(case_with())
    for words in (
        "51 %",
        "could reproduce",
        "0.41 (0.09)",
        "20 % (95 % interval 4 to 37 %)",
        "The direction is the same in both.",
        "depends on this choice",
        "2 major and 1 minor requests",
    ):
        assert words in text


@pytest.mark.parametrize(
    ("state", "words"), [("no", "could not reproduce"), ("partly", "in part"), ("absent", "No printed figure")]
)
def test_the_editor_is_told_plainly_what_could_not_be_reproduced(state, words):
    case = case_with()
    known = [fact for fact in case.facts if fact.name != "refit.reproduced"]
    known += [] if state == "absent" else [done("refit.reproduced", state, "models")]
    facts = Facts(tuple(known)).linked(CLAIM, MODEL)
    assert words in editor(replace(case, facts=facts, findings=decide(facts, BOOK)))


@pytest.mark.parametrize("conclusion", ["agrees", "unsettled", "none"])
def test_no_conclusion_is_told_without_its_bound_or_reason(conclusion):
    more = [
        done("refit.conclusion", conclusion, "comparison"),
        done("refit.difference_excludes_zero", "no", "comparison"),
    ]
    more.append(done("refit.why_no_conclusion", "the two have no common scale", "comparison"))
    text = editor(case_with(more=more))
    assert {"agrees": "within 71 %", "unsettled": "bound it at 71 %", "none": "no common scale"}[conclusion] in text


@pytest.mark.parametrize("word", ["reject", "unfortunately", "misleading", "fail", "cherry", "mistake", "wrong"])
def test_no_note_judges(word):
    text = authors(all_raised()) + editor(all_raised())
    assert word not in text.lower()


# --- what may not leave -----------------------------------------------------------------------------------------

WISHES = NoteWishes(dropped={"reason-not-given": "SENTINEL-REASON"}, own_words={"editor": "SENTINEL-FOR-EDITOR"})


def test_what_is_private_reaches_no_file_for_the_authors(tmp_path, monkeypatch):
    for name in ("USER", "LOGNAME", "USERNAME", "HOSTNAME"):
        monkeypatch.setenv(name, "SENTINEL-USER")
    files = write_all(case_with(wishes=WISHES, more=PRIVATE), tmp_path)
    assert len(files) >= 13
    for path in files:
        content = everything_in(path)
        allowed = b"SENTINEL-FOR-EDITOR" if path.stem == "to-editor" else b""
        assert b"SENTINEL" not in content.replace(allowed, b"") if allowed else b"SENTINEL" not in content, path.name
    assert "SENTINEL-FOR-EDITOR" in shown_text(tmp_path / "to-editor.txt")


def test_a_point_that_rests_on_the_editors_facts_is_not_told_to_the_authors():
    case = case_with()
    raised = next(one for one in case.findings if one.state is State.RAISED)
    by_condition = replace(raised.rule, when=SimpleNamespace(names=("editor.policy",)))
    by_text = replace(raised.rule, stands="[[{editor.policy}]]")
    assert points(replace(case, findings=(raised,)))
    for rule in (by_condition, by_text):
        assert points(replace(case, findings=(replace(raised, rule=rule),))) == ()


@pytest.mark.parametrize(
    ("seed", "zone", "locale"), [("1", "Pacific/Auckland", "C"), ("77", "America/Lima", "C.UTF-8")]
)
def test_the_same_case_gives_the_same_bytes_elsewhere(tmp_path, seed, zone, locale):
    here, there, home = (tmp_path / name for name in ("here", "there", "home"))
    for folder in (here, there, home):
        folder.mkdir()
    write_all(case_with(more=PRIVATE), here)
    tests = Path(__file__).parent
    surroundings = {
        **os.environ,
        "PYTHONHASHSEED": seed,
        "TZ": zone,
        "LC_ALL": locale,
        "COLUMNS": "40",
        "PYTHONPATH": os.pathsep.join([str(tests.parent), str(tests)]),
    }
    command = [sys.executable, str(tests / "finished_notes.py"), str(there)]
    subprocess.run(command, check=True, cwd=home, env=surroundings)
    assert [path.name for path in sorted(here.iterdir())] == [path.name for path in sorted(there.iterdir())]
    for path in here.iterdir():
        assert path.read_bytes() == (there / path.name).read_bytes(), path.name


# --- wishes and wording -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "values", [{"colour": "red"}, {"voice": "they"}, {"order": "a"}, {"dropped": ["a"]}, {"own_words": {"a": 1}}]
)
def test_a_wish_that_cannot_be_met_is_refused_with_what_is_allowed(values):
    with pytest.raises(Refusal, match="Allowed"):
        wishes_from(values)


def test_wishes_are_read_from_their_file():
    wishes = wishes_from({"format": 1, "voice": "I", "order": ["a"], "dropped": {"b": "why"}, "own_points": ["c"]})
    assert wishes == NoteWishes(("a",), {"b": "why"}, ("c",), {}, Voice.I)


@pytest.mark.parametrize("voice", list(Voice))
def test_every_phrase_can_be_said(voice):
    phrases = phrases_for(voice)
    for table, entries in phrases.tables.items():
        if table in ("format", "limits", "order", "voice"):
            continue
        for key in entries:
            names = re.findall(r"\{(\w+)\}", entries[key])
            assert phrases.say(f"{table}.{key}", **dict.fromkeys(names, "x"))
