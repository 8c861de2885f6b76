"""Past runs under another version of their method: what would have changed, and nothing written."""

import math
from dataclasses import replace
from pathlib import Path

import pytest
from small_laboratory import METHOD, Line, a_day, standards, state_of, unknown, with_response

from calib.bench.evaluate import evaluate
from calib.bench.method_definition import read_definition
from calib.bench.register import add_method, list_methods
from calib.bench.replay import ReplayRequest, replay_runs
from calib.errors import CalibError, InputError, MethodError, NotFound, UnknownUnit, UnreadableFile
from calib.quantification.range import working_range

TEXT = METHOD.format(name="line-a", analyte="alpha")
DAYS = ("2026-03-30T08:00:00+02:00", "2026-03-31T08:00:00+02:00", "2026-04-01T08:00:00+02:00")
LATER = [unknown("L1", 3.0), unknown("L2", 7.0), unknown("L3", 14.0)]
OFF = (5, 22.4)  # S3 at 4 mg/L reads 1.6 to 2 % too high; the other readings scatter by at most 0.6 %
RULE = "relative_error = 0.01\n"


def three_days(bench) -> None:
    """The middle one has a reading that is off; all are accepted."""
    bench.log(a_day(), "one.csv", started=DAYS[0])
    bench.log(with_response(a_day(slope=5.02), *OFF), "two.csv", started=DAYS[1])
    bench.log(a_day(slope=5.04), "three.csv", started=DAYS[2])


def candidate(bench, *changes: tuple[str, str]) -> Path:
    """A method file that is not added, with passages of the present version replaced."""
    text = TEXT
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return bench.file("candidate.toml", text)


def stricter(bench, *rules: str) -> Path:
    return candidate(bench, ("residual_sd = 0.2\n", "".join(rules)))


def replayed(bench, file: Path | None = None, **request):
    """A replay, after which the store is as it was."""
    before = state_of(bench.store)
    found = replay_runs(bench.store, ReplayRequest(file=file, **request))
    assert state_of(bench.store) == before
    return found


def test_under_the_same_version_nothing_changes(bench):
    three_days(bench)
    bench.quantify(LATER)
    found = replayed(bench)
    assert (found.runs, found.void, found.changed, found.largest_change) == (4, 0, (), None)
    assert [(m.name, m.version, m.file, m.runs) for m in found.methods] == [("line-a", 1, None, 4)]


def test_a_tighter_limit_rejects_exactly_the_run_that_breaks_it(bench):
    three_days(bench)
    found = replayed(bench, stricter(bench, "residual_sd = 0.2\n", RULE))
    (run,) = found.changed
    assert (run.id, run.before.decision, run.after.decision) == (2, "accepted", "rejected")
    assert "S3" in run.first_reason
    assert run.changes == ("verdict", "samples")
    assert [(s.sample, s.change) for s in run.samples] == [("U1", "disappears"), ("U2", "disappears")]
    assert found.verdict_changes == {("accepted", "rejected"): 1}
    assert (found.sample_changes, found.samples, found.largest_change) == ({"disappears": 2}, 6, None)


def test_a_wider_limit_lets_results_appear(bench):
    bench.log(with_response(a_day(), 5, 30.0))
    file = stricter(bench, "residual_sd = 20\nrelative_error = 2.0\n")
    (run,) = replayed(bench, file).changed
    assert (run.before.decision, run.after.decision) == ("rejected", "accepted")
    assert run.first_reason == run.before.reasons[0]
    assert [(s.sample, s.change, s.before) for s in run.samples] == [
        ("U1", "appears", None),
        ("U2", "appears", None),
    ]


