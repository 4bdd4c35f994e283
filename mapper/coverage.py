"""What part of each cell lies in each polygon, exactly: signed areas summed along rows."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
import shapely
from numpy.typing import NDArray

from mapper.grid import Grid, Window, tiles_of

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

TILE = (256, 256)
"""Coverage is worked out on tiles anchored at the grid's origin, so that it does not depend on
the window that asks for it."""

ROUNDING = 1e-9
"""Shares within this of 0 or 1 are taken as 0 or 1: coordinates are good to 1e-12 of the grid."""

OVERLAP_TOLERANCE = 1e-6
"""Part of a cell by which polygons may overlap or gape at a shared border and still be taken to
meet: coordinates written with seven digits leave such slivers."""

NONE = -1
MIXED = -2


@dataclass(frozen=True, eq=False)
class Polygons:
    """Named areas as directed edges in grid units: column and row of both ends, rows down.

    ``edges`` holds for each name an array (n_edges, 4) of u0, v0, u1, v1; holes run the other way
    round, so that signed areas add up.
    """

    names: tuple[str, ...]
    edges: tuple[Floats, ...]
    bounds: Floats


class Cover(NamedTuple):
    """Coverage of a window's cells.

    ``single`` has shape (n_cells,): the one polygon that fills the cell, `NONE` where no polygon
    touches it, `MIXED` where it is divided. The other three arrays list the pieces of divided
    cells, ordered by cell and then by polygon; ``share`` is the part of the cell.
    """

    single: NDArray[np.int32]
    cell: Ints
    polygon: Ints
    share: Floats

    def entries(self) -> tuple[Ints, Ints, Floats]:
        """All pieces, whole cells too: cell, polygon and share, ordered by cell and polygon."""
        whole = np.flatnonzero(self.single >= 0)
        cell = np.concatenate([whole, self.cell])
        polygon = np.concatenate([self.single[whole].astype(np.int64), self.polygon])
        share = np.concatenate([np.ones(whole.size), self.share])
        order = np.argsort(cell, kind="stable")
        return cell[order], polygon[order], share[order]


def polygons_on(grid: Grid, names: tuple[str, ...], shapes: NDArray[Any]) -> Polygons:
    """Bring valid polygons in the grid's CRS into grid units.

    On a longitude/latitude grid a polygon also counts a whole turn east and west of where it is
    drawn, so that grids across the antimeridian meet it.
    """
    turns = (0.0, -360.0, 360.0) if grid.is_geographic else (0.0,)
    edges = tuple(_edges(shape, grid, turns) for shape in shapes)
    bounds = np.array([_bounds(one) for one in edges]).reshape(-1, 4)
    return Polygons(names, edges, bounds)


def _edges(shape: Any, grid: Grid, turns: tuple[float, ...]) -> Floats:
    found: list[Floats] = [np.empty((0, 4))]
    for part in shapely.get_parts(shape):
        if shapely.get_type_id(part) != 3 or shapely.is_empty(part):
            continue
        rings = shapely.get_rings(part)
        for position, ring in enumerate(rings):
            points = shapely.get_coordinates(ring)
            if bool(shapely.is_ccw(ring)) != (position == 0):
                points = points[::-1]
            found.extend(_ring_edges(points, grid, turn) for turn in turns)
    return np.concatenate(found)


def _ring_edges(points: Floats, grid: Grid, turn: float) -> Floats:
    u = (points[:, 0] + turn - grid.left) / grid.dx
    v = (grid.top - points[:, 1]) / grid.dy
    if u.max() <= 0 or u.min() >= grid.n_cols or v.max() <= 0 or v.min() >= grid.n_rows:
        return np.empty((0, 4))
    return np.stack([u[:-1], v[:-1], u[1:], v[1:]], axis=1)


def _bounds(edges: Floats) -> tuple[float, float, float, float]:
    if not edges.size:
        return np.inf, np.inf, -np.inf, -np.inf
    u, v = edges[:, 0], edges[:, 1]
    return float(u.min()), float(v.min()), float(u.max()), float(v.max())


def cover_window(polygons: Polygons, grid: Grid, window: Window) -> Cover:
    """Find what part of each of a window's cells lies in each polygon."""
    single = np.full(window.shape, NONE, dtype=np.int32)
    pieces: list[tuple[Ints, Ints, Floats]] = []
    for tile in tiles_of(grid, window, TILE):
        _cover_tile(polygons, tile, window, single, pieces)
    if not pieces:
        none = np.empty(0, dtype=np.int64)
        return Cover(single.ravel(), none, none.copy(), np.empty(0))
    cell, polygon, share = (np.concatenate(one) for one in zip(*pieces, strict=True))
    order = np.lexsort((polygon, cell))
    return Cover(single.ravel(), cell[order], polygon[order], share[order])


