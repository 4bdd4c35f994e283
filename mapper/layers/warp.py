"""Bringing values onto the grid from another CRS: sampled at points of each target cell."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mapper.grid import Grid, Window, parse_crs, transformer
from mapper.layers.axis import Axis, AxisPlan
from mapper.layers.resample import LEAST_COVER
from mapper.layers.source import Source

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

LATTICE = 8
"""Cells between the points that PROJ transforms; bilinear between them. The lattice is anchored
at the grid's origin, so that a point's coordinates do not depend on the window."""

MOST_OFF = 0.02
"""Source cells by which coordinates between lattice points may be off; where they are further
off, PROJ transforms each point."""

MOST_SUBDIVISIONS = 8


@dataclass(frozen=True, eq=False)
class PointPlan:
    """Source cells around each sample point of a window.

    ``points`` is the number of sample points along a cell's side. ``row`` and ``col`` have shape
    (n_rows * points, n_cols * points) and count from the start of ``rows`` and ``cols``; -1 lies
    outside the source.
    """

    points: int
    rows: AxisPlan
    cols: AxisPlan
    row: Ints
    col: Ints
    x: Floats
    y: Floats


def plan_points(grid: Grid, window: Window, source: Source, points: int) -> PointPlan | None:
    """Find the source cells that a window's sample points fall into; None where there are none."""
    x, y = _source_coordinates(grid, window, source, points)
    y = -y
    if _geographic(source):
        middle = 0.5 * (source.x.edges[0] + source.x.edges[-1])
        start = source.x.edges[0] if source.x.period else middle - 180.0
        x = start + np.mod(x - start, 360.0)
    row, col = _index(source.y, y), _index(source.x, x)
    inside = (row >= 0) & (col >= 0)
    if not inside.any():
        return None
    row, col = np.where(inside, row, -1), np.where(inside, col, -1)
    rows = _span(source.y, row[inside])
    cols = _span(source.x, col[inside])
    return PointPlan(points, rows, cols, _from(row, rows.start), _from(col, cols.start), x, y)


def subdivisions(grid: Grid, source: Source) -> int:
    """Sample points along a cell's side, so that no source cell under the grid is passed over."""
    widths = [_width(grid, source, at) for at in (0.5, 0.25, 0.75, 0.0, 1.0)]
    known = [one for one in widths if np.isfinite(one)]
    return int(np.clip(np.ceil(known[0] if known else 1.0), 1, MOST_SUBDIVISIONS))


def _width(grid: Grid, source: Source, at: float) -> float:
    """Source cells across the grid's cell at a part of its diagonal; NaN beyond a projection."""
    cell = Window(round(at * (grid.n_rows - 1)), round(at * (grid.n_cols - 1)), 1, 1)
    x, y = _source_coordinates(grid, cell, source, 2)
    x = _short(x - x[0, 0], 360.0 if _geographic(source) else 0.0)
    return max(float(np.ptp(x)) * 2 / source.x.step, float(np.ptp(y)) * 2 / source.y.step)


def sample_nearest(plan: PointPlan, values: Floats, valid: NDArray[np.bool_]) -> Floats:
    """The mean of the source cells at each target cell's sample points, NaN under half valid."""
    inside = plan.row >= 0
    row, col = np.maximum(plan.row, 0), np.maximum(plan.col, 0)
    good = inside & valid[row, col]
    return _cell_means(np.where(good, values[row, col], 0.0), good, plan.points)


