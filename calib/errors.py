"""The one exception family of calib.

Every message says what was wrong, where, and what to do, in one line. A fit that
went badly is not an exception: it is a status with findings on the curve.
"""


class CalibError(Exception):
    """Base of everything calib raises on purpose."""


class InputError(CalibError):
    """Something handed in cannot be used as it is."""


class UnreadableFile(InputError):
    """A file cannot be opened, or is not what it claims to be."""


class MissingColumn(InputError):
    """A table lacks a column it needs, or has it twice."""


class NotANumber(InputError):
    """A cell that must hold a number does not."""


class UnknownUnit(InputError):
    """A unit that is not known, not given, or does not fit the other one."""


class DuplicateFile(InputError):
    """The same readings are in the store already."""


class MethodError(CalibError):
    """A method definition or an acceptance limit contradicts itself.

    ``key`` names the setting it is about, such as ``acceptance.blank``, where there is one.
    """

    def __init__(self, message: str, key: str | None = None) -> None:
        super().__init__(message)
        self.key = key


class ModelError(CalibError):
    """A response model is unknown, or used in a way it does not allow."""


class StoreError(CalibError):
    """The store cannot do what was asked of it."""


class NotFound(StoreError):
    """The store holds no record of that name or number."""


class NotAStore(StoreError):
    """The file or address is no calib store."""


class SchemaTooNew(StoreError):
    """The store was made by a newer calib."""


class SchemaTooOld(StoreError):
    """The store must be upgraded before use."""


class StoreLocked(StoreError):
    """Another program holds the store and did not let go in time."""


class StoreDamaged(StoreError):
    """The record chain or the integrity of the store is broken."""
