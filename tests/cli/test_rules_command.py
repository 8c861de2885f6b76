"""calib rules: why a run has its verdict, in words and as JSON."""

import re


def test_a_rejected_run_says_what_would_have_to_change(worked):
    out = worked("rules", "2").out
    assert out.startswith("REJECTED   run 2")
    assert "Not kept; each of these rejects the curve" in out
    assert re.search(r"✗ residual standard deviation at most 0\.2 .*\n +seen ", out)
    assert re.search(r"source   method line-a version 1", out)
    assert "S2 (3) would have to read between 1.6 and 2.4 mg/L" in out


def test_an_accepted_run_lists_what_was_kept_and_what_there_was_nothing_to_judge_by(worked):
    out = worked("rules", "1").out
    assert "Not kept" not in out
    assert out.index("Kept") < out.index(
        "✓ relative error of each standard above the lowest level at most 20 %"
    )


def test_a_run_of_unknowns_points_to_its_curve(worked):
    assert "unknowns read on the curve of run 1; these are the rules" in worked("rules", "3").out


def test_the_rules_as_json(worked):
    found = worked("rules", "2", "--json").json
    assert (found["schema"], found["decision"], found["preset"]) == ("calib-rules-1", "rejected", "plain")
    failed = {r["id"]: r for r in found["rules"] if not r["passed"] and not r["warns"]}
    assert {"relative_error", "residual_sd"} <= set(failed)
    assert all(r["remedy"] for r in failed.values())


def test_the_multirule_stands_beside_the_verdict(worked):
    out = worked("rules", "1").out
    assert "Controls and checks over the runs (multirule; no part of the verdict)" in out
    assert "too few runs to judge: check 5" in out
    assert worked("rules", "1", "--json").json["multirule"] == {
        "signals": [],
        "baseline_runs": {"check 5": 0},
    }


def test_an_unknown_run_is_refused(worked):
    assert "there is no run 99" in worked.refused("rules", "99")
