"""What a reading layout is, what it is given, and what it gives back."""

from collections.abc import Callable
from dataclasses import dataclass

from calib.errors import UnreadableFile
from calib.intake.parsed import ParsedRun


@dataclass(frozen=True, slots=True)
class Source:
    """Bytes of a file and, where they are text, that text and its encoding."""

    content: bytes
    text: str | None
    encoding: str | None

    def require_text(self) -> str:
        """Return the text.

        Raises
        ------
        UnreadableFile
            If the file is a workbook.
        """
        if self.text is None:
            raise UnreadableFile("this is a workbook, not text: leave the layout out, or name it workbook")
        return self.text


@dataclass(frozen=True, slots=True)
class Extract:
    """Runs of a file, and what the layout has to say about how it read them."""

    runs: tuple[ParsedRun, ...]
    notes: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Layout:
    """One way in which instruments write readings.

    Attributes
    ----------
    name : str
        Name to force it by.
    summary : str
        One line for a list of layouts.
    recognises : callable
        Whether a source looks like this layout; never raises.
    read : callable
        Takes the source apart; raises InputError.
    """

    name: str
    summary: str
    recognises: Callable[[Source], bool]
    read: Callable[[Source], Extract]
