"""Bad input: one line that says what, where and what to do; exit code 1; the store as it was."""

import os
from pathlib import Path

import pytest
from small_laboratory import a_day, header_block, unknown

HEAD = "sample,role,concentration [mg/L],response [mV]\n"
ROWS = "S1,standard,1,7\nS2,standard,2,12\nS3,standard,3,17\n"
SAID = ("--instrument", "LX-1", "--method", "line-a", "--at", "2026-04-01T08:00")


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (HEAD.replace("response [mV]", "note") + ROWS, ("row 1", "no column response", "add one")),
        (HEAD.replace("role,", "role,role,") + ROWS, ("row 1", "column role is there twice", "keep one")),
        (HEAD + "S1,standard,1,seven\n" + ROWS, ("row 2, column response", "'seven' is no number", "write")),
        (HEAD + "S1,standard,NaN,7\n" + ROWS, ("row 2, column concentration", "'NaN' is no number", "write")),
        (HEAD + "S1,standard,inf,7\n" + ROWS, ("row 2, column concentration", "'inf' is no number", "write")),
        (HEAD + "S1,standard,-inf,7\n" + ROWS, ("row 2, column concentration", "is no number", "write")),
        (HEAD + "S1,standard,1e999,7\n" + ROWS, ("row 2, column concentration", "not finite", "write")),
        (HEAD + "S1,standard,1,1e999\n" + ROWS, ("row 2, column response", "not finite", "write")),
        (HEAD + "S1,standard,1e300,7\n" + ROWS, ("row 2", "is no measured number", "correct it")),
        (
            HEAD + "S1,standard,-1,7\n" + ROWS,
            ("row 2, column concentration", "is negative", "write 0 or more"),
        ),
        (
            HEAD + "S1,standard,,7\n" + ROWS,
            ("row 2, column concentration", "needs its concentration", "fill"),
        ),
        (HEAD.replace("mg/L", "cups") + ROWS, ("row 1", "'cups' is no known unit", "use one of")),
        (HEAD.replace("mg/L", "mg/L] [ug/L") + ROWS, ("row 1", "unit", "")),
        (HEAD.replace("[mV]", "[nA]") + ROWS, ("day.csv", "responses are in 'nA'", "correct the unit")),
        (HEAD.replace("mg/L", "mmol/L") + ROWS, ("day.csv", "cannot be converted", "one kind")),
        (HEAD + "S1,standard,1 ug/L,7\n" + ROWS, ("row 2, column concentration", "is no number", "write")),
        (HEAD + "S1,calibrant,1,7\n" + ROWS, ("row 2, column role", "is no role", "use one of")),
        (HEAD + "U1,unknown,,ERR\n", ("day.csv", "no standards in it", "calib quantify")),
        (HEAD, ("row 1", "no readings below it", "export the file again")),
        ("", ("day.csv", "the file is empty", "export it again")),
        (" \n\n", ("day.csv", "the file is empty", "export it again")),
        (bytes(range(256)) * 40, ("day.csv", "", "")),
        (b"%PDF-1.7\n\x00\x01\x02\x03 binary", ("day.csv", "neither text nor a workbook", "export")),
        ("dear all,\nplease find attached\n", ("day.csv", "layout is not known", "begin with a heading row")),
    ],
)
def test_a_bad_file_is_refused_with_place_and_remedy(desk, content, words):
    message = desk.refused("log", desk.file("day.csv", content), *SAID)
    for word in words:
        assert word in message


def test_a_workbook_that_is_none_is_refused(desk):
    assert "begins like a workbook but is none" in desk.refused("log", desk.file("x.xlsx", b"PK\x03\x04 no"))
    assert "layout is not known" in desk.refused("log", desk.file("y.xlsx", "hello\n"))


@pytest.mark.parametrize(
    ("said", "words"),
    [
        (("--instrument", "LX-9"), "the file says instrument LX-1, but --instrument says LX-9"),
        (("--method", "line-z"), "the file says method line-a, but --method says line-z"),
        (("--lot", "Z-9"), "the file says lot A-1, but --lot says Z-9; one is wrong"),
        (("--layout", "pdf"), "'pdf' is no reading layout: use one of workbook"),
        (("--layout", "workbook"), "day.csv"),
        (("--at", "yesterday"), "--at 'yesterday' is no time; write 2026-03-02T08:20"),
        (("--at", ""), "--at '' is no time"),
        (("--at", "0001-01-01"), "lies outside 1950 to 2200; correct the year"),
        (("--at", "9999-12-31T23:59"), "lies outside 1950 to 2200"),
    ],
)
def test_what_is_said_beside_the_file_is_checked(desk, day, said, words):
    assert words in desk.refused("log", day, *said)


