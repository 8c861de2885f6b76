"""Files are written whole or not at all, and only what their suffix promises."""

import json
from pathlib import Path

import pytest

from calib.bench.records import RunRecord
from calib.errors import InputError, UnreadableFile
from calib.report.figures import curve_figure
from calib.report.files import write_figure, write_report
from calib.report.html_report import render_run


def test_report_by_suffix(records: dict[str, RunRecord], tmp_path: Path) -> None:
    record = records["rising"]
    page = write_report(record, tmp_path / "run.HTML")
    assert page.read_text(encoding="utf-8") == render_run(record)
    data = json.loads(write_report(record, str(tmp_path / "run.json")).read_text(encoding="utf-8"))
    assert data["verdict"]["decision"] == "accepted"
    assert sorted(p.name for p in tmp_path.iterdir()) == ["run.HTML", "run.json"]


def test_figure_by_suffix(records: dict[str, RunRecord], tmp_path: Path) -> None:
    figure = curve_figure(records["rising"])
    assert write_figure(figure, tmp_path / "c.png").read_bytes().startswith(b"\x89PNG")
    assert b"<svg" in write_figure(figure, tmp_path / "c.svg").read_bytes()


@pytest.mark.parametrize("name", ["run.docx", "run", "run.html.bak"])
def test_other_suffixes_are_refused(records: dict[str, RunRecord], tmp_path: Path, name: str) -> None:
    with pytest.raises(InputError, match=r"\.html or \.json") as caught:
        write_report(records["rising"], tmp_path / name)
    assert "\n" not in str(caught.value)
    with pytest.raises(InputError, match=r"\.svg or \.png"):
        write_figure(curve_figure(records["rising"]), tmp_path / name)
    assert list(tmp_path.iterdir()) == []


def test_a_place_that_cannot_be_written(records: dict[str, RunRecord], tmp_path: Path) -> None:
    with pytest.raises(UnreadableFile, match="cannot write"):
        write_report(records["rising"], tmp_path / "missing" / "run.json")
    taken = tmp_path / "taken.json"
    taken.mkdir()
    with pytest.raises(UnreadableFile):
        write_report(records["rising"], taken)
    assert [p.name for p in tmp_path.iterdir()] == ["taken.json"]


def test_an_earlier_file_is_replaced(records: dict[str, RunRecord], tmp_path: Path) -> None:
    path = tmp_path / "run.json"
    path.write_text("old")
    write_report(records["rising"], path)
    assert path.read_text(encoding="utf-8").startswith("{")
