"""A layer on the job's grid: opened, decoded once, resampled, checked for sense."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import NDArray
from pyproj import Geod

from mapper.errors import GridError, ValuesError
from mapper.grid import Grid, Window, parse_crs, same_crs, transformer
from mapper.job import LayerSpec
from mapper.layers.axis import SAME_TOLERANCE, Axis, AxisPlan, Method, nearest_turn, plan_axis
from mapper.layers.decoding import read_decoded
from mapper.layers.resample import resample
from mapper.layers.source import Source, file_kind
from mapper.layers.timeline import Step
from mapper.layers.warp import plan_points, sample_bilinear, sample_nearest, subdivisions
from mapper.units import INNER_UNIT, MONTHS_PER_YEAR, Conversion, Quantity, conversion
from mapper.vegetation import cover_from_ndvi, cover_of_classes, read_cover_table

if TYPE_CHECKING:
    from mapper.layers.lapse import Lapse

Floats = NDArray[np.float64]
How = Literal["same", "nearest", "bilinear", "mean", "points"]

QUANTITY: dict[str, Quantity] = {
    "temperature": "temperature",
    "runoff": "water",
    "precipitation": "water",
    "evapotranspiration": "water",
    "potential_evapotranspiration": "water",
    "vegetation": "fraction",
    "soil_shielding": "fraction",
    "erosion": "erosion",
    "soil_co2": "pressure",
    "reference_consumption": "rate",
    "elevation": "elevation",
    "coarse_elevation": "elevation",
}

PLAUSIBLE: dict[str, tuple[float, float]] = {
    # inner units; common practice, no source: wide enough for any place on the earth
    "temperature": (180.0, 335.0),
    "runoff": (-500.0, 20_000.0),
    "precipitation": (0.0, 20_000.0),
    "evapotranspiration": (0.0, 6_000.0),
    "potential_evapotranspiration": (0.0, 6_000.0),
    "vegetation": (-1e-6, 1.0 + 1e-6),
    "soil_shielding": (-1e-6, 1.0 + 1e-6),
    "erosion": (0.0, 1e6),
    "soil_co2": (0.0, 1.0),
    "reference_consumption": (0.0, 100.0),
    "elevation": (-500.0, 9_000.0),
    "coarse_elevation": (-500.0, 9_000.0),
}


@dataclass(frozen=True, eq=False)
class Layer:
    """One continuous layer brought onto the grid.

    ``how`` is "same" where the source's cells are the grid's own, offset by whole cells;
    "points" where its CRS is another one and cells are sampled.
    """

    spec: LayerSpec
    source: Source
    grid: Grid
    how: How
    conversion: Conversion
    points: int = 1
    lapse: Lapse | None = None
    classes: Mapping[int, float] | None = None

    @property
    def name(self) -> str:
        """The layer's name in the job."""
        return self.spec.name

    def values(self, window: Window, month: int | None = None) -> Floats:
        """Values of a window in inner units, NaN where there is no data.

        Parameters
        ----------
        month : 1..12 for the mean of that month, None for the mean of whole years.

        Raises
        ------
        ValuesError where values cannot be what the layer says they are.
        """
        values = self._plain(window, month)
        return values if self.lapse is None else self.lapse.correct(self, window, values)

    def _plain(self, window: Window, month: int | None) -> Floats:
        if self.how == "points":
            return self._sampled(window, month)
        rows, cols = axis_plans(self.source, self.grid, window, method_of(self.how))
        values, valid = read_decoded(self, rows, cols, month)
        return self.arrange(window, (rows, cols), values, valid)

    def arrange(
        self,
        window: Window,
        plans: tuple[AxisPlan, AxisPlan],
        values: Floats,
        valid: NDArray[np.bool_],
    ) -> Floats:
        """Bring values on the source's cells onto a window, as this layer is brought there."""
        rows, cols = plans
        if self.how != "same":
            return resample(rows, cols, values, valid, method_of(self.how))
        if values.shape == window.shape:
            return np.where(valid, values, np.nan)
        inside, taken = same_cells(rows), same_cells(cols)
        whole = np.full(window.shape, np.nan)
        part = np.where(valid, values, np.nan)[inside[1], taken[1]]
        whole[inside[0], taken[0]] = part
        return whole

    def decode(self, raw: NDArray[Any], valid: NDArray[np.bool_]) -> Floats:
        """Raw values in inner units; what is not valid is left as it falls."""
        values = self._converted(raw, valid, 1.0)
        self.check(values, valid)
        return values

    def decode_step(self, raw: NDArray[Any], valid: NDArray[np.bool_], step: Step) -> Floats:
        """Raw values of one step of time; a sum over a month counts by that month's length."""
        factor = 1.0
        if self.conversion.per_month and step.month:
            factor = step.year_days / (MONTHS_PER_YEAR * step.days)
        values = self._converted(raw, valid, factor)
        if self.name in ("temperature", "vegetation", "soil_shielding"):
            self.check(values, valid)  # of water a single month or day may be far from the mean
        return values

    def check(self, values: Floats, valid: NDArray[np.bool_]) -> None:
        """Refuse values that the layer cannot have."""
        _check_plausible(self, values, valid, PLAUSIBLE[self.name], self.name)

    def _converted(self, raw: NDArray[Any], valid: NDArray[np.bool_], factor: float) -> Floats:
        if self.classes is not None:
            return cover_of_classes(raw, valid, self.classes, where=self.spec.where)
        values = raw.astype(np.float64)
        if (self.source.scale, self.source.offset) != (1.0, 0.0):
            values = values * self.source.scale + self.source.offset
        factor = self.conversion.factor * factor
        if (factor, self.conversion.offset) != (1.0, 0.0):
            values = values * factor + self.conversion.offset
        if self.name != "vegetation" or self.spec.kind == "cover":
            return values
        _check_plausible(self, values, valid, (-1.0 - 1e-6, 1.0 + 1e-6), "NDVI")
        squared = self.spec.kind == "ndvi-squared"
        return cover_from_ndvi(values, bare=self.spec.bare, dense=self.spec.dense, squared=squared)

    def _sampled(self, window: Window, month: int | None) -> Floats:
        plan = plan_points(self.grid, window, self.source, self.points)
        if plan is None:
            return np.full(window.shape, np.nan)
        values, valid = read_decoded(self, plan.rows, plan.cols, month)
        if self.points > 1 or self.spec.resampling == "nearest":
            return sample_nearest(plan, values, valid)
        return sample_bilinear(plan, self.source, values, valid)


