"""Regions: read, checked, and joined with cells, so that sums over them lose nothing."""

from __future__ import annotations

import math
from collections import Counter
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
import shapely
from numpy.typing import NDArray

from mapper.coverage import MIXED, NONE, OVERLAP_TOLERANCE, Polygons, cover_window, polygons_on
from mapper.errors import Problems, RegionError
from mapper.grid import Grid, Window, same_crs
from mapper.job import RegionsSpec
from mapper.layers.vector import read_vector, reproject, valid_shapes

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Regions:
    """Regions on the grid; the position after the last name stands for 'outside'."""

    names: tuple[str, ...]
    polygons: Polygons
    shapes: NDArray[Any]
    notes: tuple[str, ...] = ()

    @property
    def n_keys(self) -> int:
        """Number of regions and one for 'outside'."""
        return len(self.names) + 1


class Pieces(NamedTuple):
    """Entries split among regions: position of the entry, region, and part of the cell."""

    entry: Ints
    region: Ints
    part: Floats


@dataclass(frozen=True, eq=False)
class RegionCells:
    """Which regions each cell of a window belongs to, 'outside' included; parts add up to 1."""

    single: NDArray[np.int32]
    cell: Ints
    start: Ints
    region: Ints
    part: Floats

    def split(self, cells: Ints) -> Pieces:
        """Split entries in ``cells`` among the regions of their cells."""
        held = self.single[cells]
        if not self.cell.size:
            return Pieces(np.arange(cells.size), held.astype(np.int64), np.ones(cells.size))
        whole = np.flatnonzero(held != MIXED)
        mixed = np.flatnonzero(held == MIXED)
        region = held[whole].astype(np.int64)
        if not mixed.size:
            return Pieces(whole, region, np.ones(whole.size))
        at = np.searchsorted(self.cell, cells[mixed])
        count = self.start[at + 1] - self.start[at]
        entry = np.repeat(mixed, count)
        offset = np.arange(entry.size) - np.repeat(np.cumsum(count) - count, count)
        piece = np.repeat(self.start[at], count) + offset
        return Pieces(
            np.concatenate([whole, entry]),
            np.concatenate([region, self.region[piece]]),
            np.concatenate([np.ones(whole.size), self.part[piece]]),
        )


def open_regions(spec: RegionsSpec, grid: Grid) -> Regions:
    """Read the regions of a job and bring them onto its grid.

    Raises
    ------
    MissingFileError, FileFormatError, RegionError, GridError, or ManyProblemsError.
    """
    where = f"regions, {spec.path}"
    frame = read_vector(
        spec.path, layer=spec.layer, column=spec.id, crs=spec.crs, where=where, key="regions"
    )
    names = _names(frame.values, spec, where)
    notes: list[str] = []
    shapes = frame.shapes
    if not same_crs(frame.crs, grid.crs):
        shapes = reproject(shapes, frame.crs, grid.crs)
        notes.append("brought from their own CRS, edges divided finely first")
    shapes, repairs = valid_shapes(shapes, names)
    notes.extend(repairs)
    polygons = polygons_on(grid, names, shapes)
    if all(not edges.size for edges in polygons.edges):
        raise _misses(shapes, grid, where)
    return Regions(names, polygons, shapes, tuple(notes))


def is_missing(value: Any) -> bool:
    """Whether an id is empty: None or NaN."""
    return value is None or (isinstance(value, float) and math.isnan(value))


def _names(values: tuple[Any, ...], spec: RegionsSpec, where: str) -> tuple[str, ...]:
    problems = Problems()
    empty = [n for n, one in enumerate(values, start=1) if is_missing(one)]
    if empty:
        problems.add(
            RegionError(
                f"feature {', '.join(map(str, empty[:5]))} has no {spec.id!r}",
                where=where,
                fix="an id for every region",
            )
        )
    names = tuple("" if is_missing(one) else _name(one) for one in values)
    twice = [name for name, count in Counter(names).items() if count > 1]
    if twice and not empty:
        problems.add(
            RegionError(
                f"{len(twice)} ids occur more than once, first {twice[0]!r}",
                where=where,
                fix="one multipart feature a region, or another id column",
            )
        )
    taken = [name for name in names if name in ("outside", "all")]
    if taken:
        problems.add(
            RegionError(
                f"a region is called {taken[0]!r}, which the tables use themselves",
                where=where,
                fix="another name for it",
            )
        )
    problems.raise_if_any()
    return names


def _name(value: Any) -> str:
    if isinstance(value, float | np.floating) and float(value).is_integer():
        return str(int(value))
    return str(value)


def _misses(shapes: NDArray[Any], grid: Grid, where: str) -> RegionError:
    left, bottom, right, top = grid.bounds
    x0, y0, x1, y1 = shapely.total_bounds(shapes)
    return RegionError(
        f"no region touches the grid: regions x {x0:g}..{x1:g}, y {y0:g}..{y1:g} against grid "
        f"x {left:g}..{right:g}, y {bottom:g}..{top:g}",
        where=where,
        fix="regions of the same area, or the right crs for them",
    )


def region_cells(regions: Regions | None, grid: Grid, window: Window) -> RegionCells:
    """Find the regions of each cell of a window, and what part lies outside them all.

    Raises RegionError where regions overlap.
    """
    none = np.empty(0, dtype=np.int64)
    if regions is None:
        single = np.zeros(window.n_cells, dtype=np.int32)
        return RegionCells(single, none, np.zeros(1, dtype=np.int64), none, np.empty(0))
    outside = len(regions.names)
    cover = cover_window(regions.polygons, grid, window)
    single = np.where(cover.single == NONE, outside, cover.single).astype(np.int32)
    if not cover.cell.size:
        return RegionCells(single, none, np.zeros(1, dtype=np.int64), none, np.empty(0))
    cells, first = np.unique(cover.cell, return_index=True)
    covered = np.add.reduceat(cover.share, first)
    _refuse_overlap(regions, grid, window, (cells, covered), cover.polygon[first])
    whole = np.abs(covered - 1.0) <= OVERLAP_TOLERANCE
    count = np.diff(np.append(first, cover.cell.size))
    divisor = np.repeat(np.where(whole, covered, 1.0), count)
    cell = np.concatenate([cover.cell, cells[~whole]])
    region = np.concatenate([cover.polygon, np.full(int((~whole).sum()), outside)])
    part = np.concatenate([cover.share / divisor, 1.0 - covered[~whole]])
    order = np.lexsort((region, cell))
    start = np.searchsorted(cell[order], np.append(cells, cells[-1] + 1))
    return RegionCells(single, cells, start, region[order].astype(np.int64), part[order])


def _refuse_overlap(
    regions: Regions, grid: Grid, window: Window, covered: tuple[Ints, Floats], first: Ints
) -> None:
    cells, share = covered
    if share.max() <= 1.0 + OVERLAP_TOLERANCE:
        return
    at = int(np.argmax(share))
    row, col = divmod(int(cells[at]), window.n_cols)
    x = float(grid.x_centres(window.col + col, window.col + col + 1)[0])
    y = float(grid.y_centres(window.row + row, window.row + row + 1)[0])
    raise RegionError(
        f"regions overlap: they cover {share[at]:.3f} of the cell at x {x:g}, y {y:g}, in or "
        f"beside {regions.names[int(first[at])]!r}",
        where="regions",
        fix="regions that do not overlap; sums over them would count ground twice",
    )
