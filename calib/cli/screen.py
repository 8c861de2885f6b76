"""The screen: tables and verdict lines for people, plain text when piped."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from calib.report.wording import visible

if TYPE_CHECKING:
    from rich.console import Console

PIPED_WIDTH = 160

Lines = tuple[str, ...]


def console() -> Console:
    """Console on the standard output; wide enough not to fold tables when piped."""
    import sys

    from rich.console import Console

    width = None if sys.stdout.isatty() else PIPED_WIDTH
    return Console(width=width, highlight=False, soft_wrap=False, emoji=False, markup=False)


def print_table(headings: Sequence[str], rows: Iterable[Sequence[str | Lines]], title: str = "") -> None:
    """A plain table; headings that start with '>' are aligned to the right, a tuple is a cell of lines."""
    from rich.table import Table
    from rich.text import Text

    table = Table(title=title or None, box=None, title_justify="left", title_style="bold", pad_edge=False)
    for heading in headings:
        right = heading.startswith(">")
        table.add_column(heading.lstrip(">"), justify="right" if right else "left", overflow="fold")
    for row in rows:
        table.add_row(*(Text("\n".join(visible(line) for line in _lines(cell))) for cell in row))
    console().print(table)


def _lines(cell: str | Lines) -> Lines:
    return (cell,) if isinstance(cell, str) else cell


def say(text: str = "", style: str | None = None) -> None:
    """A line of text; style is a help for the eye, never the message."""
    console().print(visible(text), style=style)


@contextmanager
def progress_bar(what: str) -> Iterator[Any]:
    """A bar on the standard error; silent when it is no terminal.

    Yields a callable (done, total, text).
    """
    import sys

    if not sys.stderr.isatty():
        yield lambda done, total, text="": None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (
        TextColumn(what),
        BarColumn(),
        MofNCompleteColumn(),
        TimeRemainingColumn(),
        TextColumn("{task.fields[text]}"),
    )
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task(what, total=None, text="")

        def show(done: int, total: int, text: str = "") -> None:
            bar.update(task, completed=done, total=total, text=text)

        yield show