def test_an_unknown_instrument_or_method_in_the_file_is_answered_with_the_known_ones(desk):
    message = desk.refused("log", desk.file("a.csv", header_block(a_day(), instrument="LX-9", serial=None)))
    assert "unknown instrument 'LX-9'; known are LX-1, LX-2 (add one with calib instrument add)" in message
    message = desk.refused("log", desk.file("a.csv", header_block(a_day(), method="line-z")))
    assert "unknown method 'line-z'; known are line-a, line-b (add one with calib method add)" in message


# Paths.


def test_two_hundred_megabytes_of_nothing_are_refused_unread(desk):
    path = desk.folder / "day.csv"
    with path.open("wb") as file:
        file.truncate(200_000_000)
    assert "200 MB is more than the 50 MB allowed" in desk.refused("log", path)


def test_a_folder_a_missing_file_and_a_path_through_a_file_are_refused(desk, day):
    assert "this is a folder: name a file in it" in desk.refused("log", desk.folder)
    assert "there is no such file: check the path" in desk.refused("log", desk.folder / "none.csv")
    assert "cannot be opened" in desk.refused("log", day / "day.csv")


@pytest.mark.skipif(os.name != "posix" or os.geteuid() == 0, reason="the superuser may read everything")
def test_a_file_that_may_not_be_read_is_refused(desk, day):
    day.chmod(0)
    assert "reading is not permitted" in desk.refused("log", day)


@pytest.mark.parametrize(
    ("command", "suffix", "words"),
    [
        ("report", "run.pdf", "end the name in .html or .json"),
        ("report", "run", "end the name in .html or .json"),
        ("plot", "run.jpeg", "end the name in .svg or .png"),
        ("plot", "none/run.svg", "cannot write"),
        ("report", "none/run.html", "cannot write"),
    ],
)
def test_a_report_that_cannot_be_written_is_refused(worked, command, suffix, words):
    assert words in worked.refused(command, 1, "--to", worked.folder / suffix)


# Corrections and questions about what is not there.


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("run", "show", "9"), "there is no run 9; the last one is 3 (see calib run list)"),
        (("run", "show", "99999999999999999999"), "there is no run 99999999999999999999"),
        (("run", "refit", "9", "--reason", "x"), "there is no run 9"),
        (("report", "9", "--to", "x.html"), "there is no run 9"),
        (("plot", "9", "--to", "x.svg"), "there is no run 9"),
        (("run", "refit", "1", "--reason", ""), "a correction needs a reason in words"),
        (("run", "void", "1", "--reason", "  "), "a correction needs a reason in words"),
        (("run", "amend", "1", "--reason", "x"), "nothing to amend: name at least one fact"),
        (("run", "amend", "1", "--at", "noon", "--reason", "x"), "--at 'noon' is no time"),
        (("run", "amend", "1", "--sample", "U1", "--reason", "x"), "--sample 'U1' must be READING=VALUE"),
        (("run", "amend", "1", "--dilution", "U1=ten", "--reason", "x"), "'ten' is no number"),
        (("run", "amend", "1", "--dilution", "U1=-1", "--reason", "x"), "must be above 0"),
        (("run", "exclude", "1", "S99", "--reason", "x"), "no reading 'S99' in this run; give a position"),
        (("run", "exclude", "1", "S1", "--reason", "x", "--cause", "mood"), "unknown class of reason 'mood'"),
        (("run", "exclude", "3", "U1", "--reason", "x"), "run 3 holds unknowns only"),
        (("run", "void", "1", "--reason", "x"), "its curve was used by run 3; declare these void first"),
        (("run", "list", "--instrument", "LX-9"), "unknown instrument 'LX-9'; known are"),
        (("run", "list", "--method", "line-z"), "unknown method 'line-z'; known are"),
        (("instrument", "show", "LX-9"), "unknown instrument 'LX-9'; known are"),
        (("method", "show", "line-z"), "unknown method 'line-z'; known are"),
        (("method", "show", "line-a", "--version", "7"), "unknown method 'line-a' version 7"),
        (("method", "show", "line-a", "--version", str(10**30)), "unknown method 'line-a' version 1000"),
        (("method", "add", "none.toml"), "none.toml: cannot be read (No such file or directory)"),
        (("drift", "LX-9"), "unknown instrument 'LX-9'"),
        (("drift", "LX-2"), "no run of instrument LX-2 is logged; nothing to review"),
        (("drift", "LX-1", "--since", "spring"), "--since 'spring' is no time"),
        (("event", "add", "LX-1", "--at", "noon", "--kind", "part", "--what", "x"), "--at 'noon' is no time"),
        (
            ("event", "add", "LX-1", "--at", "2026-04-01", "--kind", "party", "--what", "x"),
            "unknown kind of event 'party'; known are",
        ),
        (("lot", "add", "L", "--material", "x", "--expiry", "soon"), "--expiry 'soon' is no day"),
        (("instrument", "add", "LX-1", "--kind", "x"), "is registered already; choose another name"),
    ],
    ids=lambda value: " ".join(value)[:50] if isinstance(value, tuple) else "",
)
def test_what_cannot_be_done_is_said_in_one_line(worked, arguments, words):
    assert words in worked.refused(*arguments)


