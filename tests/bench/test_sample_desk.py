"""The samples desk: each sample in one state, with the reason."""

import pytest
from small_laboratory import METHOD, a_day, unknown, with_response

from calib.bench.register import add_method
from calib.bench.review_runs import approve_run
from calib.bench.sample_desk import list_samples, show_sample
from calib.bench.settings import set_roles
from calib.errors import NotFound

AGREEING = METHOD.format(name="line-a", analyte="alpha") + '\n[results]\ndilution_agreement = "20 %"\n'


def states(bench, **asked):
    return {s.sample: s.state for s in list_samples(bench.store, **asked)}


def one(bench, name):
    (record,) = show_sample(bench.store, name)
    return record


def test_each_sample_waits_for_what_it_needs(bench):
    bench.log(a_day(unknowns=[unknown("U1", 3.0), unknown("HIGH", 14.0), unknown("LOW", 0.2)]))
    assert states(bench) == {"U1": "review", "HIGH": "dilute", "LOW": "review"}
    assert one(bench, "U1").why == "run 1: not reviewed"
    assert one(bench, "HIGH").why.startswith(
        "run 1: above the highest standard: dilute and measure again (about × 5)"
    )


def test_samples_of_a_rejected_curve_wait_for_another_run(bench):
    bench.log(with_response(a_day(), 3, 40.0))
    assert set(states(bench).values()) == {"re-run"}
    assert one(bench, "U1").why == "run 1: the curve was rejected: no result"


def test_a_dilution_measured_later_takes_the_place_of_the_value_above_the_range(bench):
    bench.log(a_day(unknowns=[unknown("U1", 14.0)]))
    bench.quantify([unknown("U1", 2.8, dilution=5.0)])
    record = one(bench, "U1")
    assert (record.state, [r.run for r in record.counts]) == ("review", [2])
    assert record.dilutions.value == pytest.approx(14.0, abs=0.2)


def test_dilutions_that_disagree_are_measured_again(bench):
    add_method(bench.store, bench.file("agree.toml", AGREEING), by="KM")
    one_day = [unknown("U1", 8.0), unknown("U1", 1.2, dilution=5.0), unknown("U2", 8.0)]
    bench.log(a_day(unknowns=[*one_day, unknown("U2", 1.6, dilution=5.0)]))
    assert states(bench) == {"U1": "re-run", "U2": "review"}
    assert one(bench, "U1").why.startswith("its dilutions differ by 28.")
    assert [r.quantity.dilution for r in one(bench, "U2").counts] == [1.0]


def test_a_value_that_rises_with_the_dilution_is_told_as_a_hook(bench):
    add_method(bench.store, bench.file("agree.toml", AGREEING), by="KM")
    bench.log(a_day(unknowns=[unknown("U1", 4.0), unknown("U1", 4.0, dilution=5.0)]))
    assert one(bench, "U1").dilutions.hook
    assert one(bench, "U1").why.endswith("the value rises with the dilution, as with a hook")


def test_a_second_measurement_is_told_beside_the_one_that_counts(bench):
    bench.log(a_day(unknowns=[unknown("U1", 3.0)]))
    bench.quantify([unknown("U1", 3.1)])
    assert one(bench, "U1").why == "run 2: not reviewed; run 1 holds a value too"


def test_a_void_run_counts_no_longer(bench):
    bench.log(a_day())
    bench.laboratory.void(1, reason="wrong tray")
    assert one(bench, "U1").why == "every run that holds it is void"


def test_the_last_day_is_shown_unless_more_is_asked_for(bench):
    bench.log(a_day(unknowns=[unknown("OLD", 3.0)]), "old.csv", started="2026-03-30T08:00:00+02:00")
    bench.log(a_day())
    assert set(states(bench)) == {"U1", "U2"}
    everything = list_samples(bench.store, since=one(bench, "OLD").latest.date())
    assert {s.sample for s in everything} == {"OLD", "U1", "U2"}
    assert list_samples(bench.store, state="release") == ()


def test_an_unknown_sample_is_not_there(bench):
    with pytest.raises(NotFound, match="no run holds a sample 'X'"):
        show_sample(bench.store, "X")


@pytest.mark.parametrize(
    ("rule", "upper", "outcome"),
    [
        ("simple acceptance", 3.05, "pass"),
        ("guarded acceptance", 3.01, "fail"),
        ("simple acceptance", 2.9, "fail"),
        ("guarded rejection", 2.99, "pass"),
    ],
)
def test_a_statement_names_its_rule(bench, rule, upper, outcome):
    text = METHOD.format(name="line-a", analyte="alpha")
    text += f'\n[specification]\nupper = "{upper} mg/L"\ndecision_rule = "{rule}"\n'
    add_method(bench.store, bench.file("spec.toml", text), by="KM")
    bench.log(a_day(unknowns=[unknown("U1", 3.0), unknown("HIGH", 14.0), unknown("LOW", 0.2)]))
    (result,) = one(bench, "U1").results
    assert result.statement.outcome == outcome
    assert f"at most {upper} mg/L, {rule}" in result.statement.rule
    assert [one(bench, n).results[0].statement.outcome for n in ("HIGH", "LOW")] == ["undecided", "pass"]


def test_an_approved_sample_can_be_released_until_its_run_changes(bench):
    set_roles(bench.store, "RS", ("reviewer",), by="QM")
    bench.log(a_day(unknowns=[unknown("U1", 3.0)]))
    approve_run(bench.store, 1, by="RS")
    assert (one(bench, "U1").state, one(bench, "U1").why) == ("release", "run 1 is approved")
    bench.laboratory.exclude(1, ["#3"], reason="bubble")
    assert (one(bench, "U1").state, one(bench, "U1").why) == ("review", "run 1: changed since its review")
