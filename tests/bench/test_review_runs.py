"""The second person: exceptions first, never the analyst unless a setting says so, and what lapses."""

from datetime import timedelta

import pytest
from small_laboratory import NOW, Bench, a_day, header_block, state_of, unknown, with_response

from calib.bench.amend_run import Change
from calib.bench.laboratory import Laboratory
from calib.bench.register import LotRecord, add_lot
from calib.bench.review_runs import approve_run, return_run, runs_to_review
from calib.bench.settings import change_setting, list_people, set_roles
from calib.errors import InputError, StoreError

LATER = "2026-04-01T15:00:00+02:00"


@pytest.fixture
def staffed(bench: Bench) -> Bench:
    """KM measures and RS reviews; run 1 is logged."""
    set_roles(bench.store, "KM", ("analyst",), by="QM")
    set_roles(bench.store, "RS", ("reviewer",), by="QM")
    bench.log(a_day())
    return bench


def as_reviewer(bench: Bench) -> Laboratory:
    return Laboratory(bench.store, "RS")


def state(bench: Bench, number: int = 1) -> str:
    return bench.laboratory.run(number).review.state


def test_a_run_is_a_draft_until_a_reviewer_approved_it(staffed):
    assert state(staffed) == "not reviewed"
    record = as_reviewer(staffed).approve(1, comment="looked at the plate plan too")
    assert (record.review.state, record.review.by, record.review.own_work) == ("approved", "RS", False)
    assert staffed.laboratory.check().sound


@pytest.mark.parametrize(
    ("by", "words"),
    [
        ("KM", "KM is not registered as reviewer"),
        ("XX", "XX is not registered as reviewer"),
    ],
)
def test_only_a_reviewer_reviews(staffed, by, words):
    before = state_of(staffed.store)
    with pytest.raises(InputError, match=words):
        approve_run(staffed.store, 1, by=by)
    assert state_of(staffed.store) == before


@pytest.mark.parametrize("name", ["KM", "km", " KM "])
def test_nobody_approves_what_they_had_a_hand_in(staffed, name):
    set_roles(staffed.store, "KM", ("analyst", "reviewer"), by="QM", reason="holiday cover")
    with pytest.raises(InputError, match="had a hand in run 1: a second person has to review it"):
        approve_run(staffed.store, 1, by=name)


def test_who_corrected_a_run_had_a_hand_in_it(staffed):
    Laboratory(staffed.store, "RS").refit(1, reason="new library")
    with pytest.raises(InputError, match="RS had a hand in run 1"):
        as_reviewer(staffed).approve(1)


def test_a_setting_allows_own_work_and_the_record_says_so(staffed):
    set_roles(staffed.store, "KM", ("analyst", "reviewer"), by="QM", reason="one-person laboratory")
    change_setting(staffed.store, "own-work", "allowed", by="QM", reason="one-person laboratory")
    record = staffed.laboratory.approve(1)
    assert (record.review.approved, record.review.own_work) == (True, True)


@pytest.mark.parametrize(
    "correct",
    [
        lambda lab: lab.refit(1, reason="x"),
        lambda lab: lab.exclude(1, ["#3"], reason="x"),
        lambda lab: lab.amend(1, Change(operator="ZZ"), reason="x"),
        lambda lab: lab.amend(1, Change(samples=(("U1", "U9"),)), reason="x"),
        lambda lab: lab.amend(1, Change(dilutions=(("U1", 10.0),)), reason="x"),
    ],
    ids=["refit", "exclude", "operator", "sample", "dilution"],
)
def test_every_correction_makes_an_approval_lapse(staffed, correct):
    as_reviewer(staffed).approve(1)
    correct(staffed.laboratory)
    assert state(staffed) == "changed since its review"
    assert as_reviewer(staffed).approve(1).review.approved
    assert [r.decision for r in reviews(staffed)] == ["approved", "approved"]


def reviews(bench):
    from sqlalchemy import select

    from calib import store as tables

    with bench.store.reading() as session:
        return session.scalars(select(tables.Review).order_by(tables.Review.id)).all()


def test_a_returned_run_waits_for_its_analyst_and_keeps_the_reason(staffed):
    record = return_run(staffed.store, 1, by="RS", reason="the blank is missing")
    assert (record.review.state, record.review.comment) == ("returned", "the blank is missing")
    assert runs_to_review(staffed.store) == ()
    with pytest.raises(InputError, match="returned already, by RS"):
        return_run(staffed.store, 1, by="RS", reason="again")
    with pytest.raises(InputError, match="returned for a reason"):
        return_run(staffed.store, 1, by="RS", reason=" ")


