"""The check of a store: it finds and names what was done to it, and never stops at damage."""

import json
from collections.abc import Callable

import pytest
from made_rows import add_run, facts

from calib.errors import StoreDamaged, StoreError
from calib.store import ChainEntry, Store, check_store, open_store
from calib.store.chain import entry_hash
from calib.store.digests import row_digest
from calib.store.triggers import EVIDENCE_TABLES

UNGUARDED = [
    f"DROP TRIGGER {table}_no_{act}" for table in EVIDENCE_TABLES for act in ("update", "delete", "insert")
]


def codes(store: Store) -> set[tuple[str, str]]:
    """Findings beside those about the triggers that the tampering removed."""
    found = check_store(store).findings
    return {(finding.code, finding.place) for finding in found if finding.code != "trigger-missing"}


def test_a_sound_store_has_no_findings(filled: Store) -> None:
    check = check_store(filled)
    assert check.sound
    assert (check.entries, check.rows) == (2, 22)
    assert (check.head_sequence, check.head_hash) == filled.head()


def test_progress_ends_at_the_number_of_rows(filled: Store) -> None:
    seen: list[tuple[int, int]] = []
    check_store(filled, lambda done, total: seen.append((done, total)))
    assert seen[-1] == (22, 22)


@pytest.mark.parametrize(
    ("deed", "code", "place"),
    [
        ("UPDATE reading SET response = 0.9 WHERE id = 3", "row-changed", "reading 3"),
        ("UPDATE instrument SET response_ceiling = NULL WHERE id = 1", "row-changed", "instrument 1"),
        ("UPDATE curve SET parameters = '{}' WHERE id = 2", "row-changed", "curve 2"),
        ("UPDATE curve SET parameters = '{' WHERE id = 2", "row-unreadable", "curve 2"),
        ("""UPDATE curve SET parameters = '{"slope":NaN}' WHERE id = 2""", "row-unreadable", "curve 2"),
        ("UPDATE reading SET at = 'yesterday' WHERE id = 3", "row-unreadable", "reading 3"),
        ("UPDATE reading SET sample = CAST(x'ff' AS TEXT) WHERE id = 3", "row-unreadable", "reading 3"),
        ("UPDATE original SET content = x'00' WHERE id = 1", "original-changed", "original 1"),
        ("DELETE FROM reading WHERE id = 4", "row-missing", "reading 4"),
        ("UPDATE run SET method_id = 77 WHERE id = 1", "reference", "run 1"),
        ("UPDATE record_chain SET by = 'XX' WHERE sequence = 1", "chain-hash", "entry 1"),
        (
            "UPDATE record_chain SET at = '2020-01-01 00:00:00.000000' WHERE sequence = 2",
            "chain-hash",
            "entry 2",
        ),
        ("UPDATE record_chain SET at = 'x' WHERE sequence = 2", "chain-unreadable", "entry 2"),
        ("UPDATE record_chain SET payload = '[]' WHERE sequence = 2", "chain-payload", "entry 2"),
        ("UPDATE record_chain SET clock_behind = 1 WHERE sequence = 2", "chain-clock", "entry 2"),
        ("UPDATE record_chain SET hash = 'ab' WHERE sequence = 1", "chain-link", "entry 2"),
        ("DELETE FROM record_chain WHERE sequence = 1", "chain-gap", "entry 2"),
        ("DELETE FROM record_chain WHERE sequence = 2", "chain-cut", "entry 1"),
        ("DELETE FROM record_chain WHERE sequence = 2", "row-unrecorded", "run 2"),
        ("DROP INDEX ix_reading_run_id_ordinal", "schema", "reading"),
        ("CREATE TABLE other (x)", "schema", "other"),
        ("ALTER TABLE instrument ADD COLUMN colour TEXT", "schema", "instrument"),
        ("DELETE FROM run_facts", "no-facts", "run 1"),
    ],
)
def test_tampering_is_found_and_named(
    filled: Store, tamper: Callable[..., None], deed: str, code: str, place: str
) -> None:
    tamper(*UNGUARDED, deed)
    assert (code, place) in codes(filled)


def test_dropped_triggers_are_named(filled: Store, tamper: Callable[..., None]) -> None:
    tamper("DROP TRIGGER reading_no_update")
    (finding,) = check_store(filled).findings
    assert (finding.code, finding.place) == ("trigger-missing", "reading")
    assert "reading_no_update" in finding.message


