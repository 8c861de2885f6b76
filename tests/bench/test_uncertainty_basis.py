"""Combined uncertainty in the store: what a run's budget rests on, and what is said to be missing."""

from datetime import date

import numpy as np
import pytest
from small_laboratory import METHOD, Line, a_day, signal, standards, state_of, unknown

from calib.bench.amend_run import Change
from calib.bench.prepared_solutions import PreparationRequest, prepare_solution
from calib.bench.register import add_method
from calib.bench.replay import ReplayRequest
from calib.store import check_store

SHIFTS = (0.03, -0.03, 0.02, -0.04, 0.03, -0.01, 0.02)


def day(shift: float = 0.0, *unknowns: Line) -> list[Line]:
    """A day whose check reads high by a fraction that its standards do not show."""
    return [
        *standards(),
        Line("Q", "check", 5.0, signal(5.0 * (1 + shift))),
        *(unknowns or (unknown("U1", 3.0), unknown("U2", 7.5))),
    ]


def log_days(bench, n, **head):
    for k, shift in enumerate(SHIFTS[:n]):
        bench.log(day(shift), f"day{k}.csv", started=f"2026-03-{10 + k}T08:00:00+02:00", **head)


def of(record, sample="U1"):
    (found,) = [q for q in record.evaluation.quantities if q.sample == sample]
    return found


def test_with_too_few_runs_it_is_the_curve_only_and_says_why(bench):
    log_days(bench, 5)
    record = bench.log(day())
    assert (of(record).kind, set(of(record).budget)) == (
        "curve only",
        {"repeatability of the reading", "curve"},
    )
    assert record.evaluation.basis.left_out[0] == (
        "between runs: 5 accepted runs with check standards or controls before this one, at least 6 are needed"
    )


def test_from_six_runs_on_it_is_combined_with_every_component_known(bench):
    log_days(bench, 6)
    record = bench.log(day())
    q = of(record)
    assert q.kind == "combined"
    assert q.u == pytest.approx(np.sqrt(sum(u**2 for u in q.budget.values())))
    # The check scatters by sd(shifts) in ln, nearly all of it between runs; the lot has U 0.4 of 100 at k = 2.
    assert q.budget["between runs"] / q.concentration == pytest.approx(
        np.std(np.log1p(SHIFTS[:6]), ddof=1), rel=0.02
    )
    assert q.budget["standard lot with its preparation"] == pytest.approx(0.002 * q.concentration)
    assert q.degrees_of_freedom < 8
    assert record.evaluation.basis.runs == (1, 2, 3, 4, 5, 6)
    assert (
        "provisional: the between-run component rests on 6 runs, fewer than 10"
        in record.evaluation.basis.left_out
    )


def test_what_was_logged_is_what_is_shown_later(bench):
    log_days(bench, 6)
    logged = bench.log(day())
    shown = bench.laboratory.run(7)
    assert shown.evaluation.quantities == logged.evaluation.quantities
    assert shown.evaluation.basis.relative == logged.evaluation.basis.relative
    assert shown.evaluation.basis.left_out == logged.evaluation.basis.left_out
    assert check_store(bench.store).findings == ()


def test_a_later_run_does_not_count_for_an_earlier_one_logged_after_it(bench):
    log_days(bench, 6)
    record = bench.log(day(), started="2026-03-12T20:00:00+02:00")
    assert record.evaluation.basis.runs == (1, 2, 3)
    assert of(record).kind == "curve only"


def test_rejected_and_void_runs_do_not_count(bench):
    log_days(bench, 7)
    bench.laboratory.void(2, reason="wrong tray")
    record = bench.log(day())
    assert record.evaluation.basis.runs == (1, 3, 4, 5, 6, 7)


