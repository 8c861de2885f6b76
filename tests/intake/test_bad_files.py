"""A bad file is refused in one line that says what, where, and what to do."""

import io
import os
import zipfile
from datetime import datetime
from pathlib import Path

import openpyxl
import pytest

from calib.errors import InputError, MissingColumn, NotANumber, UnknownUnit, UnreadableFile
from calib.intake import read as reading
from calib.intake import read_file, read_text, workbook

from .written import ELECTRODE, LONG, PLATE, PROBE, growth_reader, saved

HEAD = "sample,role,concentration [ug/L],response [1],replicate,dilution,position,time\n"
GOOD_ROW = "S1,standard,1,0.5,1,1,A1,2026-03-02 08:00\n"


def refusal(text: str, layout: str | None = None) -> InputError:
    with pytest.raises(InputError) as caught:
        read_text(text, layout)
    assert "\n" not in str(caught.value)
    assert str(caught.value).startswith("pasted text: ")
    return caught.value


def file_refusal(path: Path) -> str:
    with pytest.raises(InputError) as caught:
        read_file(path)
    assert "\n" not in str(caught.value)
    assert path.name in str(caught.value)
    return str(caught.value)


def workbook_refusal(tmp_path: Path, book: openpyxl.Workbook) -> str:
    path = tmp_path / "growth.xlsx"
    path.write_bytes(saved(book))
    return file_refusal(path)


# Rows of a long form.


@pytest.mark.parametrize(
    ("row", "kind", "words"),
    [
        ("S2,standard,1,12x4,1,1,A2,", NotANumber, "row 3, column response: '12x4' is no number"),
        ("S2,standard,x,1,1,1,A2,", NotANumber, "row 3, column concentration: 'x' is no number"),
        ("S2,standard,NaN,1,1,1,A2,", NotANumber, "column concentration: 'NaN' is no number"),
        ("S2,standard,inf,1,1,1,A2,", NotANumber, "column concentration: 'inf' is no number"),
        ("S2,standard,1e999,1,1,1,A2,", NotANumber, "column concentration: '1e999' is not finite"),
        ("S2,standard,-1,1,1,1,A2,", NotANumber, "the concentration '-1' is negative"),
        ("S2,standard,,1,1,1,A2,", InputError, "a standard needs its concentration"),
        ("S2,first check,,1,1,1,A2,", InputError, "a first-check needs its concentration"),
        ("S2,blank,5,1,1,1,A2,", InputError, "a blank has no concentration, but 5 is given"),
        (
            "S2,calibrant,1,1,1,1,A2,",
            InputError,
            "column role: 'calibrant' is no role: use one of blank, zero",
        ),
        ("S2,,1,1,1,1,A2,", InputError, "'' is no role"),
        (",unknown,,1,1,1,A2,", InputError, "column sample: an unknown has no sample name"),
        ("S2,unknown,,1,1,0,A2,", NotANumber, "column dilution: the dilution '0' is not above 0"),
        ("S2,unknown,,1,1,-2,A2,", NotANumber, "the dilution '-2' is not above 0"),
        ("S2,unknown,,1,1,inf,A2,", NotANumber, "column dilution: 'inf' is no number"),
        ("S2,unknown,,1,1.5,1,A2,", NotANumber, "column replicate: the replicate '1.5' is no whole number"),
        (
            "S2,unknown,,1,1,1,A2,31.02.2026 08:00",
            InputError,
            "column time: the date '31.02.2026 08:00' does not",
        ),
        ("S2,unknown,,1,1,1,A2,2026-03-02 08:00Z", InputError, "column time: some times have an offset"),
        ("S2,unknown,,1,1,1,A1,", InputError, "row 3: position 'A1' is there twice, first in row 2"),
        ("S2,standard,0,5,0,5,1,1,A2,", InputError, "row 3: .* stands under no heading: a decimal comma"),
        ("S2,standard,1", InputError, "row 3: the row ends before its response"),
        ('S2,standard,"1,234",1,1,1,A2,', NotANumber, "'1,234' has a comma, but '0.5' in row 2 has a point"),
        ('S2,"standard,1,1,1,1,A2,', UnreadableFile, "row 3: the cells cannot be told apart"),
    ],
)
def test_a_bad_row_is_named(row, kind, words):
    error = refusal(HEAD + GOOD_ROW + row + "\n")
    assert type(error) is kind
    with pytest.raises(InputError, match=words):
        raise error


