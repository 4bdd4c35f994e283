"""One axis of a source grid, normalised, and how target cells draw on it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy import sparse

from mapper.errors import GridError

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Method = Literal["nearest", "bilinear", "mean"]

SAME_TOLERANCE = 1e-4  # of a cell: offsets below it are rounding in the file's header


@dataclass(frozen=True, eq=False)
class Axis:
    """Cell centres and edges along one axis, ascending, and where each lies in the file.

    Parameters
    ----------
    centres : shape (n,), ascending.
    edges : shape (n + 1,), ascending.
    order : shape (n,), position in the file of each normalised cell.
    period : 360 for a longitude axis that goes round the earth, else 0.
    """

    centres: Floats
    edges: Floats
    order: Ints
    period: float = 0.0

    @property
    def size(self) -> int:
        """Number of cells."""
        return int(self.centres.size)

    @property
    def step(self) -> float:
        """Median cell size."""
        return float(np.median(np.diff(self.edges)))

    @property
    def is_regular(self) -> bool:
        """Whether all cells have one size, to a thousandth."""
        sizes = np.diff(self.edges)
        return bool(np.ptp(sizes) <= 1e-3 * self.step)

    def evened(self) -> Axis:
        """The same cells with the outer two as wide as their neighbours, where a pole cut them."""
        if self.size < 3:
            return self
        edges = self.edges.copy()
        if edges[0] == -90.0 and edges[1] - edges[0] < self.step:
            edges[0] = edges[1] - self.step
        if edges[-1] == 90.0 and edges[-1] - edges[-2] < self.step:
            edges[-1] = edges[-2] + self.step
        return Axis(self.centres, edges, self.order, self.period)

    def shifted(self, by: float) -> Axis:
        """The same cells, ``by`` further along."""
        return Axis(self.centres + by, self.edges + by, self.order, self.period)


def regular_axis(start: float, step: float, count: int) -> Axis:
    """An axis of equal cells from the outer edge ``start``; a negative ``step`` descends."""
    edges = start + step * np.arange(count + 1, dtype=np.float64)
    centres = start + step * (np.arange(count, dtype=np.float64) + 0.5)
    order = np.arange(count, dtype=np.int64)
    if step < 0:
        return Axis(centres[::-1].copy(), edges[::-1].copy(), order[::-1].copy())
    return Axis(centres, edges, order)


def axis_from_centres(
    centres: Floats, bounds: Floats | None, *, longitude: bool, where: str
) -> Axis:
    """An axis from coordinates as a file gives them: any direction, longitudes in any turn.

    Parameters
    ----------
    centres : shape (n,). bounds : shape (n, 2) or None: then edges lie midway.

    Raises
    ------
    GridError where coordinates are not finite, repeat, or turn back.
    """
    if not np.isfinite(centres).all():
        raise GridError("coordinates are not all finite", where=where, fix="mend the file")
    order = np.arange(centres.size, dtype=np.int64)
    if longitude:
        centres, bounds, order = _unroll(centres, bounds, order)
    if centres.size > 1 and centres[0] > centres[-1]:
        centres, order = centres[::-1], order[::-1]
        bounds = None if bounds is None else bounds[::-1]
    steps = np.diff(centres)
    if (steps <= 0).any():
        at = int(np.argmax(steps <= 0))
        raise GridError(
            f"coordinates neither rise nor fall throughout: {centres[at]:g} then "
            f"{centres[at + 1]:g}",
            where=where,
            fix="sort the file along this axis and drop repeated cells",
        )
    edges = _edges(centres, bounds, where)
    return Axis(centres.copy(), edges, order.copy())


def _unroll(
    centres: Floats, bounds: Floats | None, order: Ints
) -> tuple[Floats, Floats | None, Ints]:
    """Make a longitude axis that jumps by a turn, as 0..179, -180..-1 does, run on."""
    steps = np.diff(centres)
    jumps = np.flatnonzero(np.abs(steps) > 180.0)
    if jumps.size != 1:
        return centres, bounds, order
    first = int(jumps[0]) + 1
    turn = -360.0 * np.sign(steps[jumps[0]])
    moved = centres.copy()
    moved[first:] += turn
    if bounds is not None:
        bounds = bounds.copy()
        bounds[first:] += turn
    return moved, bounds, order


def _edges(centres: Floats, bounds: Floats | None, where: str) -> Floats:
    if bounds is not None:
        low, high = bounds.min(axis=1), bounds.max(axis=1)
        if np.allclose(low[1:], high[:-1], rtol=0, atol=1e-3 * float(np.median(high - low))):
            return np.concatenate([low, high[-1:]])
    if centres.size < 2:
        raise GridError(
            "one coordinate alone does not say how wide its cell is",
            where=where,
            fix="give the axis bounds, or use a GeoTIFF",
        )
    middle = 0.5 * (centres[1:] + centres[:-1])
    first = centres[0] - (middle[0] - centres[0])
    last = centres[-1] + (centres[-1] - middle[-1])
    return np.concatenate([[first], middle, [last]])


def around_the_earth(axis: Axis) -> Axis:
    """Mark a longitude axis that spans a full turn as periodic."""
    span = float(axis.edges[-1] - axis.edges[0])
    if abs(span - 360.0) <= 0.01 * axis.step:
        return Axis(axis.centres, axis.edges, axis.order, 360.0)
    return axis


def inside_the_poles(y: Axis, *, where: str) -> Axis:
    """Clip a latitude axis whose outer cells reach up to half a cell beyond a pole.

    Raises GridError where they reach further.
    """
    over = float(np.abs(y.edges).max()) - 90.0
    if over > 0.51 * y.step:
        raise GridError(
            f"cells reach {over:g} degrees beyond a pole (cells of {y.step:g})",
            where=where,
            fix="mend latitudes: cell edges within -90 and 90",
        )
    edges = np.clip(y.edges, -90.0, 90.0)
    return Axis(np.clip(y.centres, -90.0, 90.0), edges, y.order, y.period)


def one_turn(axis: Axis, registration: str | None, *, where: str) -> Axis:
    """Drop the last column of a node-registered longitude axis, which repeats the first.

    Raises GridError where an axis is longer than a turn and the job does not say why.
    """
    over = float(axis.edges[-1] - axis.edges[0]) - 360.0
    if over <= 0.01 * axis.step:
        return axis
    if abs(over - axis.step) > 0.01 * axis.step:
        raise GridError(
            f"the file spans {360.0 + over:g} degrees of longitude, more than a turn",
            where=where,
            fix="a file of at most 360 degrees of longitude",
        )
    if registration != "node":
        raise GridError(
            f"the file spans {360.0 + over:g} degrees of longitude: the last column seems to "
            "repeat the first",
            where=where,
            fix='registration = "node" if values stand at the nodes of the grid',
        )
    return Axis(axis.centres[:-1], axis.edges[:-1], axis.order[:-1], axis.period)


def nearest_turn(axis: Axis, low: float, high: float) -> Axis:
    """Shift a longitude axis by whole turns to where it overlaps ``low`` to ``high`` most."""
    if axis.period:
        return axis

    def overlap(by: float) -> float:
        return float(min(high, axis.edges[-1] + by) - max(low, axis.edges[0] + by))

    return axis.shifted(max((0.0, -360.0, 360.0), key=overlap))


@dataclass(frozen=True, eq=False)
class AxisPlan:
    """How a run of target cells draws on source cells ``start`` to ``stop``.

    ``weights`` has shape (n_target, stop - start); ``nearest`` is the source cell, counted from
    ``start``, that holds the target's centre, or -1. For "mean" a row of weights adds up to the
    part of the target cell that the source covers.
    """

    start: int
    stop: int
    weights: sparse.csr_matrix[np.float64]
    nearest: Ints
    file_index: Ints


def plan_axis(
    axis: Axis, target_edges: Floats, target_centres: Floats, method: Method, *, sphere: bool
) -> AxisPlan:
    """Work out which source cells a run of target cells needs, and with which weights.

    Parameters
    ----------
    target_edges, target_centres : ascending, in the source's coordinates.
    sphere : whether lengths along this axis are latitudes, weighed by the area between them.

    Notes
    -----
    A target cell's weights depend on that cell alone, never on the run it is asked for in.
    """
    centres, edges = _extended(axis)
    if method == "nearest":  # no more cells than are taken: each may cost a tile of the file
        low, high, margin = float(target_centres[0]), float(target_centres[-1]), 0
    else:
        low, high, margin = float(target_edges[0]), float(target_edges[-1]), 1
    first = max(int(np.searchsorted(edges, low, side="right")) - 1 - margin, 0)
    last = min(int(np.searchsorted(edges, high, side="left")) + margin, centres.size)
    if last <= first:
        first, last = 0, 1
    centres, edges = centres[first:last], edges[first : last + 1]
    nearest = np.searchsorted(edges, target_centres, side="right") - 1
    nearest = np.where((nearest < 0) | (nearest >= centres.size), -1, nearest)
    if method == "mean":
        weights = _overlaps(edges, target_edges, sphere=sphere)
    elif method == "bilinear":
        weights = _between(centres, target_centres, nearest)
    else:
        weights = _picks(nearest, centres.size)
    file_index = axis.order[np.arange(first, last) % axis.size]
    return AxisPlan(first, last, weights, nearest.astype(np.int64), file_index)


def whole_axis(axis: Axis, start: int = 0, stop: int | None = None) -> AxisPlan:
    """A plan that reads an axis as it is, all of it or a stretch."""
    order = axis.order[start:stop]
    empty = sparse.csr_matrix((0, order.size), dtype=np.float64)
    return AxisPlan(start, start + order.size, empty, np.empty(0, dtype=np.int64), order)


def _extended(axis: Axis) -> tuple[Floats, Floats]:
    if not axis.period:
        return axis.centres, axis.edges
    turns = (-axis.period, 0.0, axis.period)
    centres = np.concatenate([axis.centres + turn for turn in turns])
    edges = np.concatenate([axis.edges[:-1] + turn for turn in turns])
    return centres, np.concatenate([edges, [axis.edges[-1] + axis.period]])


def _picks(nearest: Ints, n_source: int) -> sparse.csr_matrix[np.float64]:
    good = nearest >= 0
    rows = np.flatnonzero(good)
    ones = np.ones(rows.size)
    return sparse.csr_matrix((ones, (rows, nearest[good])), shape=(nearest.size, n_source))


def _between(centres: Floats, targets: Floats, nearest: Ints) -> sparse.csr_matrix[np.float64]:
    n = centres.size
    if n == 1:
        return _picks(nearest, 1)
    lower = np.clip(np.searchsorted(centres, targets, side="right") - 1, 0, n - 2)
    share = (targets - centres[lower]) / (centres[lower + 1] - centres[lower])
    share = np.clip(share, 0.0, 1.0)
    good = np.flatnonzero(nearest >= 0)
    data = np.stack([1.0 - share[good], share[good]], axis=1).ravel()
    cols = np.stack([lower[good], lower[good] + 1], axis=1).ravel()
    rows = np.repeat(good, 2)
    return sparse.csr_matrix((data, (rows, cols)), shape=(targets.size, n))


def _overlaps(edges: Floats, target: Floats, *, sphere: bool) -> sparse.csr_matrix[np.float64]:
    lows, highs = target[:-1], target[1:]
    first = np.clip(np.searchsorted(edges, lows, side="right") - 1, 0, edges.size - 2)
    last = np.clip(np.searchsorted(edges, highs, side="left"), 1, edges.size - 1)
    count = np.maximum(last - first, 0)
    rows = np.repeat(np.arange(lows.size), count)
    within = np.arange(rows.size) - np.repeat(np.cumsum(count) - count, count)
    cols = first[rows] + within
    start = np.maximum(edges[cols], lows[rows])
    stop = np.minimum(edges[cols + 1], highs[rows])
    measure = _band(start, stop) if sphere else stop - start
    whole = _band(lows, highs) if sphere else highs - lows
    data = np.where(stop > start, measure / whole[rows], 0.0)
    keep = data > 1e-9
    shape = (lows.size, edges.size - 1)
    return sparse.csr_matrix((data[keep], (rows[keep], cols[keep])), shape=shape)


def _band(low: Floats, high: Floats) -> Floats:
    low, high = (np.deg2rad(np.clip(one, -90.0, 90.0)) for one in (low, high))
    # sin b - sin a without cancellation
    return np.asarray(2.0 * np.cos(0.5 * (high + low)) * np.sin(0.5 * (high - low)))