def same_cells(plan: AxisPlan) -> tuple[slice, slice]:
    """Where a run of the grid's own cells lies in the target and in what was read."""
    inside = np.flatnonzero(plan.nearest >= 0)
    if not inside.size:
        return slice(0, 0), slice(0, 0)
    first, last = int(inside[0]), int(inside[-1])
    taken = slice(int(plan.nearest[first]), int(plan.nearest[last]) + 1)
    return slice(first, last + 1), taken


def method_of(how: How) -> Method:
    """The way of weighing source cells that belongs to a way of coming onto the grid."""
    return "nearest" if how in ("same", "points") else how  # type: ignore[return-value]


def _check_plausible(
    layer: Layer,
    values: Floats,
    valid: NDArray[np.bool_],
    band: tuple[float, float],
    what: str,
) -> None:
    if values.size and values.min() >= band[0] and values.max() <= band[1]:
        return  # most often, and then nothing need be looked at cell by cell
    wrong = valid & ((values < band[0]) | (values > band[1]))
    count = int(wrong.sum())
    if not count:
        return
    unit = INNER_UNIT[QUANTITY[layer.name]]
    median = float(np.median(values[valid]))
    worst = float(values[wrong][0])
    n_valid = int(valid.sum())
    if count < 0.5 * n_valid:
        raw_worst = _raw(layer, worst)
        fix = f"nodata = {raw_worst:g} if that value means no data; else mend the file or its units"
    else:
        fix = f'units = "..." as the values really are; read as {layer.conversion.unit!r} now'
    raise ValuesError(
        f"{count} of {n_valid} values cannot be {what}: for example {worst:g} {unit} "
        f"(median {median:g} {unit}; {band[0]:g} to {band[1]:g} is possible)",
        where=layer.spec.where,
        fix=fix,
    )


