"""The quality manager's lists, each with what it must hold and nothing else."""

from datetime import datetime

import pytest
from small_laboratory import a_day, with_response

from calib.bench.actions import open_action
from calib.bench.audit import audit
from calib.bench.issue_report import issue_report
from calib.bench.laboratory import Laboratory
from calib.bench.settings import change_setting, set_roles
from calib.bench.verify_installation import verify_installation
from calib.report.audit_report import render_audit


def lists(bench, **period):
    return {each.key: each.rows for each in audit(bench.store, **period).lists}


@pytest.fixture
def audited(bench):
    """Run 1 approved by its own analyst and changed since its report, run 2 rejected and late, run 3 void."""
    set_roles(bench.store, "KM", ("analyst", "reviewer"), by="QM")
    change_setting(bench.store, "own-work", "allowed", by="QM", reason="one person")
    bench.log(a_day())
    bench.laboratory.approve(1)
    issue_report(bench.store, 1, "json", lambda record, stamp: repr(stamp).encode(), by="KM")
    bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    bench.log(with_response(a_day(), 3, 40.0), "bad.csv", started="2026-03-20T08:00:00+01:00")
    bench.log(a_day(5.1), "void.csv", started="2026-03-31T08:00:00+02:00")
    bench.laboratory.void(3, reason="wrong cup")
    return bench


def test_each_list_holds_its_runs(audited):
    found = lists(audited)
    assert [(row[0], row[-1]) for row in found["without-review"]] == [
        (2, "not reviewed"),
        (1, "changed since its review"),
    ]
    assert [row[0] for row in found["rejected"]] == [2]
    assert "relative error" in found["rejected"][0][-1] or "residual" in found["rejected"][0][-1]
    assert [row[0] for row in found["late-entries"]] == [2, 3]
    assert [(row[0], row[-1]) for row in found["outdated-reports"]] == [(1, "changed since")]
    assert found["expired-lots"] == ()
    assert found["chain"] == ()
    assert found["verification"][0][1].startswith("none of these versions")


def test_own_work_is_listed_as_a_decision_against_a_rule(audited):
    audited.laboratory.approve(1)
    found = lists(audited)["overrides"]
    assert [row[0] for row in found] == [1, 1]
    assert all(row[1].startswith("own work approved by KM") for row in found)


def test_the_rate_of_exclusions_counts_standard_readings(audited):
    (row,) = lists(audited)["exclusion-rate"]
    assert row[:2] == ("KM", "LX-1")
    assert row[3] >= 1
    assert row[4] == pytest.approx(100 * row[3] / row[2], abs=0.01)


def test_a_period_leaves_out_other_runs(audited):
    since = datetime.fromisoformat("2026-04-01T00:00")
    found = audit(audited.store, since=since)
    assert found.runs == 1
    assert {row[0] for each in found.lists if each.key == "without-review" for row in each.rows} == {1}


def test_open_actions_and_a_verification_are_seen(audited):
    open_action(audited.store, "run", "1", what="drop", by="QM")
    verify_installation(audited.store, by="QM")
    found = lists(audited)
    assert [row[3] for row in found["open-actions"]] == ["run 1"]
    assert found["verification"] == ()


def test_a_signal_is_listed_until_an_action_is_about_it(bench):
    for day in range(1, 25):
        slope = 5.0 + 0.002 * (day % 5) if day < 22 else 6.5
        bench.log(a_day(slope), f"{day}.csv", started=f"2026-03-{day:02d}T08:00:00+01:00")
    signals = lists(bench)["signals"]
    assert signals
    assert {row[0] for row in signals} == {"LX-1"}
    assert min(row[2] for row in signals) == 22
    open_action(bench.store, "instrument", "LX-1", what="lamp", by="QM")
    assert lists(bench)["signals"] == ()


def test_the_page_to_print_escapes_what_it_shows(audited):
    audited.laboratory.return_run(1, reason="<script>alert(1)</script>")
    open_action(audited.store, "run", "1", what="<script>alert(1)</script>", by="<b>QM</b>")
    page = render_audit(audit(audited.store))
    assert "<script>" not in page
    assert "&lt;script&gt;" in page


def test_a_reviewer_named_by_another_list_is_no_override(audited):
    set_roles(audited.store, "RS", ("reviewer",), by="QM")
    Laboratory(audited.store, "RS").approve(2)
    assert 2 not in {row[0] for row in lists(audited)["overrides"]}
