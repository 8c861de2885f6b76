"""The screen and the JSON of a run with a noise history and an outlying reading."""

import pytest
from noisy_days import ASKING, file_of


@pytest.fixture
def odd_day(desk):
    """The eleventh day of a method with its noise from history: one reading lies far off."""
    assert desk("method", "add", desk.file("history.toml", ASKING), "--by", "KM").code == 0
    for n in range(11):
        file = desk.file(f"{n}.csv", file_of(n, odd=2.5 if n == 10 else 0.0))
        assert desk("log", file, "--by", "KM").code == 0
    return desk


def test_run_show_and_rules_tell_it(odd_day):
    shown = odd_day("run", "show", 11).out
    assert "noise history: 120 readings of 10 runs (1–10)" in shown
    assert "of this run alone: it scatters more than its history" in shown
    assert "moderated by its history" in odd_day("run", "show", 10).out
    assert "S10 (10) at level 6 does not belong to the run" in shown
    assert "without it: level 1 " in shown
    assert "proposed to be left out" in odd_day("rules", 11).out


def test_the_json_holds_it(odd_day):
    entry = odd_day("run", "show", 11, "--json").json
    history = entry["curve"]["noise_history"]
    assert history["runs"] == list(range(1, 11))
    assert history["readings"] == 120
    assert history["family"] in ("power-of-mean", "additive-relative")
    calm = odd_day("run", "show", 10, "--json").json["curve"]
    assert calm["interval_degrees_of_freedom"] > calm["degrees_of_freedom"]
    outlying = entry["outlying_reading"]
    assert (outlying["reading"], outlying["where"], outlying["last_of_end_level"]) == (
        "#10",
        "S10 (10)",
        False,
    )
    assert {e["kind"] for e in outlying["effects"]} == {"level"}
    assert odd_day("run", "show", 1, "--json").json["curve"]["noise_history"] is None
