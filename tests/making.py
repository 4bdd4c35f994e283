"""Makes the tiny inputs of the tests: rasters, NetCDF files, polygons and jobs of a few cells."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import warnings
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import rasterio
import shapely
import xarray as xr
from rasterio.transform import from_origin

import mapper

ROOT = Path(mapper.__file__).resolve().parents[1]

LON_LAT = "EPSG:4326"
EQUAL_AREA = "EPSG:6933"
"""Cylindrical equal area in metres: a cell of 1000 m is exactly 1 km2."""
UTM = "EPSG:32633"

LEGEND = "code,rock\n1,granite\n2,basalt\n3,limestone\n4,water\n"


def write_raster(
    path: Path,
    values: Any,
    *,
    left: float = 0.0,
    top: float | None = None,
    cell: float = 1000.0,
    crs: str | None = EQUAL_AREA,
    **about: Any,
) -> Path:
    """Write a GeoTIFF whose lower left corner is at 0, 0 unless told otherwise.

    ``about``: dtype, nodata, unit, scale, offset, south_up.
    """
    values = np.asarray(values, dtype=about.get("dtype"))
    top = cell * values.shape[0] if top is None else top
    transform = from_origin(left, top, cell, cell)
    if about.get("south_up"):
        values = values[::-1]
        bottom = top - cell * values.shape[0]
        transform = rasterio.Affine(cell, 0, left, 0, cell, bottom)
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=values.shape[1],
        height=values.shape[0],
        count=1,
        dtype=values.dtype,
        crs=crs,
        transform=transform,
        nodata=about.get("nodata"),
    ) as file:
        file.write(values, 1)
        if about.get("unit"):
            file.units = (about["unit"],)
        if "scale" in about:
            file.scales = (about["scale"],)
        if "offset" in about:
            file.offsets = (about["offset"],)
    return path


def write_netcdf(
    path: Path,
    values: Any,
    *,
    lat: Any,
    lon: Any,
    name: str = "tas",
    units: str | None = "K",
    **attrs: Any,
) -> Path:
    """Write one variable on longitude and latitude."""
    about = dict(attrs) if units is None else {"units": units, **attrs}
    dataset = xr.Dataset(
        {name: (("lat", "lon"), np.asarray(values, dtype=np.float64), about)},
        coords={
            "lat": ("lat", np.asarray(lat, dtype=float), {"units": "degrees_north"}),
            "lon": ("lon", np.asarray(lon, dtype=float), {"units": "degrees_east"}),
        },
    )
    dataset.to_netcdf(path, engine="h5netcdf", encoding={name: {"_FillValue": None}})
    return path


def write_polygons(
    path: Path,
    shapes: Mapping[Any, Any],
    *,
    column: str = "name",
    crs: str | None = EQUAL_AREA,
) -> Path:
    """Write polygons with one column, keys of ``shapes`` being its values."""
    frame = gpd.GeoDataFrame({column: list(shapes)}, geometry=list(shapes.values()), crs=crs)
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", "'crs' was not provided")  # some tests want just that
        frame.to_file(path, driver="GPKG", engine="pyogrio")
    return path


def write_legend(path: Path, text: str = LEGEND) -> Path:
    """Write a legend."""
    path.write_text(text, encoding="utf-8")
    return path


def write_job(folder: Path, table: Mapping[str, Any], name: str = "job.toml") -> Path:
    """Write a job file; a nested mapping is written inline."""
    lines = [f"{key} = {_toml(value)}" for key, value in table.items()]
    path = folder / name
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def _toml(value: Any) -> str:
    if isinstance(value, Mapping):
        inside = ", ".join(f"{json.dumps(key)} = {_toml(one)}" for key, one in value.items())
        return "{ " + inside + " }"
    if isinstance(value, Path):
        return json.dumps(str(value))
    return json.dumps(value)


def small_job(folder: Path, **changes: Any) -> Path:
    """Write the usual job: 4 x 4 cells of 1 km2, 1000 mm of runoff, two regions, and no more.

    Rows of rock from the top: granite, basalt, limestone, water. Regions: 'west' is the left
    column, 'middle' the two columns beside it; the right column lies outside. ``changes`` replace
    entries of the job's table; None drops one.
    """
    write_raster(folder / "rock.tif", np.repeat([[1], [2], [3], [4]], 4, axis=1), dtype="uint8")
    write_raster(folder / "runoff.tif", np.full((4, 4), 1000.0), unit="mm yr-1")
    write_legend(folder / "legend.csv")
    write_polygons(
        folder / "regions.gpkg",
        {"west": shapely.box(0, 0, 1000, 4000), "middle": shapely.box(1000, 0, 3000, 4000)},
    )
    table = {
        "title": "Small",
        "layers": {
            "lithology": {"path": "rock.tif", "legend": "legend.csv"},
            "runoff": {"path": "runoff.tif"},
        },
        "law": {"default": "amiotte-suchet-1995"},
        "regions": {"path": "regions.gpkg", "id": "name"},
        "output": {"folder": "out"},
    }
    table.update(changes)
    return write_job(folder, {key: one for key, one in table.items() if one is not None})


def command(
    *arguments: Any, cwd: Path | None = None, **environment: str
) -> subprocess.CompletedProcess[str]:
    """Run the real command, its output piped."""
    return subprocess.run(
        [sys.executable, "-m", "mapper.cli", *map(str, arguments)],
        cwd=cwd or ROOT,
        env={**os.environ, "PYTHONPATH": str(ROOT), **environment},
        capture_output=True,
        text=True,
        check=False,
        timeout=120,
    )
