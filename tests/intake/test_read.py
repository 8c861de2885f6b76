import hashlib
import io
import re
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

from calib.intake import read_file, read_text

from .written import ELECTRODE, LONG, PLATE, PROBE, growth_reader, saved

EXAMPLES = {"plate-grid": PLATE, "header-block": PROBE, "semicolon": ELECTRODE, "long-form": LONG}


@pytest.mark.parametrize("layout", EXAMPLES)
def test_the_layout_is_found_from_the_content_not_the_name(tmp_path: Path, layout):
    path = tmp_path / "export.dat"
    path.write_text(EXAMPLES[layout], encoding="utf-8")
    assert read_file(path).layout == layout
    assert read_file(path, layout=layout).runs == read_text(EXAMPLES[layout]).runs


def test_the_original_bytes_are_kept_with_their_fingerprint(tmp_path: Path):
    content = LONG.replace("\n", "\r\n").encode("utf-8-sig")
    (tmp_path / "run.csv").write_bytes(content)
    parsed = read_file(tmp_path / "run.csv")
    assert (parsed.name, parsed.size, parsed.content) == ("run.csv", len(content), content)
    assert parsed.fingerprint == hashlib.sha256(content).hexdigest()
    assert "content" not in repr(parsed)


@pytest.mark.parametrize("line_end", ["\r\n", "\r", "\n"])
@pytest.mark.parametrize("layout", EXAMPLES)
def test_each_line_end_gives_the_same_runs(tmp_path: Path, layout, line_end):
    path = tmp_path / "run.csv"
    path.write_bytes(EXAMPLES[layout].replace("\n", line_end).encode())
    assert read_file(path).runs == read_text(EXAMPLES[layout]).runs


def test_the_preview_counts_readings_by_role_and_absent_ones_by_cause():
    understood = read_text(PLATE).understood
    assert understood[0] == "Layout plate-grid, UTF-8."
    assert "Cells separated by comma, decimal point." in understood
    assert (
        "11 readings: 2 blanks, 1 zero standard, 1 standard, 1 anchor, 1 first check, 1 check, 1 control, "
        "1 carry-over blank, 2 unknowns." in understood
    )
    assert "1 reading absent: overflow (position A4, row 17)." in understood
    assert "1 reading absent: empty (position B3, row 18)." in understood


def test_the_preview_says_what_the_file_says_of_its_origin():
    assert (
        "The file says analyte nitrate, instrument EE-3, serial E-55-0312, method nitrate-electrode, "
        "started 2026-03-02 08:31 +0100, operator KM, standard lot NI-2601."
        in read_text(ELECTRODE).understood
    )
    assert (
        "The file says started 2026-03-02 08:00 (local time, no offset). "
        "It does not say: instrument, method, standard lot." in read_text(LONG).understood
    )


def test_the_preview_counts_empty_rows_and_names_a_missing_column_of_dilutions():
    text = "sample,role,concentration [ug/L],response [1]\n\nS,unknown,,1\n\nT,unknown,,2\n\n\n"
    understood = read_text(text).understood
    assert "2 empty rows skipped." in understood
    assert "No column of dilutions: all taken as undiluted." in understood


def test_the_runs_of_a_file_are_numbered_in_the_preview():
    text = "method,sample,role,concentration [ug/L],response [1]\nm1,S,unknown,,1\nm2,S,unknown,,2\n"
    understood = read_text(text).understood
    assert any(sentence.startswith("Run 2 of 2: The file says method m2.") for sentence in understood)


def test_a_formula_counts_with_the_value_stored_beside_it(tmp_path: Path):
    book = growth_reader()
    book["Readings"]["D2"] = "=2*5"
    path = tmp_path / "growth.xlsx"
    path.write_bytes(with_stored_value(saved(book), "10"))
    assert read_file(path).runs[0].readings[0].concentration == 10.0


def with_stored_value(content: bytes, value: str) -> bytes:
    """Put in the value that a spreadsheet program would have stored beside the formula."""
    stream = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as source, zipfile.ZipFile(stream, "w") as target:
        for entry in source.infolist():
            stored = f"</f><v>{value}</v>".encode()
            target.writestr(entry.filename, re.sub(rb"</f><v ?/>|</f><v></v>", stored, source.read(entry)))
    return stream.getvalue()


def test_importing_intake_does_not_load_the_workbook_library():
    code = "import sys, calib.intake; sys.exit('openpyxl' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
