"""Maps as Cloud Optimized GeoTIFFs, put together without holding them in memory."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from numpy.typing import NDArray
from rasterio.shutil import copy as copy_raster
from rasterio.windows import Window as RasterWindow

from mapper.evaluation import FLAG_MEANING
from mapper.exports.files import whole_file
from mapper.grid import Grid, Window
from mapper.uncertainty.cells import MAP_DRAWS

RATE_UNIT = "t CO2 km-2 yr-1"
COG_BLOCK = 512


@dataclass(frozen=True, kw_only=True)
class MapKind:
    """One map of a run: its file, what its values mean, and how its overviews are made."""

    name: str
    dtype: str
    nodata: float | None
    unit: str
    description: str
    overviews: str
    tags: Mapping[str, str]


_CAUTION = "a screening estimate, not verified removal; local rules and qualified judgement decide"

MAPS: tuple[MapKind, ...] = (
    MapKind(
        name="consumption",
        dtype="float32",
        nodata=float("nan"),
        unit=RATE_UNIT,
        description="CO2 taken up by weathering, short term",
        overviews="AVERAGE",
        tags={
            "long_name": "CO2 taken from air and soil by rock weathering, short term, over the "
            "whole cell",
            "caution": _CAUTION,
        },
    ),
    MapKind(
        name="drawdown",
        dtype="float32",
        nodata=float("nan"),
        unit=RATE_UNIT,
        description="CO2 drawn down by weathering, long term",
        overviews="AVERAGE",
        tags={
            "long_name": "CO2 that stays out of the atmosphere after carbonate has formed in the "
            "sea, long term, over the whole cell",
            "caution": _CAUTION,
        },
    ),
    MapKind(
        name="flags",
        dtype="uint8",
        nodata=None,
        unit="bits",
        description="what to know about a cell, as bits",
        overviews="NEAREST",
        tags={f"bit_{int(flag)}": meaning for flag, meaning in FLAG_MEANING.items()},
    ),
)


def _interval_map(level: str, percent: int) -> MapKind:
    return MapKind(
        name=f"drawdown_{level}",
        dtype="float32",
        nodata=float("nan"),
        unit=RATE_UNIT,
        description=f"CO2 drawn down, long term: {percent} % of the draws lie below",
        overviews="NEAREST",  # a mean of quantiles is no quantile
        tags={
            "long_name": f"CO2 that stays out of the atmosphere, long term: {percent} % quantile "
            f"of the first {MAP_DRAWS} draws, each cell for itself; cells do not add up to an area",
            "caution": _CAUTION,
        },
    )


INTERVAL_MAPS: tuple[MapKind, ...] = (_interval_map("p05", 5), _interval_map("p95", 95))
"""Maps that a job with ``[uncertainty] maps = true`` gets besides."""


def write_map(
    folder: Path,
    kind: MapKind,
    grid: Grid,
    pieces: Iterable[tuple[Window, NDArray[Any]]],
    *,
    threads: int,
) -> int:
    """Write one map as COG; returns its number of cells.

    Parameters
    ----------
    pieces : windows and their values, which together fill the grid.
    threads : how many compress at one time.
    """
    final = folder / f"{kind.name}.tif"
    plain = folder / f".part-plain-{kind.name}.tif"
    try:
        with whole_file(plain) as temporary:
            _write_plain(temporary, kind, grid, pieces)
        with whole_file(final) as temporary:
            copy_raster(plain, temporary, **_cog_options(kind, threads))
    finally:
        plain.unlink(missing_ok=True)
    return grid.n_cells


def _write_plain(
    path: Path,
    kind: MapKind,
    grid: Grid,
    pieces: Iterable[tuple[Window, NDArray[Any]]],
) -> None:
    statistics = Statistics()
    profile: dict[str, Any] = {
        "driver": "GTiff",
        "width": grid.n_cols,
        "height": grid.n_rows,
        "count": 1,
        "dtype": kind.dtype,
        "crs": rasterio.CRS.from_wkt(grid.crs),
        "transform": rasterio.Affine(*grid.transform),
        "nodata": kind.nodata,
        "bigtiff": "IF_SAFER",
        "tiled": True,
        "blockxsize": COG_BLOCK,
        "blockysize": COG_BLOCK,
    }
    with rasterio.open(path, "w", **profile) as dataset:
        dataset.set_band_description(1, kind.description)
        dataset.units = (kind.unit,)
        dataset.update_tags(**kind.tags)
        dataset.update_tags(1, units=kind.unit)
        for window, values in pieces:
            at = RasterWindow(window.col, window.row, window.n_cols, window.n_rows)
            dataset.write(values, 1, window=at)
            if kind.nodata is not None:
                statistics.add(values)
        dataset.update_tags(1, **statistics.tags())


@dataclass
class Statistics:
    """A map's statistics, gathered piece by piece, under the names that GDAL reads.

    Mean and standard deviation are given with six digits, so that the order of the pieces does
    not show.
    """

    cells: int = 0
    low: float = math.inf
    high: float = -math.inf
    sums: list[tuple[int, float, float]] = field(default_factory=list)

    def add(self, values: NDArray[Any]) -> None:
        """Count in one piece; NaN is no data."""
        self.cells += values.size
        held = values[~np.isnan(values)].astype(np.float64)
        if held.size:
            self.low = min(self.low, float(held.min()))
            self.high = max(self.high, float(held.max()))
            self.sums.append((held.size, float(held.sum()), float(np.dot(held, held))))

    def tags(self) -> dict[str, str]:
        """The statistics as tags of a band; none where there is no data."""
        if not self.sums:
            return {}
        count = sum(one[0] for one in self.sums)
        mean = math.fsum(one[1] for one in self.sums) / count
        square = math.fsum(one[2] for one in self.sums) / count
        return {
            "STATISTICS_MINIMUM": f"{self.low:.9g}",
            "STATISTICS_MAXIMUM": f"{self.high:.9g}",
            "STATISTICS_MEAN": f"{mean:.6g}",
            "STATISTICS_STDDEV": f"{math.sqrt(max(square - mean**2, 0.0)):.6g}",
            "STATISTICS_VALID_PERCENT": f"{100.0 * count / self.cells:.4g}",
        }


def _cog_options(kind: MapKind, threads: int) -> dict[str, Any]:
    return {
        "driver": "COG",
        "compress": "DEFLATE",
        "predictor": "YES",
        "level": 6,
        "blocksize": COG_BLOCK,
        "overview_resampling": kind.overviews,
        "num_threads": threads,
        "bigtiff": "IF_SAFER",
    }
