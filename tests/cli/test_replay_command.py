"""calib replay: the summary, the table of changed runs only, JSON, exit codes, and refusals in one line."""

import pytest
from small_laboratory import METHOD, a_day, header_block, unknown, with_response

from calib.bench.replay_records import Outcome, Replay, ReplayedMethod, ReplayedRun, Span
from calib.cli.replay_screen import summary

TEXT = METHOD.format(name="line-a", analyte="alpha")

EARLIER = "2026-03-29T08:00:00+02:00"


@pytest.fixture
def strict(worked):
    """A method file under which the accepted run of the worked store is rejected."""
    return worked.file("strict.toml", TEXT.replace("residual_sd = 0.2", "residual_sd = 0.01"))


def test_nothing_changes_under_the_same_version(worked):
    before = worked.state()
    outcome = worked("replay")
    assert (outcome.code, outcome.err) == (0, "")
    assert outcome.out.splitlines() == [
        "3 runs replayed: nothing would change",
        "  line-a, 3 runs under version 1: none would change",
    ]
    assert worked.state() == before


def test_only_the_runs_that_change_are_listed_and_a_rejection_is_no_failure(worked, strict):
    before = worked.state()
    outcome = worked("replay", "--with", strict)
    assert (outcome.code, outcome.err) == (0, "")  # no progress bar where nobody watches
    lines = outcome.out.splitlines()
    assert lines[0] == (
        "3 runs replayed, 2 would change: 1 verdict accepted → rejected; samples: 3 disappear of 6"
    )
    assert lines[1] == "  line-a, 3 runs under strict.toml: 2 would change"
    rows = [line.split() for line in lines[3:] if line.strip() and line.split()[0].isdigit()]
    assert [row[0] for row in rows] == ["1", "3"]
    assert "accepted → rejected" in outcome.out
    assert "residual standard" in outcome.out
    assert lines[-1] == "Only runs that would change are listed; nothing was written."
    assert worked.state() == before


def test_a_version_an_instrument_and_a_run_can_be_chosen(worked, strict):
    worked("method", "add", strict)
    assert "1 run replayed, 1 would change" in worked("replay", "line-a", "--version", 2, "--run", 1).out
    assert "nothing would change" in worked("replay", "line-a", "--version", 1).out
    assert "3 runs replayed, 2 would change" in worked("replay", "--instrument", "LX-1").out


def test_void_runs_are_counted(worked):
    worked("run", "void", 2, "--reason", "x")
    assert worked("replay").out.startswith("2 runs replayed (1 void left out): nothing would change")


def test_concentrations_and_ranges_are_told_before_and_after(worked):
    file = worked.file(
        "bent.toml", TEXT.replace('model = "line"', 'model = "quadratic"\nrequired_cv = 0.004')
    )
    worked("log", worked.file("off.csv", header_block(with_response(a_day(), 5, 22.4), started=EARLIER)))
    out = worked("replay", "--with", file, "--run", 4).out
    assert "1 working range; samples: 2 change of 2; largest change -0." in out
    assert " to 10 → " in out


def test_json_has_the_documented_keys_at_full_precision(worked, strict):
    told = worked("replay", "--with", strict, "--json").json
    assert told["schema"] == "calib-replay-1"
    assert told.keys() == {
        "schema",
        "methods",
        "runs",
        "void_runs_left_out",
        "samples",
        "verdict_changes",
        "sample_changes",
        "changed",
    }
    assert told["methods"] == [{"name": "line-a", "version": None, "file": "strict.toml", "runs": 3}]
    assert told["verdict_changes"] == [{"before": "accepted", "after": "rejected", "runs": 1}]
    first, later = told["changed"]
    assert (first["run"], later["run"], later["kind"]) == (1, 3, "unknowns")
    for outcome in (first["before"], first["after"]):
        assert outcome.keys() == {"decision", "reasons", "calibrated_range", "working_range"}
        assert outcome["working_range"].keys() == {"lowest", "highest", "unit"}
    shown = worked("run", "show", 1, "--json").json
    assert first["before"]["decision"] == shown["verdict"]["decision"]
    values = {q["sample"]: q["concentration"] for q in shown["quantities"]}
    assert {s["sample"]: s["before"]["concentration"] for s in first["samples"]} == values
    assert {(s["change"], s["after"], s["relative_change"]) for s in first["samples"]} == {
        ("disappears", None, None)
    }


def test_a_run_that_cannot_be_fitted_is_strict_json_too(worked):
    lines = [*with_response(a_day(), 1, 1e9)[:4], unknown("U1", 3.0)]
    worked("log", worked.file("odd.csv", header_block(lines, started=EARLIER)))
    file = worked.file("4.toml", TEXT.replace('model = "line"', 'model = "4PL"'))
    assert worked("replay", "--with", file, "--json").json["runs"] == 4


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("line-x",), "unknown method 'line-x'"),
        (("line-a", "--version", "9"), "version 9"),
        (("--version", "1"), "of which method"),
        (("--run", "77"), "there is no run 77"),
        (("--instrument", "LX-9"), "unknown instrument 'LX-9'"),
        (("--instrument", "LX-2"), "nothing to replay"),
        (("line-b",), "nothing to replay"),
        (("--with", "none.toml"), "none.toml: cannot be read"),
    ],
    ids=str,
)
def test_what_cannot_be_replayed_is_one_line(worked, arguments, words):
    assert words in worked.refused("replay", *arguments)


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        (
            '"mg/L"',
            '"ug/L"',
            "judged by version 1 of method line-a with concentrations in mg/L, but bad.toml",
        ),
        ('"mV"', '"V"', "responses in mV, but bad.toml has them in V"),
        ('"line"', '"knot"', "bad.toml: line 5: model"),
        ("[acceptance]", "[acceptance", "bad.toml: the method is not readable as TOML"),
    ],
)
def test_a_file_that_cannot_be_used_is_named(worked, old, new, words):
    assert words in worked.refused("replay", "--with", worked.file("bad.toml", TEXT.replace(old, new)))


def test_the_summary_counts_ranges_once_for_a_curve():
    accepted = Outcome("accepted", (), Span(1.0, 10.0), Span(1.0, 10.0))
    narrower = Outcome("accepted", (), Span(2.0, 10.0), Span(None, None))
    kinds = ("calibration", "unknowns")
    runs = tuple(
        ReplayedRun(n, kind, "LX-1", "line-a", 1, None, "mg/L", accepted, narrower, (), 4)  # type: ignore[arg-type]
        for n, kind in enumerate(kinds, start=1)
    )
    record = Replay((ReplayedMethod("line-a", 2, None, 2),), runs, 2, 1, 8)
    assert summary(record) == (
        "2 runs replayed (1 void left out), 2 would change: 1 working range; 1 calibrated range; "
        "samples: none of 8"
    )