def test_unknowns_are_approved_only_on_an_approved_curve(staffed):
    later = staffed.quantify([unknown("U7", 7.0)], started=LATER).heading.id
    with pytest.raises(InputError, match="read on the curve of run 1, which is not approved"):
        as_reviewer(staffed).approve(later)
    as_reviewer(staffed).approve(1)
    as_reviewer(staffed).approve(later)
    assert state(staffed, later) == "approved"
    return_run(staffed.store, 1, by="RS", reason="second thoughts")
    assert state(staffed, later) == "its curve is not approved"


def test_a_void_run_is_not_reviewed(staffed):
    staffed.laboratory.void(1, reason="wrong cup")
    with pytest.raises(InputError, match="void"):
        as_reviewer(staffed).approve(1)
    assert runs_to_review(staffed.store) == ()


def test_the_list_puts_exceptions_first_and_names_them(staffed):
    staffed.log(with_response(a_day(), 3, 40.0), "bad.csv", started="2026-04-01T09:00:00+02:00")
    staffed.laboratory.exclude(2, ["#3"], reason="drop fell in", reason_class="assignable cause")
    first, second = runs_to_review(staffed.store)
    assert (first.run.id, second.run.id) == (2, 1)
    kinds = {e.kind: e.what for e in first.exceptions}
    assert kinds["exclusion"] == "S2 (3) by KM, assignable cause: drop fell in"
    assert kinds["repeat of the day"] == "one of 2 calibrations that day"
    assert kinds["correction"] == "fitted again by KM: drop fell in"
    assert [e.kind for e in second.exceptions] == ["repeat of the day"]


def test_failed_rules_late_entries_expired_lots_and_strangers_are_exceptions(staffed):
    add_lot(
        staffed.store,
        LotRecord(
            "OLD", "alpha", None, None, None, None, (NOW - timedelta(days=30)).date(), None, None, None
        ),
        by="KM",
    )
    lines = with_response(a_day(), 14, 60.0)  # the check standard reads far too high
    text = header_block(lines, started="2026-03-20T08:00:00+01:00", standard_lot="OLD", operator="ZZ")
    staffed.laboratory.log(staffed.file("late.csv", text), lot_override="no other bottle")
    (line,) = [x for x in runs_to_review(staffed.store) if x.run.id == 2]
    kinds = {e.kind: e.what for e in line.exceptions}
    assert kinds["expired lot"] == "standard lot OLD used on 2026-03-20, expired 2026-03-02"
    assert "no other bottle" in kinds["override"]
    assert kinds["late entry"] == "logged 12 d after it was measured"
    assert kinds["person"] == "measured by ZZ, who is not registered as analyst"
    change_setting(staffed.store, "late-after", "30 d", by="QM", reason="monthly import")
    (line,) = [x for x in runs_to_review(staffed.store) if x.run.id == 2]
    assert "late entry" not in {e.kind for e in line.exceptions}


def test_roles_change_with_a_reason_and_stay_on_record(staffed):
    with pytest.raises(InputError, match="give the reason for the change"):
        set_roles(staffed.store, "rs", (), by="QM")
    set_roles(staffed.store, "rs", (), by="QM", reason="left the laboratory")
    assert {p.name: p.roles for p in list_people(staffed.store)} == {"KM": ("analyst",), "RS": ()}
    (first, second) = staffed.laboratory.history("person", "RS")
    assert (first.reason, second.reason) == (None, "left the laboratory")
    assert ("reviewer", True, False) in second.rows[0].changes
    with pytest.raises(InputError, match="not registered as reviewer"):
        as_reviewer(staffed).approve(1)


def test_two_reviews_of_one_run_in_force_are_refused_by_the_schema(staffed):
    from calib import store as tables

    as_reviewer(staffed).approve(1)
    held = reviews(staffed)[0]
    with (
        pytest.raises(StoreError, match="one version of this run_id is in force"),
        staffed.store.change("approve run", "RS") as session,
    ):
        session.add(
            tables.Review(
                run_id=1,
                decision="approved",
                facts_id=held.facts_id,
                curve_id=held.curve_id,
                exceptions=[],
                own_work=False,
                by="RS",
                at=NOW,
            )
        )


@pytest.mark.parametrize(
    ("name", "value", "words"),
    [
        ("colour", "red", "unknown setting 'colour'"),
        ("own-work", "maybe", "own-work is refused or allowed, not 'maybe'"),
        ("late-after", "soon", "late-after = 'soon' must be a time"),
    ],
)
def test_a_wrong_setting_is_refused(bench, name, value, words):
    with pytest.raises(InputError, match=words):
        change_setting(bench.store, name, value, by="QM", reason="x")
