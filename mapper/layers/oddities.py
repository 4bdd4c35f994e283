"""What is odd in a layer's raw values and was dealt with: noted, so that nobody is surprised."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from mapper.layers.axis import whole_axis
from mapper.layers.layer import Layer
from mapper.layers.source import UNTAGGED_FILLS, Source

MOST_CELLS = 2**21
"""Cells looked at; of a larger file every n-th row only."""


def odd_values(layer: Layer) -> list[str]:
    """Notes on infinities and untagged fill values among a layer's raw values."""
    source = layer.source
    if np.dtype(source.dtype).kind != "f" or source.kind == "tiles":
        return []
    raw = _look(source)
    notes: list[str] = []
    # in half precision a fill is infinite, and counted as such
    infinite = int(np.isinf(raw).sum())
    if infinite:
        notes.append(f"{infinite} infinite values count as no data")
    for fill in UNTAGGED_FILLS if raw.dtype.itemsize > 2 else ():
        count = int((raw == np.asarray(fill).astype(raw.dtype)).sum())
        if count and fill not in source.tagged_nodata:
            notes.append(f"{count} values of {fill:.6g}, an undeclared fill, count as no data")
    return notes


def _look(source: Source) -> NDArray[np.floating]:
    """Raw values of the whole file, or of a band in the middle of a large one."""
    n_rows = max(1, min(source.y.size, MOST_CELLS // max(source.x.size, 1)))
    first = (source.y.size - n_rows) // 2
    return source.read_raw(whole_axis(source.y, first, first + n_rows), whole_axis(source.x))
