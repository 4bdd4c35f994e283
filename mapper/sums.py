"""Sums that do not depend on the order of adding: values as whole counts of a tiny unit."""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from mapper.errors import ValuesError
from mapper.grid import Grid

Floats = NDArray[np.float64]
Counts = NDArray[np.int64]

LIMB_BITS = 32
LIMBS = 2
UNIT_BITS = 56
"""A value is counted in units of the cell's size times 2^-56: a rate of 0.01 mol m-2 yr-1 is
then kept to 2e-15 of itself, and 128 mol m-2 yr-1 is the most that fits."""

LARGEST_RATE = 2.0 ** (LIMB_BITS * LIMBS - 1 - UNIT_BITS)

MOST_AT_ONCE = 2**16
"""Values added at one time: double precision adds 2^21 limbs exactly, and this many stay in the
processor's cache."""


def unit_exponent(grid: Grid) -> int:
    """The power of two of the unit in which sums over a grid are counted.

    It depends on the grid alone, so that every block of a run counts alike.
    """
    if grid.is_geographic:
        nominal = grid.dx * grid.dy * 112_000.0**2  # m2; a degree is at most 111.7 km
    else:
        nominal = grid.dx * grid.dy * 2.0  # areal scales above 0.5
    return math.frexp(nominal)[1] - UNIT_BITS


class Runs(NamedTuple):
    """Stretches of equal keys: the first position and the key of each, and the length of all."""

    start: NDArray[np.int64]
    key: NDArray[np.int64]
    size: int


def runs_of(keys: NDArray[Any]) -> Runs:
    """Find the stretches of equal keys, so that several quantities are added by them."""
    start = np.flatnonzero(keys[1:] != keys[:-1]) + 1
    start = np.concatenate([np.arange(min(keys.size, 1)), start])
    return Runs(start, keys[start].astype(np.int64), keys.size)


def add_up(keys: NDArray[Any] | Runs, values: Floats, n_keys: int, exponent: int) -> Counts:
    """Add values by key, exactly, each rounded once to a whole count.

    Parameters
    ----------
    keys : shape (n,), 0 .. n_keys - 1, or their runs. values : shape (n,), finite.
    exponent : from `unit_exponent`.

    Returns
    -------
    Array (n_keys, LIMBS) of counts, lowest limb first; arrays of several blocks are added with +.

    Notes
    -----
    Each limb is a whole number below 2^32, so that double precision adds `MOST_AT_ONCE` of them
    exactly, in any order.
    """
    runs = keys if isinstance(keys, Runs) else runs_of(keys)
    out = np.zeros((n_keys, LIMBS), dtype=np.int64)
    for first in range(0, runs.size, MOST_AT_ONCE):
        last = min(first + MOST_AT_ONCE, runs.size)
        low, high = np.searchsorted(runs.start, (first + 1, last))
        start = np.concatenate([[0], runs.start[low:high] - first])
        at = runs.key[low - 1 : high]
        for limb, counts in enumerate(_limbs(values[first:last], exponent)):
            summed = np.add.reduceat(counts, start)
            found = np.bincount(at, weights=summed, minlength=n_keys)
            out[:, limb] += found.astype(np.int64)
    return out


def add_repeated(values: Floats, times: NDArray[np.int64], exponent: int) -> Counts:
    """Add values that occur many times over, as `add_up` would one by one.

    Parameters
    ----------
    values : shape (n,). times : shape (n, n_keys), how often each occurs under each key; a column
        may hold 2^31 in all.
    """
    limbs = np.stack(_limbs(values, exponent), axis=1).astype(np.int64)
    return times.T @ limbs


def _limbs(values: Floats, exponent: int) -> tuple[Floats, Floats]:
    """Split values into whole counts of the unit, low and high limb."""
    unit = math.ldexp(1.0, exponent)
    high = np.rint(values * math.ldexp(1.0, -exponent - LIMB_BITS))
    if max(high.max(), -high.min()) >= 2.0 ** (LIMB_BITS - 1):
        worst = float(np.abs(values).max())
        raise ValuesError(
            f"a cell takes up {worst:g} mol per year, over {LARGEST_RATE:g} mol m-2 yr-1",
            where="the law's result",
            fix="check the law's parameters and the layers' units",
        )
    low = values - high * (unit * 2.0**LIMB_BITS)
    low *= 1.0 / unit
    return np.rint(low, out=low), high


def totals(counts: Counts, exponent: int) -> Floats:
    """Counts as numbers, each rounded once.

    Parameters
    ----------
    counts : shape (..., LIMBS).

    Returns
    -------
    Array of the leading shape.
    """
    flat = counts.reshape(-1, LIMBS)
    values = [
        math.ldexp(
            float(sum(int(part) << (LIMB_BITS * at) for at, part in enumerate(row))), exponent
        )
        for row in flat
    ]
    return np.array(values, dtype=np.float64).reshape(counts.shape[:-1])
