"""The smallest workbook a spreadsheet opens, the same bytes every time.

Written by hand, because a workbook library stamps the time of saving into the file, and because the bytes
would change with its version. Stored, not compressed: compressed bytes differ between zlib builds.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from io import BytesIO
from xml.sax.saxutils import escape
from zipfile import ZIP_STORED, ZipFile, ZipInfo

MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
RELATIONS = "http://schemas.openxmlformats.org/package/2006/relationships"
OFFICE = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
TYPES = "http://schemas.openxmlformats.org/package/2006/content-types"
SPREADSHEET = "application/vnd.openxmlformats-officedocument.spreadsheetml"
DECLARATION = '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n'
SPREADSHEET_EPOCH = datetime(1899, 12, 30)  # day 0 of the 1900 date system
ZIP_EPOCH = (1980, 1, 1, 0, 0, 0)

STYLESHEET = (
    f'<styleSheet xmlns="{MAIN}"><fonts count="1"><font/></fonts>'
    '<fills count="2"><fill><patternFill patternType="none"/></fill>'
    '<fill><patternFill patternType="gray125"/></fill></fills>'
    '<borders count="1"><border/></borders><cellStyleXfs count="1"><xf/></cellStyleXfs>'
    '<cellXfs count="2"><xf xfId="0"/><xf numFmtId="22" xfId="0" applyNumberFormat="1"/></cellXfs>'
    '<cellStyles count="1"><cellStyle name="Normal" xfId="0" builtinId="0"/></cellStyles></styleSheet>'
)


@dataclass(frozen=True, slots=True)
class Sheet:
    name: str
    rows: Sequence[Sequence[object]]
    merged: str | None = None


def serial_date(at: datetime) -> float:
    passed = at - SPREADSHEET_EPOCH
    return passed.days + passed.seconds / 86400


def cell_xml(reference: str, value: object) -> str:
    if value is None:
        return ""
    if isinstance(value, datetime):
        return f'<c r="{reference}" s="1"><v>{serial_date(value)!r}</v></c>'
    if isinstance(value, str):
        return f'<c r="{reference}" t="inlineStr"><is><t>{escape(value)}</t></is></c>'
    return f'<c r="{reference}"><v>{value!r}</v></c>'


def sheet_xml(sheet: Sheet) -> str:
    rows = "".join(
        f'<row r="{row}">'
        + "".join(cell_xml(f"{chr(65 + column)}{row}", value) for column, value in enumerate(cells))
        + "</row>"
        for row, cells in enumerate(sheet.rows, start=1)
    )
    merged = f'<mergeCells count="1"><mergeCell ref="{sheet.merged}"/></mergeCells>' if sheet.merged else ""
    return f'<worksheet xmlns="{MAIN}"><sheetData>{rows}</sheetData>{merged}</worksheet>'


def content_types(count: int) -> str:
    parts = [("/xl/workbook.xml", "sheet.main"), ("/xl/styles.xml", "styles")]
    parts += [(f"/xl/worksheets/sheet{number}.xml", "worksheet") for number in range(1, count + 1)]
    overrides = "".join(
        f'<Override PartName="{name}" ContentType="{SPREADSHEET}.{kind}+xml"/>' for name, kind in parts
    )
    relations = "application/vnd.openxmlformats-package.relationships+xml"
    return (
        f'<Types xmlns="{TYPES}"><Default Extension="rels" ContentType="{relations}"/>'
        f'<Default Extension="xml" ContentType="application/xml"/>{overrides}</Types>'
    )


def relationships(targets: Sequence[tuple[str, str]]) -> str:
    lines = "".join(
        f'<Relationship Id="rId{number}" Type="{OFFICE}/{kind}" Target="{target}"/>'
        for number, (kind, target) in enumerate(targets, start=1)
    )
    return f'<Relationships xmlns="{RELATIONS}">{lines}</Relationships>'


def workbook_xml(sheets: Sequence[Sheet]) -> str:
    lines = "".join(
        f'<sheet name="{escape(sheet.name)}" sheetId="{number}" r:id="rId{number}"/>'
        for number, sheet in enumerate(sheets, start=1)
    )
    return f'<workbook xmlns="{MAIN}" xmlns:r="{OFFICE}"><sheets>{lines}</sheets></workbook>'


def workbook_bytes(sheets: Sequence[Sheet]) -> bytes:
    numbered = [(f"worksheets/sheet{number}.xml", sheet) for number, sheet in enumerate(sheets, start=1)]
    targets = [("worksheet", name) for name, _ in numbered]
    parts = {
        "[Content_Types].xml": content_types(len(sheets)),
        "_rels/.rels": relationships([("officeDocument", "xl/workbook.xml")]),
        "xl/workbook.xml": workbook_xml(sheets),
        "xl/_rels/workbook.xml.rels": relationships([*targets, ("styles", "styles.xml")]),
        "xl/styles.xml": STYLESHEET,
        **{f"xl/{name}": sheet_xml(sheet) for name, sheet in numbered},
    }
    return zip_bytes({name: DECLARATION + xml for name, xml in parts.items()})


def zip_bytes(parts: dict[str, str]) -> bytes:
    buffer = BytesIO()
    with ZipFile(buffer, "w", ZIP_STORED) as archive:
        for name, xml in parts.items():
            entry = ZipInfo(name, ZIP_EPOCH)
            entry.create_system = 3  # the same on every platform
            archive.writestr(entry, xml.encode())
    return buffer.getvalue()
