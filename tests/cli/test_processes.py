"""The command line as a process of its own: locks, pipes, interruption, and what it imports."""

import json
import os
import shutil
import sqlite3
import subprocess
import sys
from contextlib import closing
from pathlib import Path

import pytest

from calib.bench import set_up_demo
from calib.shipped import shipped

CALIB = (sys.executable, "-c", "from calib.cli.main import main; main()")


def start(*arguments: object, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*CALIB, *(str(a) for a in arguments)],
        capture_output=True,
        text=True,
        encoding="utf-8",
        timeout=120,
        check=False,
        env={**os.environ, "CALIB_BY": "KM", "PYTHONIOENCODING": "utf-8", **environment},
    )


def test_a_day_as_a_process(desk, day):
    done = start("--store", desk.store, "log", day)
    assert (done.returncode, done.stderr) == (0, "")
    assert "ACCEPTED" in done.stdout
    refused = start("--store", desk.store, "log", day)
    assert (refused.returncode, refused.stdout) == (1, "")
    assert refused.stderr.startswith("calib: day.csv: the same file is logged already as run 1")
    assert start("brew").returncode == 2


def test_a_locked_store_is_waited_for_and_then_named(desk, day):
    before = desk.state()
    with closing(sqlite3.connect(desk.store, isolation_level=None)) as other:
        other.execute("BEGIN IMMEDIATE")
        done = start("--store", desk.store, "log", day, CALIB_BUSY_SECONDS="0.1")
        assert (done.returncode, done.stdout) == (1, "")
        assert "another program holds it and did not let go in time" in done.stderr
        assert done.stderr.count("\n") == 1
        # Reading goes on meanwhile.
        assert start("--store", desk.store, "run", "list", CALIB_BUSY_SECONDS="0.1").returncode == 0
        other.execute("ROLLBACK")
    assert desk.state() == before


@pytest.mark.skipif(os.name != "posix", reason="pipes are closed in another way there")
@pytest.mark.parametrize(
    "arguments", [("run", "list"), ("run", "list", "--json"), ("run", "show", "1"), ("--help",)]
)
def test_a_reader_that_has_seen_enough_is_no_failure(worked, arguments):
    read, write = os.pipe()
    os.close(read)
    try:
        process = subprocess.run(
            [*CALIB, "--store", str(worked.store), *arguments],
            stdout=write,
            stderr=subprocess.PIPE,
            timeout=120,
            check=False,
        )
    finally:
        os.close(write)
    assert (process.returncode, process.stderr) == (0, b"")


@pytest.mark.parametrize("encoding", ["ascii", "cp1252"])
def test_a_terminal_that_lacks_a_sign_stops_nothing(worked, encoding):
    for arguments, code in ((("run", "show", "2"), 0), (("run", "refit", "2", "--reason", "µ ≥ Ω"), 3)):
        done = subprocess.run(
            [*CALIB, "--store", str(worked.store), *arguments],
            capture_output=True,
            timeout=120,
            check=False,
            env={**os.environ, "CALIB_BY": "KM", "PYTHONIOENCODING": encoding},
        )
        assert (done.returncode, done.stderr) == (code, b"")
    told = start("--store", worked.store, "run", "show", "2", "--json", PYTHONIOENCODING=encoding)
    assert json.loads(told.stdout)["amendments"][-1]["reason"] == "µ ≥ Ω"


LOOK = """
import json, sys
from calib.cli.main import run
code = run(sys.argv[1:])
print(json.dumps([code, sorted(sys.modules)]), file=sys.stderr)
"""


@pytest.mark.parametrize("json_option", [(), ("--json",)], ids=["screen", "json"])
def test_logging_on_an_existing_store_imports_nothing_it_does_not_need(desk, day, json_option):
    done = subprocess.run(
        [sys.executable, "-c", LOOK, "--store", str(desk.store), "log", str(day), "--by", "KM", *json_option],
        capture_output=True,
        text=True,
        timeout=120,
        check=True,
    )
    code, modules = json.loads(done.stderr.splitlines()[-1])
    assert code == 0
    unwanted = {"scipy.stats", "pandas", "matplotlib", "alembic", "openpyxl", "jinja2"}
    assert unwanted & set(modules) == set()
    if json_option:
        assert "rich" not in modules


def test_the_help_imports_no_numbers():
    done = subprocess.run(
        [sys.executable, "-c", LOOK, "--help"], capture_output=True, text=True, timeout=120, check=True
    )
    _, modules = json.loads(done.stderr.splitlines()[-1])
    assert {"numpy", "scipy", "sqlalchemy", "rich"} & set(modules) == set()


