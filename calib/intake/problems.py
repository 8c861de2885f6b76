"""Row problems are collected over the whole file, then told in one line."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import ParamSpec, TypeVar

from calib.errors import InputError
from calib.intake.parsed import Place

P = ParamSpec("P")
T = TypeVar("T")

_ROWS_NAMED = 8


@dataclass(frozen=True, slots=True)
class Problem:
    """What is wrong at one place."""

    place: Place
    error: InputError


class Problems:
    """The problems found so far in one file."""

    def __init__(self) -> None:
        self.found: list[Problem] = []

    def add(self, place: Place, error: InputError) -> None:
        """Keep one problem."""
        self.found.append(Problem(place, error))

    def attempt(self, place: Place, parse: Callable[P, T], *args: P.args, **kwargs: P.kwargs) -> T | None:
        """Return what `parse` returns; where it raises an InputError keep that and return None."""
        try:
            return parse(*args, **kwargs)
        except InputError as error:
            self.add(place, error)
            return None

    def raise_any(self) -> None:
        """Raise the first problem, counting the rest; do nothing where there is none."""
        if not self.found:
            return
        first, rest = self.found[0], self.found[1:]
        raise type(first.error)(f"{first.place}: {first.error}{_and_more(rest)}")


def _and_more(rest: Sequence[Problem]) -> str:
    if not rest:
        return ""
    rows = list(dict.fromkeys(problem.place.row for problem in rest if problem.place.row is not None))
    named = ", ".join(str(row) for row in rows[:_ROWS_NAMED]) + (", ..." if len(rows) > _ROWS_NAMED else "")
    where = f": {'row' if len(rows) == 1 else 'rows'} {named}" if rows else ""
    return f"; and {len(rest)} more{where}"
