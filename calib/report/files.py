"""Write reports and pictures; a file is there whole or not at all."""

from __future__ import annotations

import json
import os
from contextlib import suppress
from io import BytesIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

from calib.errors import InputError, UnreadableFile

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from calib.bench.records import ReportStamp, RunRecord

REPORTS = (".html", ".json", ".csv")
PICTURES = (".svg", ".png")
# The same record gives the same bytes: no date, no random identifiers.
SALT = "calib"


def report_kind(path: str | Path) -> str:
    """Kind of report a file name asks for: 'html', 'json' or 'csv'.

    Raises
    ------
    InputError
        For another suffix.
    """
    return _suffix(Path(path), REPORTS).removeprefix(".")


def render_report(record: RunRecord, stamp: ReportStamp | None, kind: str) -> bytes:
    """The report of a run as the bytes of a file; the same record and stamp give the same bytes."""
    match kind:
        case "html":
            from calib.report.html_report import render_run

            return render_run(record, stamp).encode()
        case "csv":
            from calib.report.csv_report import render_csv

            return render_csv(record, stamp).encode()
        case _:
            from calib.report.as_json import run_json

            text = json.dumps(run_json(record, stamp), ensure_ascii=False, indent=2, allow_nan=False)
            return f"{text}\n".encode()


def write_report(record: RunRecord, path: str | Path, stamp: ReportStamp | None = None) -> Path:
    """Write the report of a run, by suffix: .html, .json or .csv.

    Raises
    ------
    InputError
        For another suffix.
    UnreadableFile
        When the place cannot be written.
    """
    return write_file(Path(path), render_report(record, stamp, report_kind(path)))


def write_page(text: str, path: str | Path) -> Path:
    """Write a page that is laid out already; the name ends in .html.

    Raises
    ------
    InputError
        For another suffix.
    UnreadableFile
        When the place cannot be written.
    """
    path = Path(path)
    _suffix(path, (".html",))
    return write_file(path, text.encode())


def write_figure(figure: Figure, path: str | Path) -> Path:
    """Write a picture, by suffix: .svg or .png.

    Raises
    ------
    InputError
        For another suffix.
    UnreadableFile
        When the place cannot be written.
    """
    path = Path(path)
    return write_file(path, picture(figure, _suffix(path, PICTURES).removeprefix(".")))


def check_picture(path: str | Path) -> None:
    """Refuse a name that ends in no kind of picture, before the work is done.

    Raises
    ------
    InputError
        For another suffix than .svg or .png.
    """
    _suffix(Path(path), PICTURES)


def picture(figure: Figure, kind: str) -> bytes:
    """Draw a figure as 'svg' or 'png'; the same figure gives the same bytes."""
    from matplotlib import rc_context

    metadata: dict[str, Any] = {"Date": None, "Creator": None} if kind == "svg" else {"Software": None}
    out = BytesIO()
    with rc_context({"svg.hashsalt": SALT, "svg.fonttype": "path"}):
        figure.savefig(out, format=kind, metadata=metadata)
    return out.getvalue()


def _suffix(path: Path, allowed: tuple[str, ...]) -> str:
    suffix = path.suffix.lower()
    if suffix not in allowed:
        raise InputError(
            f"{path.name}: cannot write '{suffix or 'no suffix'}'; end the name in {' or '.join(allowed)}"
        )
    return suffix


def write_file(path: Path, content: bytes) -> Path:
    """Write beside the place, then put it there in one step."""
    beside = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        beside.write_bytes(content)
        beside.replace(path)
    except OSError as cause:
        reason = cause.strerror or type(cause).__name__
        raise UnreadableFile(f"cannot write {path}: {reason}; choose a place that can be written") from cause
    finally:
        _discard(beside)
    return path


def _discard(beside: Path) -> None:
    """Take away what an interrupted write left; nothing is there after a whole one."""
    with suppress(OSError):
        beside.unlink(missing_ok=True)