@pytest.mark.parametrize(
    "changes",
    [
        (('model = "line"', 'model = "quadratic"'),),
        (('noise = "uniform"', 'noise = "relative"'),),
        (('noise = "uniform"', 'noise = { assumed = "response", exponent = 1.0 }'),),
        (('model = "line"', 'model = "power-law"'), ('noise = "uniform"', 'noise = "power-of-mean"')),
    ],
    ids=lambda value: value[0][1],
)
def test_concentrations_are_those_of_a_direct_evaluation(bench, changes):
    three_days(bench)
    file = candidate(bench, *changes)
    definition = read_definition(file.read_text(), 2)
    found = replayed(bench, file)
    assert [run.id for run in found.changed] == [1, 2, 3]
    for run in found.changed:
        record = bench.laboratory.run(run.id)
        direct = evaluate(definition, record.readings)
        assert (run.before.decision, run.after.decision) == (
            record.evaluation.verdict.decision,
            direct.verdict.decision,
        )
        now = {q.sample: q for q in record.evaluation.quantities}
        then = {q.sample: q for q in direct.quantities}
        assert {s.sample for s in run.samples} == {"U1", "U2"}
        for s in run.samples:
            assert (s.before.concentration, s.before.lower) == (
                now[s.sample].concentration,
                now[s.sample].lower,
            )
            assert s.after.concentration == pytest.approx(then[s.sample].concentration, rel=1e-9)
            assert (s.after.lower, s.after.upper) == pytest.approx(
                (then[s.sample].lower, then[s.sample].upper), rel=1e-9
            )
    off = next(run for run in found.changed if run.id == 2)
    assert {s.change for s in off.samples} == {"concentration"}
    assert off.largest_change == max((s.relative_change for s in off.samples), key=abs)
    number, change = found.largest_change
    assert next(run for run in found.changed if run.id == number).largest_change == change
    assert abs(change) >= abs(off.largest_change)


def test_another_confidence_changes_the_intervals_alone(bench):
    bench.log(a_day())
    file = candidate(bench, ('noise = "uniform"', 'noise = "uniform"\ninterval_confidence = 0.99'))
    (run,) = replayed(bench, file).changed
    assert (run.changes, run.largest_change) == (("samples",), None)
    assert {s.change for s in run.samples} == {"interval"}
    assert all(s.after.lower < s.before.lower and s.before.upper < s.after.upper for s in run.samples)


def test_another_required_cv_changes_the_working_range(bench):
    bench.log(a_day())
    file = candidate(bench, ('noise = "uniform"', 'noise = "uniform"\nrequired_cv = 0.004'))
    (run,) = replayed(bench, file).changed
    assert run.changes == ("working range",)
    curve = bench.laboratory.run(1).evaluation.curve
    for outcome, cv in ((run.before, 0.2), (run.after, 0.004)):
        expected = working_range(curve, cv)
        assert outcome.working.lowest == pytest.approx(expected.lowest, rel=1e-9)
        assert outcome.working.highest == pytest.approx(expected.highest, rel=1e-9)
    assert run.after.working.lowest > run.before.working.lowest


def test_a_run_no_cv_is_met_in_has_no_working_range(bench):
    bench.log(with_response(a_day(), *OFF))
    file = candidate(bench, ('noise = "uniform"', 'noise = "uniform"\nrequired_cv = 0.001'))
    (run,) = replayed(bench, file).changed
    assert (run.after.working.lowest, run.after.working.highest) == (None, None)


def test_exclusions_in_force_are_respected(bench):
    three_days(bench)
    reason = {"reason": "bubble", "reason_class": "assignable cause"}
    bench.laboratory.exclude(2, ["#5"], **reason)
    bench.laboratory.exclude(1, ["S1", "#3"], **reason)
    bench.laboratory.restore(1, ["#3"], reason="the other one")
    assert replayed(bench).changed == ()
    assert replayed(bench, stricter(bench, "residual_sd = 0.2\n", RULE)).changed == ()
    file = candidate(bench, ('model = "line"', 'model = "quadratic"'))
    for run in replayed(bench, file).changed:
        direct = evaluate(read_definition(file.read_text(), 2), bench.laboratory.run(run.id).readings)
        assert run.after.decision == direct.verdict.decision
        assert run.after.calibrated.lowest == direct.verdict.lowest == (2.0 if run.id == 1 else 1.0)
        assert run.samples[0].after.concentration == pytest.approx(
            direct.quantities[1].concentration, rel=1e-9
        )


def test_later_unknowns_follow_their_curve(bench):
    bench.log(with_response(a_day(), *OFF), started=DAYS[2])
    later = bench.quantify(LATER)
    file = candidate(bench, ('model = "line"', 'model = "quadratic"'))
    run = next(r for r in replayed(bench, file).changed if r.kind == "unknowns")
    assert (run.id, run.sample_count) == (later.heading.id, 3)
    curve = evaluate(read_definition(file.read_text(), 2), bench.laboratory.run(1).readings).curve
    for s in run.samples:
        (value,) = curve.invert([next(m.response for m in later.readings if m.sample == s.sample)]).value
        assert s.after.concentration == pytest.approx(value, rel=1e-9)
    assert {s.sample for s in run.samples} == {"L1", "L2"}  # the third lies above the standards in both


