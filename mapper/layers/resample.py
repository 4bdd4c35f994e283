"""Bringing values onto the grid where both axes run alike: the same bits for any window."""

from __future__ import annotations

from typing import cast

import numpy as np
from numpy.typing import NDArray
from scipy import sparse

from mapper.layers.axis import AxisPlan, Method

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
Codes = NDArray[np.int64]

LEAST_COVER = 0.5
"""Part of a target cell that valid source cells must cover for a mean to stand for it."""

LEAST_SHARE = 1e-7
"""Shares of a cell below this are rounding, not rock."""


def resample(
    rows: AxisPlan, cols: AxisPlan, values: Floats, valid: Bools, method: Method
) -> Floats:
    """Nearest, bilinear or area-weighted mean of a source window on target cells.

    Parameters
    ----------
    values, valid : shape (source rows, source columns) of the plans.

    Returns
    -------
    Array (n target rows, n target columns), NaN where there is no data: for "nearest" and
    "bilinear" where the source cell that holds the target's centre has none; for "mean" where
    less than half of the target cell has some. Invalid neighbours are left out and the other
    weights raised.
    """
    if method == "nearest":
        picked, good = _picked(rows, cols, values, valid)
        return np.where(good, picked, np.nan)
    total = np.outer(_row_sums(rows.weights), _row_sums(cols.weights))
    filled = np.where(valid, values, 0.0)
    summed = _product(rows.weights, cols.weights, filled, method)
    weight = total
    if not valid.all():
        part = _product(rows.weights, cols.weights, valid.astype(np.float64), method)
        touched = _product(
            _ones(rows.weights), _ones(cols.weights), (~valid).astype(np.float64), method
        )
        weight = np.where(touched == 0.0, total, part)
    if method == "bilinear":
        good = _held(rows, cols, valid)
    else:
        good = weight >= LEAST_COVER
    out = np.full(weight.shape, np.nan)
    np.divide(summed, weight, out=out, where=good)
    return out


def class_shares(
    rows: AxisPlan, cols: AxisPlan, codes: Codes, valid: Bools
) -> tuple[NDArray[np.int64], Codes, Floats]:
    """Share of each code in each target cell, by exact overlap.

    Returns
    -------
    cells, codes, shares : three arrays of one length, ordered by code and then by cell; cells
    count along rows of the target window. A cell's shares add up to the part of it that valid
    codes cover.
    """
    n_cols = cols.nearest.size
    found: list[tuple[NDArray[np.int64], Codes, Floats]] = []
    for code in np.unique(codes[valid]):
        here = ((codes == code) & valid).astype(np.float64)
        share = _product(rows.weights, cols.weights, here, "mean")
        at_row, at_col = np.nonzero(share > LEAST_SHARE)
        cells = at_row.astype(np.int64) * n_cols + at_col
        found.append((cells, np.full(cells.size, code), share[at_row, at_col]))
    if not found:
        none = np.empty(0, dtype=np.int64)
        return none, none.copy(), np.empty(0)
    cells, names, shares = (np.concatenate(part) for part in zip(*found, strict=True))
    return cells, names, shares


def _picked(rows: AxisPlan, cols: AxisPlan, values: Floats, valid: Bools) -> tuple[Floats, Bools]:
    index = np.ix_(np.maximum(rows.nearest, 0), np.maximum(cols.nearest, 0))
    return values[index], _held(rows, cols, valid)


def _held(rows: AxisPlan, cols: AxisPlan, valid: Bools) -> Bools:
    """Whether the source cell that holds each target's centre is there and valid."""
    inside = (rows.nearest >= 0)[:, None] & (cols.nearest >= 0)[None, :]
    if valid.all():
        return inside
    held = valid[np.ix_(np.maximum(rows.nearest, 0), np.maximum(cols.nearest, 0))]
    return np.asarray(inside & held)


def _product(
    rows: sparse.csr_matrix[np.float64],
    cols: sparse.csr_matrix[np.float64],
    values: Floats,
    method: Method,
) -> Floats:
    """Weights along both axes; the axis that shrinks the work goes first, fixed by method."""
    if method == "mean":
        down = np.asarray(rows @ values)
        return np.ascontiguousarray(np.asarray(cols @ np.ascontiguousarray(down.T)).T)
    across = np.ascontiguousarray(np.asarray(cols @ np.ascontiguousarray(values.T)).T)
    return cast("Floats", np.asarray(rows @ across))


def _row_sums(weights: sparse.csr_matrix[np.float64]) -> Floats:
    return np.asarray(weights.sum(axis=1), dtype=np.float64).ravel()


def _ones(weights: sparse.csr_matrix[np.float64]) -> sparse.csr_matrix[np.float64]:
    ones = (weights.data != 0.0).astype(np.float64)
    return sparse.csr_matrix((ones, weights.indices, weights.indptr), shape=weights.shape)
