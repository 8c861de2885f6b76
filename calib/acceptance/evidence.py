"""What a verdict rests on: the standards, checks and blanks as the fitted curve reads them."""

import math
from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class JudgedStandard:
    """One reading of a standard or anchor standard beside what the curve makes of it.

    Attributes
    ----------
    label : str
        Name of the sample, as in the file.
    role : str
        'standard' or 'anchor'; an anchor helps the fit and is never judged.
    level : float
        Nominal concentration, in the unit of the evidence.
    response : float
        Response, in the run's response unit; nan where the detector gave none (saturated).
    back_calculated : float
        Concentration at which the curve has this response; nan where there is none.
    relative_error : float
        back_calculated / level - 1, a fraction; nan where it has no value.
    excluded : bool
        Left out of the fit, with a reason kept elsewhere.
    saturated : bool
        The detector was at its ceiling.
    """

    label: str
    role: str
    level: float
    response: float
    back_calculated: float
    relative_error: float
    excluded: bool
    saturated: bool


@dataclass(frozen=True, slots=True)
class JudgedCheck:
    """One reading of a check standard; `role` is 'check' or 'first-check', `found` nan off the curve."""

    label: str
    role: str
    level: float
    found: float

    @property
    def deviation(self) -> float:
        """Relative deviation found / level - 1, a fraction; nan where it is not defined."""
        return self.found / self.level - 1.0 if self.level > 0 else float("nan")


@dataclass(frozen=True, slots=True)
class Evidence:
    """Everything the criteria look at, for one curve.

    Attributes
    ----------
    standards : tuple of JudgedStandard
        Standards and anchor standards, the excluded ones too.
    checks : tuple of JudgedCheck
        Check standards and first checks.
    blanks : tuple of float
        Back-calculated concentrations of the blanks; 0.0 where the response lies on the
        far side of the response at concentration zero, nan where there is no value.
    converged : bool
        Whether the fit converged.
    findings : tuple of (code, message)
        Findings of the curve.
    residual_sd : float
        Residual standard deviation, in units of the noise model's scale.
    free_parameters : int
        Number of parameters the fit estimated.
    r_squared : float
        Shown with the verdict, never judged.
    concentration_unit : str
        Unit of every concentration here.
    """

    standards: tuple[JudgedStandard, ...]
    checks: tuple[JudgedCheck, ...]
    blanks: tuple[float, ...]
    converged: bool
    findings: tuple[tuple[str, str], ...]
    residual_sd: float
    free_parameters: int
    r_squared: float
    concentration_unit: str

    @property
    def judged(self) -> tuple[JudgedStandard, ...]:
        """Readings of role 'standard' above concentration zero, excluded ones too, by level."""
        return _by_level(s for s in self.standards if s.role == "standard" and s.level > 0)

    @property
    def fitted(self) -> tuple[JudgedStandard, ...]:
        """The judged readings that are in the fit; a saturated one without a response is not."""
        return tuple(s for s in self.judged if not s.excluded and not math.isnan(s.response))

    @property
    def ends(self) -> tuple[float, float] | None:
        """Lowest and highest judged level in the fit; None when there is none."""
        levels = [s.level for s in self.fitted]
        return (min(levels), max(levels)) if levels else None


def _by_level(standards: Iterable[JudgedStandard]) -> tuple[JudgedStandard, ...]:
    """In one order whatever the order of the rows, so that the verdict's words do not depend on it."""
    return tuple(sorted(standards, key=lambda s: (s.level, s.label, s.response)))
