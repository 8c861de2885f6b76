"""Prepared solutions in the store: tree, checks by a second person, dates, and runs that use them."""

from datetime import date

import pytest
from small_laboratory import a_day, header_block, state_of

from calib.bench.amend_run import Change
from calib.bench.plan_run import LogOptions, plan_file
from calib.bench.prepared_solutions import (
    PreparationRequest,
    confirm_preparation,
    list_solutions,
    prepare_solution,
    show_solution,
    solutions_from,
)
from calib.bench.register import LotRecord, add_lot
from calib.errors import InputError, NotFound
from calib.store import check_store

DAY = date(2026, 3, 20)


def request(name="W-1", parent="A-1", taken=10.0, made_up_to=100.0, **other) -> PreparationRequest:
    facts = {"unit": "mL", "prepared_on": DAY, "prepared_by": "KM"} | other
    return PreparationRequest(name, parent, taken, 0.01 * taken, made_up_to, 0.0, **facts)


@pytest.fixture
def tree(bench):
    """A-1 → W-1 → (L-1, L-2), and A-1 → W-2."""
    for each in (
        request(),
        request("W-2", taken=5.0),
        request("L-1", "W-1", taken=10.0),
        request("L-2", "W-1", taken=20.0),
    ):
        prepare_solution(bench.store, each, by="KM")
    return bench


def test_the_tree_from_the_lot_down(tree):
    assert [(s.name, s.depth, s.lot) for s in list_solutions(tree.store)] == [
        ("A-1", 0, "A-1"),
        ("W-1", 1, "A-1"),
        ("L-1", 2, "A-1"),
        ("L-2", 2, "A-1"),
        ("W-2", 1, "A-1"),
    ]
    assert [s.name for s in show_solution(tree.store, "L-2")] == ["A-1", "W-1", "L-2"]
    assert [s.name for s in solutions_from(tree.store, "W-1")] == ["L-1", "L-2"]


def test_value_and_uncertainty_follow_the_tree(tree):
    """By hand: the lot holds 100 mg/L with U 0.4 at k = 2; each volume taken has u of 1 %."""
    level = show_solution(tree.store, "L-2")[-1]
    assert level.value == pytest.approx(2.0)
    assert level.u == pytest.approx(2.0 * (0.002**2 + 2 * 0.01**2) ** 0.5)
    assert [p.name for p in level.parts if p.relative_u] == [
        "certified value of A-1",
        "volume taken for W-1",
        "volume taken for L-2",
    ]


def test_preparations_are_evidence_with_an_entry_each_in_the_chain(tree):
    assert tree.store.head()[0] >= 4
    assert check_store(tree.store).findings == ()


def test_a_second_person_checks_at_once_or_later(bench):
    assert prepare_solution(bench.store, request(checked_by="RS"), by="KM").checked_by == "RS"
    assert prepare_solution(bench.store, request("W-2"), by="KM").checked_by is None
    assert confirm_preparation(bench.store, "W-2", by="RS").checked_by == "RS"


@pytest.mark.parametrize(("name", "by", "words"), [
    ("W-1", "km", "km prepared it; a second person has to check it"),
    ("A-1", "RS", "'A-1' is a standard lot and was not prepared here"),
    ("Z", "RS", "unknown standard lot 'Z'; known are A-1, W-1"),
])  # fmt: skip
def test_a_check_that_is_none_is_refused(bench, name, by, words):
    prepare_solution(bench.store, request(), by="KM")
    with pytest.raises((InputError, NotFound), match=words):
        confirm_preparation(bench.store, name, by=by)


def test_a_preparation_is_checked_once(bench):
    prepare_solution(bench.store, request(checked_by="RS"), by="KM")
    with pytest.raises(InputError, match="was checked by RS already"):
        confirm_preparation(bench.store, "W-1", by="JT")