def test_a_hollow_trigger_is_named(filled: Store, tamper: Callable[..., None]) -> None:
    tamper(
        "DROP TRIGGER reading_no_update",
        "CREATE TRIGGER reading_no_update BEFORE UPDATE ON reading BEGIN SELECT 1; END",
    )
    assert codes(filled) == {("trigger-changed", "reading")}


def test_a_row_slipped_in_is_named(filled: Store, tamper: Callable[..., None]) -> None:
    tamper(
        "INSERT INTO reading (run_id, ordinal, sample, role, response, response_text, dilution) "
        "VALUES (1, 9, 'S9', 'standard', 1.0, '1', 1.0)"
    )
    assert codes(filled) == {("row-unrecorded", "reading 11")}


def test_a_row_with_a_new_digest_still_breaks_the_chain(filled: Store, tamper: Callable[..., None]) -> None:
    with filled.engine.connect() as connection:
        (payload,) = connection.exec_driver_sql("SELECT payload FROM record_chain WHERE sequence = 1").one()
    forged = payload.replace('"digest":"', '"digest":"0', 1)
    tamper(*UNGUARDED, f"UPDATE record_chain SET payload = '{forged}' WHERE sequence = 1")
    assert ("chain-hash", "entry 1") in codes(filled)


def test_a_forged_entry_breaks_the_link_to_the_next(filled: Store, tamper: Callable[..., None]) -> None:
    with filled.reading() as session:
        entry = session.get_one(ChainEntry, 1)
        held = {column.name: getattr(entry, column.name) for column in ChainEntry.__table__.columns}
    forged = entry_hash(held["previous_hash"], {**held, "by": "XX"})
    tamper(*UNGUARDED, f"UPDATE record_chain SET by = 'XX', hash = '{forged}' WHERE sequence = 1")
    assert codes(filled) == {("chain-link", "entry 2")}


NO_RULE = "DROP TRIGGER run_facts_no_insert"


def test_a_second_version_in_force_is_refused_and_found_where_the_rule_was_dropped(
    filled: Store, tamper: Callable[..., None]
) -> None:
    def add() -> None:
        with filled.change("amend", "KM", "no link to the older one") as session:
            session.add(facts(1, 1))

    with pytest.raises(StoreError, match="one version of this run_id is in force; supersede it"):
        add()
    tamper(NO_RULE)
    add()
    assert codes(filled) == {("two-in-force", "run 1")}


def test_a_version_of_another_record_is_refused_and_found_where_the_rule_was_dropped(
    filled: Store, tamper: Callable[..., None]
) -> None:
    def add() -> None:
        with filled.change("amend", "KM", "wrong run") as session:
            session.add(facts(1, 1, supersedes=2, reason="wrong run"))

    with pytest.raises(StoreError, match="in force; supersede it"):
        add()
    tamper(NO_RULE)
    add()
    assert ("wrong-version", "run_facts 3") in codes(filled)


def test_digests_do_not_depend_on_columns_that_are_empty() -> None:
    assert row_digest({"id": 1, "name": "a", "colour": None}) == row_digest({"id": 1, "name": "a"})
    assert row_digest({"id": 1, "name": "a"}) != row_digest({"id": 1, "name": "b"})


def test_a_torn_file_is_reported_not_raised(filled: Store) -> None:
    with filled.change("log run", "KM") as session:
        add_run(session, "c", readings=400)
    filled.close()
    whole = bytearray(filled.path.read_bytes())
    pages = len(whole) // 4096
    for page in range(pages // 2, pages):
        torn = bytearray(whole)
        torn[page * 4096 : (page + 1) * 4096] = b"\xa5" * 4096
        filled.path.write_bytes(torn)
        try:
            with open_store(filled.path, create=False) as store:
                assert not check_store(store).sound
        except StoreDamaged:
            continue


def test_a_file_cut_short_is_reported_not_raised(filled: Store) -> None:
    filled.close()
    with filled.path.open("r+b") as file:
        file.truncate(3 * 4096)
    check = check_store(filled)
    assert not check.sound
    assert all("\n" not in finding.message for finding in check.findings)


def test_a_payload_is_plain_json(filled: Store) -> None:
    with filled.engine.connect() as connection:
        (payload,) = connection.exec_driver_sql("SELECT payload FROM record_chain WHERE sequence = 1").one()
    assert set(json.loads(payload)) == {"action", "rows"}
