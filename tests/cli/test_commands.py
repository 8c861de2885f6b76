"""Every command: its help, its exit code, what it shows, and that a preview writes nothing."""

import re

import pytest
from small_laboratory import METHOD, a_day, header_block, unknown, with_response

from calib.cli.main import COMMANDS, cli
from calib.shipped import shipped


def commands(group=cli, path=()):
    """Every command of the command line with its path."""
    for name in group.list_commands(None):
        command = group.get_command(None, name)
        yield (*path, name), command
        if hasattr(command, "list_commands"):
            yield from commands(command, (*path, name))


COMMAND_LINE = list(commands())
PATHS = [path for path, _ in COMMAND_LINE]
PATHS_IN_WORDS = [" ".join(path) for path in PATHS]


@pytest.mark.parametrize("path", [(), *PATHS], ids=" ".join)
def test_every_command_has_help(call, path):
    for option in ("--help", "-h"):
        outcome = call(*path, option)
        assert (outcome.code, outcome.err) == (0, "")
        assert outcome.out.startswith(f"Usage: {' '.join(('calib', *path))} ")


@pytest.mark.parametrize(("path", "command"), COMMAND_LINE, ids=PATHS_IN_WORDS)
def test_every_option_and_command_says_what_it_is_for(path, command):
    assert command.help
    assert [p.name for p in command.params if p.param_type_name == "option" and not p.help] == []


def test_the_help_lists_every_command_with_its_line(call):
    out = call("--help").out
    for name, (_, line) in COMMANDS.items():
        assert re.search(rf"^  {name} +{re.escape(line[:30])}", out, re.MULTILINE)
    assert "3 logged but a run rejected" in " ".join(out.split())


def test_the_version_is_told(call):
    assert re.fullmatch(r"calib \d+\.\d+\.\d+\n", call("--version").out)


@pytest.mark.parametrize(
    "arguments",
    [
        (),
        ("brew",),
        ("run",),
        ("run", "show"),
        ("run", "show", "one"),
        ("run", "show", "1", "--colour"),
        ("run", "exclude", "1", "S1"),
        ("run", "exclude", "1", "--reason", "x"),
        ("run", "list", "--last", "0"),
        ("log",),
        ("event", "add", "LX-1", "--kind", "part"),
        ("instrument", "add", "N", "--kind", "x", "--response-ceiling", "high"),
    ],
    ids=" ".join,
)
def test_a_command_that_is_no_command_is_a_matter_of_usage(desk, arguments):
    outcome = desk(*arguments)
    assert outcome.code == 2
    assert "Usage: calib" in outcome.err + outcome.out
    assert "Traceback" not in outcome.err


# A day at the bench.


def test_a_day_is_logged_and_shown_verdict_first(desk, day):
    outcome = desk("log", day)
    assert (outcome.code, outcome.err) == (0, "")
    assert "day.csv: read as header-block" in outcome.out
    assert "ACCEPTED   run 1 · LX-1 · line-a v1 · 2026-04-01 08:00 · KM" in outcome.out
    assert outcome.out.index("ACCEPTED") < outcome.out.index("Sample")
    assert re.search(r"U2 +1 +7\.\d+ ± 0\.\d+ mg/L", outcome.out)


def test_a_rejected_run_is_logged_with_code_3_and_its_reasons(desk):
    outcome = desk("log", desk.file("day.csv", header_block(with_response(a_day(), 3, 40.0))))
    assert outcome.code == 3
    assert "REJECTED   run 1" in outcome.out
    assert "✗ residual standard deviation at most 0.2" in outcome.out
    assert "the curve was rejected: no result" in outcome.out
    assert desk("run", "show", 1).code == 0  # looking at it is no failure


@pytest.mark.parametrize("json", [(), ("--json",)], ids=["screen", "json"])
@pytest.mark.parametrize("lines", [a_day(), with_response(a_day(), 3, 40.0)], ids=["good", "bad"])
def test_a_preview_writes_nothing(desk, lines, json):
    before = desk.state()
    outcome = desk("log", desk.file("day.csv", header_block(lines)), "--dry-run", *json)
    assert outcome.code == 0
    assert desk.state() == before


def test_a_preview_says_what_would_be(desk, day):
    outcome = desk("log", day, "--dry-run")
    assert "would be accepted; nothing was written (--dry-run)" in outcome.out
    assert "12 standards" in outcome.out


def test_later_unknowns_are_read_on_the_curve_in_force(worked):
    text = header_block([unknown("U7", 4.0)], started="2026-04-01T16:00:00+02:00")
    outcome = worked("quantify", worked.file("more.csv", text))
    assert outcome.code == 0
    assert "run 4: unknowns on LX-1, read on the curve of run 1" in outcome.out


