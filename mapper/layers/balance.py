"""The water balance over the mapped land: what falls, evaporates and runs off, added exactly."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from mapper.layers.lithology import RockCells
from mapper.rocks import ROCK_NAMES
from mapper.sums import LIMBS, Counts, Runs, add_up, totals

Floats = NDArray[np.float64]

FALLEN = "precipitation_of_the_year"
"""Key under which the precipitation that runoff is derived from lies beside the layers."""

NO_BALANCE: Counts = np.zeros((0, LIMBS), dtype=np.int64)
"""The sums of a run whose runoff is given."""

_METRES_PER_MM = 1e-3
_KM3_PER_M3 = 1e-9
_KM2_PER_M2 = 1e-6
_WATER_BODY = ROCK_NAMES.index("water")


def water_sums(
    inputs: Mapping[str, Floats], rocks: RockCells, areas: Floats, exponent: int
) -> Counts:
    """Add up a block's water: land area [m2], then what falls, evaporates and runs off [m3 yr-1].

    Parameters
    ----------
    inputs : layers of the year [mm yr-1], with `FALLEN` where runoff is derived.
    areas : of all cells [m2].

    Returns
    -------
    Array (4, LIMBS), or `NO_BALANCE` where runoff is given. Land is mapped ground that is no water
    body and has both precipitation and runoff.
    """
    if FALLEN not in inputs:
        return NO_BALANCE
    land = rocks.rock != _WATER_BODY
    area = np.bincount(rocks.cell[land], weights=rocks.share[land], minlength=areas.size) * areas
    falls, runs_off = inputs[FALLEN], inputs["runoff"]
    known = ~(np.isnan(falls) | np.isnan(runs_off))
    falls, runs_off, area = (np.where(known, one, 0.0) for one in (falls, runs_off, area))
    depths = (falls, falls - runs_off, runs_off)
    every = Runs(np.zeros(1, dtype=np.int64), np.zeros(1, dtype=np.int64), areas.size)
    rows = [area, *(depth * _METRES_PER_MM * area for depth in depths)]
    return np.concatenate([add_up(every, row, 1, exponent) for row in rows])


def describe_water(sums: Counts, exponent: int) -> dict[str, float]:
    """The balance as volumes [km3 yr-1] over its land [km2]; empty where runoff is given.

    ``closure`` is the part of the precipitation that evaporation and runoff leave over: rounding.
    """
    if not sums.shape[0]:
        return {}
    area, falls, evaporates, runs_off = (float(one) for one in totals(sums, exponent))
    left = falls - evaporates - runs_off
    return {
        "land_area_km2": area * _KM2_PER_M2,
        "precipitation_km3_per_yr": falls * _KM3_PER_M3,
        "evapotranspiration_km3_per_yr": evaporates * _KM3_PER_M3,
        "runoff_km3_per_yr": runs_off * _KM3_PER_M3,
        "closure": abs(left) / falls if falls else 0.0,
    }


def water_line(balance: Mapping[str, float]) -> str:
    """The balance in one line for the terminal."""
    falls = balance["precipitation_km3_per_yr"]
    evaporates = balance["evapotranspiration_km3_per_yr"]
    runs_off = balance["runoff_km3_per_yr"]
    part = f" ({100 * runs_off / falls:.0f} % of it)" if falls else ""
    return (
        f"  water, km3 per year: {falls:,.4g} falls, {evaporates:,.4g} evaporates, "
        f"{runs_off:,.4g} runs off{part}"
    )
