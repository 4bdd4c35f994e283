"""Polygons from vector files: read, repaired and brought to the grid's CRS."""

from __future__ import annotations

import difflib
import warnings
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import geopandas
import numpy as np
import pyogrio
import shapely
from numpy.typing import NDArray
from pyogrio.errors import DataLayerError, DataSourceError

from mapper.errors import FileFormatError, GridError, RegionError
from mapper.grid import parse_crs, transformer
from mapper.layers.source import file_kind

SEGMENTS_PER_SPAN = 500
"""Edges are divided into pieces of at most this part of the whole span before they are moved to
another CRS: moving the corners alone bends no edge."""


@dataclass(frozen=True, eq=False)
class Features:
    """Shapes, the values of one column, and their CRS."""

    shapes: NDArray[Any]
    values: tuple[Any, ...]
    crs: str


def read_vector(
    path: str, *, layer: str | None, column: str, crs: str | None, where: str, key: str
) -> Features:
    """Read polygons and one column of their attributes.

    Raises
    ------
    MissingFileError, FileFormatError, RegionError for features that are not polygons, GridError
    where the CRS is missing.
    """
    if file_kind(path, where=where) != "vector":
        raise FileFormatError(
            "the file holds no vectors", where=where, fix="a GeoPackage, GeoJSON, Shapefile ..."
        )
    frame = _read_frame(path, layer, where)
    if column not in frame.columns:
        known = [str(one) for one in frame.columns if one != "geometry"]
        near = difflib.get_close_matches(column, known, n=1, cutoff=0.0)
        raise RegionError(
            f"there is no column {column!r}; there are: {', '.join(known)}",
            where=where,
            fix=f'"{near[0]}"' if near else "a file with attributes",
        )
    if "geometry" not in frame.columns:
        raise RegionError("the file holds a table without shapes", where=where, fix="polygons")
    found = crs or (frame.crs.to_wkt() if frame.crs is not None else None)
    if found is None:
        raise GridError(
            "the file does not say its CRS", where=where, fix=f'crs = "EPSG:4326" under [{key}]'
        )
    shapes = np.asarray(frame.geometry.array)
    _refuse_lines(shapes, where)
    crs = parse_crs(found).to_wkt()
    values = tuple(frame[column])
    if parse_crs(crs).is_geographic:
        _refuse_long_edges(shapes, values, where)
    return Features(shapes, values, crs)


def _read_frame(path: str, layer: str | None, where: str) -> Any:
    with Path(path).open("rb") as stream:
        parquet = stream.read(4) == b"PAR1"
    if parquet:
        return _read_parquet(path, where)
    try:
        with warnings.catch_warnings():
            # GDAL's doubts about a file become an error or a result of our own
            warnings.simplefilter("ignore", RuntimeWarning)
            _refuse_choice(path, layer, where)
            return pyogrio.read_dataframe(path, layer=layer)
    except (DataSourceError, DataLayerError) as cause:
        raise FileFormatError(
            f"the file cannot be read as vectors: {cause}", where=where, fix="copy it again"
        ) from cause


def _refuse_choice(path: str, layer: str | None, where: str) -> None:
    layers = [str(one) for one in pyogrio.list_layers(path)[:, 0]]
    if layer is None and len(layers) > 1:
        raise RegionError(
            f"the file holds {len(layers)} layers: {', '.join(layers)}",
            where=where,
            fix=f'layer = "{layers[0]}"',
        )


def _read_parquet(path: str, where: str) -> Any:
    try:
        return geopandas.read_parquet(path)
    except ImportError as cause:
        raise FileFormatError(
            "GeoParquet needs the library pyarrow, which is not installed",
            where=where,
            fix="pip install pyarrow, or save the file as GeoPackage",
        ) from cause
    except (ValueError, OSError) as cause:
        raise FileFormatError(
            f"the file cannot be read as GeoParquet: {cause}",
            where=where,
            fix="save it as GeoPackage",
        ) from cause


def _refuse_long_edges(shapes: NDArray[Any], values: tuple[Any, ...], where: str) -> None:
    """Refuse an edge of more than half a turn that is not the full turn of a closed band.

    Such an edge may run across the antimeridian or round the other side: nobody can tell.
    """
    for position, shape in enumerate(shapes):
        if shape is None or shapely.is_empty(shape) or np.ptp(shape.bounds[::2]) <= 180.0:
            continue
        for ring in shapely.get_rings(shape):
            lengths = np.abs(np.diff(shapely.get_coordinates(ring)[:, 0]))
            wrong = (lengths > 180.0 + 1e-9) & (np.abs(lengths - 360.0) > 1e-6)
            if wrong.any():
                raise RegionError(
                    f"{values[position]!r} has an edge of {lengths[wrong][0]:g} degrees of "
                    "longitude: whether it crosses the antimeridian cannot be told",
                    where=where,
                    fix="split it at longitude 180 (RFC 7946), e.g. ogr2ogr -wrapdateline, or "
                    "add corners along the edge",
                )


def _refuse_lines(shapes: NDArray[Any], where: str) -> None:
    kinds = shapely.get_type_id(shapes)
    wrong = [n for n, kind in enumerate(kinds, start=1) if kind not in (-1, 3, 6, 7)]
    if wrong:
        raise RegionError(
            f"feature {wrong[0]} is a {shapes[wrong[0] - 1].geom_type}, and a polygon is needed",
            where=where,
            fix="polygons only",
        )


def valid_shapes(shapes: NDArray[Any], names: tuple[str, ...]) -> tuple[NDArray[Any], list[str]]:
    """Repair shapes that cross themselves, and say by how much their area changed."""
    notes: list[str] = []
    fixed = shapes.copy()
    for at in np.flatnonzero(shapely.is_missing(shapes) | shapely.is_empty(shapes)):
        fixed[at] = shapely.Polygon()
        notes.append(f"{names[at]!r} has no geometry: its area is 0")
    for at in np.flatnonzero(~shapely.is_valid(fixed)):
        repaired = shapely.make_valid(fixed[at], method="structure")
        change = shapely.area(repaired) - shapely.area(fixed[at])
        notes.append(
            f"{names[at]!r} crossed itself: repaired, area changed by {change:g} CRS units2"
        )
        fixed[at] = repaired
    return fixed, notes


def reproject(shapes: NDArray[Any], source: str, target: str) -> NDArray[Any]:
    """Bring shapes to another CRS, with their edges divided finely first."""
    bounds = shapely.total_bounds(shapes)
    step = max(bounds[2] - bounds[0], bounds[3] - bounds[1]) / SEGMENTS_PER_SPAN
    dense = shapely.segmentize(shapes, step) if np.isfinite(step) and step > 0 else shapes
    move = transformer(source, target)

    def moved(points: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.stack(move.transform(points[:, 0], points[:, 1]), axis=1)

    return np.asarray(shapely.transform(dense, moved))
