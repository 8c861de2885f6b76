"""Changes: one transaction, one entry in the chain, nothing but new rows."""

import hashlib
import json
import math
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import pytest
from made_rows import AT, add_run, curve, facts, instrument, reading
from sqlalchemy import insert, select, text

from calib.errors import StoreError
from calib.store import (
    GENESIS,
    ChainEntry,
    Curve,
    Instrument,
    Reading,
    RunFacts,
    Store,
    check_store,
    is_current,
    open_store,
)


def logical_content(store: Store) -> list[str]:
    connection = store.engine.raw_connection()
    try:
        return list(connection.driver_connection.iterdump())
    finally:
        connection.close()


def test_empty_chain_has_its_beginning_as_head(store: Store) -> None:
    assert store.head() == (0, GENESIS)


def test_chain_grows_by_one_entry_a_change(filled: Store) -> None:
    with filled.reading() as session:
        first, second = session.scalars(select(ChainEntry).order_by(ChainEntry.sequence))
    assert (first.sequence, second.sequence) == (1, 2)
    assert first.previous_hash == GENESIS
    assert second.previous_hash == first.hash
    assert (second.action, second.by, second.reason) == ("log run", "JT", "second plate")
    assert filled.head() == (2, second.hash)


def test_entry_hash_can_be_computed_by_anyone_from_the_stored_columns(filled: Store) -> None:
    with filled.reading() as session:
        entry = session.get_one(ChainEntry, 2)
    held = {
        "action": entry.action,
        "at": entry.at.astimezone(UTC).isoformat(),
        "by": entry.by,
        "clock_behind": entry.clock_behind,
        "offset_minutes": entry.offset_minutes,
        "payload": entry.payload,
        "reason": entry.reason,
        "sequence": entry.sequence,
    }
    canonical = json.dumps(held, sort_keys=True, separators=(",", ":"))
    assert hashlib.sha256((entry.previous_hash + canonical).encode()).hexdigest() == entry.hash


def test_payload_names_every_row_of_the_change(filled: Store) -> None:
    with filled.reading() as session:
        payload = json.loads(session.get_one(ChainEntry, 1).payload)
        readings = session.scalars(select(Reading.id).where(Reading.run_id == 1)).all()
    recorded = [row["id"] for row in payload["rows"] if row["table"] == "reading"]
    assert payload["action"] == "log run"
    assert recorded == list(readings)


def test_values_come_back_as_they_were_given(filled: Store) -> None:
    with filled.reading() as session:
        held = session.get_one(Curve, 1)
        first = session.scalars(select(Reading).order_by(Reading.id)).first()
    assert held.parameters == {"intercept": 0.0, "slope": 0.1 + 0.2}
    assert held.covariance == [[1e-6, None], [None, 1e-9]]
    assert first is not None
    assert first.at == AT


def test_local_times_are_stored_as_utc(store: Store) -> None:
    local = datetime(2026, 3, 2, 8, 12, tzinfo=timezone(timedelta(hours=1)))
    with store.change("add", "KM") as session:
        session.add(instrument(added_at=local))
    with store.reading() as session:
        held = session.get_one(Instrument, 1).added_at
    assert held == local
    assert held.utcoffset() == timedelta(0)


def test_a_time_without_offset_is_refused(store: Store) -> None:
    with pytest.raises(StoreError, match="no offset from UTC"), store.change("add", "KM") as session:
        session.add(instrument(added_at=datetime(2026, 3, 2, 8, 12)))


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_numbers_that_are_not_finite_are_refused(store: Store, value: float) -> None:
    with (
        pytest.raises(StoreError, match=r"instrument\.response_ceiling is"),
        store.change("add", "KM") as session,
    ):
        session.add(instrument(response_ceiling=value))
    assert store.head() == (0, GENESIS)


def test_nan_inside_json_is_refused_with_its_place(store: Store) -> None:
    with store.change("log run", "KM") as session:
        add_run(session)
    with (
        pytest.raises(StoreError, match=r"curve\.covariance\[0\]\[1\] is nan"),
        store.change("refit", "KM", "test") as session,
    ):
        session.add(curve(1, supersedes=1, covariance=[[1.0, math.nan]]))


@pytest.mark.parametrize("tiny", [-0.0, 5e-324, 1e308, 0.1 + 0.2, 3])
def test_digests_hold_for_awkward_numbers(store: Store, tiny: float) -> None:
    with store.change("add", "KM") as session:
        session.add(instrument(response_ceiling=tiny, location="Labor 2 · ü € \U0001f9ea"))
    assert check_store(store).findings == ()