def test_the_first_bad_row_is_told_and_the_rest_counted():
    bad = ["S,standard,x,1,1,1,,", "S,standard,1,1,1,1,,", "S,calibrant,1,1,1,1,,", "S,standard,1,y,1,0,,"]
    message = str(refusal(HEAD + "\n".join(bad) + "\n"))
    assert "row 2, column concentration: 'x'" in message
    assert message.endswith("; and 3 more: rows 4, 5")


def test_many_bad_rows_still_make_one_short_line():
    message = str(refusal(HEAD + "S,standard,x,1,1,1,,\n" * 500))
    assert "and 499 more: rows 3, 4, 5" in message
    assert len(message) < 300


def test_a_cell_with_line_ends_stays_on_one_line():
    assert "'a\\\\nb'" in str(refusal(HEAD + 'S,standard,1,"a\nb",1,1,,\n')).replace("\\", "\\\\")


# Headings and units.


@pytest.mark.parametrize(
    ("heading", "kind", "words"),
    [
        (
            "sample,role,concentration [ug/L]",
            MissingColumn,
            "there is no column response: add one with a unit",
        ),
        (
            "sample,role,response [1]",
            MissingColumn,
            "there is no column concentration: .*concentration \\[ug/L\\]",
        ),
        ("sample,concentration [ug/L],response [1]", MissingColumn, "there is no column role"),
        ("role,concentration [ug/L],response [1]", MissingColumn, "there is no column sample"),
        ("sample,role,role,concentration [ug/L],response [1]", MissingColumn, "column role is there twice"),
        (
            "sample,label,role,concentration [ug/L],response [1]",
            MissingColumn,
            "column sample is there twice",
        ),
        ("sample,role,concentration [ug/L],concentration [ug/L],response [1]", MissingColumn, "there twice"),
        (
            "sample,role,concentration [ug/L],concentration [mg/L],response [1]",
            UnknownUnit,
            "in ug/L and mg/L",
        ),
        ("sample,role,concentration [ug/L] [mg/L],response [1]", UnknownUnit, "has two units"),
        ("sample,role,concentration,response [1]", UnknownUnit, "column concentration has no unit"),
        (
            "sample,role,concentration [ug/L],response",
            UnknownUnit,
            "column response has no unit: .*response \\[1\\]",
        ),
        ("sample,role,concentration [ug/L],response []", UnknownUnit, "column response has no unit"),
        (
            "sample,role,concentration [ppm],response [1]",
            UnknownUnit,
            "'ppm' is no known unit .* use one of pg/L",
        ),
        ("sample,role,lead [ug/L],zinc [ug/L],current [nA]", MissingColumn, "3 columns have a unit"),
    ],
)
def test_a_bad_heading_is_named(heading, kind, words):
    error = refusal(heading + "\nS1,standard,1,1,1\n")
    assert type(error) is kind
    with pytest.raises(InputError, match="row 1: .*" + words):
        raise error


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (HEAD, "there is a heading but no readings"),
        (PROBE[: PROBE.index("n,label")], "a header but no table of readings"),
        (PROBE[: PROBE.index("1,dark")], "there is a heading but no readings"),
        (ELECTRODE[: ELECTRODE.index("No;")], "a header but no table of readings"),
        ("", "the file is empty"),
        (" \n\n", "the file is empty"),
        ("dear colleague,\nhere are the results", "its layout is not known"),
        ("\ud800", "broken characters"),
    ],
)
def test_text_without_readings_is_refused(text, words):
    assert words in str(refusal(text))


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        (
            "2026-03-02T08:20:00+01:00",
            "03/02/2026",
            "row 3: the date '03/02/2026' cannot be read without guessing",
        ),
        (
            "# operator: JT",
            "# operator: JT\n# operator: KM",
            "row 5: operator is given twice, as 'JT' and as 'KM'",
        ),
        ("# operator: JT", "# UTC offset: +03:00", "the UTC offset differs from the one in the date"),
    ],
)
def test_a_bad_header_line_is_named(old, new, words):
    assert words in str(refusal(PROBE.replace(old, new)))


def test_a_run_has_one_standard_lot():
    text = "sample,role,lot,concentration [ug/L],response [1]\nS1,standard,L1,1,1\nS2,standard,L2,2,2\n"
    assert "row 3: lot L2 differs from L1" in str(refusal(text))


def test_a_row_that_leaves_its_run_open_is_named():
    text = "sample,role,analyte,concentration [ug/L],response [1]\nS1,standard,lead,1,1\nU1,unknown,,,2\n"
    assert "row 3: the analyte is empty but other rows have one" in str(refusal(text))


def test_an_unknown_layout_name_is_answered_with_the_known_ones():
    with pytest.raises(
        InputError, match="use one of workbook, plate-grid, header-block, semicolon, long-form"
    ):
        read_text(LONG, layout="pdf")


