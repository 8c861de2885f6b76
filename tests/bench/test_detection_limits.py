"""Detection limits from what was logged, and the command that shows them."""

import pytest
from small_laboratory import a_day, unknown, with_response

from calib.bench.detection_limits import detection_limits
from calib.cli.main import run
from calib.errors import InputError, NotFound
from calib.quantification.curve_limits import curve_limits
from calib.quantification.detection import method_detection_limit

SPIKED = (1.9, 2.2, 2.05, 1.8, 2.3, 2.1, 1.95)


def log_spikes(bench):
    for day, value in enumerate(SPIKED, start=1):
        lines = a_day(unknowns=[unknown("SPIKE-1", value), unknown("U1", 3.0)])
        bench.log(lines, f"{day}.csv", started=f"2026-03-{day:02d}T08:00:00+02:00")
    bench.log(with_response(a_day(), 3, 40.0), "bad.csv")  # rejected: it counts for nothing


def test_limits_come_from_the_accepted_runs(bench):
    log_spikes(bench)
    found = detection_limits(bench.store, "LX-1", "line-a", spikes="SPIKE")
    assert found.runs == tuple(range(1, 8))
    assert found.latest == curve_limits(bench.laboratory.run(7).evaluation.curve)
    assert found.spikes == pytest.approx(SPIKED, abs=0.02)
    assert len(found.blanks) == 7
    assert found.method_limit == method_detection_limit(found.spikes, found.blanks)
    assert detection_limits(bench.store, "LX-1", "line-a").method_limit is None


def test_what_is_not_there_is_said(bench):
    with pytest.raises(NotFound, match="no accepted curve of LX-1 and method line-a"):
        detection_limits(bench.store, "LX-1", "line-a")
    bench.log(a_day(unknowns=[unknown("SPIKE-1", 2.0)]))
    with pytest.raises(InputError, match="no sample whose name begins with 'X'"):
        detection_limits(bench.store, "LX-1", "line-a", spikes="X")
    with pytest.raises(InputError, match="1 spiked samples: the procedure asks for at least 7"):
        detection_limits(bench.store, "LX-1", "line-a", spikes="SPIKE")


def test_the_command_names_the_procedure(bench, capsys):
    log_spikes(bench)
    store = str(bench.store.path)
    asked = ["--store", store, "method", "detection", "line-a", "--instrument", "LX-1", "--spikes", "SPIKE"]
    assert run(asked) == 0
    out = capsys.readouterr().out
    assert "method detection limit (7 spikes, 7 blanks)" in out
    assert "40 CFR 136" in out
    assert run([*asked, "--json"]) == 0
    assert '"schema": "calib-detection-1"' in capsys.readouterr().out
