"""Whether single readings pull a curve: what a robust fit reads in the middle of the standards."""

from __future__ import annotations

import numpy as np

from calib.curves.curve import Curve
from calib.curves.diagnostics import Finding
from calib.curves.robust import robust_fit
from calib.quantification.inverse import concentration_of

CODE = "robust-fit-differs"


def robust_finding(curve: Curve) -> Finding | None:
    """Compare a curve with a robust fit of the same standards at the middle concentration.

    Returns
    -------
    Finding or None
        Where the two differ by more than the standard uncertainty of the curve there.
    """
    robust = robust_fit(curve)
    if robust is None:
        return None
    low, high = curve.standards.lowest, curve.standards.highest
    middle = float(np.sqrt(low * high)) if low > 0 else 0.5 * (low + high)
    read = float(concentration_of(robust, curve.predict([middle]))[0])
    slope = abs(float(curve.response_model.slope(middle, curve.values)))
    with np.errstate(divide="ignore", invalid="ignore"):
        u = float(np.sqrt(curve.fit_variance(middle)) / slope)
    if not (np.isfinite(read) and np.isfinite(u)) or abs(read - middle) <= u:
        return None
    return Finding(
        CODE,
        f"a robust fit, which readings far from the curve pull less, reads {read:.4g} where the curve reads "
        f"{middle:.4g} (u of the curve {u:.2g}): single readings pull the curve; look at the standards",
    )
