"""The proof of a method: its figures are those of the truth it simulates, and the store stays as it is."""

import shutil
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import binomtest
from small_laboratory import LEVELS, METHOD, Bench, Line, open_bench, signal, state_of, unknown

from calib.bench.method_history import history_of_method
from calib.bench.planted_faults import CLEAN, FAULTS, Fault, levels_of
from calib.bench.proof_records import Proof, Share
from calib.bench.prove import prove_method
from calib.bench.register import add_method
from calib.bench.simulated_runs import Asked, plan_of, simulated_runs, truth_of
from calib.errors import InputError, NotFound
from calib.models import response_model

RUNS, FAULTY = 120, 30
BY_KEY = {f.key: f for f in FAULTS}
RELATIVE = """name = "line-a"
analyte = "alpha"
concentration_unit = "mg/L"
response_unit = "mV"
model = "line"
noise = "uniform"
[acceptance]
preset = "plain"
relative_error = 0.9
relative_error_lowest = 0.9
relative_error_highest = 0.9
"""


def scattering_day(rng: np.random.Generator, relative: float = 0.0, sd: float = 0.05) -> list[Line]:
    """Standards in duplicate, a check, and two samples read twice."""

    def read(x: float) -> float:
        mean = signal(x)
        return float(mean + rng.standard_normal() * (sd + relative * mean))

    return [
        *(Line(f"S{n}", "standard", x, read(x)) for n, x in enumerate(LEVELS, 1) for _ in range(2)),
        Line("Q", "check", 5.0, read(5.0)),
        *(Line(name, "unknown", None, read(4.0)) for name in ("U1", "U2") for _ in range(2)),
    ]


def log_days(bench: Bench, days: int, relative: float = 0.0) -> None:
    rng = np.random.default_rng(5)
    for day in range(1, days + 1):
        bench.log(scattering_day(rng, relative), f"d{day}.csv", started=f"2026-03-{day:02d}T08:00:00+02:00")


@pytest.fixture(scope="module")
def practised_path(tmp_path_factory: pytest.TempPathFactory, registered_store: Path) -> Path:
    """A store with seven accepted days of constant scatter."""
    path = Path(shutil.copy(registered_store, tmp_path_factory.mktemp("practised") / "lab.db"))
    bench = open_bench(path)
    log_days(bench, 7)
    bench.laboratory.close()
    return path


@pytest.fixture
def practised(practised_path: Path, tmp_path: Path) -> Iterator[Bench]:
    bench = open_bench(Path(shutil.copy(practised_path, tmp_path / "practised.db")))
    yield bench
    bench.laboratory.close()


@pytest.fixture(scope="module")
def proof(practised_path: Path) -> Proof:
    bench = open_bench(practised_path)
    before, steps = state_of(bench.store), []
    proof = prove_method(bench.store, "line-a", runs=RUNS, seed=3, progress=lambda *done: steps.append(done))
    assert state_of(bench.store) == before
    assert steps[-1] == (RUNS + 5 * FAULTY, RUNS + 5 * FAULTY)
    bench.laboratory.close()
    return proof


def test_intervals_cover_what_they_claim_when_the_method_assumes_what_is_true(proof: Proof) -> None:
    # The cells of a run share its curve; of 120 runs the mean over all cells has a standard error near 1 %.
    assert overall(proof) == pytest.approx(0.95, abs=0.03)
    assert max(abs(c.bias or 0.0) for c in proof.cells) < 0.02
    assert proof.noise_source == "pooled over 7 accepted runs"
    lengths = {(c.concentration, c.replicates): c.relative_length or 9.0 for c in proof.cells}
    assert all(lengths[x, 3] < lengths[x, 1] for x, _ in lengths)


def overall(proof: Proof) -> float:
    return sum(c.covered.count for c in proof.cells) / sum(c.covered.of for c in proof.cells)


