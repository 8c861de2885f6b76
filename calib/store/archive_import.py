"""Make a store from an open archive: whole and checked, or not at all."""

import hashlib
import json
import zipfile
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from sqlalchemy import Connection, Table, insert

from calib.errors import SchemaTooNew, StoreDamaged, StoreError
from calib.store.archive import FORMAT, MANIFEST, TABLES, decode, member_of
from calib.store.check import check_store
from calib.store.check_chain import no_progress
from calib.store.files import new_file
from calib.store.findings import StoreFinding
from calib.store.migrating import migrate
from calib.store.opening import BUSY_SECONDS, store_path
from calib.store.refusals import files_in_words, in_words
from calib.store.schema import REVISIONS
from calib.store.session import WRITING, Store, connect_engine, local_now

ROWS_AT_ONCE = 2000
LONGEST_MANIFEST = 50_000_000
PIECE = 1 << 20


@dataclass(frozen=True, slots=True)
class Import:
    """A store made from an archive, and what the check of it counted."""

    path: Path
    rows: int
    entries: int
    head_sequence: int
    head_hash: str


def import_store(
    archive: str | Path,
    to: str | Path,
    *,
    progress: Callable[[int, int], None] = no_progress,
) -> Import:
    """Make a new store from an archive: the same rows, digits, originals and record chain.

    Parameters
    ----------
    archive : str or Path
        What ``export_store`` wrote, of this schema or an older one.
    to : str or Path
        The new store; one that is there is never overwritten.
    progress : callable, optional
        Called with the number of rows done and in all.

    Raises
    ------
    StoreDamaged
        If a member does not fit its fingerprint, or the record chain does not fit the rows.
    StoreError
        If it is no archive, or a store is there already. Nothing is left behind.
    """
    source, target = Path(archive).expanduser(), store_path(to)
    with files_in_words("import into the store", target):
        if target.exists():
            raise StoreError(f"there is a file {target} already; an archive is imported into a new store")
        with _opened(source) as held:
            manifest = _manifest(source, held)
            _refuse_changed(source, held, manifest)
            with new_file(target) as draft:
                store = Store(draft, connect_engine(draft, BUSY_SECONDS), local_now)
                with store, in_words(target):
                    migrate(store.engine)
                    _load(source, store, held, manifest, progress)
                    return _checked(source, target, store, manifest)


def _opened(source: Path) -> zipfile.ZipFile:
    try:
        return zipfile.ZipFile(source)
    except (zipfile.BadZipFile, OSError) as cause:
        raise StoreError(
            f"{source} is no archive of a store ({cause}); name what store export wrote"
        ) from cause


def _manifest(source: Path, held: zipfile.ZipFile) -> Mapping[str, Any]:
    try:
        if held.getinfo(MANIFEST).file_size > LONGEST_MANIFEST:
            raise StoreDamaged(f"the archive {source} has a manifest that is far too large")
        manifest: Mapping[str, Any] = json.loads(held.read(MANIFEST))
        known = manifest["format"] == FORMAT
        for key in ("record_chain", "members", "rows", "schema"):
            manifest[key]
    except (KeyError, ValueError, TypeError, zipfile.BadZipFile) as cause:
        raise StoreError(
            f"{source} is no archive of a store: its manifest cannot be read ({cause})"
        ) from cause
    if not known:
        raise StoreError(f"{source} has format {manifest['format']}; this calib reads {FORMAT}")
    if manifest["schema"] not in REVISIONS:
        raise SchemaTooNew(
            f"{source} has schema {manifest['schema']}, which a newer calib made; install the newer calib"
        )
    return manifest


def _refuse_changed(source: Path, held: zipfile.ZipFile, manifest: Mapping[str, Any]) -> None:
    """Compare every member with its fingerprint; names are looked up, never followed as paths."""
    members = manifest["members"]
    there = set(held.namelist()) - {MANIFEST}
    for name in sorted(there ^ set(members)):
        what = "is missing" if name in members else "does not belong to it"
        raise StoreDamaged(f"the archive {source} was changed: {name} {what}; nothing was imported")
    for name, told in members.items():
        digest, size = hashlib.sha256(), 0
        try:
            for piece in _pieces(held, name, told["bytes"]):
                digest.update(piece)
                size += len(piece)
        except (zipfile.BadZipFile, OSError, EOFError, ValueError) as cause:
            raise StoreDamaged(f"the archive {source} is damaged: {name} cannot be read ({cause})") from cause
        if (digest.hexdigest(), size) != (told["sha256"], told["bytes"]):
            raise StoreDamaged(
                f"the archive {source} was changed: {name} does not fit its fingerprint; nothing was imported"
            )


def _pieces(held: zipfile.ZipFile, name: str, most: int) -> Iterator[bytes]:
    """The bytes of a member, not many more than it may have."""
    left = most + 1
    with held.open(name) as member:
        while left > 0 and (piece := member.read(min(PIECE, left))):
            left -= len(piece)
            yield piece


def _load(
    source: Path,
    store: Store,
    held: zipfile.ZipFile,
    manifest: Mapping[str, Any],
    progress: Callable[[int, int], None],
) -> None:
    total, done = sum(manifest["rows"].values()), 0
    writing = store.engine.execution_options(**{WRITING: True})
    with writing.begin() as connection:
        connection.exec_driver_sql("PRAGMA defer_foreign_keys = ON")
        for table in TABLES:
            if member_of(table) in manifest["members"]:
                for count in _load_table(source, connection, held, table):
                    done += count
                    progress(min(done, total), total)


def _load_table(source: Path, connection: Connection, held: zipfile.ZipFile, table: Table) -> Iterator[int]:
    rows: list[dict[str, Any]] = []
    originals = _Originals(held)
    with held.open(member_of(table)) as lines:
        for number, line in enumerate(lines, start=1):
            try:
                rows.append(decode(table, line.decode(), originals))
            except (ValueError, KeyError, TypeError) as cause:
                raise StoreDamaged(
                    f"the archive {source} was changed: {member_of(table)}, line {number}: {cause}"
                ) from cause
            if len(rows) == ROWS_AT_ONCE or originals.held:
                connection.execute(insert(table), rows)
                yield len(rows)
                rows, originals.held = [], False
    if rows:
        connection.execute(insert(table), rows)
        yield len(rows)


class _Originals(Mapping[str, bytes]):
    """Files of the archive by the name of their member, read when they are asked for."""

    def __init__(self, archive: zipfile.ZipFile) -> None:
        self.archive = archive
        self.held = False

    def __getitem__(self, name: str) -> bytes:
        self.held = True
        return self.archive.read(name)

    def __iter__(self) -> Iterator[str]:
        return iter(self.archive.namelist())

    def __len__(self) -> int:
        return len(self.archive.namelist())


def _checked(source: Path, target: Path, store: Store, manifest: Mapping[str, Any]) -> Import:
    check = check_store(store)
    if check.findings:
        raise StoreDamaged(_damage(source, check.findings))
    head = manifest["record_chain"]
    if (check.head_sequence, check.head_hash) != (head["sequence"], head["hash"]):
        raise StoreDamaged(
            f"the archive {source} was changed: its record chain ends at entry {check.head_sequence}, "
            f"the manifest says {head['sequence']}; nothing was imported"
        )
    return Import(target, check.rows, check.entries, check.head_sequence, check.head_hash)


def _damage(source: Path, findings: Sequence[StoreFinding]) -> str:
    first = findings[0]
    more = f" (and {len(findings) - 1} more)" if len(findings) > 1 else ""
    return f"the archive {source} was changed: {first.place} {first.message}{more}; nothing was imported"
