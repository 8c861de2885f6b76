"""Traces: back to certificate and file, forward to every result, superseded ones named."""

import pytest
from small_laboratory import a_day, unknown

from calib.bench.laboratory import Laboratory
from calib.bench.settings import set_roles
from calib.bench.trace_back import trace_back
from calib.bench.trace_forward import trace_forward
from calib.errors import InputError, NotFound
from calib.report.figures import affected_figure, trace_figure
from calib.report.files import picture

LATER = "2026-04-01T15:00:00+02:00"


@pytest.fixture
def worked_bench(bench):
    """Run 1 with a curve that is superseded once; run 2 of unknowns on it, read again."""
    bench.log(a_day())
    bench.quantify([unknown("U7", 7.0)], started=LATER)
    bench.laboratory.exclude(1, ["#3"], reason="a bubble")
    return bench


def keys(trace):
    return {t.key for t in trace.things}


def leads(trace):
    return {(s.source, s.target) for s in trace.steps}


def test_a_result_leads_back_to_certificate_file_people_and_versions(bench):
    bench.log(a_day())
    trace = trace_back(bench.store, "U1")
    assert keys(trace) == {
        "standard_lot 1",
        "instrument 1",
        "method 1",
        "original 1",
        "run 1",
        "curve 1",
        "quantity 2",
    }
    things = {t.key: dict(t.facts) for t in trace.things}
    assert things["original 1"]["fingerprint"] == bench.laboratory.run(1).heading.fingerprint
    assert things["run 1"]["operator"] == "KM"
    assert "scipy" in things["curve 1"]["versions"]
    assert things["curve 1"]["levels"] == "1, 2, 4, 6, 8, 10"
    assert leads(trace) >= {
        ("standard_lot 1", "run 1"),
        ("original 1", "run 1"),
        ("run 1", "curve 1"),
        ("curve 1", "quantity 2"),
    }
    assert (trace.chain_sequence, trace.chain_head) == bench.store.head()
    assert all(t.entry for t in trace.things)


def test_a_superseded_result_names_its_successor_and_stays_in_the_trace(worked_bench):
    trace = trace_back(worked_bench.store, "U7")
    by_key = {t.key: t for t in trace.things}
    assert by_key["curve 1"].superseded_by == "curve 2"
    gone = [t for t in trace.things if t.key.startswith("quantity") and t.superseded_by]
    assert len(gone) == 1
    assert ("run 2", gone[0].key) in leads(trace)
    assert ("curve 1", gone[0].key) in leads(trace)


def test_reviews_and_reports_follow_the_version_they_saw(worked_bench):
    set_roles(worked_bench.store, "RS", ("reviewer",), by="QM")
    Laboratory(worked_bench.store, "RS").approve(1)
    worked_bench.laboratory.refit(1, reason="again")
    trace = trace_back(worked_bench.store, "U1")
    (step,) = [s for s in trace.steps if s.target == "review 1"]
    seen = next(t for t in trace.things if t.key == step.source)
    assert seen.superseded_by is not None


@pytest.mark.parametrize(
    ("kind", "name"), [("lot", "A-1"), ("instrument", "LX-1"), ("layout", "header-block")]
)
def test_every_result_is_found_from_where_it_came(worked_bench, kind, name):
    worked_bench.log(a_day(5.1), "b.csv", started="2026-03-31T08:00:00+02:00", standard_lot=None)
    found = trace_forward(worked_bench.store, kind, name)
    assert {1, 2} <= set(found.runs)
    assert (3 in found.runs) == (kind != "lot")
    assert {q.sample for q in found.quantities} >= {"U1", "U2", "U7", "Q"}
    assert {q.superseded_by is not None for q in found.quantities} == {True, False}


def test_from_a_superseded_curve_only_what_was_read_on_it_and_what_replaced_that(worked_bench):
    found = trace_forward(worked_bench.store, "curve", "1")
    own = [q for q in found.quantities if q.run == 1]
    assert {q.curve for q in own} == {1}
    assert all(q.superseded_by for q in own)
    assert {(q.curve, q.superseded_by is None) for q in found.quantities if q.run == 2} == {
        (1, False),
        (2, True),
    }


def test_an_amended_lot_is_still_traced_from_the_first_one(bench):
    from calib.bench.amend_run import Change
    from calib.bench.register import LotRecord, add_lot

    bench.log(a_day())
    add_lot(bench.store, LotRecord("B-2", "x", None, None, None, None, None, None, None, None), by="KM")
    bench.laboratory.amend(1, Change(lot="B-2"), reason="wrong bottle noted")
    for lot in ("A-1", "B-2"):
        assert trace_forward(bench.store, "lot", lot).runs == (1,)


def test_what_cannot_be_traced_is_said(worked_bench):
    worked_bench.log(a_day(), "b.csv", started="2026-03-31T08:00:00+02:00")
    with pytest.raises(InputError, match="'U1' was measured in runs 1, 3; name one with --run"):
        trace_back(worked_bench.store, "U1")
    assert "run 3" in keys(trace_back(worked_bench.store, "U1", run=3))
    for sample in ("none", "#99", "#99999999999999999999"):
        with pytest.raises(NotFound):
            trace_back(worked_bench.store, sample)
    for kind, name in (("lot", "none"), ("curve", "99"), ("curve", "x"), ("moon", "1")):
        with pytest.raises(NotFound):
            trace_forward(worked_bench.store, kind, name)


def test_both_ways_have_a_picture(worked_bench):
    back = picture(trace_figure(trace_back(worked_bench.store, "U7")), "svg")
    assert back.startswith(b"<?xml")
    forward = picture(affected_figure(trace_forward(worked_bench.store, "lot", "A-1")), "svg")
    assert len(forward) > 10_000
