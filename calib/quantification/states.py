"""What the limits of an unknown say about it: its state.

The state is a function of response and replicates alone, constant but for a handful of
steps. For very many unknowns of the same replicates it is found at a table of responses, the
cells in which it changes are divided until they are narrow, and only the few unknowns that lie
in one of those are inverted one by one.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import chain

import numpy as np
from numpy.typing import NDArray

from calib.quantification.band import Band, Estimate, Limits

Array = NDArray[np.float64]
Codes = NDArray[np.int8]
Mask = NDArray[np.bool_]

STATES = ("asymmetric", "off-curve", "no-estimate", "open-above", "open-below", "ok")
ASYMMETRIC, OFF, NO_ESTIMATE, OPEN_ABOVE, OPEN_BELOW, OK = range(len(STATES))

# The longer side may exceed the shorter by this factor before ± is suppressed.
LOPSIDED = 1.25
# A table pays from so many unknowns; its cells, how often and into how many parts a cell with a
# change is divided.
TABLED_FROM = 8192
CELLS = 1024
DIVISIONS = 2
PARTS = 16
# Unknowns looked up at once.
PIECE = 8192


def states(band: Band, y: Array, replicates: Array, read: Estimate, limits: Limits) -> Codes:
    """State of each unknown as a number in `STATES`.

    Parameters
    ----------
    band : Band
    y, replicates : (m,) arrays
    read, limits
        What was read of them.
    """
    axis = band.axis
    side, off = band.beyond(y, replicates, read.q)
    # Nearly all draws beyond one and the same end say that the response is not on the curve.
    off = off | (limits.lower == np.inf) | (limits.upper == axis.open_low)
    open_below = limits.lower <= (0.0 if axis.logarithmic else -np.inf)
    open_above = np.isinf(limits.upper)
    gone = (side != 0) | (open_below & open_above)
    t, low, high = (axis.position(v) for v in (read.value, limits.lower, limits.upper))
    with np.errstate(invalid="ignore"):
        short, long = np.minimum(t - low, high - t), np.maximum(t - low, high - t)
        symmetric = long <= LOPSIDED * short
    conditions = [off, gone, open_above, open_below, symmetric]
    codes = [OFF, NO_ESTIMATE, OPEN_ABOVE, OPEN_BELOW, OK]
    return np.asarray(np.select(conditions, codes, ASYMMETRIC), dtype=np.int8)


def words(codes: Codes, names: tuple[str, ...]) -> tuple[str, ...]:
    """Names of numbers."""
    known = np.array(names, dtype=object)
    parts = (codes[i : i + PIECE] for i in range(0, codes.size, PIECE))
    return tuple(chain.from_iterable(known[part].tolist() for part in parts))


@dataclass(frozen=True, slots=True)
class _Table:
    """Stretches of responses of one state: between ``ends[i]`` and ``starts[i]`` lies a change.

    ``codes`` and ``second`` (s + 1,) belong to the stretches, s the number of changes.
    """

    ends: Array
    starts: Array
    codes: Codes
    second: Mask

    def stretch(self, y: Array) -> tuple[NDArray[np.int16], Mask]:
        """Stretch of each response, and whether it lies in a change instead."""
        passed = np.zeros(y.size, dtype=np.int16)
        for end, start in zip(self.ends, self.starts, strict=True):
            passed += y > end
            passed += y >= start
        return passed >> 1, (passed & 1).astype(bool)


def inverted_states(band: Band, y: Array, replicates: Array) -> tuple[Codes, Mask]:
    """State and second region of many unknowns, each as if it were inverted alone."""
    if y.size < TABLED_FROM:
        return _inverted(band, y, replicates)
    tables = {}
    for m in np.unique(replicates):
        same = replicates == m
        if np.count_nonzero(same) >= TABLED_FROM:
            low, high = np.min(y, initial=np.inf, where=same), np.max(y, initial=-np.inf, where=same)
            tables[m] = _tabled(band, float(low), float(high), float(m))
    codes, second = np.empty(y.size, dtype=np.int8), np.empty(y.size, dtype=bool)
    rest = np.ones(y.size, dtype=bool)
    for i in range(0, y.size, PIECE):
        part = slice(i, i + PIECE)
        for m, table in tables.items():
            same = replicates[part] == m
            stretch, changing = table.stretch(y[part])
            np.copyto(codes[part], table.codes[stretch], where=same)
            np.copyto(second[part], table.second[stretch], where=same)
            np.copyto(rest[part], changing, where=same)
    codes[rest], second[rest] = _inverted(band, y[rest], replicates[rest])
    return codes, second


def _inverted(band: Band, y: Array, replicates: Array) -> tuple[Codes, Mask]:
    read = band.estimate(y, replicates)
    limits = band.limits(y, replicates, read)
    return states(band, y, replicates, read, limits), limits.second


def _tabled(band: Band, lowest: float, highest: float, replicates: float) -> _Table:
    """Changes of state between two responses."""
    low, high = (float(np.clip(v, lowest, highest)) for v in band.reach(replicates))
    y = np.unique(np.concatenate([[lowest], np.linspace(low, high, CELLS + 1), [highest]]))
    codes, second = _inverted(band, y, np.full(y.size, replicates))
    for _ in range(DIVISIONS):
        changes = _changes(codes, second)
        share = np.arange(1, PARTS) / PARTS
        inner = (y[changes, None] + share * (y[changes + 1] - y[changes])[:, None]).ravel()
        more, again = _inverted(band, inner, np.full(inner.size, replicates))
        y = np.concatenate([y, inner])
        order = np.argsort(y, kind="stable")
        y = y[order]
        codes, second = np.concatenate([codes, more])[order], np.concatenate([second, again])[order]
    changes = _changes(codes, second)
    first = np.concatenate([changes, [y.size - 1]])
    return _Table(y[changes], y[changes + 1], codes[first], second[first])


def _changes(codes: Codes, second: Mask) -> NDArray[np.intp]:
    """Positions after which the state changes."""
    return np.flatnonzero((codes[1:] != codes[:-1]) | (second[1:] != second[:-1]))
