"""Issued reports: numbered, fingerprinted, and each names the one it replaces."""

import csv
import hashlib
import json
from functools import partial
from io import StringIO

import pytest
from small_laboratory import Line, a_day, signal, state_of

from calib.bench.issue_report import issue_report, issued_reports
from calib.bench.laboratory import Laboratory
from calib.bench.settings import set_roles
from calib.errors import InputError
from calib.report.files import render_report


def issue(bench, kind="json", **options):
    return issue_report(bench.store, 1, kind, partial(render_report, kind=kind), by="KM", **options)


@pytest.fixture
def approved(bench):
    set_roles(bench.store, "RS", ("reviewer",), by="QM")
    bench.log(a_day())
    Laboratory(bench.store, "RS").approve(1)
    return bench


def test_what_is_not_approved_is_a_draft_and_no_record_is_made(bench):
    bench.log(a_day())
    before = state_of(bench.store)
    for kind, mark in (("html", b"DRAFT"), ("csv", b"DRAFT"), ("json", b'"draft": true')):
        written = issue(bench, kind)
        assert written.stamp is None
        assert mark in written.content
    assert state_of(bench.store) == before


@pytest.mark.parametrize("kind", ["html", "csv", "json"])
def test_an_approved_run_is_issued_once_and_copied_after(approved, kind):
    first, second = issue(approved, kind), issue(approved, kind)
    assert b"DRAFT" not in first.content
    assert (first.stamp.number, first.copy, second.copy) == (1, False, True)
    assert second.content == first.content
    (record,) = issued_reports(approved.store, 1)
    assert record.fingerprint == hashlib.sha256(first.content).hexdigest()
    assert record.chain_head.encode() in first.content
    assert approved.laboratory.check().sound


def test_a_copy_is_the_same_bytes_after_others_wrote_to_the_store(approved):
    first = issue(approved, "html")
    approved.log(a_day(5.1), "next.csv", started="2026-03-31T08:00:00+02:00")
    assert issue(approved, "html").content == first.content


def test_a_report_that_replaces_another_needs_a_reason_and_names_it(approved):
    issue(approved)
    approved.laboratory.refit(1, reason="new library")
    assert issue(approved).stamp is None  # a draft again: the approval lapsed
    Laboratory(approved.store, "RS").approve(1)
    before = state_of(approved.store)
    with pytest.raises(InputError, match="run 1 changed since report 1 was issued"):
        issue(approved)
    assert state_of(approved.store) == before
    second = issue(approved, reason="fitted again")
    told = json.loads(second.content)
    assert (told["report"]["number"], told["report"]["replaces"]) == (2, 1)
    assert "replaces report 1 (fitted again)" in told["status"]
    assert [(r.number, r.in_force) for r in issued_reports(approved.store)] == [(1, False), (2, True)]


def test_a_spreadsheet_takes_no_cell_of_the_csv_for_a_formula(bench):
    wicked = ["=1+1", "+cmd", "-2+3", "@SUM(A1)"]
    bench.log(a_day(unknowns=[Line(name, "unknown", None, signal(3.0)) for name in wicked]))
    rows = list(csv.DictReader(StringIO(issue(bench, "csv").content.decode())))
    assert {f"'{name}" for name in wicked} <= {row["sample"] for row in rows}
    assert not [cell for row in rows for cell in row.values() if cell[:1] in "=+-@" and cell[:1]]


def test_a_void_run_gives_no_numbers(approved):
    approved.laboratory.void(1, reason="wrong cup")
    written = issue(approved, "csv")
    assert written.stamp is None
    rows = list(csv.DictReader(StringIO(written.content.decode())))
    assert {row["concentration"] for row in rows} == {""}
    assert {row["status"] for row in rows} == {"VOID: wrong cup"}