def _cover_tile(
    polygons: Polygons,
    tile: Window,
    window: Window,
    single: NDArray[np.int32],
    pieces: list[tuple[Ints, Ints, Floats]],
) -> None:
    """Enter a tile's coverage, cropped to the window, into ``single`` and ``pieces``."""
    rows = slice(max(tile.row, window.row), min(tile.row_stop, window.row_stop))
    cols = slice(max(tile.col, window.col), min(tile.col_stop, window.col_stop))
    part = np.s_[rows.start - tile.row : rows.stop - tile.row,
                 cols.start - tile.col : cols.stop - tile.col]  # fmt: skip
    target = single[rows.start - window.row : rows.stop - window.row,
                    cols.start - window.col : cols.stop - window.col]  # fmt: skip
    first = (rows.start - window.row) * window.n_cols + cols.start - window.col

    def enter(here: NDArray[np.bool_], polygon: NDArray[Any] | int, share: Floats) -> None:
        at_row, at_col = np.nonzero(here)
        if at_row.size:
            cell = first + at_row * window.n_cols + at_col
            held = np.broadcast_to(polygon, target.shape)[at_row, at_col].astype(np.int64)
            pieces.append((cell, held, share[at_row, at_col]))
            target[at_row, at_col] = MIXED

    for position in _touching(polygons.bounds, tile):
        edges = polygons.edges[position]
        if not _crosses(edges, tile):  # most tiles: the polygon holds all of it or none
            if not _holds(edges, tile):
                continue
            if (target == NONE).all():
                target[:] = position
                continue
        share = cover_tile(edges, tile)[part]
        touched = share > 0.0
        # a cell that an earlier polygon fills becomes divided: overlaps show as cover above one
        enter(touched & (target >= 0), target.copy(), np.ones(target.shape))
        alone = (share == 1.0) & (target == NONE)
        target[alone] = position
        enter(touched & ~alone, int(position), share)


def _crosses(edges: Floats, tile: Window) -> bool:
    """Whether some edge may pass through a tile."""
    u0, v0, u1, v1 = edges.T
    apart = (np.maximum(u0, u1) < tile.col) | (np.minimum(u0, u1) > tile.col_stop)
    apart |= (np.maximum(v0, v1) < tile.row) | (np.minimum(v0, v1) > tile.row_stop)
    return not bool(apart.all())


def _holds(edges: Floats, tile: Window) -> bool:
    """Whether a tile that no edge passes through lies inside: edges left of its middle wind."""
    u0, v0, u1, v1 = edges.T
    middle = tile.row + 0.5 * tile.n_rows
    up = ((v0 <= middle) != (v1 <= middle)) & (np.maximum(u0, u1) < tile.col)
    return bool(np.sign(v1 - v0)[up].sum() != 0)


def _touching(bounds: Floats, tile: Window) -> Ints:
    apart = (
        (bounds[:, 0] >= tile.col_stop)
        | (bounds[:, 2] <= tile.col)
        | (bounds[:, 1] >= tile.row_stop)
        | (bounds[:, 3] <= tile.row)
    )
    return np.flatnonzero(~apart)


