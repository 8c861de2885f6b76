"""calib prove: tables, JSON, picture, quiet when piped, and refusals in one line."""

from calib.bench.prove import FIRST_SEED


def test_the_screen_tells_coverage_faults_and_what_is_not_covered(worked):
    before = worked.state()
    outcome = worked("prove", "line-a", "--runs", 20)
    assert (outcome.code, outcome.err) == (0, "")  # no bar where nobody watches
    assert worked.state() == before
    out = outcome.out
    assert out.splitlines()[0] == (
        "line-a v1 on LX-1: 20 clean runs and 20 with each fault, simulated as the method is; "
        f"seed {FIRST_SEED}"
    )
    assert "as the method assumes, with the residual SD of 1 accepted run" in out
    for words in (
        "Covered (95 % claimed)",
        "run rejected",
        "residual_sd not kept",
        "wrong lot: the standards hold 85 %",
        "the levels are taken as exact",
        "no heavy tails",
        "the validated method, local rules and accredited practice decide",
    ):
        assert words in out


def test_json_has_the_documented_keys_and_a_picture_can_be_had_too(worked):
    told = worked(
        "prove", "line-a", "--runs", 20, "--seed", 7, "--json", "--to", worked.folder / "p.svg"
    ).json
    assert told.keys() == {
        "schema",
        "method",
        "method_version",
        "instrument",
        "seed",
        "simulated",
        "confidence",
        "coverage",
        "read_in_faulty_runs",
        "criteria",
        "scenarios",
        "not_covered",
    }
    assert (told["schema"], told["seed"]) == ("calib-proof-1", 7)
    assert {c["replicates"] for c in told["coverage"]} == {1, 2, 3}
    first = told["coverage"][0]
    assert first["concentration"] == told["simulated"]["calibrated_range"]["lowest"] == 1.0
    assert first["covered"]["of"] <= 20
    assert first["covered"]["lower"] <= first["covered"]["share"] <= first["covered"]["upper"]
    assert told["scenarios"][0]["id"] == "clean"
    assert set(told["scenarios"][1]["not_kept"]) == {c["id"] for c in told["criteria"]}
    assert (worked.folder / "p.svg").read_bytes().startswith(b"<?xml")


def test_a_wrong_picture_or_method_is_refused_before_the_work(worked):
    assert "end the name in .svg or .png" in worked.refused("prove", "line-a", "--to", "p.pdf")
    assert "line-b has no accepted run" in worked.refused("prove", "line-b")
    assert worked("prove", "line-a", "--runs", 5).code == 2
