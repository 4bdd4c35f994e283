"""Regions with all their numbers as a GeoPackage, and as GeoParquet on request."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from mapper.exports.contents import OTHER_ROWS, Contents, Table
from mapper.exports.files import whole_file
from mapper.exports.words import clean

FIXED_DATE = "2000-01-01T00:00:00.000Z"
"""OGR writes the time of change into a GeoPackage; a fixed one keeps two runs' bytes alike."""


def region_fields(contents: Contents) -> dict[str, NDArray[Any]]:
    """Columns of the layer of regions, in the order of the shapes.

    Those of ``regions.csv``, then those of ``ranking.csv`` that are not in it.
    """
    names = [name for name in contents.found.names if name not in OTHER_ROWS]
    fields: dict[str, NDArray[Any]] = {"region": np.array([clean(n) for n in names], dtype=object)}
    for table in _tables(contents):
        for column in table.columns:
            if column not in fields:
                values = [table.by_region.get(name, {}).get(column) for name in names]
                fields[column] = _array(values)
    return fields


def _tables(contents: Contents) -> list[Table]:
    ranking = contents.tables.get("ranking")
    return [contents.regions] if ranking is None else [contents.regions, ranking]


def _array(values: list[Any]) -> NDArray[Any]:
    if any(isinstance(one, str) for one in values):
        return np.array([None if one is None else clean(one) for one in values], dtype=object)
    return np.array([np.nan if one is None else one for one in values], dtype=np.float64)


def write_geopackage(contents: Contents) -> None:
    """Write ``regions.gpkg``; nothing where the job has no regions."""
    if contents.plan.regions is None:
        return
    shapes, kind = _multi(contents.plan.regions.shapes)
    os.environ["OGR_CURRENT_DATE"] = FIXED_DATE
    with whole_file(contents.folder / "regions.gpkg") as temporary:
        temporary.unlink(missing_ok=True)
        _write_layer(temporary, "regions", shapes, kind, region_fields(contents), contents)
        _add_hotspots(temporary, contents)


def _write_layer(
    path: Path,
    layer: str,
    shapes: NDArray[Any],
    kind: str,
    fields: dict[str, NDArray[Any]],
    contents: Contents,
) -> None:
    import pyogrio.raw  # noqa: PLC0415 - only where regions are written

    pyogrio.raw.write(
        path,
        geometry=shapely.to_wkb(shapes),
        field_data=list(fields.values()),
        fields=np.array(list(fields), dtype=object),
        driver="GPKG",
        layer=layer,
        geometry_type=kind,
        crs=contents.plan.grid.crs,
        append=path.exists(),
        layer_metadata={"title": clean(contents.title)[:200], "long_term": "drawdown columns"},
    )


def _multi(shapes: NDArray[Any]) -> tuple[NDArray[Any], str]:
    """Polygons as multipolygons, so that the layer has one kind of geometry."""
    many = [shapely.multipolygons(shapely.get_parts(one)) for one in shapes]
    return np.array(many, dtype=object), "MultiPolygon"


def _add_hotspots(path: Path, contents: Contents) -> None:
    """Add the layer of hot spots, where the run looked for them."""
    frame = contents.hotspots
    if frame is None or not len(frame):
        return
    shapes, kind = _multi(np.asarray(frame.geometry, dtype=object))
    fields = {name: frame[name].to_numpy() for name in frame.columns if name != "geometry"}
    _write_layer(path, "hotspots", shapes, kind, fields, contents)


def write_geoparquet(contents: Contents) -> None:
    """Write ``regions.parquet`` (GeoParquet 1.0, geometry as WKB)."""
    import json  # noqa: PLC0415
    from importlib import import_module  # noqa: PLC0415

    if contents.plan.regions is None:
        return
    arrow, parquet = import_module("pyarrow"), import_module("pyarrow.parquet")
    from mapper.grid import parse_crs  # noqa: PLC0415

    shapes, kind = _multi(contents.plan.regions.shapes)
    fields = {
        name: arrow.array(values.tolist()) for name, values in region_fields(contents).items()
    }
    fields["geometry"] = arrow.array(list(shapely.to_wkb(shapes)), type=arrow.binary())
    column = {
        "encoding": "WKB",
        "geometry_types": [kind],
        "crs": parse_crs(contents.plan.grid.crs).to_json_dict(),
        "bbox": [float(one) for one in shapely.total_bounds(shapes)],
    }
    geo = {"version": "1.0.0", "primary_column": "geometry", "columns": {"geometry": column}}
    table = arrow.table(fields).replace_schema_metadata({b"geo": json.dumps(geo).encode()})
    with whole_file(contents.folder / "regions.parquet") as temporary:
        parquet.write_table(table, temporary, compression="zstd")
