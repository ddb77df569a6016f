"""Works are cited with seen fields only."""

import json

from rule_examples import BOOK, RULES

from reviewkit.references import bracketed_citation, citation, read_work, short_citation


def work(**changes):
    entry = {
        "id": "able2020",
        "title": "On things",
        "author": [{"family": "Able", "given": "Ann"}, {"family": "Baker", "given": "Bo"}],
        "issued": {"date-parts": [[2020]]},
        "container-title": "Journal of Things",
        "volume": "3",
        "issue": "2",
        "page": "1-9",
        "DOI": "10.1/x",
    }
    return read_work(
        {key: value for key, value in {**entry, **changes}.items() if value is not None}, "references.json"
    )


def test_a_complete_entry():
    assert (
        citation(work())
        == "Able, Ann and Bo Baker (2020). On things. Journal of Things 3(2), 1–9. https://doi.org/10.1/x"
    )
    assert short_citation(work()) == "Able and Baker (2020)"
    assert bracketed_citation(work()) == "Able and Baker 2020"


def test_missing_fields_leave_no_gaps():
    assert (
        citation(work(volume=None, issue=None, page=None, DOI=None))
        == "Able, Ann and Bo Baker (2020). On things. Journal of Things."
    )
    assert citation(work(author=[{"literal": "The Board"}], title="Why?", DOI=None)) == (
        "The Board (2020). Why? Journal of Things 3(2), 1–9."
    )


def test_many_authors_are_shortened():
    names = [{"family": letter} for letter in "ABCD"]
    assert short_citation(work(author=names[:3])) == "A, B and C (2020)"
    assert short_citation(work(author=names)) == "A et al. (2020)"
    assert short_citation(work(author=[*names[:2], {"literal": "and others"}])) == "A et al. (2020)"


def test_no_field_that_nobody_saw_is_in_the_book():
    for entry in json.loads((RULES / "references.json").read_text(encoding="utf-8")):
        assert entry["custom"]["verification_level"] in ("full", "details", "partial")
        assert set(entry["custom"]) == {"verification_level", "text_seen"}
        shown = citation(BOOK.references[entry["id"]])
        assert ("doi.org" in shown) is ("DOI" in entry)
        assert ".." not in shown
        assert "  " not in shown


def test_a_partly_seen_work_is_cited_without_what_was_not_seen():
    assert citation(BOOK.references["mullahy2024whytransform"]).endswith("Oxford Bulletin of Economics and Statistics.")
    assert short_citation(BOOK.references["koren2022dcas"]) == "Social Science Data Editors (2022)"
