"""Codes of a gridded map on the job's grid: what share of each cell each code takes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from mapper.errors import ValuesError
from mapper.grid import Grid, Window
from mapper.layers.axis import AxisPlan
from mapper.layers.layer import How, axis_plans, how_aligned, place, same_cells
from mapper.layers.resample import LEAST_SHARE, class_shares
from mapper.layers.source import MOST_EXACT, Source
from mapper.layers.warp import plan_points, subdivisions

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

Encode = Callable[[NDArray[Any]], Ints]
"""Turns raw values that are data, of shape (n,), into codes."""


class CodeShares(NamedTuple):
    """Cells, their codes and the share of the cell that each takes: three arrays of one length."""

    cell: Ints
    code: Ints
    share: Floats


@dataclass(frozen=True, eq=False)
class CodeGrid:
    """A map of codes brought onto the grid; ``points`` a side of a cell where CRSs differ."""

    source: Source
    grid: Grid
    how: How
    points: int = 1

    def shares(self, window: Window, encode: Encode) -> CodeShares:
        """The codes of each cell of a window, by exact overlap; ground without data is left out."""
        if self.how == "points":
            return self._from_points(window, encode)
        same = self.how == "same"
        rows, cols = axis_plans(self.source, self.grid, window, "nearest" if same else "mean")
        raw, valid = self.source.read(rows, cols)
        codes: Ints = np.zeros(raw.shape, dtype=np.int64)
        codes[valid] = encode(raw[valid])
        if not same:
            return CodeShares(*class_shares(rows, cols, codes, valid))
        if codes.shape != window.shape:
            at, taken = zip(same_cells(rows), same_cells(cols), strict=True)
            whole, held = np.zeros(window.shape, np.int64), np.zeros(window.shape, np.bool_)
            whole[at], held[at] = codes[taken], valid[taken]
            codes, valid = whole, held
        cells = np.flatnonzero(valid)
        return CodeShares(cells, codes.ravel()[cells], np.ones(cells.size))

    def nested(self, window: Window, encode: Encode) -> CodeShares | None:
        """The codes where each cell lies in one cell of the file at most; None where it does not.

        Far quicker than `shares`, and the same but for slivers that `shares` leaves out.
        """
        if self.how in ("same", "points"):
            return self.shares(window, encode)
        rows, cols = axis_plans(self.source, self.grid, window, "mean")
        row, col = _only_source(rows), _only_source(cols)
        if row is None or col is None:
            return None
        raw, valid = self.source.read(rows, cols)
        codes: Ints = np.zeros(raw.shape, dtype=np.int64)
        codes[valid] = encode(raw[valid])
        at = np.ix_(row.at, col.at)
        share = np.where(valid[at], np.outer(row.share, col.share), 0.0).ravel()
        cells = np.flatnonzero(share > LEAST_SHARE)
        return CodeShares(cells, codes[at].ravel()[cells], share[cells])

    def _from_points(self, window: Window, encode: Encode) -> CodeShares:
        none = np.empty(0, dtype=np.int64)
        plan = plan_points(self.grid, window, self.source, self.points)
        if plan is None:
            return CodeShares(none, none.copy(), np.empty(0))
        raw, valid = self.source.read(plan.rows, plan.cols)
        row, col = np.maximum(plan.row, 0), np.maximum(plan.col, 0)
        good = (plan.row >= 0) & valid[row, col]
        at_row, at_col = np.nonzero(good)
        cells = at_row // self.points * window.n_cols + at_col // self.points
        pairs = np.stack([encode(raw[row, col][good]), cells], axis=1)
        unique, count = np.unique(pairs, axis=0, return_counts=True)
        return CodeShares(unique[:, 1], unique[:, 0], count / self.points**2)


class _Only(NamedTuple):
    """The one source cell that each target cell lies in, and the part of it that lies there."""

    at: Ints
    share: Floats


def _only_source(plan: AxisPlan) -> _Only | None:
    """None where a target cell reaches into a second source cell by more than a sliver."""
    weights = plan.weights.tocoo()
    real = weights.data > LEAST_SHARE
    target, source = weights.row[real], weights.col[real]
    if np.bincount(target, minlength=plan.nearest.size).max(initial=0) > 1:
        return None
    only = _Only(np.zeros(plan.nearest.size, np.int64), np.zeros(plan.nearest.size))
    only.at[target], only.share[target] = source, weights.data[real]
    return only


def open_codes(source: Source, grid: Grid, *, where: str) -> CodeGrid:
    """Bring an opened map of codes onto the grid.

    Raises GridError where it lies apart from the grid.
    """
    source = place(source, grid, where=where)
    how = how_aligned(source, grid, "mean")
    points = max(subdivisions(grid, source), 2) if how == "points" else 1
    return CodeGrid(source, grid, how, points)


def whole_codes(raw: NDArray[Any], *, where: str) -> Ints:
    """Raw values as codes; refuses what is no whole number."""
    if raw.dtype.kind == "f":
        wrong = (raw != np.floor(raw)) | (np.abs(raw) > MOST_EXACT)
        if wrong.any():
            raise ValuesError(
                f"{int(wrong.sum())} codes are not whole numbers, for example {raw[wrong][0]:g}",
                where=where,
                fix="a raster of integer codes, never resampled by bilinear or mean",
            )
    return raw.astype(np.int64)
