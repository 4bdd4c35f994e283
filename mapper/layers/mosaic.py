"""Several files of one layer, side by side on one lattice of cells, read as one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy import sparse

from mapper.errors import FileFormatError, GridError
from mapper.grid import same_crs
from mapper.layers.axis import SAME_TOLERANCE, Axis, AxisPlan, around_the_earth, regular_axis
from mapper.layers.source import Source


class Part(NamedTuple):
    """One file of a mosaic and the cell that its upper left corner takes."""

    source: Source
    row: int
    col: int


def join(sources: Sequence[Source], *, where: str) -> Source:
    """Join files into one source.

    Raises
    ------
    GridError or FileFormatError where they differ in CRS, cell size, type, unit or scale, lie off
    one another's lattice, or overlap.
    """
    first = sources[0]
    for other in sources[1:]:
        _refuse_difference(first, other, where)
    x = _joined([one.x for one in sources], where)
    y = _joined([one.y for one in sources], where)
    if first.x.period or abs(x.edges[-1] - x.edges[0] - 360.0) < 1e-6:
        x = around_the_earth(x)
    parts = tuple(
        Part(one, _cells_from(y, one.y, where), _cells_from(x, one.x, where)) for one in sources
    )
    _refuse_overlap(parts, where)
    names = ", ".join(Path(one.path).name for one in sources[:3])
    note = f"{len(sources)} files side by side: {names}" + (" ..." if len(sources) > 3 else "")
    notes = tuple(dict.fromkeys(note for one in sources for note in one.notes))
    return replace(first, kind="tiles", x=x, y=y, parts=parts, notes=(note, *notes))


_ALIKE = ("dtype", "unit", "scale", "offset", "steps", "variable")


def _refuse_difference(first: Source, other: Source, where: str) -> None:
    names = f"{Path(first.path).name} and {Path(other.path).name}"
    if not same_crs(first.crs, other.crs):
        raise GridError(f"{names} differ in CRS", where=where, fix="files of one CRS")
    for key in _ALIKE:
        one, two = getattr(first, key), getattr(other, key)
        if one != two:
            raise FileFormatError(
                f"{names} differ in {key}: {one!r} and {two!r}",
                where=where,
                fix="files that are alike, or one layer made of them, e.g. with gdalbuildvrt and "
                "gdal_translate",
            )


def _joined(axes: list[Axis], where: str) -> Axis:
    step = axes[0].step
    for axis in axes:
        if not axis.is_regular or abs(axis.step - step) * axis.size > SAME_TOLERANCE * step:
            raise GridError(
                f"the files have cells of {step:g} and {axis.step:g}",
                where=where,
                fix="files with cells of one size",
            )
    start = min(float(axis.edges[0]) for axis in axes)
    stop = max(float(axis.edges[-1]) for axis in axes)
    return regular_axis(start, step, round((stop - start) / step))


def _cells_from(whole: Axis, part: Axis, where: str) -> int:
    offset = float(part.edges[0] - whole.edges[0]) / whole.step
    if abs(offset - round(offset)) > 100 * SAME_TOLERANCE:
        raise GridError(
            f"a file lies {offset - round(offset):.3f} cells off the lattice of the others",
            where=where,
            fix="files on one lattice of cells",
        )
    return round(offset)


def _refuse_overlap(parts: tuple[Part, ...], where: str) -> None:
    for at, one in enumerate(parts):
        for two in parts[at + 1 :]:
            rows = _shared(one.row, one.source.y.size, two.row, two.source.y.size)
            cols = _shared(one.col, one.source.x.size, two.col, two.source.x.size)
            if rows > 0 and cols > 0:
                names = f"{Path(one.source.path).name} and {Path(two.source.path).name}"
                raise GridError(
                    f"{names} overlap by {rows} x {cols} cells",
                    where=where,
                    fix="files that do not overlap: which one counts cannot be told",
                )


def _shared(start: int, size: int, other: int, other_size: int) -> int:
    return min(start + size, other + other_size) - max(start, other)


def read_tiles(
    source: Source, rows: AxisPlan, cols: AxisPlan, at: slice | None
) -> tuple[NDArray[Any], NDArray[np.bool_]]:
    """Read a window of a mosaic; what no file covers is no data."""
    shape = (rows.file_index.size, cols.file_index.size)
    if at is not None:
        shape = (at.stop - at.start, *shape)  # type: ignore[assignment]
    raw = np.zeros(shape, dtype=source.dtype)
    valid = np.zeros(shape, dtype=np.bool_)
    for part in source.parts:
        row_at, row_plan = _of_part(rows, part.row, part.source.y)
        col_at, col_plan = _of_part(cols, part.col, part.source.x)
        if not (row_at.size and col_at.size):
            continue
        taken = part.source.read(row_plan, col_plan, at)
        row_index, col_index = np.ix_(row_at, col_at)
        raw[..., row_index, col_index], valid[..., row_index, col_index] = taken
    return raw, valid


def _of_part(plan: AxisPlan, start: int, axis: Axis) -> tuple[NDArray[np.int64], AxisPlan]:
    """Which of a plan's cells a file holds, and the plan to read them."""
    inside = np.flatnonzero((plan.file_index >= start) & (plan.file_index < start + axis.size))
    cells = plan.file_index[inside] - start
    empty = sparse.csr_matrix((0, cells.size), dtype=np.float64)
    none = np.empty(0, dtype=np.int64)
    return inside, AxisPlan(0, cells.size, empty, none, axis.order[cells])
