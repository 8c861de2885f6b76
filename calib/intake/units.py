"""Units of concentration: spellings, and the factor from one to another."""

import re

from calib.errors import UnknownUnit

# unit -> (kind, power of ten of the kind's base unit: g/L, mol/L, 1)
_UNITS: dict[str, tuple[str, int]] = {
    "pg/L": ("mass per volume", -12),
    "ng/L": ("mass per volume", -9),
    "ug/L": ("mass per volume", -6),
    "mg/L": ("mass per volume", -3),
    "g/L": ("mass per volume", 0),
    "pg/mL": ("mass per volume", -9),
    "ng/mL": ("mass per volume", -6),
    "ug/mL": ("mass per volume", -3),
    "mg/mL": ("mass per volume", 0),
    "nmol/L": ("amount per volume", -9),
    "umol/L": ("amount per volume", -6),
    "mmol/L": ("amount per volume", -3),
    "mol/L": ("amount per volume", 0),
    "%": ("fraction", -2),
    "1": ("fraction", 0),
}

CONCENTRATION_UNITS: tuple[str, ...] = tuple(_UNITS)


def parse_concentration_unit(text: str) -> str:
    """Bring a spelling of a concentration unit to the one calib writes.

    Parameters
    ----------
    text : str
        A unit such as ``µg/l``, ``mcg/L`` or ``ug / L``.

    Returns
    -------
    str
        The unit as in `CONCENTRATION_UNITS`.

    Raises
    ------
    UnknownUnit
        If the unit is not one of them; capital and small letters of prefixes count.

    Examples
    --------
    >>> parse_concentration_unit("µg/l")
    'ug/L'
    """
    spelled = re.sub(r"\s", "", text).replace("µ", "u").replace("μ", "u")
    spelled = re.sub(r"^mcg/", "ug/", spelled)
    spelled = re.sub(r"/(m?)l$", r"/\1L", spelled)
    if spelled not in _UNITS:
        raise UnknownUnit(
            f"{text.strip()[:40]!r} is no known unit of concentration: "
            f"use one of {', '.join(CONCENTRATION_UNITS)}"
        )
    return spelled


def conversion_factor(from_unit: str, to_unit: str) -> float:
    """Return the factor that turns a concentration in one unit into another unit.

    Parameters
    ----------
    from_unit, to_unit : str
        Concentration units in any known spelling.

    Returns
    -------
    float
        A power of ten: value in `to_unit` = factor * value in `from_unit`.

    Raises
    ------
    UnknownUnit
        If a unit is unknown, or mass, amount and fraction would be mixed.

    Examples
    --------
    >>> conversion_factor("mg/L", "ug/L")
    1000.0
    """
    source, target = parse_concentration_unit(from_unit), parse_concentration_unit(to_unit)
    (from_kind, from_power), (to_kind, to_power) = _UNITS[source], _UNITS[target]
    if from_kind != to_kind:
        raise UnknownUnit(
            f"{source} ({from_kind}) cannot be converted to {target} ({to_kind}): "
            f"give both in units of one kind"
        )
    # The text form is the double closest to the power of ten; 10.0 ** n need not be.
    return float(f"1e{from_power - to_power}")
