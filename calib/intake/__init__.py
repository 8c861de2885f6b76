"""Files of instruments -> frozen runs and readings; knows no store."""

from calib.intake.extract import Layout
from calib.intake.parsed import ParsedFile, ParsedReading, ParsedRun, Place, Role, content_fingerprint
from calib.intake.read import LAYOUTS, READER_VERSION, read_bytes, read_file, read_text
from calib.intake.units import CONCENTRATION_UNITS, conversion_factor, parse_concentration_unit

__all__ = [
    "CONCENTRATION_UNITS",
    "LAYOUTS",
    "READER_VERSION",
    "Layout",
    "ParsedFile",
    "ParsedReading",
    "ParsedRun",
    "Place",
    "Role",
    "content_fingerprint",
    "conversion_factor",
    "parse_concentration_unit",
    "read_bytes",
    "read_file",
    "read_text",
]
