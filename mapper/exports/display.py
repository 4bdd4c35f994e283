"""Maps reduced for display: read from overviews, never used for a number in a table."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import rasterio
import shapely
from numpy.typing import NDArray
from rasterio.enums import Resampling

from mapper.engine import Plan
from mapper.exports.colours import Stretch, stretch
from mapper.exports.contents import Contents
from mapper.grid import Grid, Window, parse_crs, transformer
from mapper.layers.lithology import RockCells

DISPLAY_CELLS = 640_000
LONGEST_SIDE = 1200
ROCK_MAP_CELLS = 12_000_000
"""Above this many cells the rocks are not read a second time for the page."""
NO_ROCK = 255
BAND_CELLS = 120_000
OUTLINE_POINTS = 60_000


@dataclass(frozen=True, eq=False)
class DisplayMap:
    """One map reduced: rates as floats with NaN, flags or rocks as bytes."""

    name: str
    values: NDArray[Any]
    unit: str
    long_name: str
    stretch: Stretch | None
    blank: NDArray[np.bool_] | None = None
    """Where nothing is drawn: no rock is mapped there, so a flag would say nothing."""


@dataclass(frozen=True, eq=False)
class Display:
    """What pictures and the page draw."""

    grid: Grid
    shape: tuple[int, int]
    width_to_height: float
    maps: Mapping[str, DisplayMap]

    @property
    def reduced(self) -> bool:
        """Whether a display cell stands for several cells."""
        return self.shape != self.grid.shape


def display_shape(grid: Grid, cells: int = DISPLAY_CELLS) -> tuple[int, int]:
    """Rows and columns of the display: the grid's own, or a whole fraction of them."""
    by_count = math.sqrt(grid.n_cells / cells)
    by_side = max(grid.shape) / LONGEST_SIDE
    step = max(1, math.ceil(max(by_count, by_side) - 1e-9))
    return math.ceil(grid.n_rows / step), math.ceil(grid.n_cols / step)


def read_display(contents: Contents, cells: int = DISPLAY_CELLS) -> Display:
    """Read every map of a run reduced to about ``cells`` cells."""
    grid = contents.plan.grid
    shape = display_shape(grid, cells)
    maps = {name: _read_map(path, name, shape) for name, path in contents.map_paths.items()}
    rocks = dominant_rock(contents.plan, shape)
    if rocks is not None:
        maps["rock"] = DisplayMap("rock", rocks, "", "rock that fills most of the cell", None)
        maps["flags"] = replace(maps["flags"], blank=rocks == NO_ROCK)
    return Display(grid, shape, _aspect(grid), maps)


def _read_map(path: Any, name: str, shape: tuple[int, int]) -> DisplayMap:
    with rasterio.open(path) as dataset:
        classes = dataset.dtypes[0] == "uint8"
        how = Resampling.nearest if classes else Resampling.average
        values = dataset.read(1, out_shape=shape, resampling=how)
        tags = dataset.tags()
        largest = float(dataset.tags(1).get("STATISTICS_MAXIMUM", "nan"))
        unit = dataset.units[0] or ""
        words = tags.get("long_name") or dataset.descriptions[0] or name
    spans = None if classes else stretch(values, None if math.isnan(largest) else largest)
    return DisplayMap(name, values, "" if classes else unit, words, spans)


def dominant_rock(plan: Plan, shape: tuple[int, int]) -> NDArray[np.uint8] | None:
    """The rock that fills most of each display cell's middle cell; None on large grids."""
    grid = plan.grid
    if grid.n_cells > ROCK_MAP_CELLS:
        return None
    rows = _middles(grid.n_rows, shape[0])
    cols = _middles(grid.n_cols, shape[1])
    out = np.full((rows.size, cols.size), NO_ROCK, dtype=np.uint8)
    for first, window in _bands(grid, rows):
        held = rows[first:][rows[first:] < window.row_stop] - window.row
        band = _most_of_cell(plan.lithology.rock_cells(window), window)
        out[first : first + held.size] = band[np.ix_(held, cols)]
    return out