@pytest.mark.parametrize("layout", ["workbook", "plate-grid", "header-block", "semicolon"])
def test_a_wrong_layout_that_is_forced_is_refused(layout):
    refusal("a,b\n1,2\n", layout)


# Plates.


@pytest.mark.parametrize(
    ("old", "new", "kind", "words"),
    [
        ("std 0.05", "std", InputError, "row 12, column 3, well A3: 'std' does not say what the well holds"),
        ("std 0.05", "std -1", NotANumber, "well A3: the concentration '-1' is negative"),
        ("std 0.05", "std nan", NotANumber, "well A3: 'nan' is no number"),
        ("std 0.05", "calibrant 1", InputError, "write blank \\[LABEL\\], zero, std C"),
        ("check 0.5", "check 0.5 mg/L", UnknownUnit, "well B2: .* has a unit in the well"),
        ("x10", "x0", NotANumber, "well B1: the dilution '0' is not above 0"),
        ("1.9", "1.9.2", NotANumber, "row 17, column 2, well A2: '1.9.2' has more than one sign"),
        ("1.9", "wet", NotANumber, "row 17, column 2, well A2: 'wet' is no number"),
        ("C,1.1,1.8,0.05,0.7\n", "", InputError, "readings are 2 x 4 .*, but the plan in row 11 is 3 x 4"),
        ("readings,1,2,3,4", "readings,1,2,3,5", InputError, "give both grids the same rows and columns"),
        (
            "plan,1,2,3,4",
            "plan,1,2,2,4",
            MissingColumn,
            "row 11: the columns of the grid plan are not 1, 2, 3",
        ),
        ("B,0.8", "A,0.8", InputError, "row 18: row letter A is there twice, first in row 17"),
        ("B,0.8", "7,0.8", InputError, "row 18: '7' is no row letter"),
        ("A,0.051,1.9", "A,0,051,1,9", InputError, "row 17: line A has more cells than the grid has columns"),
        ("plan,1,2,3,4", "", MissingColumn, "there is no grid headed plan"),
        ("readings,1,2,3,4", "", MissingColumn, "there is no grid headed readings"),
        ("concentration unit,ug/L\n", "", UnknownUnit, "the head has no concentration unit"),
        ("response unit,1\n", "", UnknownUnit, "the head has no response unit"),
        (
            "unit,ug/L\n",
            "unit,ug/L\nconcentration unit,mg/L\n",
            InputError,
            "is given twice, as 'ug/L' and as",
        ),
        ("unit,ug/L", "unit,cups", UnknownUnit, "'cups' is no known unit"),
        ("2026-03-02 08:12:00 +0100", "soon", InputError, "row 4: the date 'soon' cannot be read"),
    ],
)
def test_a_bad_plate_is_refused_with_its_well(old, new, kind, words):
    assert old in PLATE
    error = refusal(PLATE.replace(old, new, 1))
    assert type(error) is kind
    with pytest.raises(InputError, match=words):
        raise error


# Workbooks.


@pytest.mark.parametrize(
    ("cell", "value", "words"),
    [
        ("E2", "12x4", "sheet Readings, row 2, column Growth rate: '12x4' is no number"),
        ("E2", True, "'True' is no number"),
        ("E2", datetime(2026, 3, 2), "is no number"),
        ("E2", "#DIV/0!", "'#DIV/0!' is no number"),
        ("D2", None, "sheet Readings, row 2, column Carbon: a standard needs its concentration"),
        ("A3", "V1", "position 'V1' is there twice"),
        ("D1", "Carbon", "sheet Readings, row 1: there is no column concentration"),
        ("E2", "=1+1", "sheet Readings, row 2, column E: a formula has no stored value"),
    ],
)
def test_a_bad_cell_of_a_sheet_is_named(tmp_path: Path, cell, value, words):
    book = growth_reader()
    book["Readings"][cell] = value
    assert words in workbook_refusal(tmp_path, book)


def test_merged_cells_in_the_table_are_refused(tmp_path: Path):
    book = growth_reader()
    book["Readings"].merge_cells("B2:B3")
    assert "row 2: the cells B2:B3 are merged: unmerge them" in workbook_refusal(tmp_path, book)


def test_a_start_that_is_no_date_is_named_with_its_sheet(tmp_path: Path):
    book = growth_reader()
    book["Info"]["B4"] = 46083.34
    book["Info"]["B4"].number_format = "General"
    assert "sheet Info, row 4: the date '46083.34' cannot be read" in workbook_refusal(tmp_path, book)


