"""The job's grid: taken from a layer, cut to bounds, or spelled out."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

from mapper.errors import GridError, JobError
from mapper.grid import Grid, parse_crs
from mapper.job import GridSpec, Job
from mapper.layers.layer import source_grid
from mapper.layers.source import Source


def choose_grid(job: Job, sources: Mapping[str, Source]) -> Grid | None:
    """The grid that the job asks for, else its lithology's own, else its finest layer's.

    Raises JobError or GridError where there is none.
    """
    spec = job.grid
    if spec.resolution is not None or spec.crs is not None:
        return _once_round(_spelled_grid(spec, job), job)
    if not sources and spec.take_from is None:
        raise JobError(
            "no layer is a grid, so the job's grid must be spelled out",
            where=f"{job.path}, grid",
            fix='[grid] with crs = "EPSG:4326", resolution = 0.1, bounds = [left, ... top]',
        )
    name = spec.take_from or ("lithology" if "lithology" in sources else _finest(sources))
    if name not in job.layers:
        raise JobError(
            f"from = {name!r} is not a layer of this job",
            where=f"{job.path}, grid",
            fix="one of: " + ", ".join(job.layers),
        )
    if name not in sources:
        raise JobError(
            f"the grid cannot be taken from layer {name!r}, which is no grid or could not be read",
            where=f"{job.path}, grid",
            fix="[grid] from = another layer, or crs, resolution and bounds",
        )
    grid = _cut(source_grid(sources[name], where=job.layers[name].where), spec.bounds, job)
    return _once_round(grid, job)


def _once_round(grid: Grid, job: Job) -> Grid:
    """The grid itself; refuses one that goes round the earth more than once."""
    width = grid.dx * grid.n_cols
    if grid.is_geographic and width > 360.0 * (1 + 1e-9):
        raise GridError(
            f"the grid spans {width:g} degrees of longitude: ground would count twice",
            where=f"{job.path}, grid",
            fix="[grid] bounds of at most 360 degrees",
        )
    return grid


def _finest(sources: Mapping[str, Source]) -> str:
    if not sources:
        return "lithology"
    geographic = {name: bool(parse_crs(one.crs).is_geographic) for name, one in sources.items()}
    return min(
        sources, key=lambda name: sources[name].x.step * (1 if not geographic[name] else 1e5)
    )


def _spelled_grid(spec: GridSpec, job: Job) -> Grid:
    if spec.crs is None or spec.bounds is None or spec.resolution is None:
        raise JobError(
            "a grid of one's own needs crs, resolution and bounds together",
            where=f"{job.path}, grid",
            fix='crs = "EPSG:4326", resolution = 0.1, bounds = [left, bottom, right, top]',
        )
    left, bottom, right, top = spec.bounds
    dx, dy = spec.resolution
    n_cols, n_rows = round((right - left) / dx), round((top - bottom) / dy)
    off = max(abs((right - left) / dx - n_cols), abs((top - bottom) / dy - n_rows))
    if off > 1e-6 * max(n_cols, n_rows, 1) or not n_cols or not n_rows:
        raise GridError(
            f"bounds {list(spec.bounds)} do not hold a whole number of cells of {dx:g} x {dy:g}",
            where=f"{job.path}, grid.bounds",
            fix=f"bounds = [{left:g}, {top - dy * max(n_rows, 1):g}, "
            f"{left + dx * max(n_cols, 1):g}, {top:g}]",
        )
    return Grid(parse_crs(spec.crs).to_wkt(), left, top, dx, dy, n_rows, n_cols)


def _cut(grid: Grid, bounds: tuple[float, float, float, float] | None, job: Job) -> Grid:
    """The part of a grid that bounds enclose, cells kept whole."""
    if bounds is None:
        return grid
    left, bottom, right, top = bounds
    col = max(0, math.floor((left - grid.left) / grid.dx + 1e-6))
    row = max(0, math.floor((grid.top - top) / grid.dy + 1e-6))
    col_stop = min(grid.n_cols, math.ceil((right - grid.left) / grid.dx - 1e-6))
    row_stop = min(grid.n_rows, math.ceil((grid.top - bottom) / grid.dy - 1e-6))
    if col_stop <= col or row_stop <= row:
        raise GridError(
            f"bounds {list(bounds)} lie outside the grid {[round(one, 6) for one in grid.bounds]}",
            where=f"{job.path}, grid.bounds",
            fix="bounds within it",
        )
    return replace(
        grid,
        left=grid.left + grid.dx * col,
        top=grid.top - grid.dy * row,
        n_rows=row_stop - row,
        n_cols=col_stop - col,
    )
