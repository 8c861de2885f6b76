"""Write the open archive of a store."""

import hashlib
import json
import zipfile
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from sqlalchemy import Column, Connection, LargeBinary, Table, func, select

from calib.store.archive import FORMAT, MANIFEST, NOTE, TABLES, encode, member_of, member_of_bytes
from calib.store.chain import chain_head
from calib.store.check_chain import no_progress
from calib.store.digests import batches, key_of
from calib.store.files import new_file
from calib.store.refusals import files_in_words, in_words
from calib.store.schema import newest_revision
from calib.store.session import Store

# The same store gives the same bytes: no clock in the archive.
STAMP = (1980, 1, 1, 0, 0, 0)


@dataclass(frozen=True, slots=True)
class Export:
    """A finished archive."""

    path: Path
    rows: int
    originals: int
    head_sequence: int
    head_hash: str


def export_store(
    store: Store, to: str | Path, *, version: str, progress: Callable[[int, int], None] = no_progress
) -> Export:
    """Write everything a store holds to an archive that other programs can read.

    Parameters
    ----------
    to : str or Path
        The new file; one that is there is never overwritten.
    version : str
        Of calib, for the manifest.
    progress : callable, optional
        Called with the number of rows done and in all.

    Raises
    ------
    StoreError
        If the file is there already or cannot be written, or the store cannot be read.
    """
    target = Path(to).expanduser()
    with (
        files_in_words("write the archive", target),
        in_words(store.path),
        new_file(target) as draft,
        store.engine.connect() as connection,
        zipfile.ZipFile(draft, "w", zipfile.ZIP_DEFLATED) as archive,
    ):
        writer = _Writer(connection, archive, progress)
        manifest = writer.write(version)
    head = manifest["record_chain"]
    return Export(target, writer.done, writer.originals, head["sequence"], head["hash"])


class _Writer:
    """Writes one archive in one state of the store, and counts what it wrote."""

    def __init__(
        self, connection: Connection, archive: zipfile.ZipFile, progress: Callable[[int, int], None]
    ) -> None:
        self.connection, self.archive, self.progress = connection, archive, progress
        self.done = self.originals = 0
        self.members: dict[str, dict[str, Any]] = {}

    def write(self, version: str) -> dict[str, Any]:
        from calib.store import archive as described

        head = chain_head(self.connection)
        counts = {t.name: self.connection.scalar(select(func.count()).select_from(t)) or 0 for t in TABLES}
        self._member(NOTE, iter([(described.__doc__ or "").encode()]))
        for table in TABLES:
            self._member(member_of(table), self._lines(table, sum(counts.values())))
            for column in table.columns:
                if isinstance(column.type, LargeBinary):
                    self._bytes(table, column)
        manifest = {
            "format": FORMAT,
            "calib": version,
            "schema": newest_revision(),
            "record_chain": {"sequence": head.sequence, "hash": head.hash},
            "rows": counts,
            "members": self.members,
        }
        text = json.dumps(manifest, indent=1, sort_keys=True).encode()
        self.archive.writestr(_entry(MANIFEST), text, zipfile.ZIP_DEFLATED)
        return manifest

    def _member(self, name: str, parts: Iterator[bytes]) -> None:
        digest, size = hashlib.sha256(), 0
        with self.archive.open(_entry(name), "w", force_zip64=True) as member:
            for part in parts:
                digest.update(part)
                size += len(part)
                member.write(part)
        self.members[name] = {"sha256": digest.hexdigest(), "bytes": size}

    def _bytes(self, table: Table, column: Column[Any]) -> None:
        """Each file a member of its own, one at a time."""
        key = key_of(table)
        for number in self.connection.scalars(select(key).order_by(key)).all():
            content: bytes = self.connection.execute(select(column).where(key == number)).scalar_one()
            name = member_of_bytes(content)
            if name not in self.members:
                self._member(name, iter([content]))
                self.originals += 1

    def _lines(self, table: Table, total: int) -> Iterator[bytes]:
        key = key_of(table)
        for some in batches(table, self.connection.scalars(select(key).order_by(key)).all()):
            rows = self.connection.execute(select(table).where(key.in_(some)).order_by(key))
            for row in rows:
                yield f"{encode(row._asdict())}\n".encode()
            self.done += len(some)
            self.progress(self.done, total)


def _entry(name: str) -> zipfile.ZipInfo:
    entry = zipfile.ZipInfo(name, STAMP)
    entry.compress_type = zipfile.ZIP_DEFLATED
    entry.external_attr = 0o600 << 16
    return entry