# The demo, on the last days of the season only.


@pytest.fixture
def short_season(tmp_path_factory, monkeypatch) -> Path:
    """The sample runs with two days and the second upload."""
    folder = tmp_path_factory.mktemp("short") / "sample_runs"
    whole = shipped("sample_runs")
    shutil.copytree(whole, folder, ignore=lambda _, names: [n for n in names if n == "season"])
    for pattern in ("*_2026-04-14*", "*_2026-05-29*"):
        for file in (whole / "season").rglob(pattern):
            target = folder / file.relative_to(whole)
            target.parent.mkdir(parents=True, exist_ok=True)
            shutil.copy(file, target)
    monkeypatch.setattr(set_up_demo, "shipped", lambda name: folder)
    return folder


def test_the_demo_sets_up_shows_and_writes(call, tmp_path, short_season):
    outcome = call("demo", "--into", str(tmp_path / "lab"))
    assert (outcome.code, outcome.err) == (0, "")
    assert "Ostrel Lake Laboratory (fictional): 8 files logged, 0 there before" in outcome.out
    assert "refused   OP-1_2026-04-14_again.csv" in outcome.out
    assert {f.name for f in (tmp_path / "lab").iterdir()} >= {"laboratory.db", "today.html", "drift_PP-2.png"}
    commands = [line.split() for line in outcome.out.splitlines() if line.startswith("  calib --store")]
    assert len(commands) == 3
    for command in commands:  # the commands to try next work as they are printed
        assert call(*command[1:]).code == 0


def test_a_demo_that_is_there_goes_on(call, tmp_path, short_season):
    first = call("demo", "--into", str(tmp_path / "lab"), "--json").json
    again = call("demo", "--into", str(tmp_path / "lab"), "--json").json
    assert (first["schema"], first["season"]["logged"], again["season"]["logged"]) == ("calib-demo-1", 8, 0)
    assert again["season"]["present"] == 8
    assert [run["run"]["id"] for run in again["today"]] == [run["run"]["id"] for run in first["today"]]


def test_an_interrupted_demo_keeps_what_was_logged_and_goes_on(call, tmp_path, short_season, monkeypatch):
    real = set_up_demo.log_plan
    logged = []

    def interrupted(store, evaluated):
        if len(logged) == 3:
            raise KeyboardInterrupt
        logged.append(evaluated.plan.file.name)
        return real(store, evaluated)

    monkeypatch.setattr(set_up_demo, "log_plan", interrupted)
    outcome = call("demo", "--into", str(tmp_path / "lab"))
    assert (outcome.code, outcome.err.strip()) == (1, "calib: stopped; what was logged before is kept")
    monkeypatch.setattr(set_up_demo, "log_plan", real)
    season = call("demo", "--into", str(tmp_path / "lab"), "--json").json["season"]
    assert (season["present"], season["logged"]) == (3, 5)
    assert call("--store", str(tmp_path / "lab" / "laboratory.db"), "store", "check").code == 0


def test_an_exclusion_that_an_interruption_prevented_is_made_up_for(
    call, tmp_path, short_season, monkeypatch
):
    spilled = "GB-4_2026-04-09.xlsx"
    shutil.copy(shipped("sample_runs") / "season" / "GB-4" / spilled, short_season / "season" / "GB-4")
    real = set_up_demo.exclude_readings

    def interrupted(*arguments, **named):
        raise KeyboardInterrupt

    monkeypatch.setattr(set_up_demo, "exclude_readings", interrupted)
    assert call("demo", "--into", str(tmp_path / "lab")).code == 1
    monkeypatch.setattr(set_up_demo, "exclude_readings", real)
    assert call("demo", "--into", str(tmp_path / "lab")).code == 0
    store = str(tmp_path / "lab" / "laboratory.db")
    decisions = {
        r["file"]: r["decision"] for r in call("--store", store, "run", "list", "--json").json["runs"]
    }
    assert decisions[spilled] == "accepted with exclusions"


def test_the_demo_leaves_a_folder_with_other_things_alone(call, tmp_path):
    (tmp_path / "lab").mkdir()
    (tmp_path / "lab" / "thesis.txt").write_text("mine")
    outcome = call("demo", "--into", str(tmp_path / "lab"))
    assert (outcome.code, "holds other files; choose an empty folder with --into" in outcome.err) == (1, True)
    assert [f.name for f in (tmp_path / "lab").iterdir()] == ["thesis.txt"]
    outcome = call("demo", "--into", str(tmp_path / "lab" / "thesis.txt"))
    assert (outcome.code, "no usable folder" in outcome.err) == (1, True)
