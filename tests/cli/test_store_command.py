"""calib store on the command line: head, restore, export and import, and what damage is told."""

import sqlite3
from contextlib import closing

import pytest


def tamper(desk, *statements):
    with closing(sqlite3.connect(desk.store)) as connection:
        for statement in statements:
            connection.execute(statement)
        connection.commit()


def test_a_head_kept_elsewhere_is_compared(worked, tmp_path):
    kept = tmp_path / "head.json"
    written = worked("store", "head", "--to", kept).out.strip()
    worked("run", "refit", 1, "--reason", "again")
    for head in (kept, written):
        assert worked("store", "check", "--against", head).code == 0
    other = f"{written.partition(':')[0]}:{'0' * 64}"
    outcome = worked("store", "check", "--against", other)
    assert outcome.code == 4
    assert "the head that was given is another: the chain up to there was written anew" in outcome.out
    beyond = worked("store", "check", "--against", f"9999:{'0' * 64}")
    assert "entries were cut off" in beyond.out
    assert "is no head of a record chain" in worked.refused("store", "check", "--against", "x")


def test_damage_names_the_first_broken_entry_and_what_rests_on_it(worked, tmp_path):
    for name, role in (("RS", "reviewer"),):
        worked("person", "set", name, "--role", role)
    worked("review", "approve", 1, "--by", "RS")
    worked("report", 1, "--to", tmp_path / "one.json")
    logged = worked("history", "run", 1, "--json").json["entries"][0]["sequence"]
    tamper(worked, "DROP TRIGGER reading_no_update", "UPDATE reading SET response = 9.0 WHERE id = 3")
    outcome = worked("store", "check")
    assert outcome.code == 4
    assert f"first broken: entry {logged} of the record chain (reading 3)" in outcome.out
    assert "results of runs 1, 3 rest on it" in outcome.out
    assert "reports 1 were issued of these runs" in outcome.out
    told = worked("store", "check", "--json").json["damage"]
    assert (told["first_entry"], told["runs"], told["reports"]) == (logged, [1, 3], [1])


def test_a_backup_is_tried_and_gone_back_to(worked, tmp_path):
    copy = tmp_path / "copy.db"
    assert worked("store", "backup", "--to", copy).code == 0
    worked("run", "refit", 1, "--reason", "again")
    tried = worked("store", "restore", copy)
    assert tried.code == 0
    assert "can be restored" in tried.out
    assert "1 entries behind the store in use" in " ".join(tried.out.split())
    back = tmp_path / "back.db"
    assert worked("store", "restore", copy, "--to", back, "--json").json["sound"] is True
    assert worked.call("--store", str(back), "run", "show", "1").code == 0
    # The very loss that a backup is for: there is no store in use.
    alone = worked.call("--store", str(tmp_path / "none.db"), "store", "restore", str(copy))
    assert alone.code == 0


def test_a_backup_of_another_store_is_said(worked, tmp_path):
    other = tmp_path / "other.db"
    other.write_bytes(worked.store.read_bytes())
    worked.call("--store", str(other), "run", "refit", "1", "--reason", "elsewhere")
    worked("run", "refit", 1, "--reason", "here")
    outcome = worked("store", "restore", other)
    assert outcome.code == 4
    assert "is not the beginning of the one of the store in use" in " ".join(outcome.out.split())


def test_export_and_import_bring_every_verdict_and_digit_back(worked, tmp_path):
    archive, back = tmp_path / "all.zip", tmp_path / "back.db"
    assert worked("store", "export", "--to", archive).code == 0
    imported = worked.call("--store", str(back), "store", "import", str(archive))
    assert imported.code == 0
    for number in ("1", "2", "3"):
        same = worked.call("--store", str(back), "run", "show", number, "--json")
        assert same.json == worked("run", "show", number, "--json").json
    assert worked.call("--store", str(back), "store", "check", "--all-curves").code == 0
    again = worked.call("--store", str(back), "store", "import", str(archive))
    assert (again.code, again.err.count("\n")) == (1, 1)
    assert "imported into a new store" in again.err


def test_a_changed_archive_leaves_no_store(worked, tmp_path):
    archive, back = tmp_path / "all.zip", tmp_path / "back.db"
    worked("store", "export", "--to", archive)
    whole = bytearray(archive.read_bytes())
    whole[len(whole) // 2] ^= 1
    archive.write_bytes(whole)
    outcome = worked.call("--store", str(back), "store", "import", str(archive))
    assert outcome.code == 1
    assert "nothing was imported" in outcome.err or "cannot be read" in outcome.err
    assert not back.exists()


@pytest.mark.parametrize("option", ["--to"])
def test_an_export_never_overwrites(worked, tmp_path, option):
    there = tmp_path / "there.zip"
    there.write_text("mine")
    assert "never overwritten" in worked.refused("store", "export", option, there)
    assert there.read_text() == "mine"
