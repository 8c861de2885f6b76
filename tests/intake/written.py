"""Writes one and the same measurement in the style of each instrument."""

import io
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import datetime

import openpyxl

from calib.intake import Role


@dataclass(frozen=True)
class Line:
    """One reading as a person would write it down; the response is a number or a word."""

    sample: str
    role: Role
    concentration: float | None
    response: float | str
    dilution: float = 1.0


STARTED = datetime(2026, 3, 2, 8, 31)


def number(value: float | str | None, sign: str) -> str:
    return "" if value is None else str(value).replace(".", sign) if isinstance(value, float) else value


def header_block(lines: Sequence[Line]) -> bytes:
    head = "# instrument: X-1\n# started: 2026-03-02T08:31:00+01:00\n# method: m\n# operator: KM\n"
    rows = [
        f"{n},{x.sample},{x.role},{number(x.concentration, '.')},{number(x.response, '.')},{x.dilution}"
        for n, x in enumerate(lines, start=1)
    ]
    return (head + "n,label,kind,nitrate [mg/L],current [nA],dilution\n" + "\n".join(rows)).encode()


def semicolon(lines: Sequence[Line]) -> bytes:
    head = "Instrument;X-1\r\nDate;02.03.2026 08:31\r\nUTC offset;+01:00\r\nOperator;JT\r\n\r\n"
    rows = [
        f"{n};{x.sample};{x.role.upper()};{number(x.concentration, ',')};{number(x.response, ',')};"
        f"{number(x.dilution, ',')}"
        for n, x in enumerate(lines, start=1)
    ]
    text = head + "No;Sample;Type;Nitrate (mg/l);Current (nA);Dilution\r\n" + "\r\n".join(rows)
    return text.encode("cp1252")


def workbook(lines: Sequence[Line]) -> bytes:
    book = openpyxl.Workbook()
    info = book.active
    info.title = "Info"
    info.append(["Run sheet"])
    info.merge_cells("A1:B1")
    for pair in (("Instrument", "X-1"), ("Started", STARTED), ("UTC offset", "+01:00"), ("Operator", "KM")):
        info.append(pair)
    sheet = book.create_sheet("Readings")
    sheet.append(["Vessel", "Sample", "Role", "Nitrate [mg/L]", "Current [nA]", "Dilution"])
    for n, x in enumerate(lines, start=1):
        role = x.role.replace("-", " ").capitalize()
        sheet.append([str(n), x.sample, role, x.concentration, x.response, x.dilution])
    return saved(book)


def long_form(lines: Sequence[Line], separator: str = "\t", sign: str = ".") -> bytes:
    titles = "response [nA],analyte,role,sample,dilution,position,instrument,time,concentration [mg/L]"
    rows = [titles.split(",")] + [
        [
            number(x.response, sign),
            "nitrate",
            x.role.value,
            x.sample,
            number(x.dilution, sign),
            str(n),
            "X-1",
            "2026-03-02 07:31:00Z",
            number(x.concentration, sign),
        ]
        for n, x in enumerate(lines, start=1)
    ]
    return "\n".join(separator.join(f'"{cell}"' for cell in row) for row in rows).encode("utf-16")


WRITERS: dict[str, Callable[[Sequence[Line]], bytes]] = {
    "header-block": header_block,
    "semicolon": semicolon,
    "workbook": workbook,
    "long-form": long_form,
}


def saved(book: openpyxl.Workbook) -> bytes:
    stream = io.BytesIO()
    book.save(stream)
    return stream.getvalue()


PLATE = """Plate photometer export
instrument,PP-2
serial,4471
run started,2026-03-02 08:12:00 +0100
operator,KM
method,toxin-plate
standard lot,TX-2601
concentration unit,ug/L
response unit,1

plan,1,2,3,4
A,blank,zero,std 0.05,Anchor 5
B,unk L-0301 x10,check 0.5,control 2 QC low,
C,first-check 0.4 second source,carry-over,blank buffer,unk Inlet x two

readings,1,2,3,4
A,0.051,1.9,1.7,OVRFLW
B,0.8,0.9,,0.04
C,1.1,1.8,0.05,0.7
"""

PROBE = """# instrument: OP-1
# serial: 0917
# started: 2026-03-02T08:20:00+01:00
# operator: JT
# method: oxygen-probe
# standard lot: OX-2602
n,label,kind,oxygen [mg/L],intensity [kcounts/s],dilution
1,dark,blank,,0.02,1
2,S1,standard,0.5,85.1,1
3,U1,unknown,,40.2,2
"""

ELECTRODE = """Instrument;EE-3
Serial;E-55-0312
Date;02.03.2026 08:31
UTC offset;+01:00
Operator;KM
Method;nitrate-electrode
Standard lot;NI-2601

No;Sample;Type;Nitrate (µg/L);Current (nA);Dilution
1;S1;standard;0,5;29,1;1
2;S2;standard;1,234;55;1
3;U1;unknown;;ND;10
"""

LONG = """sample,role,concentration [ug/L],response [1],replicate,dilution,position,time
S1,standard,1,0.5,1,1,A1,2026-03-02 08:00
S1,standard,1,0.52,2,1,A1,2026-03-02 08:01
U1,unknown,,0.3,1,,A2,2026-03-02 08:10
"""


def growth_reader() -> openpyxl.Workbook:
    book = openpyxl.Workbook()
    info = book.active
    info.title = "Info"
    info.append(["Growth reader"])
    info.merge_cells("A1:B1")
    for pair in (
        ("Instrument", "GB-4"),
        ("Serial", 20817),
        ("Started", datetime(2026, 3, 2, 9, 5)),
        ("UTC offset", "+01:00"),
        ("Operator", "KM"),
        ("Method", "carbon-growth"),
        ("Standard lot", "AC-2601"),
    ):
        info.append(pair)
    sheet = book.create_sheet("Readings")
    sheet.append(["Vessel", "Sample", "Role", "Carbon [ug/L]", "Growth rate [1/d]", "Dilution"])
    sheet.append(["V1", "S1", "Standard", 10, 0.41, 1])
    sheet.append(["V2", "U1", "unknown", None, "ERR", 2])
    return book
