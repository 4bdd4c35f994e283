"""Intervals of totals: the 5, 50 and 95 % quantiles over the draws."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mapper.uncertainty.propagate import Drawn

Floats = NDArray[np.float64]

LEVELS = (0.05, 0.5, 0.95)
LEVEL_NAMES = ("p05", "p50", "p95")


@dataclass(frozen=True, eq=False)
class Intervals:
    """Quantiles of consumption and drawdown [t yr-1], the last axis as in `LEVELS`.

    ``pairs`` (2, n_regions, n_rocks, 3), ``regions`` (2, n_regions, 3), ``rocks``
    (2, n_rocks, 3), ``everything`` (2, 3); consumption first.
    """

    pairs: Floats
    regions: Floats
    rocks: Floats
    everything: Floats


def find_intervals(drawn: Drawn, n_rocks: int) -> Intervals:
    """Quantiles of every total of the tables."""
    both = (drawn.consumption, drawn.drawdown)
    pairs = np.zeros((2, drawn.n_regions, n_rocks, len(LEVELS)))
    for at, values in enumerate(both):
        pairs[at, drawn.region, drawn.rock] = levels(values)
    return Intervals(
        pairs=pairs,
        regions=np.stack([levels(drawn.by_region(values)) for values in both]),
        rocks=np.stack([levels(drawn.by_rock(values)) for values in both]),
        everything=np.stack([levels(values.sum(axis=1, keepdims=True))[0] for values in both]),
    )


def levels(values: Floats) -> Floats:
    """Quantiles over the draws: (n_draws, n) becomes (n, 3)."""
    if not values.shape[1]:
        return np.zeros((0, len(LEVELS)))
    return np.asarray(np.quantile(values, LEVELS, axis=0)).T
