"""Hot spots: places where cells above a threshold lie together, as polygons."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import rasterio
import shapely
from numpy.typing import NDArray
from rasterio.features import shapes as outline
from rasterio.windows import Window as RasterWindow
from scipy.ndimage import label

from mapper.accounting import SQUARE_METRES_PER_KM2
from mapper.doubts import HotspotsSpec
from mapper.errors import GridError
from mapper.grid import Grid, Window, cell_areas

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

CELLS_AT_ONCE = 2**22
SIDES = np.array([[0, 1, 0], [1, 1, 1], [0, 1, 0]])
"""Cells belong together where they share a side."""

COLUMNS = ("hotspot", "area_km2", "total_t_per_yr", "mean_t_per_km2_yr", "x", "y")


@dataclass(frozen=True, kw_only=True)
class Strip:
    """Whole rows of a map: rates (n_rows, n_cols) and cell areas [km2], (n_rows, n_cols)."""

    row: int
    rate: Floats
    area: Floats


def find_hotspots(path: str | Path, spec: HotspotsSpec) -> gpd.GeoDataFrame:
    """Find the hot spots of a map of rates.

    Parameters
    ----------
    path : a map of this tool, in t CO2 km-2 yr-1. spec : the threshold, or the richest share of
        the area that has a result, and the least area of a hot spot.

    Returns
    -------
    One row a hot spot, the largest total first: number, area, total, mean rate, a point inside
    (x, y in the map's CRS) and the polygon along cell edges. ``attrs["above"]`` is the threshold.

    Notes
    -----
    The map is read in strips three times over, so that memory does not grow with it; the polygons
    themselves are held.
    """
    grid = _grid_of(path)
    above = spec.above
    if above is None:
        above = richest_threshold(path, grid, spec.richest_area_share or 0.0)
    spots = _Spots()
    for strip in _strips(path, grid):
        spots.add(strip, strip.rate >= above, grid)
    frame = spots.frame(grid, spec.least_area_km2)
    frame.attrs["above"] = above
    return frame


def hotspot_rows(frame: gpd.GeoDataFrame) -> list[list[Any]]:
    """Rows of ``hotspots.csv``, in the order of `COLUMNS`."""
    return [list(row) for row in frame[list(COLUMNS)].itertuples(index=False)]


def _grid_of(path: str | Path) -> Grid:
    with rasterio.open(path) as source:
        turn = source.transform
        if turn.b or turn.d or turn.e >= 0:
            raise GridError(
                "the map does not lie north up",
                where=str(path),
                fix="maps/drawdown.tif of a run",
            )
        return Grid(
            source.crs.to_wkt(), turn.c, turn.f, turn.a, -turn.e, source.height, source.width
        )


def _strips(path: str | Path, grid: Grid) -> Iterator[Strip]:
    n_rows = max(1, min(grid.n_rows, CELLS_AT_ONCE // grid.n_cols))
    with rasterio.open(path) as source:
        for row in range(0, grid.n_rows, n_rows):
            window = Window(row, 0, min(n_rows, grid.n_rows - row), grid.n_cols)
            read = source.read(1, window=RasterWindow(0, row, grid.n_cols, window.n_rows))
            area = np.broadcast_to(cell_areas(grid, window), window.shape)
            yield Strip(row=row, rate=read.astype(np.float64), area=area / SQUARE_METRES_PER_KM2)


def richest_threshold(path: str | Path, grid: Grid, share: float) -> float:
    """The rate above which the richest ``share`` of the area with a result lies.

    Rates are single precision, and the bits of a positive one sort as it does: two counts of the
    upper and the lower half of the bits find the threshold exactly.
    """
    high = _area_by_bits(path, grid, None)
    wanted = share * high.sum()
    at, left = _last_at_most(high, wanted)
    low = _area_by_bits(path, grid, at)
    inner, _ = _last_at_most(low, left)
    bits = np.array([(at << 16) | inner], dtype=np.uint32)
    return float(bits.view(np.float32)[0])


def _area_by_bits(path: str | Path, grid: Grid, upper: int | None) -> Floats:
    """Area [km2] by the upper 16 bits of the rate, or by the lower ones under one upper half."""
    found = np.zeros(2**16)
    for strip in _strips(path, grid):
        known = ~np.isnan(strip.rate)
        bits = np.maximum(strip.rate[known], 0.0).astype(np.float32).view(np.uint32)
        area = strip.area[known]
        keys = bits >> 16
        if upper is not None:
            mine = keys == upper
            keys, area = bits[mine] & 0xFFFF, area[mine]
        found += np.bincount(keys, weights=area, minlength=2**16)
    return found


def _last_at_most(area: Floats, wanted: float) -> tuple[int, float]:
    """The lowest key that the wanted area reaches from above, and what is left to find in it."""
    from_above = np.cumsum(area[::-1])
    at = int(np.searchsorted(from_above, wanted * (1 - 1e-12)))
    key = area.size - 1 - min(at, area.size - 1)
    return key, wanted - (float(from_above[at - 1]) if at else 0.0)


class _Spots:
    """Hot spots gathered strip by strip, joined where they touch across strips."""

    def __init__(self) -> None:
        self.parent: list[int] = [0]
        self.area: list[float] = [0.0]
        self.total: list[float] = [0.0]
        self.polygons: list[list[Any]] = [[]]
        self.last: Ints | None = None

    def add(self, strip: Strip, hot: NDArray[np.bool_], grid: Grid) -> None:
        """Label one strip and join it to the last row of the one before."""
        labels, n = label(hot, structure=SIDES)
        base = len(self.parent) - 1
        labels = np.where(hot, labels + base, 0).astype(np.int64)
        self.parent.extend(range(base + 1, base + n + 1))
        flat = labels.ravel()
        area = np.bincount(flat, weights=strip.area.ravel(), minlength=base + n + 1)[base + 1 :]
        amount = np.where(hot, strip.rate, 0.0) * strip.area
        total = np.bincount(flat, weights=amount.ravel(), minlength=base + n + 1)[base + 1 :]
        self.area.extend(area.tolist())
        self.total.extend(total.tolist())
        self.polygons.extend([] for _ in range(n))
        if self.last is not None:
            touching = np.unique(np.stack([self.last, labels[0]]), axis=1).T
            for one, other in touching[(touching > 0).all(axis=1)]:
                self._join(int(one), int(other))
        transform = rasterio.Affine(
            grid.dx, 0, grid.left, 0, -grid.dy, grid.top - strip.row * grid.dy
        )
        for shape, number in outline(labels.astype(np.int32), mask=hot, transform=transform):
            self.polygons[int(number)].append(shapely.geometry.shape(shape))
        self.last = labels[-1]

    def _root(self, at: int) -> int:
        while self.parent[at] != at:
            self.parent[at] = self.parent[self.parent[at]]
            at = self.parent[at]
        return at

    def _join(self, one: int, other: int) -> None:
        low, high = sorted((self._root(one), self._root(other)))
        self.parent[high] = low

    def frame(self, grid: Grid, least_area: float) -> gpd.GeoDataFrame:
        """Join the parts of each hot spot, and order them by total."""
        members: dict[int, list[int]] = {}
        for at in range(1, len(self.parent)):
            members.setdefault(self._root(at), []).append(at)
        rows: list[tuple[float, float, Any]] = []
        for parts in members.values():
            area, total = (sum(values[at] for at in parts) for values in (self.area, self.total))
            if area >= least_area:
                shapes = [shape for at in parts for shape in self.polygons[at]]
                rows.append((area, total, shapely.union_all(shapes)))
        rows.sort(key=lambda row: (-row[1], row[2].bounds))
        points = [shape.representative_point() for _, _, shape in rows]
        columns = {
            "hotspot": list(range(1, len(rows) + 1)),
            "area_km2": [area for area, _, _ in rows],
            "total_t_per_yr": [total for _, total, _ in rows],
            "mean_t_per_km2_yr": [total / area for area, total, _ in rows],
            "x": [point.x for point in points],
            "y": [point.y for point in points],
        }
        return gpd.GeoDataFrame(columns, geometry=[shape for _, _, shape in rows], crs=grid.crs)
