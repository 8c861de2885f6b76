"""An outlying standard: proposed, left out by a person, and undone where the run stays noisy."""

import numpy as np
import pytest
from noisy_days import log_day
from small_laboratory import state_of

from calib.errors import InputError
from calib.report.html_report import render_run


def codes(record) -> set[str]:
    return {f.code for f in record.evaluation.curve.findings}


def with_history(bench, runs: int = 10):
    for n in range(runs):
        log_day(bench, n)
    return bench


def test_a_good_run_has_no_proposal(asking):
    records = [log_day(asking, n) for n in range(8)]
    assert [r.heading.id for r in records if r.evaluation.outlying is not None] == []


def test_a_reading_far_off_is_proposed_with_what_it_would_change(asking):
    with_history(asking)
    record = log_day(asking, 10, odd=2.5)
    proposal = record.evaluation.outlying
    assert (proposal.key, proposal.where, proposal.against) == (10, "S10 (10)", "the history")
    assert proposal.studentised > proposal.limit
    levels = [e for e in proposal.effects if e.kind == "level"]
    assert [round(e.before, 9) for e in levels] == [1, 2, 4, 6, 8, 10]
    assert max(abs(e.relative_change) for e in levels) > 0.005
    assert asking.laboratory.run(record.heading.id).evaluation.outlying == proposal


def test_the_proposal_is_left_out_by_a_person_and_both_curves_are_kept(asking):
    with_history(asking)
    record = log_day(asking, 10, odd=2.5)
    corrected = asking.laboratory.exclude(
        record.heading.id, ["#10"], reason="far off", reason_class="outlying"
    )
    assert corrected.evaluation.verdict.decision == "accepted with exclusions"
    assert corrected.curves_before == 1
    assert corrected.evaluation.outlying is None
    assert "noisy-run" not in codes(corrected)
    effects = {round(e.before, 9): e.after for e in record.evaluation.outlying.effects if e.kind == "level"}
    before = record.evaluation.curve.predict([4.0])
    slope, intercept = (corrected.evaluation.curve.parameters[n] for n in ("slope", "intercept"))
    assert effects[4.0] == pytest.approx((before[0] - intercept) / slope, rel=1e-9)
    assert asking.laboratory.check(all_curves=True).findings == ()


def refused(bench, number, which, message):
    before = state_of(bench.store)
    with pytest.raises(InputError, match=message):
        bench.laboratory.exclude(number, which, reason="far off", reason_class="outlying")
    assert state_of(bench.store) == before


def test_what_is_not_proposed_is_not_left_out_as_outlying(asking):
    with_history(asking)
    record = log_day(asking, 10, odd=2.5)
    number = record.heading.id
    refused(asking, number, ["#3"], r"only S10 \(10\) of run 11 is outlying.*assignable cause")
    refused(asking, number, ["#10", "#3"], r"only S10 \(10\) of run 11")
    refused(asking, 1, ["#10"], "no reading of run 1 is outlying")
    asking.laboratory.exclude(number, ["#10"], reason="far off", reason_class="outlying")
    refused(
        asking,
        number,
        ["#3"],
        r"S10 \(10\) of run 11 is left out as outlying already, and one reading at most",
    )
    asking.laboratory.exclude(number, ["#3"], reason="bubble", reason_class="assignable cause")


def test_a_run_that_stays_noisy_gets_its_reading_back_and_is_not_acceptable(asking):
    """All readings of the day scatter four times as much, and one lies far off on top of it."""
    with_history(asking)
    record = log_day(asking, 10, sd=0.04, odd=9.0)
    assert "noisy-run" in codes(record)
    assert record.evaluation.outlying.still_noisy
    after = asking.laboratory.exclude(record.heading.id, ["#10"], reason="far off", reason_class="outlying")
    assert "run-not-acceptable" in codes(after)
    assert after.evaluation.verdict.decision == "rejected"
    assert any("run not acceptable: without S10 (10)" in r for r in after.evaluation.verdict.reasons)
    assert after.curves_before == 2
    assert [s.key for s in after.evaluation.standards if s.excluded] == []
    np.testing.assert_allclose(after.evaluation.curve.values, record.evaluation.curve.values, rtol=1e-9)
    assert [a.what for a in after.amendments][:2] == ["excluded S10 (10), outlying", "restored S10 (10)"]
    assert asking.laboratory.check(all_curves=True).findings == ()
    refused(asking, record.heading.id, ["#10"], "run 11 is not acceptable: it stayed noisy without S10")


def test_the_report_says_it(asking):
    with_history(asking)
    page = render_run(log_day(asking, 10, odd=2.5))
    assert "Outlying reading" in page
    assert "proposed to be left out, by a person with a reason" in page
    assert "Noise history" in page
    assert "120 readings of 10 runs (1–10)" in page
