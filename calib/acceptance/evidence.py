"""What a verdict rests on: the standards, checks and blanks as the fitted curve reads them."""

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field


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
    fitted_response : float
        Response of the curve at the level; nan where it has none.
    variance : float
        Noise model's variance of this response, up to the common scale: 1 where all weigh alike.
    key : int
        Ties the reading to its record; no two readings of a run share one.
    """

    label: str
    role: str
    level: float
    response: float
    back_calculated: float
    relative_error: float
    excluded: bool
    saturated: bool
    fitted_response: float = math.nan
    variance: float = 1.0
    key: int = 0


@dataclass(frozen=True, slots=True)
class JudgedCheck:
    """One reading of a check standard or control sample; `found` is nan off the curve.

    `role` is 'check', 'first-check' or 'control'.
    """

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
        Check standards, first checks and controls, in the order they were measured.
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
    model : str
        Key of the response model.
    end_slopes : tuple of float
        Slope dy/dx of the curve at the lowest and highest standard in the fit.
    counts : mapping of str to int
        Readings with a response, by role; samples count once as 'unknown'.
    carry_over : tuple of float
        Response of each carry-over blank above that at concentration zero, as a share of what the lowest
        standard adds to it; nan where there is no such share.
    reporting_limit : float or None
        Lowest concentration the method reports, undiluted.
    sample_range : tuple of float, or None
        Lowest and highest concentration met in the samples, before dilution and inside the calibrated range.
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
    model: str = ""
    end_slopes: tuple[float, float] = (math.nan, math.nan)
    counts: Mapping[str, int] = field(default_factory=dict)
    carry_over: tuple[float, ...] = ()
    reporting_limit: float | None = None
    sample_range: tuple[float, float] | None = None

    @property
    def judged(self) -> tuple[JudgedStandard, ...]:
        """Readings of role 'standard' above concentration zero, excluded ones too, by level."""
        return _by_level(s for s in self.standards if s.role == "standard" and s.level > 0)

    @property
    def fitted(self) -> tuple[JudgedStandard, ...]:
        """The judged readings that are in the fit; a saturated one without a response is not."""
        return tuple(s for s in self.judged if not s.excluded and not math.isnan(s.response))

    @property
    def in_fit(self) -> tuple[JudgedStandard, ...]:
        """Every reading in the fit: anchors, fitted blanks and concentration zero too, by level."""
        return _by_level(s for s in self.standards if not s.excluded and not math.isnan(s.response))

    @property
    def ends(self) -> tuple[float, float] | None:
        """Lowest and highest judged level in the fit; None when there is none."""
        return _ends(self.fitted)

    @property
    def designed_ends(self) -> tuple[float, float] | None:
        """Lowest and highest judged level of the run, excluded ones too.

        A level that becomes the end because the one beyond it was lost keeps its own limit
        (ICH M10, 2022, 3.3.2, from memory).
        """
        return _ends(self.judged)


def _ends(standards: Iterable[JudgedStandard]) -> tuple[float, float] | None:
    levels = [s.level for s in standards]
    return (min(levels), max(levels)) if levels else None


def _by_level(standards: Iterable[JudgedStandard]) -> tuple[JudgedStandard, ...]:
    """In one order whatever the order of the rows, so that the verdict's words do not depend on it."""
    return tuple(sorted(standards, key=lambda s: (s.level, s.label, s.response)))
