"""calib method assess: recommendation, table, JSON, picture, and refusals in one line."""

import numpy as np
import pytest
from small_laboratory import LEVELS, METHOD, Line, header_block, signal, unknown


def bent_day(rng: np.random.Generator, curvature: float) -> list[Line]:
    return [
        *(
            Line(f"S{n}", "standard", x, signal(x) + curvature * x**2 + 0.05 * float(rng.standard_normal()))
            for n, x in enumerate(LEVELS, 1)
            for _ in range(2)
        ),
        unknown("U1", 3.0),
    ]


@pytest.fixture
def history(desk):
    def logged(days: int, curvature: float = 0.0):
        rng = np.random.default_rng(11)
        text = METHOD.format(name="line-a", analyte="alpha").replace("residual_sd = 0.2", "residual_sd = 9.0")
        desk("method", "add", desk.file("wide.toml", text))
        for day in range(1, days + 1):
            file = desk.file(
                f"d{day}.csv",
                header_block(bent_day(rng, curvature), started=f"2026-03-{day:02d}T08:00:00+02:00"),
            )
            assert desk("log", file).code == 0
        return desk

    return logged


def test_a_straight_method_keeps_its_line(history):
    desk = history(7)
    before = desk.state()
    outcome = desk("method", "assess", "line-a", "--to", desk.folder / "a.svg")
    assert (outcome.code, outcome.err) == (0, "")
    assert desk.state() == before
    assert outcome.out.startswith("line-a v2 on LX-1: model line and range, from 7 accepted runs")
    for words in ("keep line", "do not tell them apart", "detection capability", "new version of the method"):
        assert words in outcome.out
    assert (desk.folder / "a.svg").read_bytes().startswith(b"<?xml")


def test_a_bent_method_is_told_and_the_figures_are_in_json(history):
    desk = history(6, curvature=0.18)
    told = desk("method", "assess", "line-a", "--cv", 0.2, "--replicates", 3, "--json").json
    assert told["schema"] == "calib-assessment-1"
    larger = next(c for c in told["comparisons"] if c["larger"] == "quadratic")
    assert larger["larger_needed"]
    assert larger["nested"]["p"] < 0.01
    assert larger["aicc_difference"] > 4
    assert larger["worst_bias"] > larger["allowed_bias"]
    assert any("consider quadratic in a new version" in line for line in told["recommendation"])
    span = told["range"]
    assert (span["required_cv"], span["replicates"], span["runs"]) == (0.2, 3, 6)
    assert 1.0 <= span["working_lowest"] < span["working_highest"] <= 10.0
    assert 0 < span["critical"] < span["detectable"]
    profile = told["precision_profile"]
    assert all(p["cv"] > 0.2 for p in profile if p["concentration"] < 0.97 * span["working_lowest"])


def test_a_bend_that_costs_less_than_a_third_of_the_allowed_error_changes_no_model(history):
    told = history(6, curvature=0.12)("method", "assess", "line-a", "--json").json
    larger = next(c for c in told["comparisons"] if c["larger"] == "quadratic")
    assert larger["nested"]["p"] < 0.01
    assert larger["worst_bias"] < larger["allowed_bias"]
    assert not larger["larger_needed"]
    assert any(line.endswith("keep line") for line in told["recommendation"])


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("line-a",), "judged by at least 6"),
        (("line-b",), "line-b has no accepted run"),
        (("line-a", "--cv", "3"), "must lie above 0 and be at most 1"),
        (("line-a", "--replicates", "0"), "give at least 1"),
        (("line-a", "--to", "a.pdf"), "end the name in .svg or .png"),
    ],
    ids=str,
)
def test_what_cannot_be_assessed_is_one_line(worked, arguments, words):
    assert words in worked.refused("method", "assess", *arguments)