def test_failure_inside_the_block_leaves_the_store_as_it_was(filled: Store) -> None:
    before = logical_content(filled)
    with pytest.raises(ZeroDivisionError), filled.change("log run", "KM") as session:
        session.add(curve(add_run(session, "c").id // 0))
    assert logical_content(filled) == before


def test_failure_at_commit_leaves_the_store_as_it_was(filled: Store) -> None:
    before = logical_content(filled)
    with pytest.raises(StoreError, match="refuses this change"), filled.change("add", "KM") as session:
        session.add_all([instrument("PP-new"), instrument("PP-a")])
    assert logical_content(filled) == before


def test_a_savepoint_that_was_undone_leaves_no_trace(store: Store) -> None:
    with store.change("add", "KM") as session:
        session.add(instrument("kept"))
        nested = session.begin_nested()
        session.add(instrument("undone"))
        session.flush()
        nested.rollback()
    assert check_store(store).findings == ()


def test_changed_rows_are_refused_before_the_database_does(filled: Store) -> None:
    with (
        pytest.raises(StoreError, match="instrument was changed or removed"),
        filled.change("x", "KM") as session,
    ):
        session.get_one(Instrument, 1).location = "cellar"


def test_removed_rows_are_refused(filled: Store) -> None:
    with (
        pytest.raises(StoreError, match="reading was changed or removed"),
        filled.change("x", "KM") as session,
    ):
        session.delete(session.get_one(Reading, 1))


def test_statements_that_write_are_refused(store: Store) -> None:
    with pytest.raises(StoreError, match="not by statements"), store.change("x", "KM") as session:
        session.execute(insert(Instrument).values(name="PP"))


def test_committing_inside_the_block_is_refused(store: Store) -> None:
    with pytest.raises(StoreError, match="commits by itself"), store.change("x", "KM") as session:
        [session.add(instrument()), session.commit()]
    assert check_store(store).rows == 0


def test_chain_entries_are_written_by_the_store_alone(store: Store) -> None:
    with pytest.raises(StoreError, match="written by the store itself"), store.change("x", "KM") as session:
        session.add(ChainEntry(sequence=1))


def test_a_change_without_rows_is_refused(store: Store) -> None:
    with pytest.raises(StoreError, match="adds no row"), store.change("x", "KM"):
        pass


@pytest.mark.parametrize(("action", "by"), [("", "KM"), ("log run", "  ")])
def test_a_change_needs_action_and_person(store: Store, action: str, by: str) -> None:
    with pytest.raises(StoreError, match="in words"), store.change(action, by):
        pass


def test_a_reading_session_refuses_new_rows(store: Store) -> None:
    with pytest.raises(StoreError, match="only reads"), store.reading() as session:
        session.add(instrument())


def test_a_reading_session_cannot_write_by_the_back_door(store: Store) -> None:
    with pytest.raises(StoreError), store.reading() as session:
        session.connection().execute(text("CREATE TABLE x (y)"))


def test_a_row_is_superseded_once(filled: Store) -> None:
    with filled.change("amend", "KM", "wrong operator") as session:
        session.add(facts(1, 1, operator="JT", supersedes=1, reason="wrong operator"))
    with (
        pytest.raises(StoreError, match="supersedes is taken"),
        filled.change("amend", "KM", "again") as session,
    ):
        session.add(facts(1, 1, operator="XX", supersedes=1, reason="again"))
    with filled.reading() as session:
        current = session.scalars(select(RunFacts).where(RunFacts.run_id == 1, is_current(RunFacts))).one()
    assert current.operator == "JT"


def test_an_amendment_needs_a_reason(filled: Store) -> None:
    with pytest.raises(StoreError, match="ck_run_facts_reason"), filled.change("amend", "KM") as session:
        session.add(facts(1, 1, supersedes=1))


@pytest.mark.parametrize(
    "other",
    [
        {"response": None},
        {"absent_cause": "overflow"},
        {"response": None, "absent_cause": "tired"},
        {"role": "std"},
        {"dilution": 0.0},
    ],
)
def test_readings_outside_the_closed_sets_are_refused(filled: Store, other: dict[str, object]) -> None:
    with pytest.raises(StoreError, match="CHECK constraint failed"), filled.change("log", "KM") as session:
        session.add(reading(1, 99, **other))


def test_a_row_that_names_a_missing_row_is_refused(filled: Store) -> None:
    with pytest.raises(StoreError, match="FOREIGN KEY"), filled.change("log", "KM") as session:
        session.add(reading(999, 1))


def test_a_clock_behind_is_recorded_not_refused(path: Path) -> None:
    east = timezone(timedelta(hours=2))
    times = iter([datetime(2026, 3, 2, 10, tzinfo=east), datetime(2026, 3, 2, 7, 59, tzinfo=UTC)])
    with open_store(path, now=lambda: next(times)) as store:
        for name in ("a", "b"):
            with store.change("add", "KM") as session:
                session.add(instrument(name))
        with store.reading() as session:
            entries = session.scalars(select(ChainEntry).order_by(ChainEntry.sequence)).all()
        assert [(entry.offset_minutes, entry.clock_behind) for entry in entries] == [(120, False), (0, True)]
        assert check_store(store).findings == ()
