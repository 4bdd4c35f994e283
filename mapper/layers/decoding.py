"""From raw values to a layer's values in inner units, and the mean over the steps of a file."""

from __future__ import annotations

from collections.abc import Iterator
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from mapper.layers.axis import Axis, AxisPlan, whole_axis
from mapper.layers.timeline import Step

if TYPE_CHECKING:
    from mapper.layers.layer import Layer

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]

SLAB_CELLS = 2**22
"""Values of several steps that are read at once."""

MOST_KEPT_CELLS = 2**20
"""Cells up to which a file's mean over time is worked out once for the whole file and kept."""


def read_decoded(
    layer: Layer, rows: AxisPlan, cols: AxisPlan, month: int | None = None
) -> tuple[Floats, Bools]:
    """Values of a window of the source in inner units, and which of them are data.

    Parameters
    ----------
    month : 1..12 for the mean of that month; None for the mean of whole years. A layer without
        months has the same values in all.

    Notes
    -----
    Steps are weighed by their length in the file's calendar. A cell that lacks one of the steps
    has no mean.
    """
    source = layer.source
    steps = steps_of(layer, month)
    if not steps:
        raw, valid = source.read(rows, cols)
        return layer.decode(raw, valid), valid
    if source.y.size * source.x.size <= MOST_KEPT_CELLS:
        values, valid = _kept_mean(layer, month if source.has_months else None)
        index = np.ix_(_position(source.y, rows), _position(source.x, cols))
        return values[index], valid[index]
    return _mean(layer, rows, cols, steps)


def steps_of(layer: Layer, month: int | None) -> tuple[Step, ...]:
    """The steps that a mean is taken over."""
    steps = layer.source.steps
    if month is None or not layer.source.has_months:
        return steps
    return tuple(step for step in steps if step.month == month)


def _position(axis: Axis, plan: AxisPlan) -> NDArray[np.int64]:
    return np.arange(plan.start, plan.stop) % axis.size


@lru_cache(maxsize=32)
def _kept_mean(layer: Layer, month: int | None) -> tuple[Floats, Bools]:
    source = layer.source
    steps = steps_of(layer, month)
    return _mean(layer, whole_axis(source.y), whole_axis(source.x), steps)


def _mean(
    layer: Layer, rows: AxisPlan, cols: AxisPlan, steps: tuple[Step, ...]
) -> tuple[Floats, Bools]:
    """The mean over steps, added in the order of time: a cell's sum knows of no other cell."""
    shape = (rows.stop - rows.start, cols.stop - cols.start)
    total, every = np.zeros(shape), np.ones(shape, dtype=np.bool_)
    days = sum(step.days for step in steps)
    for step, raw, valid in _read_steps(layer, rows, cols, steps):
        every &= valid
        total += np.where(valid, layer.decode_step(raw, valid, step), 0.0) * (step.days / days)
    layer.check(total, every)
    return total, every


def _read_steps(
    layer: Layer, rows: AxisPlan, cols: AxisPlan, steps: tuple[Step, ...]
) -> Iterator[tuple[Step, NDArray[Any], Bools]]:
    n_cells = (rows.stop - rows.start) * (cols.stop - cols.start)
    most = max(1, SLAB_CELLS // max(n_cells, 1))
    at = 0
    while at < len(steps):
        stop = at + 1
        while (
            stop < len(steps)
            and stop - at < most
            and steps[stop].index == steps[stop - 1].index + 1
        ):
            stop += 1
        slab = slice(steps[at].index, steps[stop - 1].index + 1)
        raw, valid = layer.source.read(rows, cols, slab)
        for offset, step in enumerate(steps[at:stop]):
            yield step, raw[offset], valid[offset]
        at = stop
