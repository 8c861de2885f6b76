"""A user's own formula as a response model."""

from __future__ import annotations

import warnings
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import ArrayLike

from calib.errors import ModelError
from calib.models.response_model import Array, Parameter, Parameters, ResponseModel, as_array

Function = Callable[..., ArrayLike]


class CustomModel(ResponseModel):
    """A response given as a Python function ``response(x, *parameters)``.

    It takes any finite x, and x of shape (n, q) for fitting alone. It is inverted on
    the plain axis, on the monotone stretch around the standards.
    """

    logarithmic = False

    def __init__(
        self, name: str, parameters: Sequence[str], response: Function, gradient: Function | None
    ) -> None:
        self.name = name  # type: ignore[misc]
        self.formula = f"{name}(x, {', '.join(parameters)})"  # type: ignore[misc]
        self.parameters = tuple(Parameter(p, "of the user's formula", "?") for p in parameters)  # type: ignore[misc]
        self._response = response
        self._gradient = gradient

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Evaluate the user's function.

        Raises
        ------
        ModelError
            When the function fails, or returns another number of responses.
        """
        x = as_array(x)
        try:
            with np.errstate(all="ignore"):
                values = as_array(self._response(x, *p))
        except (ArithmeticError, TypeError, ValueError, LookupError) as cause:
            raise ModelError(f"model '{self.name}' fails at x of shape {x.shape}: {cause!r}") from cause
        return values if values.ndim else as_array(np.broadcast_to(values, x.shape))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Columns of the gradient."""
        return tuple(np.moveaxis(self.gradient(x, p), -1, 0))

    def gradient(self, x: ArrayLike, p: Parameters) -> Array:
        """Use the user's gradient (n, k), or else differentiate numerically.

        A complex step (Squire and Trapp 1998) is exact to rounding; where the function
        does not take complex numbers, central differences serve.
        """
        x = as_array(x)
        if self._gradient is not None:
            return as_array(self._gradient(x, *p))
        values = as_array(p)
        return np.stack([self._derivative(x, values, j) for j in range(values.size)], axis=-1)

    def _derivative(self, x: Array, p: Array, j: int) -> Array:
        central = self._central_difference(x, p, j)
        stepped = self._complex_step(x, p, j)
        if stepped is None:
            return central
        stepped = np.broadcast_to(stepped, central.shape)
        # A function that drops or conjugates the imaginary part gives itself away here.
        size = np.max(np.abs(central), initial=0.0)
        agrees = np.all(np.abs(stepped - central) <= 1e-3 * size + 1e-12 * np.abs(stepped))
        return as_array(stepped) if agrees else central

    def _complex_step(self, x: Array, p: Array, j: int) -> Array | None:
        step = 1e-30 * max(abs(p[j]), 1e-30)
        shifted = p.astype(np.complex128)
        shifted[j] += 1j * step
        try:
            with np.errstate(all="ignore"), warnings.catch_warnings():
                warnings.simplefilter("error", np.exceptions.ComplexWarning)
                derivative = np.imag(np.asarray(self._response(x, *shifted))) / step
        except (TypeError, ValueError, ArithmeticError, np.exceptions.ComplexWarning):
            return None
        return derivative if np.all(np.isfinite(derivative)) else None

    def _central_difference(self, x: Array, p: Array, j: int) -> Array:
        step = 6e-6 * max(abs(p[j]), 1e-8)
        high, low = p.copy(), p.copy()
        high[j] += step
        low[j] -= step
        return as_array((self.response(x, high) - self.response(x, low)) / (high[j] - low[j]))

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Central difference in the concentration."""
        x = as_array(x)
        step = 6e-6 * np.maximum(np.abs(x), 1e-3 * np.max(np.abs(x), initial=1e-8))
        return as_array((self.response(x + step, p) - self.response(x - step, p)) / (2.0 * step))

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Refuse: without a stretch of the axis a formula has no one inverse."""
        raise ModelError(
            f"model '{self.name}' has no closed inverse; use Curve.invert or Curve.back_calculate"
        )

    def start(self, x: Array, y: Array) -> Array:
        """Refuse: nothing is known about the user's parameters."""
        raise ModelError(
            f"model '{self.name}' is your own formula and needs start values: "
            f"start={{{', '.join(f'{n!r}: …' for n in self.names)}}}"
        )

    def grid(self, x: Array) -> Array:
        """Nothing is known to search."""
        return np.empty((0, len(self.parameters)))

    def branch(self, p: Parameters, lowest: float, highest: float) -> tuple[float, float]:
        """Monotone stretch around the standards, at most one span beyond either end.

        Concentrations below zero are not looked for where no standard has one.
        """
        span = highest - lowest
        first_x = lowest - span if lowest < 0 else max(lowest - span, 0.0)
        x = np.linspace(first_x, highest + span, 1201)
        steps = np.diff(self.response(x, p))
        middle = int(np.searchsorted(x, 0.5 * (lowest + highest)))
        sign = np.sign(steps[middle])
        broken = np.flatnonzero((np.sign(steps) != sign) | ~np.isfinite(steps))
        below, above = broken[broken <= middle], broken[broken > middle]
        first = int(below[-1]) + 1 if below.size else 0
        last = int(above[0]) if above.size else x.size - 1
        return float(x[first]), float(x[last])


def custom_model(
    name: str, parameters: Sequence[str], response: Function, gradient: Function | None = None
) -> CustomModel:
    """Make a response model of your own formula.

    Parameters
    ----------
    name : str
        Name shown with the curve.
    parameters : sequence of str
        Names in the order the function takes them.
    response : callable
        ``response(x, *parameters)`` -> (n,) responses. ``x`` is (n,), or (n, q) for a
        formula of several columns, which can be fitted but not inverted.
    gradient : callable, optional
        ``gradient(x, *parameters)`` -> (n, k) derivatives in the parameters.

    Raises
    ------
    ModelError
        When a parameter name is missing, doubled or no identifier.

    Examples
    --------
    >>> import numpy as np, calib
    >>> decay = calib.custom_model("decay", ("height", "rate"), lambda x, h, r: h * np.exp(-r * x))
    >>> x = np.linspace(0.0, 4.0, 9)
    >>> curve = calib.fit(x, 3.0 * np.exp(-0.5 * x), model=decay, start={"height": 1.0, "rate": 1.0})
    >>> round(curve.parameters["rate"], 6)
    0.5
    """
    names = tuple(parameters)
    if not names or len(set(names)) != len(names) or not all(n.isidentifier() for n in names):
        raise ModelError(f"parameters of model '{name}' must be distinct plain names, got {names!r}")
    return CustomModel(name, names, response, gradient)
