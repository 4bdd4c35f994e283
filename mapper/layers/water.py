"""The water of a year on the grid: what falls, what evaporates and what runs off."""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from mapper.errors import JobError
from mapper.evaporation import MIDDLE_DAY, POTENTIAL
from mapper.grid import Grid, Window, parse_crs, transformer
from mapper.hydrology import METHODS, derive_runoff, evapotranspiration
from mapper.job import Job, WaterSpec
from mapper.layers.layer import Layer

Floats = NDArray[np.float64]


class Water(NamedTuple):
    """Depths of a year on a window's cells [mm yr-1]."""

    precipitation: Floats
    evapotranspiration: Floats
    runoff: Floats


def needed_layers(water: WaterSpec, present: Mapping[str, object]) -> list[str]:
    """The layers that a method of deriving runoff reads and the job lacks."""
    needed = ["precipitation"]
    if water.potential is not None or is_annual(water, present):
        needed.append("temperature")
    if water.method == "zhang-2001":
        needed.append("vegetation")
    return [name for name in needed if name not in present]


def is_annual(water: WaterSpec, present: Mapping[str, object]) -> bool:
    """Whether the method needs the year's temperature, and no potential evapotranspiration."""
    given = "potential_evapotranspiration" in present or water.potential is not None
    return water.method in METHODS and not given


def derive_water(
    water: WaterSpec, layers: Mapping[str, Layer], grid: Grid, window: Window
) -> Water:
    """Derive runoff on a window, as precipitation less evapotranspiration, each of shape (n,)."""
    falls = layers["precipitation"].values(window).ravel()
    if is_annual(water, layers):
        warmth = layers["temperature"].values(window).ravel()
        runoff = derive_runoff(water.method, falls, warmth)
        return Water(falls, falls - runoff, runoff)
    potential = _potential(water, layers, grid, window)
    cover = None
    if water.method == "zhang-2001":
        cover = layers["vegetation"].values(window).ravel()
    evaporates = evapotranspiration(water.method, falls, potential, cover)
    return Water(falls, evaporates, falls - evaporates)


def _potential(water: WaterSpec, layers: Mapping[str, Layer], grid: Grid, window: Window) -> Floats:
    if "potential_evapotranspiration" in layers:
        return layers["potential_evapotranspiration"].values(window).ravel()
    warmth = layers["temperature"]
    months = np.stack(
        [warmth.values(window, month).ravel() for month in range(1, len(MIDDLE_DAY) + 1)]
    )
    return POTENTIAL[water.potential or "oudin-2005"](months, latitudes(grid, window))


def latitudes(grid: Grid, window: Window) -> Floats:
    """Latitude of each cell's centre [degrees], shape (n,)."""
    y = grid.y_centres(window.row, window.row_stop)
    x = grid.x_centres(window.col, window.col_stop)
    if grid.is_geographic:
        return np.repeat(y, x.size)
    geodetic = parse_crs(grid.crs).geodetic_crs
    target = "EPSG:4326" if geodetic is None else geodetic.to_wkt()
    _, latitude = transformer(grid.crs, target).transform(*np.meshgrid(x, y))
    return np.asarray(latitude, dtype=np.float64).ravel()


def has_potential(job: Job) -> bool:
    """Whether potential evapotranspiration is given, derivable or not needed."""
    given = "potential_evapotranspiration" in job.layers or job.water.potential is not None
    return given or is_annual(job.water, job.layers)


def no_potential(job: Job) -> JobError:
    """The error for a method that needs it where there is none."""
    return JobError(
        f"method {job.water.method!r} needs potential evapotranspiration, and the job has none",
        where=f"{job.path}, water",
        fix='[water] potential = "oudin-2005" (from monthly temperature), or '
        '[layers.potential_evapotranspiration] with path = "..."',
    )


def check_months(job: Job, layers: Mapping[str, Layer]) -> None:
    """Refuse to make potential evapotranspiration of the mean of a year."""
    given = "runoff" in layers or "potential_evapotranspiration" in layers
    if job.water.potential is None or given or "temperature" not in layers:
        return
    if not layers["temperature"].source.has_months:
        raise JobError(
            f"potential = {job.water.potential!r} works month by month, and the temperature holds "
            "no months",
            where=f"{job.path}, water",
            fix='a file of monthly temperature, or method = "turc-1954" without potential',
        )


def month_shares(job: Job, layers: Mapping[str, Layer]) -> tuple[float, ...]:
    """Parts of a year that months take, where the job wants the mean of monthly rates."""
    if job.time_mean != "rates":
        return ()
    found = [layer.source for layer in layers.values() if layer.source.has_months]
    if not found:
        raise JobError(
            'mean = "rates", and no layer holds months',
            where=f"{job.path}, time",
            fix='mean = "climate", or a file of monthly values',
        )
    days = [
        sum(step.days for step in found[0].steps if step.month == month) for month in range(1, 13)
    ]
    return tuple(one / sum(days) for one in days)
