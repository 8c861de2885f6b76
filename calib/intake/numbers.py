"""Number cells: the decimal sign of a file, numbers, and words that stand for no number."""

import math
import re
from collections.abc import Iterable
from dataclasses import dataclass
from datetime import date, time

from calib.errors import NotANumber
from calib.intake.parsed import Place
from calib.intake.rows import Cell, cell_text, shown

SIGN_NAMES = {".": "point", ",": "comma"}

_NUMBERS = {
    sign: re.compile(
        rf"[+-]?(?:[0-9]+(?:{re.escape(sign)}[0-9]*)?|{re.escape(sign)}[0-9]+)(?:[eE][+-]?[0-9]+)?"
    )
    for sign in SIGN_NAMES
}
_MAY_GROUP = re.compile(r"[+-]?[1-9][0-9]{0,2}[.,][0-9]{3}")
_SIGNED = re.compile(r"[+-]?[0-9]*[.,][0-9.,]*(?:[eE][+-]?[0-9]+)?")

_ABSENT_WORDS = {
    "OVRFLW": "overflow",
    "OVERFLOW": "overflow",
    "OVER": "overflow",
    "SAT": "overflow",
    "ND": "not detected",
    "N.D.": "not detected",
    "<LOD": "not detected",
    "BDL": "not detected",
    "ERR": "instrument error",
    "ERROR": "instrument error",
    "#N/A": "instrument error",
    "NAN": "instrument error",
    "INF": "instrument error",
    "+INF": "instrument error",
    "-INF": "instrument error",
    "": "empty",
}
_FILLED_FIELD = re.compile(r"\*{3,}|\+{3,}")  # a display that ran over its width


@dataclass(frozen=True, slots=True)
class Response:
    """A response cell: a number, or the cause of its absence; and the cell as written."""

    value: float | None
    absent_cause: str | None
    text: str


@dataclass(frozen=True, slots=True)
class NumberText:
    """A piece of text that should be a number, and where it stands."""

    text: str
    place: Place


def decimal_sign(numbers: Iterable[NumberText], separator: str | None) -> str:
    """Return the one decimal sign of a file.

    A number such as ``1,234`` may be 1.234 or 1234. It is taken as a decimal number when
    another number of the file settles the sign (``0,5``), else the file is refused. A
    point needs no such proof, save in semicolon files, whose home is the decimal comma.

    Parameters
    ----------
    numbers : iterable of NumberText
        The number cells of the file; other text is passed over.
    separator : str or None
        What separates the cells; None in a workbook.

    Raises
    ------
    NotANumber
        If both signs occur, a thousands sign is used, or the sign stays open.
    """
    first: dict[str, NumberText] = {}
    settled: set[str] = set()
    for number in numbers:
        text = _plain_minus(number.text)
        if not _SIGNED.fullmatch(text):
            continue
        if len(signs := re.findall(r"[.,]", text)) > 1:
            raise NotANumber(f"{number.place}: {shown(number.text)} has more than one sign: {_NO_THOUSANDS}")
        first.setdefault(signs[0], number)
        if not _MAY_GROUP.fullmatch(text):
            settled.add(signs[0])
    return _the_one_sign(first, settled, separator)


_NO_THOUSANDS = "write numbers without thousands signs and with one decimal sign throughout the file"


def _the_one_sign(first: dict[str, NumberText], settled: set[str], separator: str | None) -> str:
    if len(first) == 2:
        point, comma = first["."], first[","]
        raise NotANumber(
            f"{comma.place}: {shown(comma.text)} has a comma, but {shown(point.text)} in row "
            f"{point.place.row} has a point: {_NO_THOUSANDS}"
        )
    for sign, number in first.items():
        if sign not in settled and (sign == "," or separator == ";"):
            raise NotANumber(
                f"{number.place}: {shown(number.text)} may be a decimal number or have a thousands sign, "
                f"and no other number of the file tells: write it without the sign, or with a fourth decimal"
            )
        return sign
    return "."


def parse_number(cell: Cell, sign: str) -> float:
    """Read a finite number in the decimal convention of the file.

    Parameters
    ----------
    cell : Cell
        Text, or a number of a sheet.
    sign : str
        ``.`` or ``,``.

    Raises
    ------
    NotANumber
        If the cell holds no finite number.
    """
    if isinstance(cell, bool | date | time) or cell is None:
        raise NotANumber(f"{shown(cell)} is no number: write one, with a decimal {SIGN_NAMES[sign]}")
    try:
        value = float(cell) if isinstance(cell, int | float) else _from_text(cell, sign)
    except OverflowError:
        value = math.inf
    if not math.isfinite(value):
        raise NotANumber(f"{shown(cell)} is not finite: write a finite number")
    return value


def parse_response(cell: Cell, sign: str) -> Response:
    """Read a response: a number, or a word that says why there is none.

    Raises
    ------
    NotANumber
        If the cell is neither.
    """
    text = cell_text(cell)
    if _FILLED_FIELD.fullmatch(text):
        return Response(None, "overflow", text)
    cause = _ABSENT_WORDS.get(text.upper())
    if cause is not None:
        return Response(None, cause, text)
    return Response(parse_number(cell, sign), None, text)


def parse_concentration(cell: Cell, sign: str) -> float | None:
    """Read a nominal concentration; an empty cell gives None.

    Raises
    ------
    NotANumber
        If the cell holds no number, or a negative or infinite one.
    """
    if cell is None:
        return None
    value = parse_number(cell, sign)
    if value < 0:
        raise NotANumber(f"the concentration {shown(cell)} is negative: write 0 or more")
    return value


def parse_dilution(cell: Cell, sign: str) -> float:
    """Read a dilution factor; an empty cell means undiluted.

    Raises
    ------
    NotANumber
        If the cell holds no number, or none above 0.
    """
    if cell is None:
        return 1.0
    value = parse_number(cell, sign)
    if value <= 0:
        raise NotANumber(f"the dilution {shown(cell)} is not above 0: write 10 for a sample diluted tenfold")
    return value


def parse_replicate(cell: Cell, sign: str) -> int | None:
    """Read the number of a replicate; an empty cell gives None.

    Raises
    ------
    NotANumber
        If the cell holds no whole number from 1 on.
    """
    if cell is None:
        return None
    value = parse_number(cell, sign)
    if value < 1 or not value.is_integer():
        raise NotANumber(
            f"the replicate {shown(cell)} is no whole number from 1 on: number replicates 1, 2, 3"
        )
    return int(value)


def _from_text(text: str, sign: str) -> float:
    plain = _plain_minus(text)
    if not _NUMBERS[sign].fullmatch(plain):
        raise NotANumber(f"{shown(text)} is no number: write one, with a decimal {SIGN_NAMES[sign]}")
    return float(plain.replace(sign, "."))


def _plain_minus(text: str) -> str:
    return text.replace("\N{MINUS SIGN}", "-")
