"""A small invented laboratory: one straight line, two analytes on one bench, and files made on the spot."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from pathlib import Path

from calib.bench.laboratory import Laboratory
from calib.bench.register import LotRecord, add_instrument, add_lot, add_method
from calib.store import Store, open_store
from calib.store.session import Base

NOW = datetime(2026, 4, 1, 12, 0, tzinfo=UTC)
LEVELS = (1.0, 2.0, 4.0, 6.0, 8.0, 10.0)
WOBBLE = (0.03, -0.05, 0.02, 0.04, -0.03, -0.01)  # added to the responses, so that a residual sd exists
METHOD = """name = "{name}"
analyte = "{analyte}"
concentration_unit = "mg/L"
response_unit = "mV"
model = "line"
noise = "uniform"
reference_concentrations = [2.0, 5.0, 9.0]

[acceptance]
preset = "plain"
residual_sd = 0.2
blank = "0.2 mg/L"

[curve]
valid_for = "24 h"
"""


@dataclass(frozen=True)
class Line:
    """One row of a file; the response is a number or a word."""

    sample: str
    role: str
    level: float | None
    response: float | str
    dilution: float = 1.0


def signal(concentration: float, slope: float = 5.0) -> float:
    """What the straight line of this laboratory answers."""
    return round(2.0 + slope * concentration, 6)


def standards(slope: float = 5.0, levels: Sequence[float] = LEVELS) -> list[Line]:
    """Two readings a level, a little off the line."""
    return [
        Line(f"S{n}", "standard", level, signal(level, slope) + sign * WOBBLE[n % 6])
        for n, level in enumerate(levels, start=1)
        for sign in (1.0, -1.0)
    ]


def a_day(slope: float = 5.0, unknowns: Iterable[Line] = ()) -> list[Line]:
    """Standards, a blank, a check, and two unknowns unless others are given."""
    return [
        *standards(slope),
        Line("B", "blank", None, 2.01),
        Line("Q", "check", 5.0, signal(5.0, slope) + 0.02),
        *(unknowns or (unknown("U1", 3.0, slope), unknown("U1", 3.02, slope), unknown("U2", 7.5, slope))),
    ]


def unknown(sample: str, concentration: float, slope: float = 5.0, dilution: float = 1.0) -> Line:
    """An unknown that holds this much, in its cup after dilution."""
    return Line(sample, "unknown", None, signal(concentration, slope), dilution)


def with_response(lines: Iterable[Line], ordinal: int, response: float | str) -> list[Line]:
    """The lines with another response in one, counted from 1."""
    return [
        replace(line, response=response) if n == ordinal else line for n, line in enumerate(lines, start=1)
    ]


HEAD = {
    "instrument": "LX-1",
    "serial": "77",
    "started": "2026-04-01T08:00:00+02:00",
    "operator": "KM",
    "method": "line-a",
    "standard lot": "A-1",
}


def cell(value: float | str | None) -> str:
    return "" if value is None else value if isinstance(value, str) else f"{value:.12g}"


def header_block(lines: Iterable[Line], unit: str = "mg/L", response: str = "mV", **head: str | None) -> str:
    """A file with a header; ``standard_lot=None`` leaves a line of the header out."""
    facts = HEAD | {key.replace("_", " "): value for key, value in head.items()}
    rows = [
        f"{n},{x.sample},{x.role},{cell(x.level)},{cell(x.response)},{cell(x.dilution)}"
        for n, x in enumerate(lines, start=1)
    ]
    top = [f"# {key}: {value}" for key, value in facts.items() if value is not None]
    return "\n".join([*top, f"n,label,kind,alpha [{unit}],signal [{response}],dilution", *rows, ""])


def long_form(
    runs: Mapping[str, Iterable[Line]], column: str = "analyte", at: str = "2026-04-01T08:00+02:00"
) -> str:
    """One row a reading; ``runs`` by analyte, or by what another column says."""
    rows = [
        f"{name},{x.sample},{x.role},{cell(x.level)},{cell(x.response)},{cell(x.dilution)},{n},{at}"
        for name, lines in runs.items()
        for n, x in enumerate(lines, start=1)
    ]
    return "\n".join(
        [f"{column},sample,role,concentration [mg/L],response [mV],dilution,position,time", *rows, ""]
    )


def register(store: Store, folder: Path) -> None:
    """Two instruments, methods for two analytes, and a lot."""
    for name in ("LX-1", "LX-2"):
        add_instrument(
            store,
            name,
            kind="line photometer",
            serial="77" if name == "LX-1" else "78",
            location="Room 1",
            response_ceiling=100.0,
            utc_offset_minutes=120,
            by="KM",
        )
    for name, analyte in (("line-a", "alpha"), ("line-b", "beta")):
        file = folder / f"{name}.toml"
        file.write_text(METHOD.format(name=name, analyte=analyte), encoding="utf-8")
        add_method(store, file, by="KM")
    add_lot(
        store,
        LotRecord("A-1", "alpha in water", 100.0, "mg/L", 0.4, 2.0, None, None, None, None),
        by="KM",
    )


@dataclass(frozen=True)
class Bench:
    """A laboratory, and the folder where its files come from."""

    laboratory: Laboratory
    folder: Path

    @property
    def store(self) -> Store:
        return self.laboratory.store

    def file(self, name: str, text: str) -> Path:
        path = self.folder / name
        path.write_text(text, encoding="utf-8")
        return path

    def log(self, lines: Iterable[Line], name: str = "day.csv", **head: str | None):
        """Log a file with these lines; the one run in it."""
        (record,) = self.laboratory.log(self.file(name, header_block(lines, **head)))
        return record

    def quantify(self, lines: Iterable[Line], name: str = "later.csv", **head: str | None):
        """Quantify a file with these lines; the one run in it."""
        head = {"started": "2026-04-01T15:00:00+02:00"} | head
        (record,) = self.laboratory.quantify(self.file(name, header_block(lines, **head)))
        return record


def open_bench(path: Path) -> Bench:
    return Bench(Laboratory(open_store(path, now=lambda: NOW), "KM"), path.parent)


def state_of(store: Store) -> tuple[object, ...]:
    """Head of the record chain and the number of rows of every table."""
    with store.reading() as session:
        counts = [
            session.connection().exec_driver_sql(f'SELECT count(*) FROM "{table.name}"').scalar_one()
            for table in Base.metadata.sorted_tables
        ]
    return (store.head(), *counts)