def test_the_lot_stays_whole_however_many_readings_there_are(bench):
    log_days(bench, 6)
    many = [unknown("U", 3.0 + 0.01 * (-1) ** k) for k in range(8)]
    record = bench.log(day(0.0, unknown("V", 3.0), *many))
    lot = "standard lot with its preparation"
    one, eight = of(record, "V"), of(record, "U")
    assert eight.budget[lot] / eight.concentration == pytest.approx(one.budget[lot] / one.concentration)
    assert eight.budget["repeatability of the reading"] < one.budget["repeatability of the reading"] / 2.5


def test_a_prepared_solution_brings_its_whole_tree(bench):
    request = PreparationRequest("W-1", "A-1", 10.0, 0.1, 100.0, 0.0, "mL", date(2026, 3, 1), "KM")
    prepare_solution(bench.store, request, by="KM")
    log_days(bench, 6)
    q = of(bench.log(day(), standard_lot="W-1"))
    expected = np.hypot(0.002, 0.01) * q.concentration
    assert q.budget["standard lot with its preparation"] == pytest.approx(expected)


def test_another_lot_changes_the_budget_and_nothing_else(bench):
    request = PreparationRequest("W-1", "A-1", 10.0, 0.5, 100.0, 0.0, "mL", date(2026, 3, 1), "KM")
    prepare_solution(bench.store, request, by="KM")
    log_days(bench, 6)
    before = bench.log(day())
    after = bench.laboratory.amend(7, Change(lot="W-1"), reason="the working solution was used")
    assert of(after).concentration == of(before).concentration
    assert of(after).budget["standard lot with its preparation"] == pytest.approx(
        np.hypot(0.002, 0.05) * of(after).concentration
    )
    assert check_store(bench.store).findings == ()


def test_the_method_states_dilution_and_levels(bench, tmp_path):
    file = tmp_path / "stated.toml"
    file.write_text(
        METHOD.format(name="line-a", analyte="alpha")
        + "\n[budget]\ndilution = 0.02\nlevel_preparation = 0.01\n",
        encoding="utf-8",
    )
    add_method(bench.store, file, by="KM")
    log_days(bench, 6)
    record = bench.log(day(0.0, unknown("U1", 3.0), unknown("D", 3.0, dilution=10.0)))
    plain, diluted = of(record), of(record, "D")
    assert "dilution" not in plain.budget
    assert diluted.budget["dilution"] == pytest.approx(0.02 * diluted.concentration)
    assert 0 < plain.budget["preparation of the levels"] < 0.01 * plain.concentration
    assert not any("dilution" in s for s in record.evaluation.basis.left_out)


def test_samples_of_another_day_carry_the_scatter_of_the_curves(bench):
    for k, shift in enumerate(SHIFTS):
        lines = [*standards(5.0 * (1 + shift)), *day(shift)[12:]]
        bench.log(lines, f"day{k}.csv", started=f"2026-03-{10 + k}T22:00:00+02:00")
    same = bench.quantify([unknown("U1", 3.0)], "same.csv", started="2026-03-16T23:00:00+02:00")
    other = bench.quantify([unknown("U1", 3.0)], "other.csv", started="2026-03-17T08:00:00+02:00")
    assert "curve of another day" not in of(same).budget
    # Slopes scatter by sd(shifts); twice the variance of one curve.
    relative = of(other).budget["curve of another day"] / of(other).concentration
    assert relative == pytest.approx(np.sqrt(2) * np.std(SHIFTS[:6], ddof=1), rel=0.1)
    assert of(other).u > of(same).u


def test_a_replay_under_the_same_version_changes_no_combined_interval(bench):
    log_days(bench, 7)
    before = state_of(bench.store)
    assert bench.laboratory.replay(ReplayRequest()).changed == ()
    assert state_of(bench.store) == before


def test_a_refit_keeps_the_basis(bench):
    log_days(bench, 6)
    logged = bench.log(a_day())
    again = bench.laboratory.refit(7, reason="look again")
    assert of(again).budget == pytest.approx(of(logged).budget)
    assert of(again).kind == "combined"
