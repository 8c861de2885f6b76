"""noise = "history" in a method: which runs are pooled, what is kept, and what is never pooled again."""

from datetime import timedelta

import pytest
from noisy_days import FIRST, day, log_day
from small_laboratory import METHOD, header_block, state_of

from calib.bench.log_run import evaluate_plan, log_plan
from calib.bench.plan_run import LogOptions, plan_file
from calib.bench.register import add_method
from calib.bench.replay import ReplayRequest
from calib.curves.history_noise import HistoryNoise
from calib.errors import InputError


def codes(record) -> set[str]:
    return {f.code for f in record.evaluation.curve.findings}


def test_five_accepted_runs_make_a_history(asking):
    records = [log_day(asking, n) for n in range(7)]
    for record in records[:5]:
        assert record.evaluation.history is None
        assert "variance-from-one-run" in codes(record)
    sixth, seventh = records[5:]
    assert [p.run for p in sixth.evaluation.history.past] == [r.heading.id for r in records[:5]]
    assert [p.curve for p in seventh.evaluation.history.past] == [r.curve_id for r in records[:6]]
    assert "variance-from-one-run" not in codes(sixth)
    curve = seventh.evaluation.curve
    assert isinstance(curve.noise, HistoryNoise)
    assert curve.noise.readings == 6 * 12
    assert curve.coverage_freedom > curve.degrees_of_freedom


def test_what_was_pooled_is_kept_and_read_back(asking):
    records = [log_day(asking, n) for n in range(6)]
    logged, shown = records[-1].evaluation, asking.laboratory.run(records[-1].heading.id).evaluation
    assert shown.history == logged.history
    assert shown.curve.scale == pytest.approx(logged.curve.scale, rel=1e-14)
    assert shown.curve.coverage_freedom == logged.curve.coverage_freedom
    assert shown.quantities[0].upper == logged.quantities[0].upper


def test_rejected_void_and_later_runs_are_not_pooled(asking):
    for n in range(6):
        log_day(asking, n)
    rejected = log_day(asking, 6, sd=0.3)
    assert rejected.evaluation.verdict.decision == "rejected"
    asking.laboratory.void(1, reason="wrong standards")
    late = log_day(asking, 30)
    assert [p.run for p in late.evaluation.history.past] == [2, 3, 4, 5, 6]
    between = log_day(asking, 20)
    assert [p.run for p in between.evaluation.history.past] == [2, 3, 4, 5, 6]


def test_runs_of_an_earlier_version_count_where_model_and_units_are_the_same(bench):
    for n in range(5):
        log_day(bench, n, sd=0.002)
    text = METHOD.format(name="line-a", analyte="alpha").replace('"uniform"', '"history"')
    add_method(bench.store, bench.file("history.toml", text), by="KM")
    assert log_day(bench, 5, sd=0.002).evaluation.history is not None
    other = text.replace('model = "line"', 'model = "quadratic"')
    add_method(bench.store, bench.file("other.toml", other), by="KM")
    assert log_day(bench, 6, sd=0.002).evaluation.history is None


def test_a_correction_keeps_the_noise_model_and_the_check_never_pools_again(asking):
    records = [log_day(asking, n) for n in range(7)]
    last = records[-1]
    asking.laboratory.void(1, reason="wrong standards")
    corrected = asking.laboratory.exclude(last.heading.id, ["#10"], reason="bubble")
    assert corrected.evaluation.history == last.evaluation.history
    assert (
        asking.laboratory.refit(last.heading.id, reason="look again").evaluation.history
        == last.evaluation.history
    )
    check = asking.laboratory.check(all_curves=True)
    assert check.findings == ()
    assert check.curves == 7


def test_a_replay_of_the_same_version_changes_nothing(asking):
    for n in range(7):
        log_day(asking, n)
    asking.laboratory.void(1, reason="wrong standards")
    replay = asking.laboratory.replay(ReplayRequest())
    assert (replay.runs, replay.changed) == (6, ())


def test_a_replay_under_history_pools_the_accepted_runs_before_each(bench):
    """Six runs were judged with uniform noise; the last would have had a history of five."""
    for n in range(6):
        log_day(bench, n, sd=0.002)
    text = METHOD.format(name="line-a", analyte="alpha").replace('"uniform"', '"history"')
    before = state_of(bench.store)
    replay = bench.laboratory.replay(ReplayRequest(file=bench.file("history.toml", text)))
    assert replay.runs == 6
    assert state_of(bench.store) == before


def test_a_history_that_changed_between_reading_and_writing_is_refused(asking):
    for n in range(6):
        log_day(asking, n)
    file = asking.file("next.csv", header_block(day(7), started=(FIRST + timedelta(days=7)).isoformat()))
    evaluated = evaluate_plan(plan_file(asking.store, file, LogOptions(by="KM")))
    asking.laboratory.void(3, reason="wrong standards")
    before = state_of(asking.store)
    with pytest.raises(InputError, match="past runs of LX-1 and method line-a changed meanwhile"):
        log_plan(asking.store, evaluated)
    assert state_of(asking.store) == before


def test_a_noisy_day_is_told_and_rests_on_its_own_scatter(asking):
    for n in range(12):
        log_day(asking, n)
    noisy = log_day(asking, 12, sd=0.03)
    assert "noisy-run" in codes(noisy)
    assert noisy.evaluation.curve.scale == pytest.approx(noisy.evaluation.curve.residual_sd)