def test_later_unknowns_have_no_result_when_their_curve_is_rejected(bench):
    bench.log(with_response(a_day(), *OFF), started=DAYS[2])
    bench.quantify(LATER)
    found = replayed(bench, stricter(bench, "residual_sd = 0.2\n", RULE), runs=(2,))
    (run,) = found.changed
    assert (run.kind, run.after.decision, run.first_reason) == (
        "unknowns",
        "rejected",
        run.after.reasons[0],
    )
    assert {s.change for s in run.samples} == {"disappears"}
    assert found.verdict_changes == {}  # the verdict is that of another run's curve


def test_a_shorter_validity_leaves_later_unknowns_without_a_curve(bench):
    bench.log(a_day(), started=DAYS[2])
    bench.quantify(LATER)  # seven hours later
    file = candidate(bench, ("24 h", "7 h"))
    assert replayed(bench, file).changed == ()
    (run,) = replayed(bench, candidate(bench, ("24 h", "6.9 h"))).changed
    assert (run.id, run.before.decision, run.after.decision) == (2, "accepted", "expired")
    assert run.first_reason == (
        "the curve of run 1 would have been valid for 6.9 h, and these samples were measured 7.0 h after it"
    )
    assert {s.change for s in run.samples} == {"disappears"}


def test_a_file_is_not_added(bench):
    three_days(bench)
    found = replayed(bench, stricter(bench, RULE))
    assert [(m.version, m.file) for m in found.methods] == [(None, "candidate.toml")]
    assert {m.version for m in list_methods(bench.store)} == {1}


def test_a_stored_version_gives_what_its_file_gave(bench):
    three_days(bench)
    file = stricter(bench, "residual_sd = 0.2\n", RULE)
    as_file = replayed(bench, file)
    add_method(bench.store, file, by="KM")
    as_version = replayed(bench, method="line-a", version=2)
    assert as_version.changed == as_file.changed
    assert replayed(bench).changed == as_file.changed  # the latest version where none is named
    assert replayed(bench, method="line-a", version=1).changed == ()


def test_void_runs_are_left_out_and_counted(bench):
    three_days(bench)
    bench.laboratory.void(2, reason="wrong rack")
    found = replayed(bench, stricter(bench, RULE))
    assert (found.runs, found.void, found.changed) == (2, 1, ())


def test_runs_are_chosen_by_instrument_method_and_number(bench):
    three_days(bench)
    bench.log(a_day(), "other.csv", instrument="LX-2", serial="78")
    bench.log(a_day(slope=7.0), "beta.csv", method="line-b")
    assert replayed(bench).runs == 5
    assert [m.name for m in replayed(bench).methods] == ["line-a", "line-b"]
    assert replayed(bench, instrument="LX-1").runs == 4
    assert replayed(bench, instrument="LX-1", method="line-a").runs == 3
    assert replayed(bench, runs=(1, 3)).runs == 2
    assert replayed(bench, candidate(bench)).runs == 4


def test_a_run_whose_curve_is_another_instruments_now_still_follows_it(bench):
    from calib.bench.amend_run import Change

    bench.log(a_day(), started=DAYS[2])
    bench.quantify(LATER)
    bench.laboratory.amend(2, Change(instrument="LX-2"), reason="the other bench")
    found = replayed(bench, instrument="LX-2")
    assert (found.runs, found.changed) == (1, ())


def test_a_run_with_nothing_left_to_fit_is_rejected(bench):
    text = TEXT.replace('noise = "uniform"', 'noise = "uniform"\nfit_blank = true')
    add_method(bench.store, bench.file("blank.toml", text), by="KM")
    bench.log([*standards()[:2], Line("B", "blank", None, 2.01), unknown("U1", 0.5)])
    bench.laboratory.exclude(1, ["S1"], reason="x", reason_class="other")
    (run,) = replayed(bench, method="line-a", version=1).changed or (None,)
    assert run is None  # rejected before and after
    assert replayed(bench).changed == ()


def test_units_are_those_of_the_method(bench):
    bench.log([replace(line, level=line.level and 1000 * line.level) for line in a_day()], unit="ug/L")
    assert replayed(bench).changed == ()
    (run,) = replayed(bench, candidate(bench, ('model = "line"', 'model = "quadratic"'))).changed
    assert run.unit == "mg/L"
    assert run.samples[0].after.concentration == pytest.approx(3.0, abs=0.1)