def _raw(layer: Layer, value: float) -> float:
    raw = (value - layer.conversion.offset) / layer.conversion.factor
    return (raw - layer.source.offset) / layer.source.scale


def open_source(spec: LayerSpec) -> Source:
    """Open a gridded file, or several side by side, by what its first bytes say it is."""
    if len(spec.paths) > 1:
        from mapper.layers.mosaic import join  # noqa: PLC0415 - only where it is needed

        parts = [open_source(replace(spec, path=one, paths=(one,))) for one in spec.paths]
        return join(parts, where=spec.where)
    kind = file_kind(spec.path, where=spec.where)
    if kind == "geotiff":
        from mapper.layers.geotiff import open_geotiff  # noqa: PLC0415 - heavy import

        return open_geotiff(spec)
    if kind in ("netcdf", "zarr"):
        from mapper.layers.netcdf import open_netcdf  # noqa: PLC0415 - heavy import

        return open_netcdf(spec)
    raise ValuesError(
        "the file holds vectors, and a grid is needed",
        where=spec.where,
        fix="a GeoTIFF, NetCDF or Zarr store",
    )


def source_grid(source: Source, *, where: str) -> Grid:
    """The source's own cells as a grid.

    Raises GridError where the cells are not all of one size.
    """
    x, y = source.x, source.y.evened()
    if not (x.is_regular and y.is_regular):
        raise GridError(
            "cells are not all of one size, so they cannot be the job's grid",
            where=where,
            fix="[grid] with crs, resolution and bounds",
        )
    dx = float(x.edges[-1] - x.edges[0]) / x.size
    dy = float(y.edges[-1] - y.edges[0]) / y.size
    return Grid(
        crs=source.crs,
        left=float(x.edges[0]),
        top=-float(y.edges[0]),
        dx=dx,
        dy=dy,
        n_rows=source.y.size,
        n_cols=source.x.size,
    )


def place(source: Source, grid: Grid, *, where: str) -> Source:
    """Turn a longitude axis to where the grid lies, and refuse a source that misses it.

    Raises GridError where the two do not overlap.
    """
    if same_crs(source.crs, grid.crs):
        left, bottom, right, top = grid.bounds
        if grid.is_geographic:
            source = replace(source, x=nearest_turn(source.x, left, right))
        apart = not source.x.period and (source.x.edges[-1] <= left or source.x.edges[0] >= right)
        if apart or source.y.edges[-1] <= -top or source.y.edges[0] >= -bottom:
            raise _misses(source, grid, where)
        return source
    window = Window(0, 0, grid.n_rows, grid.n_cols)
    x, y = _rim(grid, window)
    source_x, source_y = transformer(grid.crs, source.crs).transform(x, y)
    good = np.isfinite(source_x) & np.isfinite(source_y)
    if not good.any() or _apart(source, source_x[good], source_y[good]):
        raise _misses(source, grid, where)
    return source


def _apart(source: Source, x: Floats, y: Floats) -> bool:
    """Whether points of the grid, in the source's CRS, lie all on one side of the source."""
    if y.max() <= -source.y.edges[-1] or y.min() >= -source.y.edges[0]:
        return True
    if parse_crs(source.crs).is_geographic:
        return False  # round the earth there are no sides
    return bool(x.max() <= source.x.edges[0] or x.min() >= source.x.edges[-1])


def _rim(grid: Grid, window: Window) -> tuple[Floats, Floats]:
    left, bottom, right, top = grid.window_bounds(window)
    x, y = np.meshgrid(np.linspace(left, right, 21), np.linspace(bottom, top, 21))
    return x.ravel(), y.ravel()


