"""What an acceptance criterion is, and what it answers."""

import math
from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar, Protocol

from calib.acceptance.evidence import Evidence
from calib.acceptance.limits import Limit, Quantity


@dataclass(frozen=True, slots=True)
class CriterionResult:
    """The answer of one criterion.

    Attributes
    ----------
    id : str
        The setting's key, or 'curve-usable'.
    what : str
        What was asked, in words, with the limit as people read it.
    limit, observed : float or None
        Full precision, a fraction where it is one; None where there is no figure.
    passed : bool
        Whether the limit is kept.
    source : str
        Where the limit comes from, and how far that was checked.
    detail : str
        Which readings failed and by how much, or the figure that passed.
    warns : bool
        Not keeping this limit is shown and rejects nothing.
    remedy : str
        Of a limit that is not kept: what would have to be different, in words and figures.
    """

    id: str
    what: str
    limit: float | None
    observed: float | None
    passed: bool
    source: str
    detail: str
    warns: bool = False
    remedy: str = ""

    @property
    def rejects(self) -> bool:
        """Whether this answer alone rejects the curve."""
        return not self.passed and not self.warns


class Criterion(Protocol):
    """Anything that can judge the evidence of one curve."""

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Judge the evidence."""
        ...


@dataclass(frozen=True, slots=True)
class LimitedCriterion(ABC):
    """A criterion with a limit a method can set.

    It is handed all limits of the method and reads the one under its own `key`;
    those that count standards need the relative-error limits as well.
    """

    limits: Mapping[str, Limit]

    key: ClassVar[str]
    quantity: ClassVar[Quantity]

    @property
    def limit(self) -> Limit:
        """The limit of this criterion."""
        return self.limits[self.key]

    @abstractmethod
    def judge(self, evidence: Evidence) -> CriterionResult:
        """Judge the evidence."""

    def _result(
        self, what: str, observed: float | None, passed: bool, detail: str, remedy: str = ""
    ) -> CriterionResult:
        return CriterionResult(
            id=self.key,
            what=what,
            limit=self.limit.value,
            observed=observed if observed is not None and math.isfinite(observed) else None,
            passed=passed,
            source=self.limit.cited,
            detail=detail,
            warns=self.limit.warns,
            remedy="" if passed else remedy,
        )
