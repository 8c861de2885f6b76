"""Where in the TOML text of a method a setting stands."""

from __future__ import annotations

import re

_TABLE = re.compile(r"^\s*\[+\s*(?P<name>[^\[\]]+?)\s*\]+\s*(#.*)?$")
_SETTING = re.compile(r"^\s*(?P<key>[\w\".' -]+?)\s*=")


def line_of(text: str, key: str | None) -> int | None:
    r"""Line of a setting, counted from 1; that of its table where it stands inside an inline table.

    Parameters
    ----------
    text : str
        Readable TOML.
    key : str or None
        Dotted, such as ``acceptance.blank``.

    Examples
    --------
    >>> line_of('name = "m"\n[acceptance]\nblank = 1', "acceptance.blank")
    3
    """
    places = _places(text)
    while key:
        if key in places:
            return places[key]
        key = key.rpartition(".")[0]
    return None


def _places(text: str) -> dict[str, int]:
    """Line of each setting and table by its dotted key."""
    places: dict[str, int] = {}
    table = ""
    for number, line in enumerate(text.splitlines(), start=1):
        if heading := _TABLE.match(line):
            table = _plain(heading["name"])
            places.setdefault(table, number)
        elif setting := _SETTING.match(line):
            key = _plain(setting["key"])
            places.setdefault(f"{table}.{key}" if table else key, number)
    return places


def _plain(key: str) -> str:
    """A dotted key without quotes and spaces."""
    return ".".join(part.strip().strip("\"'") for part in key.split("."))