def test_a_solution_expires_with_what_it_is_made_of_unless_earlier(bench):
    lot = LotRecord("B-1", "beta", 10.0, "mg/L", 0.1, 2.0, date(2026, 6, 30), None, None, None)
    add_lot(bench.store, lot, by="KM")
    assert prepare_solution(bench.store, request("W", "B-1"), by="KM").expiry == date(2026, 6, 30)
    early = request("V", "B-1", expiry=date(2026, 4, 1))
    assert prepare_solution(bench.store, early, by="KM").expiry == date(2026, 4, 1)


@pytest.mark.parametrize(
    ("changed", "words"),
    [
        ({"name": "A-1"}, "standard lot 'A-1' is registered already"),
        ({"name": "W-1"}, "prepared solution 'W-1' is registered already"),
        ({"name": " "}, "the name of the solution is empty"),
        ({"parent": "Z"}, "unknown standard lot 'Z'; known are A-1, NC, OLD, W-1"),
        ({"parent": "NC"}, "standard lot 'NC' has no certified value with its U and k"),
        ({"parent": "OLD"}, "'OLD' expired on 2026-01-31, before 2026-03-20"),
        ({"parent": "W-1", "prepared_on": date(2026, 3, 1)}, "'W-1' was prepared on 2026-03-20, after 2026-03-01"),
        ({"expiry": date(2026, 3, 1)}, "lies before the day of preparation"),
        ({"parent": "W-1", "expiry": date(2027, 1, 1)}, "keeps no longer than what it is made of"),
        ({"taken": 200.0}, "200 taken cannot be made up to 100; exchange them"),
        ({"unit": "cup"}, "unknown unit of volume 'cup'"),
        ({"checked_by": "KM"}, "KM prepared it; a second person has to check it"),
    ],
)  # fmt: skip
def test_a_preparation_that_cannot_be_is_refused(bench, changed, words):
    nothing = (None, None, None)
    add_lot(bench.store, LotRecord("NC", "x", None, None, None, None, None, *nothing), by="KM")
    old = LotRecord("OLD", "x", 1.0, "mg/L", 0.1, 2.0, date(2026, 1, 31), *nothing)
    add_lot(bench.store, old, by="KM")
    prepare_solution(bench.store, request(expiry=date(2026, 12, 31)), by="KM")
    before = state_of(bench.store)
    with pytest.raises((InputError, NotFound), match=words):
        prepare_solution(bench.store, request(**({"name": "X"} | changed)), by="KM")
    assert state_of(bench.store) == before


def test_a_run_names_the_prepared_solution_its_standards_were_made_from(tree):
    record = tree.log(a_day(), standard_lot="W-1")
    assert (record.heading.lot, record.lot.name, record.lot.prepared) == ("W-1", "A-1", "W-1")
    assert tree.laboratory.run(record.heading.id).heading.lot == "W-1"


def test_an_amended_run_names_the_right_solution_and_tells_what_it_was(tree):
    number = tree.log(a_day(), standard_lot="W-1").heading.id
    record = tree.laboratory.amend(number, Change(operator="RS"), reason="typed the wrong name")
    assert record.heading.lot == "W-1"
    record = tree.laboratory.amend(number, Change(lot="W-2"), reason="the other flask")
    assert (record.heading.lot, record.amendments[-1].what) == ("W-2", "amended lot from W-1 to W-2")
    record = tree.laboratory.amend(number, Change(lot="A-1"), reason="the lot itself")
    assert (record.heading.lot, record.lot.prepared) == ("A-1", None)


def test_a_run_with_a_solution_out_of_date_is_refused(bench):
    prepare_solution(bench.store, request(expiry=date(2026, 3, 25)), by="KM")
    with pytest.raises(InputError, match="prepared solution W-1 expired on 2026-03-25, before this run"):
        bench.log(a_day(), standard_lot="W-1")


def test_a_run_measured_before_its_solution_was_prepared_says_so(bench):
    prepare_solution(bench.store, request(prepared_on=date(2026, 4, 2)), by="KM")
    file = bench.file("early.csv", header_block(a_day(), standard_lot="W-1"))
    (run,) = plan_file(bench.store, file, LogOptions(by="KM")).runs
    assert run.notes == ("prepared solution W-1 was prepared on 2026-04-02, after this run",)