def test_runs_come_in_the_order_they_were_measured_and_progress_ends_at_all(bench):
    bench.log(with_response(a_day(), *OFF), "late.csv", started=DAYS[2])
    bench.log(with_response(a_day(slope=5.01), *OFF), "early.csv", started=DAYS[0])
    seen = []
    file = stricter(bench, "residual_sd = 0.2\n", RULE)
    found = replay_runs(bench.store, ReplayRequest(file=file), lambda done, of: seen.append((done, of)))
    assert [run.id for run in found.changed] == [2, 1]
    assert seen[-1] == (2, 2)


@pytest.mark.parametrize("batch", [1, 2])
def test_batches_do_not_change_the_outcome(bench, monkeypatch, batch):
    three_days(bench)
    bench.quantify(LATER)
    file = stricter(bench, "residual_sd = 0.2\n", RULE)
    whole = replayed(bench, file)
    monkeypatch.setattr("calib.bench.replay.BATCH", batch)
    assert replayed(bench, file) == whole


def test_what_no_report_shows_is_no_change(bench):
    bench.log(a_day())
    file = candidate(bench, ('model = "line"', 'model = "line"\nbounds = { slope = [0.1, 100.0] }'))
    assert replayed(bench, file).changed == ()


def test_the_laboratory_has_the_verb(bench):
    three_days(bench)
    assert bench.laboratory.replay(ReplayRequest(method="line-a")).runs == 3
    assert all(math.isfinite(r.at.timestamp()) for r in bench.laboratory.runs())


@pytest.mark.parametrize(
    ("request_", "error", "words"),
    [
        ({"method": "line-x"}, NotFound, "unknown method 'line-x'"),
        ({"method": "line-a", "version": 7}, NotFound, "unknown method 'line-a' version 7"),
        ({"instrument": "LX-9"}, NotFound, "unknown instrument 'LX-9'"),
        ({"runs": (99,)}, NotFound, "there is no run 99; the last one is 3"),
        ({"runs": (10**30,)}, NotFound, "there is no run"),
        ({"version": 1}, InputError, "version 1 of which method"),
        ({"method": "line-b"}, NotFound, "nothing to replay: no run fits"),
        ({"instrument": "LX-2"}, NotFound, "nothing to replay: no run fits"),
        ({"file": "none.toml"}, UnreadableFile, "cannot be read"),
    ],
    ids=str,
)
def test_what_cannot_be_replayed_is_refused_in_one_line(bench, request_, error, words):
    three_days(bench)
    if "file" in request_:
        request_ = {"file": bench.folder / request_["file"]}
    with pytest.raises(error, match=words) as caught:
        replayed(bench, **request_)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        (
            ('"mg/L"', '"ug/L"'),
            InputError,
            "with concentrations in mg/L, but candidate.toml has them in ug/L",
        ),
        (('"mV"', '"V"'), InputError, "with responses in mV, but candidate.toml has them in V"),
        (('"mg/L"', '"mg/pint"'), UnknownUnit, "candidate.toml: "),
        (('"line"', '"cubic"'), MethodError, "candidate.toml: line 5: model"),
        (('"line-a"', '"line-z"'), NotFound, "unknown method 'line-z'"),
    ],
    ids=lambda value: str(value[1]) if isinstance(value, tuple) else "",
)
def test_a_file_that_cannot_be_compared_is_refused(bench, change, error, words):
    three_days(bench)
    with pytest.raises(error, match=words):
        replayed(bench, candidate(bench, change))


def test_contradictions_are_refused(bench):
    three_days(bench)
    file = candidate(bench)
    with pytest.raises(InputError, match="defines method line-a, not line-b"):
        replayed(bench, file, method="line-b")
    with pytest.raises(InputError, match="a version and a file are two things"):
        replayed(bench, file, method="line-a", version=1)


def test_an_empty_store_and_a_void_one_have_nothing_to_replay(bench):
    with pytest.raises(CalibError, match="nothing to replay: no run fits"):
        replayed(bench)
    bench.log(a_day())
    bench.laboratory.void(1, reason="x")
    with pytest.raises(CalibError, match="nothing to replay: the 1 run that fits is void"):
        replayed(bench)
