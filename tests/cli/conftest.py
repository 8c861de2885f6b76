import json
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from small_laboratory import a_day, header_block, open_bench, state_of, unknown, with_response

from calib.cli.main import run


@dataclass(frozen=True)
class Outcome:
    """What a command left behind: its exit code and what it wrote."""

    code: int
    out: str
    err: str

    @property
    def json(self) -> Any:
        """The output as strict JSON: NaN and Infinity, which are none, raise."""
        return json.loads(self.out, parse_constant=pytest.fail)


@dataclass(frozen=True)
class Desk:
    """A store, a folder, and the command line over both."""

    store: Path
    call: Callable[..., Outcome]

    @property
    def folder(self) -> Path:
        return self.store.parent

    def __call__(self, *arguments: object) -> Outcome:
        return self.call("--store", str(self.store), *(str(a) for a in arguments))

    def state(self) -> tuple[object, ...]:
        bench = open_bench(self.store)
        try:
            return state_of(bench.store)
        finally:
            bench.laboratory.close()

    def file(self, name: str, content: str | bytes) -> Path:
        path = self.folder / name
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    def refused(self, *arguments: object) -> str:
        """The one line of a refusal with exit code 1, after which the store is as it was."""
        before = self.state()
        outcome = self(*arguments)
        assert (outcome.code, outcome.out) == (1, ""), outcome
        assert outcome.err.count("\n") == 1
        assert outcome.err.startswith("calib: ")
        assert "Traceback" not in outcome.err
        assert self.state() == before
        return outcome.err


@pytest.fixture
def call(capsys, monkeypatch) -> Callable[..., Outcome]:
    monkeypatch.setenv("CALIB_BY", "KM")
    monkeypatch.delenv("CALIB_STORE", raising=False)

    def command(*arguments: str) -> Outcome:
        capsys.readouterr()
        code = run(list(arguments))
        written = capsys.readouterr()
        return Outcome(code, written.out, written.err)

    return command


@pytest.fixture
def desk(laboratory_path: Path, call) -> Desk:
    return Desk(laboratory_path, call)


@pytest.fixture(scope="session")
def worked_store(tmp_path_factory, registered_store: Path) -> Path:
    """A store with an accepted run, a rejected one, and later unknowns; copied for each test."""
    folder = tmp_path_factory.mktemp("worked")
    path = folder / "lab.db"
    path.write_bytes(registered_store.read_bytes())
    bench = open_bench(path)
    bench.log(a_day(), "accepted.csv")
    bench.log(with_response(a_day(), 3, 40.0), "rejected.csv", started="2026-03-30T08:00:00+02:00")
    bench.quantify([unknown("U1", 3.0), unknown("U2", 14.0)], "later.csv")
    bench.laboratory.close()
    return path


@pytest.fixture
def worked(tmp_path: Path, worked_store: Path, call) -> Desk:
    path = tmp_path / "lab.db"
    path.write_bytes(worked_store.read_bytes())
    return Desk(path, call)


@pytest.fixture
def day(desk: Desk) -> Path:
    return desk.file("day.csv", header_block(a_day()))