def test_a_run_is_corrected_by_steps(worked):
    outcome = worked("run", "exclude", 2, "#3", "--reason", "drop fell in")
    assert (outcome.code, "ACCEPTED WITH EXCLUSIONS" in outcome.out) == (0, True)
    outcome = worked("run", "restore", 2, "#3", "--reason", "other cup")
    assert (outcome.code, "REJECTED" in outcome.out) == (3, True)
    assert worked("run", "refit", 2, "--reason", "to be sure").code == 3
    outcome = worked("run", "amend", 2, "--operator", "RS", "--dilution", "U2=4", "--reason", "forgotten")
    assert "· RS" in outcome.out
    outcome = worked("run", "void", 2, "--reason", "wrong rack")
    assert (outcome.code, "VOID: wrong rack" in outcome.out) == (0, True)
    assert re.search(r"^ +2 .* void ", worked("run", "list").out, re.MULTILINE)


def test_every_rule_is_shown_with_limit_observed_and_source(worked):
    out = worked("run", "show", 2, "--rules").out
    assert re.search(r"residual standard deviation.* 0\.2 .* NO +method line-a version 1", out)
    assert re.search(r"yes ", out)


def test_runs_are_listed_in_the_order_they_were_measured(worked):
    lines = worked("run", "list").out.splitlines()
    assert [line.split()[0] for line in lines] == ["Run", "2", "1", "3"]
    assert len(worked("run", "list", "--last", 1).out.splitlines()) == 2


def test_registers_are_filled_and_listed(desk):
    assert desk("instrument", "add", "N-1", "--kind", "probe", "--utc-offset", 60).code == 0
    assert desk("event", "add", "N-1", "--at", "2026-04-01", "--kind", "part", "--what", "new cap").code == 0
    lot = ("--material", "x", "--certified-value", 10, "--unit", "mg/L", "--expiry", "2026-09-30")
    assert desk("lot", "add", "L-1", *lot).code == 0
    text = METHOD.format(name="line-c", analyte="gamma")
    assert desk("method", "add", desk.file("c.toml", text)).out == "method line-c version 1 added\n"
    assert "N-1" in desk("instrument", "list").out
    shown = desk("instrument", "show", "N-1").out
    assert "response ceiling not stated" in shown
    assert "2026-04-01 00:00  part   new cap  KM" in shown
    assert "10 mg/L" in desk("lot", "list").out
    assert "line-c" in desk("method", "list").out
    assert "method line-c version 1" in desk("method", "show", "line-c").out
    assert "new cap" in desk("event", "list", "--instrument", "N-1").out


def test_drift_is_reviewed_for_one_and_for_all(worked):
    assert "no limits yet: 1 accepted runs, 10 are needed" in worked("drift", "LX-1").out
    assert "LX-1" in worked("drift").out
    assert worked("drift", "LX-1", "--since", "2026-04-01").code == 0
    picture = worked.folder / "drift.svg"
    assert worked("drift", "LX-1", "--to", picture).code == 0
    assert picture.read_bytes().startswith(b"<?xml")


def test_one_picture_shows_one_instrument(worked):
    other = header_block(a_day(slope=6.0), instrument="LX-2", serial="78")
    worked("log", worked.file("other.csv", other))
    target = worked.folder / "x.svg"
    assert "--to draws one instrument; name it" in worked.refused("drift", "--to", target)
    assert not target.exists()


def test_reports_and_pictures_are_written(worked):
    for command, name, start in (
        ("report", "run.html", b"<!"),
        ("report", "run.json", b"{"),
        ("plot", "run.svg", b"<?xml"),
        ("plot", "run.png", b"\x89PNG"),
    ):
        target = worked.folder / name
        assert worked(command, 1, "--to", target).code == 0
        assert target.read_bytes().lower().startswith(start.lower())


def test_the_store_is_checked_and_backed_up(worked):
    outcome = worked("store", "check", "--all-curves")
    assert (outcome.code, outcome.out.startswith("SOUND: ")) == (0, True)
    copy = worked.folder / "copy.db"
    assert "sound" in worked("store", "backup", "--to", copy).out
    assert worked.call("--store", str(copy), "run", "list").out == worked("run", "list").out
    assert "never overwritten" in worked.refused("store", "backup", "--to", copy)
    assert "is up to date" in worked("store", "upgrade").out


def test_the_store_is_named_by_option_then_by_environment(call, laboratory_path, tmp_path, monkeypatch):
    monkeypatch.setenv("CALIB_STORE", str(laboratory_path))
    assert "LX-1" in call("instrument", "list").out
    other = tmp_path / "other.db"
    assert call("--store", str(other), "instrument", "add", "N", "--kind", "x").code == 0
    assert "LX-1" not in call("--store", str(other), "instrument", "list").out
    assert "LX-1" in call("--store", f"sqlite:///{laboratory_path}", "instrument", "list").out


def test_the_sample_runs_travel_with_the_program():
    assert (shipped("sample_runs") / "laboratory.toml").is_file()
