"""What a name in the register may look like."""

from __future__ import annotations

from calib.errors import InputError

LONGEST = 100


def plain_name(text: str, what: str) -> str:
    """A name without blanks around it; control and direction characters are refused.

    Raises
    ------
    InputError
        Naming what is wrong with it.
    """
    name = text.strip()
    if not name:
        raise InputError(f"{what} is empty; give it in words")
    if len(name) > LONGEST:
        raise InputError(f"{what} has {len(name)} characters; use at most {LONGEST}")
    bad = next((c for c in name if not c.isprintable()), None)
    if bad is not None:
        raise InputError(f"{what} holds the unprintable character U+{ord(bad):04X}; leave it out")
    return name