def test_a_method_that_assumes_the_wrong_noise_is_found_out(bench: Bench, tmp_path: Path) -> None:
    file = tmp_path / "relative.toml"
    file.write_text(RELATIVE, encoding="utf-8")
    add_method(bench.store, file, by="KM")
    log_days(bench, 12, relative=0.05)
    proof = prove_method(bench.store, "line-a", runs=60, seed=4)
    cells = [c for c in proof.cells if c.replicates == 1]
    # Scatter in proportion to the response, weighed alike: too wide at the bottom, too short at the top.
    assert (cells[0].covered.value or 0.0) >= 0.97
    assert min(c.covered.value or 1.0 for c in cells[-2:]) <= 0.90


def test_a_method_that_pools_its_noise_is_given_a_history_of_its_own(
    practised: Bench, tmp_path: Path
) -> None:
    file = tmp_path / "pooled.toml"
    file.write_text(
        METHOD.format(name="line-a", analyte="alpha").replace('"uniform"', '"history"'), encoding="utf-8"
    )
    add_method(practised.store, file, by="KM")
    proof = prove_method(practised.store, "line-a", runs=40, seed=9)
    assert (proof.version, proof.method_noise) == (2, "history")
    assert proof.clean.rejected.count == 0
    assert overall(proof) == pytest.approx(0.95, abs=0.06)


def test_faults_are_told_by_the_rules_that_see_them(proof: Proof) -> None:
    found = {s.key: s for s in proof.scenarios}
    assert list(found) == [CLEAN.key, *BY_KEY]
    # residual_sd may be 0.2, four times the scatter: only a gross error passes it.
    assert found["clean"].rejected.value == 0.0
    assert found["levels-exchanged"].fired["residual_sd"].value == 1.0
    assert found["wrong-lot"].fired["residual_sd"].value == 0.0
    # The curve knows nothing of a wrong lot: the check of another source alone does.
    assert [key for key, share in found["wrong-lot"].fired.items() if share.count] == ["check_recovery"]
    assert found["wrong-lot"].rejected.value == 1.0
    assert found["noise-doubled"].rejected.value == 0.0


def test_a_seed_repeats_every_figure(practised: Bench, proof: Proof) -> None:
    once, again = (prove_method(practised.store, "line-a", runs=20, seed=8) for _ in range(2))
    assert once == again
    assert once.seed == 8
    assert once.scenarios != proof.scenarios


def test_few_runs_leave_the_noise_the_method_assumes(bench: Bench) -> None:
    log_days(bench, 2)
    history = history_of_method(bench.store, "line-a")
    truth = truth_of(history)
    assert (truth.noise.label, truth.pooled) == ("uniform", 0)
    curves = [a.curve for a in history.accepted]
    assert truth.sd == pytest.approx(np.sqrt(np.mean([c.residual_sd**2 for c in curves])), rel=1e-12)


def test_the_noise_taken_as_true_is_that_of_the_runs(practised: Bench) -> None:
    truth = truth_of(history_of_method(practised.store, "line-a"))
    middle = np.array([5.0])
    sd = truth.sd * np.sqrt(truth.noise.variance(truth.model.response(middle, truth.parameters[0]), middle))
    # 70 degrees of freedom: a standard error of 8 %.
    assert sd[0] == pytest.approx(0.05, rel=0.3)
    assert truth.pooled == 7


def test_runs_that_do_not_count_teach_nothing(practised: Bench) -> None:
    practised.laboratory.void(3, reason="wrong solvent")
    practised.log([*scattering_day(np.random.default_rng(1), sd=9.0)], "bad.csv")
    history = history_of_method(practised.store, "line-a")
    assert [a.run.id for a in history.accepted] == [1, 2, 4, 5, 6, 7]
    assert [a.run.id for a in history_of_method(practised.store, "line-a", most=2).accepted] == [6, 7]


def test_samples_stand_where_they_stood_and_count_as_many(practised: Bench) -> None:
    history = history_of_method(practised.store, "line-a")
    plan = plan_of(history, [Asked(3.0, 2), Asked(7.0, 1), Asked(9.0, 3)])
    known = [(r.sample, x) for r, x in zip(plan.readings, plan.contents, strict=True) if r.role == "unknown"]
    assert known == [("U1", 3.0)] * 2 + [("U2", 7.0)] + [("U1", 9.0)] * 3
    assert [r.role for r in plan.readings] == ["standard"] * 12 + ["check"] + ["unknown"] * 6
    # A single known sample leaves the names of the others, so that as many samples are counted.
    assert {r.sample for r in plan_of(history, [Asked(3.0, 1)]).readings if r.role == "unknown"} == {
        "U1",
        "U2",
    }


