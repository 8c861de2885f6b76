from datetime import datetime, timedelta, timezone
from pathlib import Path

import pytest

from calib.intake import LAYOUTS, ParsedReading, Place, Role, read_file, read_text

from .written import ELECTRODE, LONG, PLATE, PROBE, growth_reader, saved

CET = timezone(timedelta(hours=1))


def by_position(readings: tuple[ParsedReading, ...]) -> dict[str | None, ParsedReading]:
    return {reading.position: reading for reading in readings}


def test_each_layout_has_a_name_of_its_own():
    assert len({layout.name for layout in LAYOUTS}) == len(LAYOUTS)


def test_a_plate_grid_says_where_it_comes_from():
    parsed = read_text(PLATE)
    (run,) = parsed.runs
    assert parsed.layout == "plate-grid"
    assert (run.instrument, run.serial, run.method) == ("PP-2", "4471", "toxin-plate")
    assert (run.operator, run.lot, run.analyte) == ("KM", "TX-2601", None)
    assert run.at == datetime(2026, 3, 2, 8, 12, tzinfo=CET)
    assert (run.concentration_unit, run.response_unit) == ("ug/L", "1")


@pytest.mark.parametrize(
    ("well", "role", "sample", "concentration", "response", "dilution"),
    [
        ("A1", Role.BLANK, "blank", None, 0.051, 1.0),
        ("A2", Role.ZERO, "zero", None, 1.9, 1.0),
        ("A3", Role.STANDARD, "standard 0.05", 0.05, 1.7, 1.0),
        ("A4", Role.ANCHOR, "anchor 5", 5.0, None, 1.0),
        ("B1", Role.UNKNOWN, "L-0301", None, 0.8, 10.0),
        ("B2", Role.CHECK, "check 0.5", 0.5, 0.9, 1.0),
        ("B3", Role.CONTROL, "QC low", 2.0, None, 1.0),
        ("C1", Role.FIRST_CHECK, "second source", 0.4, 1.1, 1.0),
        ("C2", Role.CARRY_OVER, "carry-over", None, 1.8, 1.0),
        ("C3", Role.BLANK, "buffer", None, 0.05, 1.0),
        ("C4", Role.UNKNOWN, "Inlet x two", None, 0.7, 1.0),
    ],
)
def test_a_well_of_the_plan_meets_its_reading(well, role, sample, concentration, response, dilution):
    (run,) = read_text(PLATE).runs
    reading = by_position(run.readings)[well]
    assert (reading.role, reading.sample, reading.concentration) == (role, sample, concentration)
    assert (reading.response, reading.dilution) == (response, dilution)


def test_a_well_that_was_read_but_not_planned_is_named_not_kept():
    parsed = read_text(PLATE)
    assert "B4" not in by_position(parsed.runs[0].readings)
    assert "1 well with a reading but no plan skipped: B4." in parsed.understood


def test_a_header_block_names_its_analyte_and_units_in_the_heading():
    parsed = read_text(PROBE)
    (run,) = parsed.runs
    assert parsed.layout == "header-block"
    assert (run.analyte, run.concentration_unit, run.response_unit) == ("oxygen", "mg/L", "kcounts/s")
    assert (run.serial, run.at) == ("0917", datetime(2026, 3, 2, 8, 20, tzinfo=CET))
    assert [reading.response for reading in run.readings] == [0.02, 85.1, 40.2]
    assert run.readings[1].place == Place(None, 9, "intensity")


def test_a_header_block_that_a_spreadsheet_saved_again_reads_the_same():
    again = PROBE.replace("OP-1", "OP-1,,,,,").replace("oxygen-probe", "oxygen-probe,,,,,")
    assert read_text(again).runs == read_text(PROBE).runs


def test_a_semicolon_file_has_decimal_commas():
    parsed = read_text(ELECTRODE)
    (run,) = parsed.runs
    assert parsed.layout == "semicolon"
    assert run.at == datetime(2026, 3, 2, 8, 31, tzinfo=CET)
    assert [reading.concentration for reading in run.readings] == [0.5, 1.234, None]
    assert (run.readings[0].response, run.readings[0].response_text) == (29.1, "29,1")
    assert (run.readings[2].response, run.readings[2].absent_cause) == (None, "not detected")


