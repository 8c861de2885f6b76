"""The formulas of the NIST StRD nonlinear sets, each written as its file prints it."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy import cos, exp, pi, sin

Formula = Callable[..., Any]


def enso(x, b1, b2, b3, b4, b5, b6, b7, b8, b9):  # type: ignore[no-untyped-def]
    year = b2 * cos(2 * pi * x / 12) + b3 * sin(2 * pi * x / 12)
    second = b5 * cos(2 * pi * x / b4) + b6 * sin(2 * pi * x / b4)
    return b1 + year + second + b8 * cos(2 * pi * x / b7) + b9 * sin(2 * pi * x / b7)


def gauss(x, b1, b2, b3, b4, b5, b6, b7, b8):  # type: ignore[no-untyped-def]
    return b1 * exp(-b2 * x) + b3 * exp(-((x - b4) ** 2) / b5**2) + b6 * exp(-((x - b7) ** 2) / b8**2)


def hahn(x, b1, b2, b3, b4, b5, b6, b7):  # type: ignore[no-untyped-def]
    return (b1 + b2 * x + b3 * x**2 + b4 * x**3) / (1 + b5 * x + b6 * x**2 + b7 * x**3)


def lanczos(x, b1, b2, b3, b4, b5, b6):  # type: ignore[no-untyped-def]
    return b1 * exp(-b2 * x) + b3 * exp(-b4 * x) + b5 * exp(-b6 * x)


FORMULAS: dict[str, Formula] = {
    "bennett5": lambda x, b1, b2, b3: b1 * (b2 + x) ** (-1 / b3),
    "chwirut2": lambda x, b1, b2, b3: exp(-b1 * x) / (b2 + b3 * x),
    "danwood": lambda x, b1, b2: b1 * x**b2,
    "eckerle4": lambda x, b1, b2, b3: (b1 / b2) * exp(-0.5 * ((x - b3) / b2) ** 2),
    "enso": enso,
    "gauss1": gauss,
    "gauss2": gauss,
    "hahn1": hahn,
    "lanczos1": lanczos,
    "lanczos2": lanczos,
    "mgh10": lambda x, b1, b2, b3: b1 * exp(b2 / (x + b3)),
    "mgh17": lambda x, b1, b2, b3, b4, b5: b1 + b2 * exp(-x * b4) + b3 * exp(-x * b5),
    "misra1a": lambda x, b1, b2: b1 * (1 - exp(-b2 * x)),
    "misra1b": lambda x, b1, b2: b1 * (1 - (1 + b2 * x / 2) ** (-2)),
    "misra1d": lambda x, b1, b2: b1 * b2 * x * (1 + b2 * x) ** (-1),
    "nelson": lambda x, b1, b2, b3: b1 - b2 * x[..., 0] * exp(-b3 * x[..., 1]),
    "rat43": lambda x, b1, b2, b3, b4: b1 / (1 + exp(b2 - b3 * x)) ** (1 / b4),
    "roszman1": lambda x, b1, b2, b3, b4: b1 - b2 * x - np.arctan(b3 / (x - b4)) / pi,
}
