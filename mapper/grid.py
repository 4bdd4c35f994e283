"""The grid as one frozen value: where each cell lies, how large it is, and blocks of cells."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pyproj import CRS, Proj, Transformer
from pyproj.exceptions import CRSError

from mapper.errors import GridError

Floats = NDArray[np.float64]

AREA_LATTICE_METRES = 10_000.0
"""Spacing below which the areal scale of a projection is interpolated between lattice points:
its error is then under 1e-6 for the transverse Mercator projection (computed)."""

_EQUAL_AREA_METHODS = (
    "equal area",
    "sinusoidal",
    "mollweide",
    "equal earth",
    "eckert iv",
    "eckert vi",
)


@dataclass(frozen=True, order=True)
class Window:
    """A rectangle of cells: first row, first column, number of rows and of columns."""

    row: int
    col: int
    n_rows: int
    n_cols: int

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.n_rows, self.n_cols

    @property
    def n_cells(self) -> int:
        """Number of cells."""
        return self.n_rows * self.n_cols

    @property
    def row_stop(self) -> int:
        """First row after the window."""
        return self.row + self.n_rows

    @property
    def col_stop(self) -> int:
        """First column after the window."""
        return self.col + self.n_cols


@dataclass(frozen=True)
class Grid:
    """A north-up, axis-aligned grid.

    Parameters
    ----------
    crs : the coordinate reference system as WKT.
    left, top : outer edges of the upper left cell, in CRS units.
    dx, dy : cell width and height, both positive, in CRS units.
    n_rows, n_cols : shape.
    """

    crs: str
    left: float
    top: float
    dx: float
    dy: float
    n_rows: int
    n_cols: int

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.n_rows, self.n_cols

    @property
    def n_cells(self) -> int:
        """Number of cells."""
        return self.n_rows * self.n_cols

    @property
    def window(self) -> Window:
        """The whole grid as a window."""
        return Window(0, 0, self.n_rows, self.n_cols)

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """Left, bottom, right, top in CRS units."""
        right = self.left + self.dx * self.n_cols
        bottom = self.top - self.dy * self.n_rows
        return self.left, bottom, right, self.top

    @cached_property
    def is_geographic(self) -> bool:
        """Whether the axes are longitude and latitude in degrees."""
        return bool(parse_crs(self.crs).is_geographic)

    @property
    def transform(self) -> tuple[float, float, float, float, float, float]:
        """The affine coefficients a, b, c, d, e, f of a north-up raster."""
        return self.dx, 0.0, self.left, 0.0, -self.dy, self.top

    def x_edges(self, start: int, stop: int) -> Floats:
        """Edges of the columns from ``start`` to ``stop``, one more than columns, ascending."""
        return self.left + self.dx * np.arange(start, stop + 1, dtype=np.float64)

    def y_edges(self, start: int, stop: int) -> Floats:
        """Edges of the rows from ``start`` to ``stop``, one more than rows, descending."""
        return self.top - self.dy * np.arange(start, stop + 1, dtype=np.float64)

    def x_centres(self, start: int, stop: int) -> Floats:
        """Centres of the columns from ``start`` to ``stop``."""
        return self.left + self.dx * (np.arange(start, stop, dtype=np.float64) + 0.5)

    def y_centres(self, start: int, stop: int) -> Floats:
        """Centres of the rows from ``start`` to ``stop``."""
        return self.top - self.dy * (np.arange(start, stop, dtype=np.float64) + 0.5)

    def window_bounds(self, window: Window) -> tuple[float, float, float, float]:
        """Left, bottom, right, top of a window in CRS units."""
        left = self.left + self.dx * window.col
        right = self.left + self.dx * window.col_stop
        top = self.top - self.dy * window.row
        bottom = self.top - self.dy * window.row_stop
        return left, bottom, right, top


def blocks(grid: Grid, shape: tuple[int, int]) -> list[Window]:
    """Cut a grid into windows of at most ``shape``, row by row."""
    return list(tiles_of(grid, grid.window, shape))


def tiles_of(grid: Grid, window: Window, shape: tuple[int, int]) -> Iterator[Window]:
    """The tiles that a window touches, of a lattice anchored at the grid's origin.

    A tile is whole but for the grid's own end, so it does not depend on the window.
    """
    for row in range(window.row // shape[0] * shape[0], window.row_stop, shape[0]):
        for col in range(window.col // shape[1] * shape[1], window.col_stop, shape[1]):
            yield Window(
                row, col, min(shape[0], grid.n_rows - row), min(shape[1], grid.n_cols - col)
            )


@lru_cache(maxsize=256)
def parse_crs(text: str) -> CRS:
    """Read a CRS from WKT, an authority code or PROJ text.

    Raises GridError where PROJ cannot read it.
    """
    try:
        return CRS.from_user_input(text)
    except CRSError as cause:
        raise GridError(
            f"CRS {text[:80]!r} cannot be read",
            where="crs",
            fix='an authority code such as crs = "EPSG:4326", or WKT',
        ) from cause


@lru_cache(maxsize=256)
def same_crs(first: str, second: str) -> bool:
    """Whether two CRSs place the same numbers at the same spot, whatever their axis order.

    Longitude/latitude CRSs on one datum count as one, however they are written.
    """
    if first == second:
        return True
    one, two = parse_crs(first), parse_crs(second)
    if one.equals(two, ignore_axis_order=True):
        return True
    if one.is_geographic and two.is_geographic:
        keys = _datum_key(one), _datum_key(two)
        return keys[0] == keys[1] or any(key[2] in _UNNAMED_DATUMS for key in keys)
    return False


_UNNAMED_DATUMS = ("", "undefined", "unknown")
"""Files of climate models name no datum, or a sphere without one; their longitudes and latitudes
are then taken as they stand, since shifting them by a guessed datum would do harm."""


def _datum_key(crs: CRS) -> tuple[float, float, str]:
    ellipsoid = crs.ellipsoid
    datum = crs.datum
    name = (datum.name if datum is not None else "").lower()
    plain = "".join(letter for letter in name if letter.isalnum())
    if "wgs84" in plain or "wgs1984" in plain or "worldgeodeticsystem1984" in plain:
        plain = "wgs84"
    plain = "unknown" if plain.startswith("unknown") else plain
    if ellipsoid is None:
        return 0.0, 0.0, plain
    return ellipsoid.semi_major_metre, ellipsoid.inverse_flattening, plain


@lru_cache(maxsize=64)
def transformer(source: str, target: str) -> Transformer:
    """The transformation between two CRSs, x before y."""
    return Transformer.from_crs(parse_crs(source), parse_crs(target), always_xy=True)


def cell_areas(grid: Grid, window: Window) -> Floats:
    """Area of each cell on the ellipsoid [m2].

    Returns
    -------
    Array of shape (n_rows, 1) for longitude/latitude grids, where a row's cells are alike, and
    (n_rows, n_cols) otherwise.

    Notes
    -----
    Longitude/latitude: the closed form of a band between two parallels. Projected: width times
    height over the projection's areal scale, taken at the grid's own lattice of points and
    bilinear between them, so that a cell's area does not depend on the window.
    """
    if grid.is_geographic:
        edges = grid.y_edges(window.row, window.row_stop)
        return (band_areas(parse_crs(grid.crs), edges) * (grid.dx / 360.0))[:, None]
    flat = grid.dx * grid.dy * _metres_per_unit(grid.crs) ** 2
    if _is_equal_area(grid.crs):
        return np.full((window.n_rows, 1), flat)
    return flat / _areal_scale(grid, window)


def band_areas(crs: CRS, latitude_edges: Floats) -> Floats:
    """Area of the full bands around the ellipsoid between descending latitude edges [m2].

    Edges beyond the poles are clipped. Source: the closed form in any text on map projections
    (authalic latitude); checked in the tests against geodesic polygons.
    """
    ellipsoid = crs.ellipsoid
    if ellipsoid is None:  # pragma: no cover - every geographic CRS in PROJ has one
        msg = f"CRS {crs.name!r} has no ellipsoid"
        raise GridError(msg, where="crs", fix='crs = "EPSG:4326"')
    a, b = ellipsoid.semi_major_metre, ellipsoid.semi_minor_metre
    sine = np.sin(np.deg2rad(np.clip(latitude_edges, -90.0, 90.0)))
    if a == b:
        integral = sine
    else:
        e = np.sqrt(1.0 - (b / a) ** 2)
        integral = 0.5 * (b / a) ** 2 * (sine / (1 - (e * sine) ** 2) + np.arctanh(e * sine) / e)
    areas: Floats = 2.0 * np.pi * a**2 * (integral[:-1] - integral[1:])
    return areas


def _metres_per_unit(crs: str) -> float:
    factor: float = parse_crs(crs).axis_info[0].unit_conversion_factor
    return factor


def _is_equal_area(crs: str) -> bool:
    operation = parse_crs(crs).coordinate_operation
    method = operation.method_name.lower() if operation is not None else ""
    return any(name in method for name in _EQUAL_AREA_METHODS)


def _areal_scale(grid: Grid, window: Window) -> Floats:
    metres = max(grid.dx, grid.dy) * _metres_per_unit(grid.crs)
    step = max(1, int(AREA_LATTICE_METRES // metres))
    rows, row_weight = _lattice(window.row, window.n_rows, step)
    cols, col_weight = _lattice(window.col, window.n_cols, step)
    row_points = np.arange(rows[0], rows[-1] + 2) * step
    col_points = np.arange(cols[0], cols[-1] + 2) * step
    nodes = _scale_at(grid, row_points + 0.5, col_points + 0.5)
    upper = nodes[rows - rows[0]]
    lower = nodes[rows - rows[0] + 1]
    along = upper + (lower - upper) * row_weight[:, None]
    left = along[:, cols - cols[0]]
    right = along[:, cols - cols[0] + 1]
    scale: Floats = left + (right - left) * col_weight[None, :]
    return scale


def _lattice(start: int, count: int, step: int) -> tuple[NDArray[np.int64], Floats]:
    index = np.arange(start, start + count, dtype=np.int64)
    return index // step, (index % step) / step


def _scale_at(grid: Grid, rows: Floats, cols: Floats) -> Floats:
    x, y = np.meshgrid(grid.left + grid.dx * cols, grid.top - grid.dy * rows)
    geodetic = parse_crs(grid.crs).geodetic_crs
    if geodetic is None:
        msg = f"CRS {parse_crs(grid.crs).name!r} has no geodetic base"
        raise GridError(msg, where="grid", fix="a projected or longitude/latitude CRS")
    lon, lat = transformer(grid.crs, geodetic.to_wkt()).transform(x, y)
    if _is_web_mercator(grid.crs):
        return _web_mercator_scale(geodetic, np.asarray(lat))
    factors: Any = Proj(parse_crs(grid.crs)).get_factors(lon, lat)
    scale = np.asarray(factors.areal_scale, dtype=np.float64)
    if not np.isfinite(scale).all():
        raise GridError(
            "the grid reaches beyond where its projection is defined",
            where=f"grid, CRS {parse_crs(grid.crs).name}",
            fix="[grid] bounds inside the projection's area of use",
        )
    return scale


def _is_web_mercator(crs: str) -> bool:
    operation = parse_crs(crs).coordinate_operation
    return operation is not None and "pseudo mercator" in operation.method_name.lower()


def _web_mercator_scale(geodetic: CRS, lat: Floats) -> Floats:
    """Areal scale of the pseudo-Mercator projection: a sphere's formulas on an ellipsoid.

    PROJ gives the scale on the sphere, which is off by up to 0.7 %. With M and N the radii of
    curvature along and across the meridian it is a^2 / (M N cos^2 lat).
    """
    ellipsoid = geodetic.ellipsoid
    if ellipsoid is None:  # pragma: no cover - every geodetic CRS in PROJ has one
        raise AssertionError
    a, b = ellipsoid.semi_major_metre, ellipsoid.semi_minor_metre
    e2 = 1.0 - (b / a) ** 2
    phi = np.deg2rad(lat)
    root = 1.0 - e2 * np.sin(phi) ** 2
    return np.asarray(root**2 / ((1.0 - e2) * np.cos(phi) ** 2))