def test_a_workbook_without_its_sheet_names_those_it_has(tmp_path: Path):
    book = growth_reader()
    book["Readings"].title = "Data"
    assert "no sheet Readings but Info, Data: rename" in workbook_refusal(tmp_path, book)


def test_a_sheet_that_reaches_to_its_last_cell_is_refused_unread(tmp_path: Path):
    book = growth_reader()
    book["Readings"]["XFD1048576"] = 1
    assert "delete the empty rows and columns" in workbook_refusal(tmp_path, book)


def zipped(entries: dict[str, bytes]) -> bytes:
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in entries.items():
            archive.writestr(name, content)
    return stream.getvalue()


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"PK\x03\x04 and then nothing of the kind", "begins like a workbook but is none"),
        (zipped({"letter.txt": b"hello"}), "begins like a workbook but is none"),
        (zipped({"[Content_Types].xml": b"<Types"}), "begins like a workbook but is none"),
        (saved(growth_reader())[:3000], "begins like a workbook but is none"),
        (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(600), "an old or a locked workbook"),
    ],
)
def test_a_workbook_that_is_none_is_refused(tmp_path: Path, content, words):
    path = tmp_path / "growth.xlsx"
    path.write_bytes(content)
    assert words in file_refusal(path)


def test_text_under_the_name_of_a_workbook_is_read_as_what_it_is(tmp_path: Path):
    path = tmp_path / "growth.xlsx"
    path.write_text(LONG, encoding="utf-8")
    assert read_file(path).layout == "long-form"


def test_a_workbook_that_unpacks_to_too_much_is_refused_unread(tmp_path: Path, monkeypatch):
    monkeypatch.setattr(workbook, "MOST_UNPACKED_BYTES", 1_000_000)
    path = tmp_path / "growth.xlsx"
    path.write_bytes(zipped({"xl/workbook.xml": bytes(2_000_000)}))
    assert path.stat().st_size < 10_000
    assert "unpacks to 2 MB, more than the 1 MB allowed" in file_refusal(path)


# Paths and bytes.


def test_a_folder_is_no_file(tmp_path: Path):
    assert "this is a folder" in file_refusal(tmp_path)


def test_a_missing_file_is_named(tmp_path: Path):
    assert "there is no such file: check the path" in file_refusal(tmp_path / "none.csv")


@pytest.mark.parametrize("name", ["n" * 5000, "with\0zero"])
def test_an_impossible_path_is_refused(name):
    with pytest.raises(UnreadableFile, match="cannot be opened"):
        read_file(name)


def test_a_pipe_is_no_ordinary_file(tmp_path: Path):
    path = tmp_path / "pipe"
    os.mkfifo(path)
    assert "no ordinary file" in file_refusal(path)


def test_a_file_that_may_not_be_read_is_named(tmp_path: Path, monkeypatch):
    path = tmp_path / "run.csv"
    path.write_text(LONG, encoding="utf-8")

    def refuse(*_args: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "open", refuse)
    assert "reading is not permitted" in file_refusal(path)


def test_an_empty_file_is_named(tmp_path: Path):
    path = tmp_path / "run.csv"
    path.touch()
    assert "the file is empty" in file_refusal(path)


@pytest.mark.parametrize(
    "content",
    [
        bytes(range(256)) * 8,
        b"\x00" * 100,
        b"\x89PNG\r\n\x1a\n\x00\x00\x00\rIHDR",
        b"\xff\xfe\x00",
        b"sample\x81,role",
    ],
)
def test_binary_nonsense_is_refused(tmp_path: Path, content):
    path = tmp_path / "run.csv"
    path.write_bytes(content)
    assert "no text in" in file_refusal(path) or "neither text nor a workbook" in file_refusal(path)


def test_a_file_beyond_the_limit_is_refused_before_it_is_read(tmp_path: Path, monkeypatch):
    path = tmp_path / "run.csv"
    with path.open("wb") as file:
        file.truncate(200_000_000)  # takes no room on the disk
    monkeypatch.setattr(Path, "open", lambda *_args: pytest.fail("the file was opened"))
    assert "200 MB is more than the 50 MB allowed" in file_refusal(path)


def test_pasted_text_beyond_the_limit_is_refused(monkeypatch):
    monkeypatch.setattr(reading, "MOST_BYTES", 100)
    assert "more than the" in str(refusal(LONG))


def test_a_name_with_control_characters_stays_on_one_line(tmp_path: Path):
    path = tmp_path / "a\nb.csv"
    path.write_text("nothing", encoding="utf-8")
    with pytest.raises(UnreadableFile, match=r"^a\?b\.csv: its layout is not known"):
        read_file(path)
