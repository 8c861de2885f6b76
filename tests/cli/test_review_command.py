"""calib review, person, history and report on the command line."""

import json

import pytest


@pytest.fixture
def staffed(worked):
    for name, role in (("KM", "analyst"), ("RS", "reviewer")):
        assert worked("person", "set", name, "--role", role).code == 0
    return worked


def test_the_list_shows_exceptions_first_and_ends_with_a_count(staffed):
    outcome = staffed("review", "list")
    assert outcome.code == 0
    assert "rejected: the curve was rejected: no results" in outcome.out
    assert outcome.out.splitlines()[-1] == "3 runs, 2 with exceptions"
    told = staffed("review", "list", "--json").json
    assert told["schema"] == "calib-review-1"
    assert told["runs"][0]["exceptions"][0]["kind"] == "rejected"


def test_from_draft_to_issued_report(staffed, tmp_path):
    assert "DRAFT – not reviewed" in staffed("run", "show", 1).out
    page = tmp_path / "one.html"
    assert staffed("report", 1, "--to", page).out.startswith("DRAFT report of run 1 written")
    assert "DRAFT – not reviewed" in page.read_text()
    assert staffed("review", "approve", 1, "--by", "RS").out == "run 1 approved by RS\n"
    assert staffed("report", 1, "--to", page).out == f"report 1 of run 1 written to {page}\n"
    text = page.read_text()
    assert "Report 1, approved by RS" in text
    assert "DRAFT" not in text
    assert staffed("report", 1, "--to", page).out.startswith("a copy of report 1 of run 1")
    shown = staffed("run", "show", 1, "--json").json
    assert (shown["draft"], shown["review"]["state"]) == (False, "approved")
    assert staffed("store", "check").code == 0


def test_review_show_fits_again(staffed):
    assert "fitted again now: the same digits" in staffed("review", "show", 1).out
    told = staffed("review", "show", 2, "--json").json
    assert told["recalculated"]["same"] is True
    assert told["exceptions"][0]["kind"] == "rejected"


def test_return_needs_a_reason_and_shows_it(staffed):
    assert staffed("review", "return", 1, "--by", "RS").code == 2
    assert staffed("review", "return", 1, "--by", "RS", "--reason", "no blank").code == 0
    assert "DRAFT – returned by RS: no blank" in staffed("run", "show", 1).out


def test_the_analyst_is_refused_in_one_line(staffed):
    assert "is not registered as reviewer" in staffed.refused("review", "approve", 1, "--by", "KM")


def test_people_and_settings_are_listed(staffed):
    staffed("person", "setting", "late-after", "48 h", "--reason", "weekend")
    out = staffed("person", "list").out
    assert "late-after: 48 h (set by KM: weekend)" in out
    assert "own-work: refused (as calib comes)" in out
    told = staffed("person", "list", "--json").json
    assert [p["roles"] for p in told["people"]] == [["analyst"], ["reviewer"]]
    assert staffed("person", "set", "RS", "--reason", "left").out == "RS: no role any more\n"


def test_history_tells_each_entry(staffed):
    staffed("run", "amend", 1, "--operator", "ZZ", "--reason", "typo")
    out = staffed("history", "run", 1).out
    assert "operator KM → ZZ" in out
    told = staffed("history", "run", 1, "--json").json
    assert [e["action"] for e in told["entries"]] == ["log run", "amend run"]
    assert "known are" in staffed.refused("history", "colour", 1)


def test_a_report_as_json_says_what_it_is(staffed, tmp_path):
    page = tmp_path / "one.json"
    staffed("report", 1, "--to", page)
    told = json.loads(page.read_text())
    assert (told["draft"], told["report"], told["status"]) == (True, None, "DRAFT – not reviewed")