def _misses(source: Source, grid: Grid, where: str) -> GridError:
    left, bottom, right, top = grid.bounds
    x0, x1 = source.x.edges[0], source.x.edges[-1]
    y0, y1 = -source.y.edges[-1], -source.y.edges[0]
    return GridError(
        f"the layer lies apart from the grid: x {x0:g}..{x1:g}, y {y0:g}..{y1:g} against "
        f"x {left:g}..{right:g}, y {bottom:g}..{top:g}",
        where=where,
        fix="a file that covers the grid, or the right crs for it",
    )


def how_aligned(source: Source, grid: Grid, resampling: str) -> How:
    """Choose how a source comes onto the grid; ``resampling`` other than "auto" decides."""
    if not same_crs(source.crs, grid.crs):
        return "points"
    y = source.y.evened()
    if _same_cells(source.x, grid.left, grid.dx) and _same_cells(y, -grid.top, grid.dy):
        return "same"
    if resampling != "auto":
        return resampling  # type: ignore[return-value]
    finer = source.x.step < 0.999 * grid.dx or source.y.step < 0.999 * grid.dy
    return "mean" if finer else "bilinear"


def _same_cells(axis: Axis, start: float, step: float) -> bool:
    if not axis.is_regular or abs(axis.step - step) * axis.size > SAME_TOLERANCE * step:
        return False
    offset = (start - axis.edges[0]) / step
    return bool(abs(offset - round(offset)) <= SAME_TOLERANCE)


def axis_plans(
    source: Source, grid: Grid, window: Window, method: Method
) -> tuple[AxisPlan, AxisPlan]:
    """Row and column plans of a window for a source in the grid's CRS."""
    row_edges = -grid.y_edges(window.row, window.row_stop)
    row_centres = -grid.y_centres(window.row, window.row_stop)
    col_edges = grid.x_edges(window.col, window.col_stop)
    col_centres = grid.x_centres(window.col, window.col_stop)
    sphere = grid.is_geographic
    rows = plan_axis(source.y, row_edges, row_centres, method, sphere=sphere)
    cols = plan_axis(source.x, col_edges, col_centres, method, sphere=False)
    return rows, cols


def _datum_shift(source: Source, grid: Grid) -> str:
    """How far the same longitude and latitude lie apart in the two datums, mid-grid."""
    left, bottom, right, top = grid.bounds
    x, y = 0.5 * (left + right), 0.5 * (bottom + top)
    there = transformer(grid.crs, source.crs).transform(x, y)
    _, _, metres = Geod(ellps="WGS84").inv(x, y, *there)
    names = parse_crs(source.crs).name, parse_crs(grid.crs).name
    return f"{names[0]} against {names[1]}: transformed, a shift of {metres:.1f} m mid-grid"


def _classes(spec: LayerSpec, source: Source) -> dict[int, float]:
    if not source.is_integer:
        raise ValuesError(
            f'kind = "class" needs whole numbers, and the file holds {source.dtype}',
            where=spec.where,
            fix='kind = "cover" or "ndvi", or a raster of classes',
        )
    return read_cover_table(spec.table or "", where=f"{spec.where}, table")


def open_layer(spec: LayerSpec, source: Source, grid: Grid) -> Layer:
    """Bring an opened source onto the grid.

    Raises
    ------
    UnitError, GridError.
    """
    source = place(source, grid, where=spec.where)
    how = how_aligned(source, grid, spec.resampling)
    if how == "points" and grid.is_geographic and parse_crs(source.crs).is_geographic:
        source = replace(source, notes=(*source.notes, _datum_shift(source, grid)))
    unit = spec.units if spec.units is not None else source.unit
    if spec.name == "vegetation" and spec.kind != "cover" and unit is None:
        unit = "1"
    where = f"{spec.where}, units"
    classes = None
    if spec.kind == "class":
        classes = _classes(spec, source)
    return Layer(
        spec=spec,
        source=source,
        grid=grid,
        how=how,
        conversion=conversion(unit, QUANTITY[spec.name], where=where),
        points=subdivisions(grid, source) if how == "points" else 1,
        classes=classes,
    )