def sample_bilinear(
    plan: PointPlan, source: Source, values: Floats, valid: NDArray[np.bool_]
) -> Floats:
    """Bilinear at each sample point, averaged over a target cell's points."""
    inside = plan.row >= 0
    row, col = np.maximum(plan.row, 0), np.maximum(plan.col, 0)
    low_row, row_share = _neighbours(source.y, plan.rows, row, plan.y)
    low_col, col_share = _neighbours(source.x, plan.cols, col, plan.x)
    summed = np.zeros(row.shape)
    weight = np.zeros(row.shape)
    for d_row in (0, 1):
        at_row = np.minimum(low_row + d_row, values.shape[0] - 1)
        w_row = row_share if d_row else 1.0 - row_share
        for d_col in (0, 1):
            at_col = np.minimum(low_col + d_col, values.shape[1] - 1)
            w = w_row * (col_share if d_col else 1.0 - col_share)
            w = np.where(valid[at_row, at_col], w, 0.0)
            summed += w * np.where(valid[at_row, at_col], values[at_row, at_col], 0.0)
            weight += w
    good = inside & valid[row, col] & (weight > 0)
    return _cell_means(
        np.divide(summed, weight, where=good, out=np.zeros_like(summed)), good, plan.points
    )


def _cell_means(values: Floats, good: NDArray[np.bool_], points: int) -> Floats:
    filled = np.where(good, values, 0.0)
    shape = (values.shape[0] // points, values.shape[1] // points)
    count, total = np.zeros(shape, dtype=np.int64), np.zeros(shape)
    for row in range(points):  # point by point: a sum over two axes adds in an order that
        for col in range(points):  # depends on the window's shape
            count += good[row::points, col::points]
            total += filled[row::points, col::points]
    out = np.full(count.shape, np.nan)
    np.divide(total, count, out=out, where=count >= LEAST_COVER * points**2)
    return out


def _source_coordinates(
    grid: Grid, window: Window, source: Source, points: int
) -> tuple[Floats, Floats]:
    """Where the sample points of a window lie in the source's CRS.

    Bilinear between the nodes of the lattice where that is true to `MOST_OFF`, as it is away
    from poles and rims of projections; point by point in the other lattice cells.
    """
    rows = _sub_centres(window.row, window.n_rows, points)
    cols = _sub_centres(window.col, window.n_cols, points)
    lattice = _Lattice(grid, source, rows, cols)
    with np.errstate(invalid="ignore", over="ignore"):  # beyond a projection PROJ gives infinity
        x, y = lattice.between(rows, cols)
        rough = lattice.rough()
    at_row, at_col = np.nonzero(rough[np.ix_(lattice.cell(rows, 0), lattice.cell(cols, 1))])
    if at_row.size:
        x[at_row, at_col], y[at_row, at_col] = transformer(grid.crs, source.crs).transform(
            grid.left + grid.dx * cols[at_col], grid.top - grid.dy * rows[at_row]
        )
    return np.where(np.isfinite(x), x, np.nan), np.where(np.isfinite(y), y, np.nan)


class _Lattice:
    """Nodes of the lattice around a window, in the source's CRS."""

    def __init__(self, grid: Grid, source: Source, rows: Floats, cols: Floats) -> None:
        self.grid = grid
        self.source = source
        self.turn = 360.0 if _geographic(source) else 0.0
        self.first = (int(rows[0] // LATTICE), int(cols[0] // LATTICE))
        self.count = (
            int(rows[-1] // LATTICE) - self.first[0] + 1,
            int(cols[-1] // LATTICE) - self.first[1] + 1,
        )
        nodes = [(one + np.arange(n + 1, dtype=np.float64)) * LATTICE for one, n in self._spans()]
        self.nodes = self._exact(nodes[0], nodes[1])

    def _spans(self) -> tuple[tuple[int, int], tuple[int, int]]:
        return (self.first[0], self.count[0]), (self.first[1], self.count[1])

    def _exact(self, rows: Floats, cols: Floats) -> tuple[Floats, Floats]:
        x, y = np.meshgrid(
            self.grid.left + self.grid.dx * cols, self.grid.top - self.grid.dy * rows
        )
        moved: tuple[Floats, Floats] = transformer(self.grid.crs, self.source.crs).transform(x, y)
        return moved

    def cell(self, places: Floats, axis: int) -> Ints:
        """The lattice cell of places along rows (0) or columns (1), counted from the first."""
        return np.floor(places / LATTICE).astype(np.int64) - self.first[axis]

    def between(self, rows: Floats, cols: Floats) -> tuple[Floats, Floats]:
        """Coordinates bilinear between the nodes."""
        at = (self.cell(rows, 0), self.cell(cols, 1))
        share = (
            rows / LATTICE - self.first[0] - at[0],
            cols / LATTICE - self.first[1] - at[1],
        )
        x, y = self.nodes
        return _between_nodes(x, at, share, self.turn), _between_nodes(y, at, share, 0.0)

    def rough(self) -> NDArray[np.bool_]:
        """Lattice cells in which bilinear is off by more than `MOST_OFF` source cells."""
        quarters = [
            ((one + np.arange(n))[:, None] + [0.25, 0.75]).ravel() * float(LATTICE)
            for one, n in self._spans()
        ]
        guess_x, guess_y = self.between(quarters[0], quarters[1])
        true_x, true_y = self._exact(quarters[0], quarters[1])
        off_x = np.abs(_short(true_x - guess_x, self.turn)) / self.source.x.step
        off_y = np.abs(true_y - guess_y) / self.source.y.step
        good = (off_x <= MOST_OFF) & (off_y <= MOST_OFF)
        return np.asarray(~good.reshape(self.count[0], 2, self.count[1], 2).all(axis=(1, 3)))


def _geographic(source: Source) -> bool:
    return bool(parse_crs(source.crs).is_geographic)


def _sub_centres(start: int, count: int, points: int) -> Floats:
    fine = np.arange(start * points, (start + count) * points, dtype=np.float64)
    return (fine + 0.5) / points


def _between_nodes(
    nodes: Floats, at: tuple[Ints, Ints], share: tuple[Floats, Floats], turn: float
) -> Floats:
    """Bilinear between lattice nodes; differences of longitude taken the short way round."""
    corner = nodes[np.ix_(at[0], at[1])]
    right = _short(nodes[np.ix_(at[0], at[1] + 1)] - corner, turn)
    below = _short(nodes[np.ix_(at[0] + 1, at[1])] - corner, turn)
    across = _short(nodes[np.ix_(at[0] + 1, at[1] + 1)] - corner, turn)
    down, along = share[0][:, None], share[1][None, :]
    return np.asarray(
        corner + along * right + down * below + down * along * (across - right - below)
    )


def _short(difference: Floats, turn: float) -> Floats:
    if not turn:
        return difference
    return np.mod(difference + turn / 2, turn) - turn / 2


def _index(axis: Axis, values: Floats) -> Ints:
    found = np.searchsorted(axis.edges, values, side="right") - 1
    bad = (found < 0) | (found >= axis.size) | ~np.isfinite(values)
    return np.where(bad, -1, found).astype(np.int64)


def _span(axis: Axis, index: Ints) -> AxisPlan:
    from scipy import sparse  # noqa: PLC0415

    start, stop = int(index.min()) - 1, int(index.max()) + 2
    if not axis.period:  # round the earth the last cell neighbours the first
        start, stop = max(start, 0), min(stop, axis.size)
    empty = sparse.csr_matrix((0, stop - start), dtype=np.float64)
    order = axis.order[np.arange(start, stop) % axis.size]
    return AxisPlan(start, stop, empty, np.empty(0, dtype=np.int64), order)


def _from(index: Ints, start: int) -> Ints:
    return np.where(index >= 0, index - start, -1)


def _neighbours(axis: Axis, plan: AxisPlan, held: Ints, values: Floats) -> tuple[Ints, Floats]:
    turns, place = np.divmod(np.arange(plan.start, plan.stop), axis.size)
    centres = axis.centres[place] + axis.period * turns
    if centres.size == 1:
        return np.zeros_like(held), np.zeros(held.shape)
    low = np.where(values < centres[held], held - 1, held)
    low = np.clip(low, 0, centres.size - 2)
    share = (values - centres[low]) / (centres[low + 1] - centres[low])
    return low, np.clip(share, 0.0, 1.0)