def _bands(grid: Grid, rows: NDArray[np.int64]) -> Iterator[tuple[int, Window]]:
    """Windows of whole rows that together hold the rows asked for, none above `BAND_CELLS`.

    Each comes with the position of its first row in ``rows``; memory does not grow with the grid.
    """
    most = max(1, BAND_CELLS // grid.n_cols)
    first = 0
    while first < rows.size:
        stop = int(np.searchsorted(rows, rows[first] + most))
        yield first, Window(int(rows[first]), 0, int(rows[stop - 1] - rows[first]) + 1, grid.n_cols)
        first = stop


def _most_of_cell(rocks: RockCells, window: Window) -> NDArray[np.uint8]:
    """The rock of the largest share; the first of the list where two are alike."""
    order = np.lexsort((-rocks.rock, rocks.share))  # the largest share of a cell comes last
    band = np.full(window.n_cells, NO_ROCK, dtype=np.uint8)
    band[rocks.cell[order]] = rocks.rock[order]
    return band.reshape(window.shape)


def _middles(n: int, n_display: int) -> NDArray[np.int64]:
    return np.minimum(((np.arange(n_display) + 0.5) * n / n_display).astype(np.int64), n - 1)


def _aspect(grid: Grid) -> float:
    """Width over height on paper; degrees of longitude shrink with the cosine of latitude."""
    left, bottom, right, top = grid.bounds
    ratio = (right - left) / (top - bottom)
    if grid.is_geographic:
        middle = math.radians((bottom + top) / 2)
        wide = top - bottom > 60.0  # a map of the world keeps its plain shape
        ratio *= 1.0 if wide else max(math.cos(middle), 0.2)
    return ratio


def kilometres_wide(grid: Grid) -> float | None:
    """Ground length of the middle row [km]; None where one scale cannot serve the whole map."""
    left, bottom, right, top = grid.bounds
    if grid.is_geographic:
        if top - bottom > 30.0 or right - left > 60.0:
            return None
        middle = math.radians((bottom + top) / 2)
        return math.radians(right - left) * 6371.0 * math.cos(middle)
    factor: float = parse_crs(grid.crs).axis_info[0].unit_conversion_factor
    return (right - left) * factor / 1000.0


def round_length(kilometres: float) -> float:
    """The longest of 1, 2, 5 times a power of ten that is not above ``kilometres``."""
    power = 10.0 ** math.floor(math.log10(kilometres))
    return max(step * power for step in (1.0, 2.0, 5.0) if step * power <= kilometres)


def ticks(low: float, high: float, about: int = 5) -> list[float]:
    """Round numbers between low and high."""
    raw = (high - low) / about
    power = 10.0 ** math.floor(math.log10(raw))
    step = next(one * power for one in (1.0, 2.0, 5.0, 10.0) if one * power >= raw * 0.999)
    first = math.ceil(low / step)
    return [round(n * step, 10) for n in range(first, math.floor(high / step) + 1)]


def tick_label(value: float, axis: str, grid: Grid) -> str:
    """A coordinate as text: degrees with a letter, or kilometres of the grid."""
    if not grid.is_geographic:
        factor: float = parse_crs(grid.crs).axis_info[0].unit_conversion_factor
        return f"{value * factor / 1000:,.6g} km"
    letters = ("E", "W") if axis == "x" else ("N", "S")
    letter = "" if value == 0 else letters[0] if value > 0 else letters[1]
    return f"{abs(value):g}°{letter}"


def outlines(contents: Contents, points: int = OUTLINE_POINTS) -> list[Any]:
    """Regions' shapes in the grid's CRS, simplified to what the display can show."""
    regions = contents.plan.regions
    if regions is None:
        return []
    shape = display_shape(contents.plan.grid)
    grid = contents.plan.grid
    box = shapely.box(*grid.bounds)
    clipped = shapely.intersection(np.asarray(regions.shapes, dtype=object), box)
    tolerance = 0.35 * grid.dx * grid.n_cols / shape[1]
    drawn = shapely.simplify(clipped, tolerance, preserve_topology=True)
    while int(shapely.get_num_coordinates(drawn).sum()) > points and tolerance < grid.dx * 1e4:
        tolerance *= 2.0
        drawn = shapely.simplify(clipped, tolerance, preserve_topology=False)
    return list(drawn)


def geographic_bounds(grid: Grid) -> tuple[float, float, float, float]:
    """West, south, east, north in degrees, from points along the edges."""
    left, bottom, right, top = grid.bounds
    if grid.is_geographic:
        return left, bottom, right, top
    along = np.linspace(0.0, 1.0, 21)
    x = np.concatenate(
        [left + along * (right - left)] * 2 + [np.full(21, left), np.full(21, right)]
    )
    y = np.concatenate(
        [np.full(21, bottom), np.full(21, top)] + [bottom + along * (top - bottom)] * 2
    )
    lon, lat = transformer(grid.crs, "EPSG:4326").transform(x, y)
    return float(lon.min()), float(lat.min()), float(lon.max()), float(lat.max())
