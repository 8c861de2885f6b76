"""The generator makes the kept season again, and the kept truth covers it."""

import json
import subprocess
import sys
import tomllib
from collections import Counter
from pathlib import Path

import pytest
from openpyxl import load_workbook

SAMPLE_RUNS = Path(__file__).parents[2] / "sample_runs"
LAST_DAY = "2026-05-29"


def season_files(folder: Path) -> dict[str, bytes]:
    return {
        file.relative_to(folder).as_posix(): file.read_bytes()
        for part in ("season", "later")
        for file in (folder / part).rglob("*")
        if file.is_file()
    }


@pytest.fixture(scope="module")
def truth():
    return json.loads((SAMPLE_RUNS / "truth.json").read_text(encoding="utf-8"))["files"]


@pytest.fixture(scope="module")
def later():
    return json.loads((SAMPLE_RUNS / "truth.json").read_text(encoding="utf-8"))["later"]


@pytest.fixture(scope="module")
def laboratory():
    return tomllib.loads((SAMPLE_RUNS / "laboratory.toml").read_text(encoding="utf-8"))


def test_generator_reproduces_the_kept_files_byte_for_byte(tmp_path):
    generator = str(SAMPLE_RUNS / "generate.py")
    subprocess.run([sys.executable, generator, "--into", str(tmp_path)], check=True, capture_output=True)
    made, kept = season_files(tmp_path), season_files(SAMPLE_RUNS)
    assert sorted(made) == sorted(kept)
    assert [name for name in kept if made[name] != kept[name]] == []
    assert (tmp_path / "truth.json").read_bytes() == (SAMPLE_RUNS / "truth.json").read_bytes()


def test_truth_covers_every_file_once(truth, later):
    assert sorted(entry["file"] for entry in [*truth, *later]) == sorted(season_files(SAMPLE_RUNS))


def test_every_instrument_has_one_first_file_each_working_day(truth, laboratory):
    first = Counter((entry["instrument"], entry["day"]) for entry in truth if entry["decision"] != "refused")
    names = {instrument["name"] for instrument in laboratory["instrument"]}
    days = {day for _, day in first}
    assert set(first) == {(name, day) for name in names for day in days}
    assert set(first.values()) == {1}
    assert len(days) == 64  # 65 weekdays from 2 March to 29 May 2026, less 1 May


def test_last_day_is_clean_and_reaches_outside_the_standards_on_the_photometer(truth):
    today = [entry for entry in truth if entry["day"] == LAST_DAY]
    photometer = next(entry for entry in today if entry["instrument"] == "PP-2")
    concentrations = [sample["concentration"] / sample["dilution"] for sample in photometer["unknowns"]]
    assert [entry["fault"] for entry in today] == [None] * 4
    assert sum(concentration > 6.4 for concentration in concentrations) >= 2
    assert sum(concentration < 0.25 for concentration in concentrations) >= 1


def test_afternoon_holds_samples_only_on_the_instrument_as_it_was_that_morning(truth, later):
    (afternoon,) = later
    (morning,) = [e for e in truth if (e["instrument"], e["day"]) == ("EE-3", LAST_DAY)]
    assert afternoon["parameters"] == morning["parameters"]
    assert b"standard;" not in (SAMPLE_RUNS / afternoon["file"]).read_bytes()
    contents = {s["sample"]: s["concentration"] / s["dilution"] for s in afternoon["unknowns"]}
    assert len(contents) == 6
    assert [s for s, content in contents.items() if content > 30.0] == ["N-0529-P4"]
    assert [s["dilution"] for s in afternoon["unknowns"]] == [1.0] * 5 + [10.0]


def test_refused_file_has_the_bytes_of_the_first(truth):
    refused = [entry["file"] for entry in truth if entry["decision"] == "refused"]
    assert refused == ["season/OP-1/OP-1_2026-04-14_again.csv"]
    first = (SAMPLE_RUNS / refused[0].replace("_again", "")).read_bytes()
    assert (SAMPLE_RUNS / refused[0]).read_bytes() == first


def test_every_lot_and_method_named_is_defined(truth, laboratory):
    assert {entry["lot"] for entry in truth} == {lot["name"] for lot in laboratory["standard_lot"]}
    methods = {tomllib.loads(file.read_text())["name"] for file in (SAMPLE_RUNS / "methods").glob("*.toml")}
    assert {entry["method"] for entry in truth} == methods


def test_no_lot_is_used_after_its_expiry(truth, laboratory):
    expiry = {lot["name"]: lot["expiry"].isoformat() for lot in laboratory["standard_lot"]}
    assert [entry["file"] for entry in truth if entry["day"] > expiry[entry["lot"]]] == []


def test_workbook_opens_in_a_spreadsheet_library():
    book = load_workbook(SAMPLE_RUNS / f"season/GB-4/GB-4_{LAST_DAY}.xlsx")
    info = {row[0]: row[1] for row in book["Info"].iter_rows(min_row=2, max_col=2, values_only=True)}
    headings = [cell.value for cell in book["Readings"][1]]
    assert str(book["Info"].merged_cells) == "A1:B1"
    assert info["Started"].date().isoformat() == LAST_DAY
    assert headings == ["Vessel", "Sample", "Role", "Carbon [ug/L]", "Growth rate [1/d]", "Dilution"]


def test_electrode_files_are_windows_1252_with_decimal_commas():
    content = (SAMPLE_RUNS / f"season/EE-3/EE-3_{LAST_DAY}.txt").read_bytes()
    with pytest.raises(UnicodeDecodeError):
        content.decode("utf-8")
    assert "1;S1;standard;0,5;" in content.decode("cp1252")


def test_probe_file_with_decimal_commas_starts_with_a_byte_order_mark():
    content = (SAMPLE_RUNS / "season/OP-1/OP-1_2026-04-28.txt").read_bytes()
    assert content.startswith(b"\xef\xbb\xbfInstrument;OP-1")
