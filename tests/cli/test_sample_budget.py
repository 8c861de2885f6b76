"""calib run show RUN --sample NAME: budget, ends of the curve, and the cross-check by Monte Carlo."""

import pytest


def test_the_budget_of_a_sample(worked):
    out = worked("run", "show", 1, "--sample", "U1").out
    assert "U1:" in out
    assert "curve only" in out
    assert "repeatability of the reading" in out
    assert "100.0 %" in out
    assert "curve only: between runs: 0 accepted runs" in out


def test_its_json_adds_up(worked):
    shown = worked("run", "show", 1, "--sample", "U1", "--json").json
    (q,) = shown["quantities"]
    assert (shown["schema"], shown["monte_carlo"]) == ("calib-run-sample-1", [])
    assert sum(line["share"] for line in q["budget_details"]) == pytest.approx(1.0)
    assert sum(line["u"] ** 2 for line in q["budget_details"]) == pytest.approx(q["u"] ** 2)
    assert q["asymptote_index"] == {"zero": None, "infinite": None}  # a line has no ends


def test_a_cross_check_with_its_seed_agrees_and_repeats(worked):
    arguments = ("run", "show", 1, "--sample", "U1", "--monte-carlo", "--seed", 7, "--json")
    first = worked(*arguments).json
    (q,), (drawn,) = first["quantities"], first["monte_carlo"]
    length = q["upper"] - q["lower"]
    assert drawn["seed"] == 7
    assert drawn["lower"] == pytest.approx(q["lower"], abs=0.03 * length)
    assert drawn["upper"] == pytest.approx(q["upper"], abs=0.03 * length)
    assert worked(*arguments).json == first
    out = worked("run", "show", 1, "--sample", "U1", "--monte-carlo").out
    assert "by propagating distributions: from" in out


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("run", "show", 1, "--sample", "Z"), "run 1 has no sample 'Z'; it has"),
        (("run", "show", 1, "--monte-carlo"), "--monte-carlo needs --sample"),
        (("run", "show", 2, "--sample", "U1", "--monte-carlo"), "nothing to check"),
    ],
)
def test_what_cannot_be_shown_is_refused(worked, arguments, words):
    assert words in worked.refused(*arguments)
