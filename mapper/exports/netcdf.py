"""All maps of a run as one CF NetCDF file."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from rasterio.windows import Window as RasterWindow

from mapper.evaluation import FLAG_MEANING, Flag
from mapper.exports.colours import flag_key
from mapper.exports.contents import Contents
from mapper.exports.files import whole_file
from mapper.exports.pictures import source_line
from mapper.exports.words import clean
from mapper.grid import Grid, Window, blocks, parse_crs

_CHUNK = 512
_RATE = "t km-2 Julian_year-1"
"""UDUNITS' plain year is the tropical one; ours has 365.25 days, which it calls Julian."""


def write_netcdf(contents: Contents) -> None:
    """Write ``maps/maps.nc``, block by block."""
    import h5netcdf  # noqa: PLC0415 - only where it is asked for

    with (
        whole_file(contents.folder / "maps" / "maps.nc") as temporary,
        h5netcdf.File(temporary, "w") as file,
    ):
        _describe(file, contents)
        _axes(file, contents.plan.grid)
        for name, path in contents.map_paths.items():
            _variable(file, name, path, contents.plan.grid)


def _describe(file: Any, contents: Contents) -> None:
    file.attrs["Conventions"] = "CF-1.8"
    file.attrs["title"] = clean(contents.title)
    file.attrs["institution"] = "not stated"
    file.attrs["source"] = source_line(contents)
    file.attrs["history"] = f"written by saprolite {contents.record['versions']['saprolite']}"
    file.attrs["references"] = "; ".join(
        sorted({law["reference"] for law in contents.record["laws"].values()})
    )
    file.attrs["comment"] = " ".join(contents.record["cautions"])


def _axes(file: Any, grid: Grid) -> None:
    names, attributes = _axis_words(grid)
    file.dimensions = dict(zip(names, grid.shape, strict=True))
    centres = (grid.y_centres(0, grid.n_rows), grid.x_centres(0, grid.n_cols))
    for name, values, words in zip(names, centres, attributes, strict=True):
        axis = file.create_variable(name, (name,), data=values)
        axis.attrs.update(words)
    mapping = file.create_variable("crs", (), data=np.int32(0))
    mapping.attrs.update(
        {key: _attribute(value) for key, value in parse_crs(grid.crs).to_cf().items()}
    )


def _attribute(value: Any) -> Any:
    return np.array(value, dtype=np.float64) if isinstance(value, list | tuple) else value


def _axis_words(grid: Grid) -> tuple[tuple[str, str], tuple[Mapping[str, str], Mapping[str, str]]]:
    if grid.is_geographic:
        return ("lat", "lon"), (
            {"standard_name": "latitude", "units": "degrees_north", "axis": "Y"},
            {"standard_name": "longitude", "units": "degrees_east", "axis": "X"},
        )
    unit = {"metre": "m"}.get(parse_crs(grid.crs).axis_info[0].unit_name, "1")
    return ("y", "x"), (
        {"standard_name": "projection_y_coordinate", "units": unit, "axis": "Y"},
        {"standard_name": "projection_x_coordinate", "units": unit, "axis": "X"},
    )


def _variable(file: Any, name: str, path: Path, grid: Grid) -> None:
    names, _ = _axis_words(grid)
    chunks = tuple(min(_CHUNK, size) for size in grid.shape)
    with rasterio.open(path) as dataset:
        classes = dataset.dtypes[0] == "uint8"
        kind = "int16" if classes else "float32"
        options = {"compression": "gzip", "compression_opts": 4, "shuffle": True}
        fill = {} if classes else {"fillvalue": np.float32(np.nan)}
        band = file.create_variable(name, names, kind, chunks=chunks, **options, **fill)
        band.attrs["long_name"] = dataset.tags().get("long_name", dataset.descriptions[0] or name)
        band.attrs["grid_mapping"] = "crs"
        band.attrs.update(_flag_words() if classes else {"units": _RATE})
        if not classes:
            band.attrs["comment"] = "mass of CO2 per area of the whole cell"
            band.attrs["cell_methods"] = "area: mean"
        for window, values in _pieces(dataset, grid):
            rows = slice(window.row, window.row_stop)
            cols = slice(window.col, window.col_stop)
            band[rows, cols] = values.astype(kind)


def _pieces(dataset: Any, grid: Grid) -> Iterator[tuple[Window, Any]]:
    for window in blocks(grid, (_CHUNK, _CHUNK * 4)):
        at = RasterWindow(window.col, window.row, window.n_cols, window.n_rows)
        yield window, dataset.read(1, window=at)


def _flag_words() -> dict[str, Any]:
    flags = list(FLAG_MEANING)
    return {
        "flag_masks": np.array([int(flag) for flag in flags], dtype=np.int16),
        "flag_meanings": " ".join(flag_key(flag) for flag in flags),
        "comment": "; ".join(f"{int(flag)}: {FLAG_MEANING[Flag(flag)]}" for flag in flags),
    }
