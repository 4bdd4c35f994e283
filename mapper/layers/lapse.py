"""Temperature of coarse cells brought to the heights of fine ones by a lapse rate."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from mapper.errors import JobError
from mapper.grid import Window
from mapper.job import LayerSpec
from mapper.layers.layer import Layer, axis_plans, method_of, open_layer, source_grid
from mapper.layers.source import Source

Floats = NDArray[np.float64]

USUAL_RATE = 6.5
"""Kelvin that the air cools in a kilometre of height: the usual mean, from memory."""

SLAB_CELLS = 2**22


@dataclass(frozen=True, eq=False)
class Lapse:
    """Heights that a temperature layer is corrected by.

    ``fine`` is the elevation on the job's grid; ``coarse`` the height [m] that each cell of the
    temperature's file stands for, in normalised order, NaN where it is not known or not needed.
    """

    rate: float
    fine: Layer
    coarse: Floats

    def correct(self, layer: Layer, window: Window, values: Floats) -> Floats:
        """T - rate (z - z of the coarse cell), the latter resampled as the temperature is."""
        rows, cols = axis_plans(layer.source, layer.grid, window, method_of(layer.how))
        at_row = np.arange(rows.start, rows.stop) % layer.source.y.size
        at_col = np.arange(cols.start, cols.stop) % layer.source.x.size
        height = self.coarse[np.ix_(at_row, at_col)]
        low = layer.arrange(window, (rows, cols), height, np.isfinite(height))
        corrected = values - 1e-3 * self.rate * (self.fine.values(window) - low)
        return np.asarray(corrected)


def with_lapse(layer: Layer, layers: Mapping[str, Layer], sources: Mapping[str, Source]) -> Layer:
    """The temperature layer corrected for height.

    Raises
    ------
    JobError where there is no elevation, or the temperature lies in another CRS than the grid.
    """
    where = f"{layer.spec.where}, downscale"
    if "elevation" not in layers:
        raise JobError(
            'downscale = "lapse-rate" needs an elevation layer',
            where=where,
            fix='[layers.elevation] with path = "elevation.tif"',
        )
    if layer.how == "points":
        raise JobError(
            'downscale = "lapse-rate" needs a temperature in the CRS of the grid',
            where=where,
            fix="a temperature file warped to it",
        )
    rate = USUAL_RATE if layer.spec.lapse_rate is None else layer.spec.lapse_rate
    name = "coarse_elevation" if "coarse_elevation" in layers else "elevation"
    coarse = _coarse_heights(layer, layers[name].spec, sources[name])
    note = f"brought to height with a lapse rate of {rate:g} K per km"
    source = replace(layer.source, notes=(*layer.source.notes, note))
    return replace(layer, source=source, lapse=Lapse(rate, layers["elevation"], coarse))


def _coarse_heights(layer: Layer, spec: LayerSpec, source: Source) -> Floats:
    """Mean height of each cell of the temperature's file that the grid draws on."""
    cells = source_grid(layer.source, where=f"{layer.spec.where}, downscale")
    heights = open_layer(spec, source, cells)
    rows, cols = axis_plans(layer.source, layer.grid, layer.grid.window, method_of(layer.how))
    at_row = np.unique(np.arange(rows.start, rows.stop) % layer.source.y.size)
    at_col = np.unique(np.arange(cols.start, cols.stop) % layer.source.x.size)
    found = np.full((layer.source.y.size, layer.source.x.size), np.nan)
    first, width = int(at_col[0]), int(at_col[-1] - at_col[0]) + 1
    fine_in_row = cells.dy / source.y.step * width * max(1.0, cells.dx / source.x.step)
    n_rows = max(1, int(SLAB_CELLS // max(fine_in_row, 1.0)))
    for start in range(int(at_row[0]), int(at_row[-1]) + 1, n_rows):
        window = Window(start, first, min(n_rows, int(at_row[-1]) + 1 - start), width)
        found[start : window.row_stop, first : window.col_stop] = heights.values(window)
    return found
