"""Which version of a record is in force."""

from functools import cache
from typing import Any

from sqlalchemy import ColumnElement, exists
from sqlalchemy.orm import aliased

from calib.store.base import Base


@cache  # building the condition costs more than the query it serves
def is_current(table: type[Base]) -> ColumnElement[bool]:
    """Condition for a query: no later row supersedes this one.

    Parameters
    ----------
    table : type
        A table with a ``supersedes`` column, such as ``Curve`` or ``RunFacts``.
    """
    # Any: the base class declares neither column, every superseding table has both.
    later: Any = aliased(table)
    this: Any = table
    return ~exists().where(later.supersedes == this.id)
