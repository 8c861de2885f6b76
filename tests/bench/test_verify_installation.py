"""The check values that ship with calib: the same as the reference cases, and kept with what came out."""

import json
from dataclasses import replace
from pathlib import Path

import pytest

from calib.bench import verify_installation as verifying
from calib.bench.verify_installation import check_values, list_verifications, published_cases

CASES = Path(__file__).parents[1] / "reference" / "cases"
SOURCES = {
    source: json.loads(path.read_text(encoding="utf-8"))
    for path in sorted(CASES.glob("*.json"))
    for source in [json.loads(path.read_text(encoding="utf-8"))["source"]]
}


def test_every_published_figure_comes_out_here():
    values = check_values()
    assert len(values) >= 70
    assert [v for v in values if not v.agrees] == []


@pytest.mark.parametrize("case", published_cases(), ids=lambda c: c["name"])
def test_each_case_has_a_source_and_the_readings_of_the_reference_case(case):
    reference = SOURCES[case["source"]]
    assert case["seen"] == reference["seen"]
    origin = reference.get("origin", 0.0)
    assert case["x"] == pytest.approx([x - origin for x in reference["x"]], abs=1e-9)
    assert case["y"] == reference["y"]


def test_the_result_is_kept_with_versions_and_machine(bench):
    record = verifying.verify_installation(bench.store, by="QM")
    assert (record.passed, record.by) == (True, "QM")
    assert {"calib", "numpy", "scipy", "python"} <= set(record.versions)
    (kept,) = list_verifications(bench.store)
    assert kept == record
    assert bench.laboratory.check().sound


def test_a_figure_that_differs_is_kept_too_and_fails(bench, monkeypatch):
    wrong = list(check_values())
    wrong[3] = replace(wrong[3], found=wrong[3].published + 2 * wrong[3].tolerance)
    wrong[4] = replace(wrong[4], found=None)
    monkeypatch.setattr(verifying, "check_values", lambda: tuple(wrong))
    record = verifying.verify_installation(bench.store, by="QM")
    assert not record.passed
    assert [v.agrees for v in record.values].count(False) == 2
    assert not list_verifications(bench.store)[0].passed


@pytest.mark.parametrize("share", [0.999, 1.001])
def test_a_figure_agrees_up_to_its_tolerance(share):
    value = replace(check_values()[0], published=1.0, tolerance=0.01, found=1.0 + share * 0.01)
    assert value.agrees is (share < 1)