def test_unknowns_without_a_curve_are_refused(desk):
    text = header_block([unknown("U1", 3.0)])
    message = desk.refused("quantify", desk.file("later.csv", text))
    assert (
        "no curve of LX-1 and method line-a is logged before 2026-04-01 08:00; log standards first" in message
    )


# Stores.


def refused_store(call, path, *arguments: str) -> str:
    outcome = call("--store", str(path), *arguments)
    assert (outcome.code, outcome.out) == (1, "")
    assert outcome.err.count("\n") == 1
    assert "Traceback" not in outcome.err
    return outcome.err


def test_a_missing_store_is_not_made_by_a_question(call, tmp_path: Path):
    path = tmp_path / "none.db"
    message = refused_store(call, path, "run", "list")
    assert "there is no store" in message
    assert "calib instrument add or calib demo" in message
    assert not path.exists()


@pytest.mark.parametrize(
    "command", [("run", "list"), ("store", "check"), ("instrument", "add", "N", "--kind", "x")]
)
def test_a_file_that_is_no_store_is_left_alone(call, tmp_path: Path, command):
    import sqlite3

    text = tmp_path / "notes.db"
    text.write_text("hello")
    assert "is no SQLite database; name a calib store" in refused_store(call, text, *command)
    foreign = tmp_path / "foreign.db"
    connection = sqlite3.connect(foreign)
    connection.execute("CREATE TABLE recipe (id INTEGER)")
    connection.close()
    before = foreign.read_bytes()
    assert "is an SQLite database, but no calib store" in refused_store(call, foreign, *command)
    empty = tmp_path / "empty.db"
    empty.touch()
    assert "is empty and no calib store" in refused_store(call, empty, *command)
    assert "is a folder; name the store file in it" in refused_store(call, tmp_path, *command)
    assert (text.read_text(), foreign.read_bytes(), empty.read_bytes()) == ("hello", before, b"")


def test_a_store_of_a_newer_version_is_refused(call, worked):
    import sqlite3

    connection = sqlite3.connect(worked.store)
    connection.execute("UPDATE alembic_version SET version_num = '9999'")
    connection.commit()
    connection.close()
    for command in (("run", "list"), ("store", "check"), ("store", "upgrade")):
        message = refused_store(call, worked.store, *command)
        assert "newer" in message
        assert "9999" in message


def test_a_store_of_another_database_is_refused(call):
    message = refused_store(call, "postgresql://host/lab", "run", "list")
    assert "a store in postgresql is not possible yet" in message


@pytest.mark.parametrize("seconds", ["soon", "-1", "nan"])
def test_a_wait_that_is_none_is_refused(desk, monkeypatch, seconds):
    monkeypatch.setenv("CALIB_BUSY_SECONDS", seconds)
    outcome = desk("run", "list")
    assert (outcome.code, "CALIB_BUSY_SECONDS" in outcome.err) == (1, True)


def test_damage_is_exit_code_4(worked):
    import sqlite3

    connection = sqlite3.connect(worked.store)
    connection.execute("DROP TRIGGER reading_no_update")
    connection.execute("UPDATE reading SET response = 0.9 WHERE id = 3")
    connection.commit()
    connection.close()
    outcome = worked("store", "check")
    assert outcome.code == 4
    assert "DAMAGED" in outcome.out
    assert "row-changed at reading 3" in outcome.out
    told = worked("store", "check", "--json")
    assert (told.code, told.json["sound"]) == (4, False)
    assert {f["code"] for f in told.json["findings"]} == {"row-changed", "trigger-missing"}