def cover_tile(edges: Floats, tile: Window) -> Floats:
    """Share of each cell of a tile that lies inside directed edges.

    Parameters
    ----------
    edges : shape (n, 4) in grid units.

    Notes
    -----
    Each edge is cut at the lines between cells. A piece that rises by dv within a cell, at a mean
    distance m from its left side, covers (1 - m) dv of it and dv of every cell to its right; the
    running sum along the row is the coverage. Pieces left of the tile count as on its left side.
    Proved in the tests against polygon intersections.
    """
    pieces = _cut_at_columns(_cut_at_rows(edges, tile), tile)
    row, col, mean, rise = pieces
    width = tile.n_cols + 1
    at = row * width + col
    summed = np.bincount(at, weights=rise * (1.0 - mean), minlength=tile.n_rows * width)
    inner = col < tile.n_cols
    summed += np.bincount(
        at[inner] + 1, weights=(rise * mean)[inner], minlength=tile.n_rows * width
    )
    share: Floats = np.cumsum(summed.reshape(tile.n_rows, width), axis=1, dtype=np.float64)[:, :-1]
    share[np.abs(share) < ROUNDING] = 0.0
    share[np.abs(share - 1.0) < ROUNDING] = 1.0
    return share


def _cut_at_rows(edges: Floats, tile: Window) -> tuple[Ints, Floats, Floats, Floats]:
    """Row, u at both ends and signed rise of each edge's piece in each row of the tile."""
    u0, v0 = edges[:, 0] - tile.col, edges[:, 1] - tile.row
    u1, v1 = edges[:, 2] - tile.col, edges[:, 3] - tile.row
    low, high = np.minimum(v0, v1), np.maximum(v0, v1)
    first = np.clip(np.floor(low), 0, tile.n_rows).astype(np.int64)
    last = np.clip(np.ceil(high), 0, tile.n_rows).astype(np.int64)
    beyond = np.minimum(u0, u1) >= tile.n_cols
    count = np.where(beyond | (low == high), 0, np.maximum(last - first, 0))
    edge = np.repeat(np.arange(count.size), count)
    row = first[edge] + np.arange(edge.size) - np.repeat(np.cumsum(count) - count, count)
    start = np.clip(v0[edge], row, row + 1)
    stop = np.clip(v1[edge], row, row + 1)
    slope = (u1[edge] - u0[edge]) / (v1[edge] - v0[edge])
    u_start = np.where(start == v0[edge], u0[edge], u0[edge] + slope * (start - v0[edge]))
    u_stop = np.where(stop == v1[edge], u1[edge], u0[edge] + slope * (stop - v0[edge]))
    return row, u_start, u_stop, stop - start


def _cut_at_columns(
    pieces: tuple[Ints, Floats, Floats, Floats], tile: Window
) -> tuple[Ints, Ints, Floats, Floats]:
    """Row, column, mean place in the column and signed rise of each piece in each column."""
    row, u_start, u_stop, rise = pieces
    low, high = np.minimum(u_start, u_stop), np.maximum(u_start, u_stop)
    first = np.clip(np.floor(low), -1, tile.n_cols).astype(np.int64)
    last = np.clip(np.ceil(high) - 1, first, tile.n_cols).astype(np.int64)
    count = last - first + 1
    piece = np.repeat(np.arange(count.size), count)
    col = first[piece] + np.arange(piece.size) - np.repeat(np.cumsum(count) - count, count)
    left = np.where(col < 0, -np.inf, col)
    right = np.where(col >= tile.n_cols, np.inf, col + 1)
    start = np.maximum(low[piece], left)
    stop = np.minimum(high[piece], right)
    span = high[piece] - low[piece]
    part = np.divide(stop - start, span, out=np.ones_like(span), where=span > 0)
    mean = np.where(col < 0, 0.0, 0.5 * (start + stop) - col)
    return row[piece], np.maximum(col, 0), mean, rise[piece] * part
