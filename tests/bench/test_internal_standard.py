"""The response of an internal standard is kept beside each reading, and judged where the method asks for it."""

import pytest
from small_laboratory import HEAD, METHOD, a_day, cell

from calib.bench.register import add_method
from calib.bench.sample_desk import show_sample
from calib.errors import CalibError

# EPA 200.8 (from memory): 60 to 125 % of the response in the calibration.
TEXT = METHOD.format(name="line-a", analyte="alpha") + '\n[results]\ninternal_standard = ["60 %", "125 %"]\n'


def with_internal_standard(lines, of_sample, **head):
    """A file with a column of internal standards: 1000 counts, and what is said of a sample."""
    facts = HEAD | head
    rows = [
        f"{n},{x.sample},{x.role},{cell(x.level)},{cell(x.response)},{of_sample.get(x.sample, 1000.0)}"
        for n, x in enumerate(lines, start=1)
    ]
    top = [f"# {key}: {value}" for key, value in facts.items()]
    return "\n".join([*top, "n,label,kind,alpha [mg/L],signal [mV],internal standard", *rows, ""])


@pytest.fixture
def ruled(bench):
    add_method(bench.store, bench.file("is.toml", TEXT), by="KM")
    return bench


def flags(record):
    return {q.sample: q.flags for q in record.evaluation.quantities if q.role == "unknown"}


@pytest.mark.parametrize(
    ("share", "kept"), [(0.60, True), (0.599, False), (1.25, True), (1.251, False), ("ND", False)]
)
def test_a_sample_keeps_its_internal_standard_or_is_measured_again(ruled, share, kept):
    answer = share if isinstance(share, str) else 1000 * share
    file = ruled.file("day.csv", with_internal_standard(a_day(), {"U2": answer}))
    (record,) = ruled.laboratory.log(file)
    assert ("internal-standard" in flags(record)["U2"]) is not kept
    assert "internal-standard" not in flags(record)["U1"]
    assert [r.internal_standard for r in ruled.laboratory.run(1).readings][:2] == [1000.0, 1000.0]
    (sample,) = show_sample(ruled.store, "U2")
    assert sample.state == ("review" if kept else "re-run")


def test_samples_measured_later_are_compared_with_the_standards_of_their_curve(ruled):
    ruled.laboratory.log(ruled.file("day.csv", with_internal_standard(a_day(), {})))
    lines = [line for line in a_day() if line.role == "unknown"]
    later = with_internal_standard(lines, {"U1": 500.0}, started="2026-04-01T15:00:00+02:00")
    (record,) = ruled.laboratory.quantify(ruled.file("later.csv", later))
    assert "internal-standard" in flags(record)["U1"]
    assert "internal-standard" not in flags(record)["U2"]


def test_a_file_without_internal_standards_keeps_none_of_the_limits(ruled):
    record = ruled.log(a_day())
    assert "internal-standard" in flags(record)["U1"]


@pytest.mark.parametrize("value", ["1", '["60 %"]', "[1.2, 0.6]", '["a", "b"]', "[true, 2]"])
def test_wrong_limits_are_refused(bench, value):
    text = TEXT.replace('["60 %", "125 %"]', value)
    with pytest.raises(
        CalibError, match=r"line 18: results.internal_standard = .* must be the least and largest"
    ):
        add_method(bench.store, bench.file("is.toml", text), by="KM")
