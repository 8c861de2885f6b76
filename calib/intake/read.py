"""Open a file or pasted text, decode it, find its layout, and read it."""

import hashlib
import re
import stat
from pathlib import Path

from calib.errors import InputError, UnreadableFile
from calib.intake import header_block, long_form, plate_grid, semicolon, workbook
from calib.intake.extract import Layout, Source
from calib.intake.parsed import ParsedFile
from calib.intake.understood import describe_runs

LAYOUTS: tuple[Layout, ...] = (
    workbook.LAYOUT,
    plate_grid.LAYOUT,
    header_block.LAYOUT,
    semicolon.LAYOUT,
    long_form.LAYOUT,
)

READER_VERSION = "1"
"""Kept with each run; goes up whenever the same bytes would be read differently."""

MOST_BYTES = 50_000_000

_OLD_WORKBOOK_MARK = b"\xd0\xcf\x11\xe0"
_MARKS = ((b"\xef\xbb\xbf", "utf-8-sig"), (b"\xff\xfe", "utf-16"), (b"\xfe\xff", "utf-16"))
_ENCODING_NAMES = {
    "utf-8-sig": "UTF-8 with a byte order mark",
    "utf-16": "UTF-16",
    "utf-16-le": "UTF-16",
    "utf-16-be": "UTF-16",
    "utf-8": "UTF-8",
    "cp1252": "Windows-1252",
}
_NO_TEXT = re.compile(r"[\x00-\x08\x0e-\x1f\x7f]")


def read_file(path: str | Path, layout: str | None = None) -> ParsedFile:
    """Read the readings of a file.

    Parameters
    ----------
    path : str or Path
        A text file or a workbook as an instrument exported it.
    layout : str or None
        Name of a reading layout; by default it is found from the content.

    Returns
    -------
    ParsedFile
        The original bytes, the runs, and what was understood.

    Raises
    ------
    InputError
        One of the family, with file, place and remedy in one line.
    """
    wanted = _wanted(layout)
    return _parse(Path(path).name, _content(Path(path)), wanted)


def read_text(text: str, layout: str | None = None) -> ParsedFile:
    """Read readings from text, as pasted from a spreadsheet or a mail.

    Parameters
    ----------
    text : str
        The text.
    layout : str or None
        Name of a reading layout; by default it is found from the content.

    Returns
    -------
    ParsedFile
        As of a file in UTF-8 by the name ``pasted text``.

    Raises
    ------
    InputError
        As `read_file`.
    """
    try:
        content = text.removeprefix("\ufeff").encode()
    except UnicodeEncodeError:
        raise UnreadableFile("pasted text: it holds broken characters: copy it again") from None
    return read_bytes("pasted text", content, layout)


def read_bytes(name: str, content: bytes, layout: str | None = None) -> ParsedFile:
    """Read readings from bytes that are at hand, such as a kept original.

    Parameters
    ----------
    name : str
        Name of the file the bytes came in.
    content : bytes
        All of it.
    layout : str or None
        Name of a reading layout; by default it is found from the content.

    Returns
    -------
    ParsedFile
        As of the file.

    Raises
    ------
    InputError
        As `read_file`.
    """
    _check_size(name, len(content))
    return _parse(name, content, _wanted(layout))


def _wanted(name: str | None) -> Layout | None:
    if name is None:
        return None
    for layout in LAYOUTS:
        if layout.name == name:
            return layout
    raise InputError(
        f"{name[:40]!r} is no reading layout: use one of {', '.join(layout.name for layout in LAYOUTS)}"
    )


def _content(path: Path) -> bytes:
    name = _one_line(str(path))
    try:
        status = path.stat()
        if stat.S_ISDIR(status.st_mode):
            raise UnreadableFile(f"{name}: this is a folder: name a file in it")
        if not stat.S_ISREG(status.st_mode):
            raise UnreadableFile(f"{name}: this is no ordinary file: save the readings to one")
        _check_size(name, status.st_size)
        with path.open("rb") as file:
            content = file.read(MOST_BYTES + 1)
    except FileNotFoundError:
        raise UnreadableFile(f"{name}: there is no such file: check the path") from None
    except PermissionError:
        raise UnreadableFile(f"{name}: reading is not permitted: ask for access or copy the file") from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise UnreadableFile(f"{name}: it cannot be opened ({reason}): check the path") from None
    _check_size(name, len(content))
    return content


def _check_size(name: str, size: int) -> None:
    if size > MOST_BYTES:
        raise UnreadableFile(
            f"{name}: {size / 1e6:.0f} MB is more than the {MOST_BYTES / 1e6:.0f} MB allowed: "
            f"export only the readings of the run"
        )


def _parse(name: str, content: bytes, wanted: Layout | None) -> ParsedFile:
    try:
        source = _source(content)
        layout = wanted or _recognise(source)
        extract = layout.read(source)
    except InputError as error:
        raise type(error)(_one_line(f"{name}: {error}")) from None
    encoding = f", {source.encoding}" if source.encoding else ""
    return ParsedFile(
        name=name,
        size=len(content),
        fingerprint=hashlib.sha256(content).hexdigest(),
        content=content,
        layout=layout.name,
        runs=extract.runs,
        understood=(f"Layout {layout.name}{encoding}.", *extract.notes, *describe_runs(extract.runs)),
    )


def _source(content: bytes) -> Source:
    if not content.strip():
        raise UnreadableFile("the file is empty: export it again")
    if content.startswith(workbook.ZIP_MARK):
        return Source(content, None, None)
    if content.startswith(_OLD_WORKBOOK_MARK):
        raise UnreadableFile("this is an old or a locked workbook: save it as .xlsx without a password")
    text, encoding = _decode(content)
    if _NO_TEXT.search(text):
        raise UnreadableFile(
            "this is neither text nor a workbook: export the readings as .csv, .txt or .xlsx"
        )
    if not text.strip():
        raise UnreadableFile("the file is empty: export it again")
    one_line_end = text.replace("\r\n", "\n").replace("\r", "\n")
    return Source(content, one_line_end, _ENCODING_NAMES[encoding])


def _decode(content: bytes) -> tuple[str, str]:
    marked = next((encoding for mark, encoding in _MARKS if content.startswith(mark)), None)
    for encoding in (marked,) if marked else (_unmarked_utf16(content) or "utf-8", "cp1252"):
        try:
            return content.decode(encoding), encoding
        except UnicodeDecodeError:
            continue
    raise UnreadableFile("this is no text in UTF-8, UTF-16 or Windows-1252: export it again in one of them")


def _unmarked_utf16(content: bytes) -> str | None:
    """Tell UTF-16 without a mark by its zero bytes: Western text has one in each pair."""
    sample = content[:4096]
    half = len(sample) // 2
    for encoding, zeros, letters in (
        ("utf-16-le", sample[1::2], sample[::2]),
        ("utf-16-be", sample[::2], sample[1::2]),
    ):
        if half and zeros.count(0) > 0.8 * half and not letters.count(0):
            return encoding
    return None


def _recognise(source: Source) -> Layout:
    for layout in LAYOUTS:
        if layout.recognises(source):
            return layout
    raise UnreadableFile(
        "its layout is not known: begin with a heading row such as "
        "sample,role,concentration [ug/L],response [1], or force one of the layouts "
        f"{', '.join(layout.name for layout in LAYOUTS)}"
    )


def _one_line(text: str) -> str:
    return "".join(character if character.isprintable() else "?" for character in text)