@pytest.mark.parametrize(
    ("encoding", "said"),
    [
        ("cp1252", "Windows-1252"),
        ("utf-8-sig", "byte order mark"),
        ("utf-16", "UTF-16"),
        ("utf-16-le", "UTF-16"),
    ],
)
def test_the_micro_sign_survives_each_encoding(tmp_path: Path, encoding, said):
    file = tmp_path / "run.txt"
    file.write_bytes(ELECTRODE.replace("\n", "\r\n").encode(encoding))
    parsed = read_file(file)
    assert parsed.runs[0].concentration_unit == "ug/L"
    assert said in parsed.understood[0]


def test_a_workbook_gives_numbers_as_numbers_and_a_zoned_start(tmp_path: Path):
    file = tmp_path / "growth.xlsx"
    file.write_bytes(saved(growth_reader()))
    parsed = read_file(file)
    (run,) = parsed.runs
    assert parsed.layout == "workbook"
    assert (run.instrument, run.serial, run.lot) == ("GB-4", "20817", "AC-2601")
    assert run.at == datetime(2026, 3, 2, 9, 5, tzinfo=CET)
    assert (run.analyte, run.concentration_unit, run.response_unit) == ("carbon", "ug/L", "1/d")
    assert (run.readings[0].concentration, run.readings[0].response) == (10.0, 0.41)
    assert str(run.readings[1].place) == "sheet Readings, row 3, column Growth rate"
    assert run.readings[1].absent_cause == "instrument error"


def test_a_long_form_starts_with_its_earliest_reading():
    parsed = read_text(LONG)
    (run,) = parsed.runs
    assert parsed.layout == "long-form"
    assert run.at == datetime(2026, 3, 2, 8, 0)
    assert [reading.replicate for reading in run.readings] == [1, 2, 1]
    assert run.readings[2].dilution == 1.0


def test_a_long_form_may_hold_a_run_for_each_analyte():
    text = (
        "analyte,sample,role,concentration [mg/L],response [nA]\n"
        "nitrate,S1,standard,1,10\nnitrite,S1,standard,1,20\nnitrate,U1,unknown,,30\n"
    )
    runs = read_text(text).runs
    assert [run.analyte for run in runs] == ["nitrate", "nitrite"]
    assert [len(run.readings) for run in runs] == [2, 1]


def test_the_lot_need_only_stand_beside_the_standards():
    heading = "sample,role,lot,concentration [ug/L],response [1]\n"
    (run,) = read_text(heading + "U1,unknown,,,1\nS2,standard,L1,2,2\nU3,unknown,,,1\n").runs
    assert (run.lot, len(run.readings)) == ("L1", 3)


@pytest.mark.parametrize("separator", [",", ";", "\t"])
def test_the_columns_of_a_long_form_may_stand_in_any_order(separator):
    text = "response [1],role,sample,concentration [ug/L]\n0.5,Carry over,C,\n0.7,FIRST CHECK,F,2.5\n"
    (run,) = read_text(text.replace(",", separator)).runs
    assert [reading.role for reading in run.readings] == [Role.CARRY_OVER, Role.FIRST_CHECK]
    assert run.readings[1].concentration == 2.5


def test_a_standard_without_a_name_is_called_after_its_level():
    (run,) = read_text("sample,role,concentration [ug/L],response [1]\n,standard,0.50,0.1\n").runs
    assert run.readings[0].sample == "standard 0.5"


def test_a_layout_can_be_forced_by_name():
    text = "plan,role,concentration [ug/L],response [1],sample\n1,unknown,,0.5,U1\n"
    assert read_text(text, layout="long-form").runs[0].readings[0].sample == "U1"


def test_a_remark_in_brackets_before_the_unit_belongs_to_the_name():
    text = PROBE.replace("oxygen [mg/L]", "nitrate (as N) [mg/L]")
    assert read_text(text).runs[0].analyte == "nitrate (as n)"


def test_columns_and_header_lines_that_are_not_used_are_named():
    text = PROBE.replace("# serial", "# firmware: 3.1\n# serial").replace("dilution\n", "dilution,remark\n")
    understood = read_text(text).understood
    assert "Header lines not used: firmware." in understood
    assert "Columns not used: remark." in understood