def readings_of(practised: Bench, fault: Fault) -> tuple[np.ndarray, np.ndarray]:
    """Contents of the standards of fifty runs, read off the true curves without scatter, and their levels."""
    history = history_of_method(practised.store, "line-a")
    truth, plan = truth_of(history), plan_of(history, [Asked(3.0, 1)])
    line, p = response_model("line"), truth.parameters[0]
    quiet = type(truth)(truth.model, p[None], truth.noise, 0.0, truth.pooled, None)
    runs = simulated_runs(quiet, plan, fault, 50, np.random.default_rng(2))
    y = np.array([[r.response for r in run if r.role == "standard"] for run in runs.values()])
    levels = np.array([r.concentration for r in plan.readings if r.role == "standard"])
    return line.inverse(y, p), levels


def test_faults_are_what_they_say(practised: Bench) -> None:
    held, levels = readings_of(practised, CLEAN)
    np.testing.assert_allclose(held, np.broadcast_to(levels, held.shape), rtol=1e-9)
    held, _ = readings_of(practised, BY_KEY["levels-exchanged"])
    for row in held:
        changed = ~np.isclose(row, levels)
        assert changed.sum() == 4
        pair = np.unique(levels[changed])
        np.testing.assert_allclose(row[changed], np.where(levels[changed] == pair[0], pair[1], pair[0]))
    held, _ = readings_of(practised, BY_KEY["mis-pipetted"])
    ratio = held / levels
    assert (np.isclose(ratio, 1.0).sum(axis=1) == levels.size - 1).all()
    np.testing.assert_allclose(ratio.min(axis=1), 0.7)
    np.testing.assert_allclose(readings_of(practised, BY_KEY["wrong-lot"])[0] / levels, 0.85)
    held, _ = readings_of(practised, BY_KEY["top-saturated"])
    np.testing.assert_allclose(held.max(axis=1), 0.5 * (LEVELS[-1] + LEVELS[-2]))
    assert BY_KEY["noise-doubled"].scatter == 2.0


def test_levels_are_those_of_the_standards(practised: Bench) -> None:
    assert tuple(levels_of(history_of_method(practised.store, "line-a").latest.readings)) == LEVELS


@pytest.mark.parametrize(("count", "of"), [(0, 20), (3, 20), (95, 100), (1000, 1000)])
def test_the_interval_of_a_share_is_that_of_a_reference_library(count: int, of: int) -> None:
    expected = binomtest(count, of).proportion_ci(0.95, method="wilson")
    assert Share(count, of).interval == pytest.approx((expected.low, expected.high), abs=1e-12)


def test_nothing_of_nothing_is_no_share() -> None:
    assert (Share(0, 0).value, Share(0, 0).interval) == (None, None)


def test_what_cannot_be_proved_is_refused(practised: Bench) -> None:
    with pytest.raises(NotFound, match="line-b has no accepted run"):
        prove_method(practised.store, "line-b")
    with pytest.raises(NotFound, match="unknown method"):
        prove_method(practised.store, "line-x")
    with pytest.raises(InputError, match="at least 20"):
        prove_method(practised.store, "line-a", runs=5)
    with pytest.raises(InputError, match="seed"):
        prove_method(practised.store, "line-a", seed=-1)
    practised.log(
        [*scattering_day(np.random.default_rng(8)), unknown("V", 2.0)],
        "other.csv",
        instrument="LX-2",
        serial="78",
    )
    with pytest.raises(InputError, match="LX-1, LX-2; name one with --instrument"):
        prove_method(practised.store, "line-a")
    assert history_of_method(practised.store, "line-a", "LX-2").instrument == "LX-2"
