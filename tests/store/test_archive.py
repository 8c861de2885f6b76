"""The open archive: out and back every row is the same, and a changed archive is refused in words."""

import hashlib
import json
import shutil
import zipfile
from collections.abc import Callable
from pathlib import Path

import pytest

from calib.errors import SchemaTooNew, StoreDamaged, StoreError
from calib.store import Store, check_store, export_store, import_store, open_store
from calib.store.archive import MANIFEST
from calib.store.triggers import EVIDENCE_TABLES

READINGS = "tables/reading.jsonl"


@pytest.fixture
def archive(filled: Store, tmp_path: Path) -> Path:
    return export_store(filled, tmp_path / "out.zip", version="0.1.0").path


def rewrite(archive: Path, change: Callable[[dict[str, bytes]], None], fingerprints: bool = False) -> None:
    """Change the members; with ``fingerprints`` the manifest is made to fit them again."""
    with zipfile.ZipFile(archive) as held:
        members = {name: held.read(name) for name in held.namelist()}
    change(members)
    if fingerprints:
        manifest = json.loads(members[MANIFEST])
        manifest["members"] = {
            name: {"sha256": hashlib.sha256(content).hexdigest(), "bytes": len(content)}
            for name, content in members.items()
            if name != MANIFEST
        }
        members[MANIFEST] = json.dumps(manifest).encode()
    with zipfile.ZipFile(archive, "w") as held:
        for name, content in members.items():
            held.writestr(name, content)


def rows(store: Store) -> dict[str, list[tuple[object, ...]]]:
    with store.engine.connect() as connection:
        return {
            name: [tuple(r) for r in connection.exec_driver_sql(f'SELECT * FROM "{name}" ORDER BY 1')]
            for name in EVIDENCE_TABLES
        }


def test_out_and_back_every_cell_is_the_same(filled: Store, archive: Path, tmp_path: Path) -> None:
    done = import_store(archive, tmp_path / "back.db")
    assert (done.head_sequence, done.head_hash) == filled.head()
    with open_store(done.path, create=False) as back:
        assert rows(back) == rows(filled)
        assert check_store(back).sound


def test_the_archive_can_be_read_without_calib(filled: Store, archive: Path) -> None:
    with zipfile.ZipFile(archive) as held:
        manifest = json.loads(held.read(MANIFEST))
        readings = [json.loads(line) for line in held.read(READINGS).decode().splitlines()]
        originals = [name for name in held.namelist() if name.startswith("originals/")]
        assert all(
            hashlib.sha256(held.read(n)).hexdigest() == n.removeprefix("originals/") for n in originals
        )
        # Digests of rows and the hash of each entry, by the description in README.txt alone.
        chain = [json.loads(line) for line in held.read("tables/record_chain.jsonl").decode().splitlines()]
    assert manifest["rows"]["reading"] == len(readings) == 10
    assert len(originals) == 2

    def canonical(value: object) -> bytes:
        return json.dumps(value, sort_keys=True, separators=(",", ":")).encode()

    listed = {(r["table"], r["id"]): r["digest"] for e in chain for r in json.loads(e["payload"])["rows"]}
    for reading in readings:
        assert hashlib.sha256(canonical(reading)).hexdigest() == listed["reading", reading["id"]]


def test_the_same_store_gives_the_same_bytes(filled: Store, archive: Path, tmp_path: Path) -> None:
    again = export_store(filled, tmp_path / "again.zip", version="0.1.0").path
    assert again.read_bytes() == archive.read_bytes()


def test_nothing_is_overwritten(filled: Store, archive: Path, path: Path) -> None:
    with pytest.raises(StoreError, match="never overwritten"):
        export_store(filled, archive, version="0.1.0")
    with pytest.raises(StoreError, match="imported into a new store"):
        import_store(archive, path)


def swap(name: str, old: bytes, new: bytes) -> Callable[[dict[str, bytes]], None]:
    def change(members: dict[str, bytes]) -> None:
        assert old in members[name]
        members[name] = members[name].replace(old, new, 1)

    return change


def drop_line(members: dict[str, bytes]) -> None:
    members[READINGS] = b"\n".join(members[READINGS].split(b"\n")[1:])


def move(members: dict[str, bytes]) -> None:
    members["../../outside.txt"] = b"x"


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (
            swap(READINGS, b'"response": 0.5', b'"response": 0.6'),
            "reading.jsonl does not fit its fingerprint",
        ),
        (lambda m: m.pop(READINGS), "reading.jsonl is missing"),
        (move, "outside.txt does not belong to it"),
        (lambda m: m.update({MANIFEST: b"{}"}), "its manifest cannot be read"),
    ],
)
def test_a_changed_archive_is_refused(
    archive: Path, tmp_path: Path, change: Callable[[dict[str, bytes]], None], words: str
) -> None:
    rewrite(archive, change)
    refused(archive, tmp_path, words)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (
            swap(READINGS, b'"response": 0.5', b'"response": 0.6'),
            r"reading \d+ is not as entry \d recorded it",
        ),
        (drop_line, "reading 1 was recorded by entry 1 and is gone"),
        (swap(READINGS, b'"sample"', b'"colour"'), r"line 1: .*no column colour"),
        (swap(READINGS, b"{", b"["), "line 1"),
        (swap("tables/record_chain.jsonl", b'"by": "KM"', b'"by": "XX"'), "entry 1 was changed"),
        (swap("tables/instrument.jsonl", b"4471", b"4472"), "instrument 1 is not as entry 1 recorded it"),
    ],
)
def test_an_archive_whose_fingerprints_were_made_to_fit_is_refused_by_its_chain(
    archive: Path, tmp_path: Path, change: Callable[[dict[str, bytes]], None], words: str
) -> None:
    rewrite(archive, change, fingerprints=True)
    refused(archive, tmp_path, words)


def refused(archive: Path, tmp_path: Path, words: str) -> None:
    before = sorted(p.name for p in tmp_path.iterdir())
    with pytest.raises(StoreError, match=words):
        import_store(archive, tmp_path / "back.db")
    assert sorted(p.name for p in tmp_path.iterdir()) == before


def test_what_is_no_archive_is_said(tmp_path: Path, archive: Path) -> None:
    other = tmp_path / "x.zip"
    other.write_text("hello")
    with pytest.raises(StoreError, match="is no archive of a store"):
        import_store(other, tmp_path / "back.db")
    torn = tmp_path / "torn.zip"
    torn.write_bytes(archive.read_bytes()[:-400])
    with pytest.raises(StoreError, match="is no archive"):
        import_store(torn, tmp_path / "back.db")
    newer = shutil.copy(archive, tmp_path / "newer.zip")
    rewrite(newer, swap(MANIFEST, b'"schema": "', b'"schema": "9'))
    with pytest.raises((SchemaTooNew, StoreDamaged), match="install the newer calib"):
        import_store(newer, tmp_path / "back.db")
