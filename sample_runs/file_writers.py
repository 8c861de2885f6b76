"""The season's files as four instruments would write them. Every writer returns the bytes of one file."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import datetime

from laboratory_truth import Cup
from minimal_workbook import Sheet, workbook_bytes

Response = float | str  # a number, or the word the instrument writes instead


@dataclass(frozen=True, slots=True)
class SeasonRun:
    """All that goes into one file."""

    instrument: str
    serial: str
    method: str
    started: datetime
    operator: str
    lot: str
    cups: tuple[Cup, ...]
    responses: tuple[Response, ...]


def plain(value: float) -> str:
    return f"{value:g}"


def written(response: Response, decimals: int) -> str:
    return response if isinstance(response, str) else f"{response:.{decimals}f}"


def level_text(cup: Cup) -> str:
    return "" if cup.nominal is None else plain(cup.nominal)


def plan_cell(cup: Cup) -> str:
    """The plate plan's words for one well."""
    diluted = "" if cup.dilution == 1.0 else f" x{plain(cup.dilution)}"
    words = {
        "standard": f"std {level_text(cup)}",
        "anchor": f"anchor {level_text(cup)}",
        "check": f"check {level_text(cup)} {cup.sample}",
        "first-check": f"first-check {level_text(cup)} {cup.sample}",
        "unknown": f"unk {cup.sample}{diluted}",
    }
    return words.get(cup.role, cup.role)


def wells_of(cups: tuple[Cup, ...]) -> list[tuple[int, int]]:
    """Row and column of every cup: standards down rows A to C, controls in A10 to C12, unknowns from D1."""
    standards = sum(cup.role in ("standard", "anchor") for cup in cups)
    controls = sum(cup.role != "unknown" for cup in cups) - standards
    unknowns = len(cups) - standards - controls
    return [
        *((index % 3, index // 3) for index in range(standards)),
        *((index // 3, 9 + index % 3) for index in range(controls)),
        *((3 + index // 12, index % 12) for index in range(unknowns)),
    ]


def grid(name: str, cells: Mapping[tuple[int, int], str]) -> list[str]:
    heading = ",".join([name, *(str(column) for column in range(1, 13))])
    rows = [
        ",".join([letter, *(cells.get((row, column), "") for column in range(12))])
        for row, letter in enumerate("ABCDEFGH")
    ]
    return [heading, *rows]


def plate_grid(run: SeasonRun) -> bytes:
    wells = wells_of(run.cups)
    header = [
        "Plate photometer export",
        f"instrument,{run.instrument}",
        f"serial,{run.serial}",
        f"run started,{run.started:%Y-%m-%d %H:%M:%S %z}",
        f"operator,{run.operator}",
        f"method,{run.method}",
        f"standard lot,{run.lot}",
        "concentration unit,ug/L",
        "response unit,1",
    ]
    plan = grid("plan", dict(zip(wells, map(plan_cell, run.cups), strict=True)))
    responses = [written(response, 4) for response in run.responses]
    readings = grid("readings", dict(zip(wells, responses, strict=True)))
    return text_bytes([*header, "", *plan, "", *readings], "\r\n")


def text_bytes(lines: list[str], line_end: str, encoding: str = "utf-8") -> bytes:
    return "".join(line + line_end for line in lines).encode(encoding)


def table(run: SeasonRun, decimals: int) -> list[list[str]]:
    return [
        [str(number), cup.sample, cup.role, level_text(cup), written(response, decimals), plain(cup.dilution)]
        for number, (cup, response) in enumerate(zip(run.cups, run.responses, strict=True), start=1)
    ]


def header_block(run: SeasonRun) -> bytes:
    header = [
        f"# instrument: {run.instrument}",
        f"# serial: {run.serial}",
        f"# started: {run.started.isoformat()}",
        f"# operator: {run.operator}",
        f"# method: {run.method}",
        f"# standard lot: {run.lot}",
        "n,label,kind,oxygen [mg/L],intensity [kcounts/s],dilution",
    ]
    return text_bytes([*header, *(",".join(row) for row in table(run, 3))], "\n")


def semicolon_lines(run: SeasonRun, quantity: str, signal: str, decimals: int) -> list[str]:
    offset = run.started.isoformat()[-6:]
    header = [
        f"Instrument;{run.instrument}",
        f"Serial;{run.serial}",
        f"Date;{run.started:%d.%m.%Y %H:%M}",
        f"UTC offset;{offset}",
        f"Operator;{run.operator}",
        f"Method;{run.method}",
        f"Standard lot;{run.lot}",
        "",
        f"No;Sample;Type;{quantity};{signal};Dilution",
    ]
    rows = [
        ";".join([number, sample, role, *(number_text.replace(".", ",") for number_text in numbers)])
        for number, sample, role, *numbers in table(run, decimals)
    ]
    return [*header, *rows]


def electrode_text(run: SeasonRun) -> bytes:
    return text_bytes(semicolon_lines(run, "Nitrate (mg/L)", "Current (nA)", 2), "\r\n", "cp1252")


def probe_with_decimal_commas(run: SeasonRun) -> bytes:
    lines = semicolon_lines(run, "Oxygen (mg/L)", "Intensity (kcounts/s)", 3)
    return text_bytes(lines, "\r\n", "utf-8-sig")


def workbook(run: SeasonRun) -> bytes:
    local = run.started.replace(tzinfo=None)
    info: list[list[object]] = [
        ["Growth bioassay reader"],
        ["Instrument", run.instrument],
        ["Serial", run.serial],
        ["Started", local],
        ["UTC offset", run.started.isoformat()[-6:]],
        ["Operator", run.operator],
        ["Method", run.method],
        ["Standard lot", run.lot],
    ]
    heading: list[object] = ["Vessel", "Sample", "Role", "Carbon [ug/L]", "Growth rate [1/d]", "Dilution"]
    rows = [
        [f"V-{number:02d}", cup.sample, cup.role, cup.nominal, cell(response), cup.dilution]
        for number, (cup, response) in enumerate(zip(run.cups, run.responses, strict=True), start=1)
    ]
    return workbook_bytes([Sheet("Info", info, merged="A1:B1"), Sheet("Readings", [heading, *rows])])


def cell(response: Response) -> Response:
    return response if isinstance(response, str) else round(response, 4)


@dataclass(frozen=True, slots=True)
class FileStyle:
    suffix: str
    write: Callable[[SeasonRun], bytes]


STYLES: Mapping[tuple[str, str | None], FileStyle] = {
    ("PP-2", None): FileStyle(".csv", plate_grid),
    ("OP-1", None): FileStyle(".csv", header_block),
    ("OP-1", "semicolon"): FileStyle(".txt", probe_with_decimal_commas),
    ("EE-3", None): FileStyle(".txt", electrode_text),
    ("GB-4", None): FileStyle(".xlsx", workbook),
}
