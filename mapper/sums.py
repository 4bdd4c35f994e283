"""Sums that do not depend on the order of adding: values as whole counts of a tiny unit."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mapper.errors import ValuesError
from mapper.grid import Grid

Floats = NDArray[np.float64]
Counts = NDArray[np.int64]

LIMB_BITS = 24
LIMBS = 3
UNIT_BITS = 58
"""A value is counted in units of the cell's size times 2^-58: a rate of 0.01 mol m-2 yr-1 is
then kept to 4e-16 of itself, and 8192 mol m-2 yr-1 is the most that fits."""

LARGEST_RATE = 2.0 ** (LIMB_BITS * LIMBS - 1 - UNIT_BITS)


def unit_exponent(grid: Grid) -> int:
    """The power of two of the unit in which sums over a grid are counted.

    It depends on the grid alone, so that every block of a run counts alike.
    """
    if grid.is_geographic:
        nominal = grid.dx * grid.dy * 112_000.0**2  # m2; a degree is at most 111.7 km
    else:
        nominal = grid.dx * grid.dy * 2.0  # areal scales above 0.5
    return math.frexp(nominal)[1] - UNIT_BITS


def add_up(keys: NDArray[Any], values: Floats, n_keys: int, exponent: int) -> Counts:
    """Add values by key, exactly, each rounded once to a whole count.

    Parameters
    ----------
    keys : shape (n,), 0 .. n_keys - 1. values : shape (n,), finite. exponent : from
        `unit_exponent`.

    Returns
    -------
    Array (n_keys, LIMBS) of counts, lowest limb first; arrays of several blocks are added with +.

    Notes
    -----
    Each limb is a whole number below 2^24, so that double precision adds 2^29 of them exactly.
    """
    out = np.zeros((n_keys, LIMBS), dtype=np.int64)
    rest = values
    for limb in range(LIMBS - 1, -1, -1):
        step = math.ldexp(1.0, exponent + limb * LIMB_BITS)
        count = np.rint(rest / step)
        if limb == LIMBS - 1 and count.size and np.abs(count).max() >= 2**LIMB_BITS:
            worst = float(np.abs(values).max())
            raise ValuesError(
                f"a cell takes up {worst:g} mol per year, over {LARGEST_RATE:g} mol m-2 yr-1",
                where="the law's result",
                fix="check the law's parameters and the layers' units",
            )
        rest = rest - count * step
        out[:, limb] = np.bincount(keys, weights=count, minlength=n_keys).astype(np.int64)
    return out


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
