"""The multirule over runs: a check that drifts away is told beside the verdict."""

import pytest
from small_laboratory import Line, a_day, signal

from calib.bench.control_history import control_history


def log_days(bench, found):
    """One run a day, each with a check that reads so much of 5 mg/L."""
    for day, value in enumerate(found, start=1):
        lines = [line for line in a_day() if line.role != "check"]
        lines.append(Line("Q", "check", 5.0, signal(value)))
        bench.log(lines, f"{day}.csv", started=f"2026-03-{day:02d}T08:00:00+02:00")
    return len(found)


STEADY = [5.0 + 0.02 * (-1) ** n for n in range(12)]


@pytest.mark.parametrize(
    ("last", "rules"),
    [([5.0], []), ([5.2], ["1-2s", "1-3s"]), ([5.07, 5.07], ["1-2s", "2-2s"]), ([4.8], ["1-2s", "1-3s"])],
)
def test_a_check_that_leaves_its_history_fires_the_rule(bench, last, rules):
    number = log_days(bench, STEADY + last)
    found = control_history(bench.store, number)
    assert found.baseline == {"check 5": len(STEADY + last) - 1}
    assert [s.rule for s in found.signals] == rules
    assert len(found.lines) == len(rules)


def test_fewer_than_ten_runs_judge_nothing(bench):
    number = log_days(bench, [5.0, 5.1, 5.0])
    found = control_history(bench.store, number)
    assert (found.signals, found.baseline) == ((), {"check 5": 0})


def test_a_void_run_is_no_part_of_the_history(bench):
    number = log_days(bench, [*STEADY, 5.4, 5.0])
    bench.laboratory.void(number - 1, reason="wrong flask")
    assert control_history(bench.store, number).signals == ()
