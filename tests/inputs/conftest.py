"""A bench that makes tiny input files and jobs whose answers can be done in the head."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
import xarray as xr
from rasterio.transform import from_origin

import mapper
from mapper.layers.layer import Layer, open_layer, open_source, source_grid
from mapper.pipeline import Engine
from mapper.planning import make_plan

LEGEND = "code,rock\n1,basalt\n2,granite\n"


class Bench:
    """Makes files in a folder: rasters of 1 degree cells from 0 E, 4 N unless told otherwise."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def path(self, name: str) -> Path:
        return self.folder / name

    def text(self, name: str, content: str | bytes) -> Path:
        data = content.encode() if isinstance(content, str) else content
        self.path(name).write_bytes(data)
        return self.path(name)

    def tif(self, name: str, values: Any, **how: Any) -> Path:
        values = np.asarray(values)
        unit, scale = how.pop("unit", None), how.pop("scale", None)
        options: dict[str, Any] = {
            "crs": "EPSG:4326",
            "transform": from_origin(0, 4, 1, 1),
            "dtype": values.dtype,
        } | how
        bands = values if values.ndim == 3 else values[None]
        with rasterio.open(
            self.path(name),
            "w",
            driver="GTiff",
            height=bands.shape[1],
            width=bands.shape[2],
            count=bands.shape[0],
            **options,
        ) as file:
            if unit:
                file.units = (unit,) * bands.shape[0]
            if scale:
                file.scales, file.offsets = (scale[0],), (scale[1],)
            file.write(bands)
        return self.path(name)

    def nc(self, name: str, variables: dict[str, Any], coords: dict[str, Any], **how: Any) -> Path:
        dataset = xr.Dataset(variables, coords=coords)
        for one in dataset.variables.values():
            one.encoding.setdefault("_FillValue", None)
        dataset.to_netcdf(self.path(name), engine="h5netcdf", **how)
        return self.path(name)

    def field(self, name: str, values: Any, lat: Any, lon: Any, **attrs: Any) -> Path:
        """One variable ``v`` on latitudes and longitudes in a NetCDF file."""
        fill = attrs.pop("_FillValue", None)
        array = xr.DataArray(np.asarray(values), dims=("lat", "lon"), attrs=attrs)
        array.encoding["_FillValue"] = fill
        return self.nc(name, {"v": array}, lat_lon(lat, lon))

    def layer(self, layer: str, path: Path, *, grid: Path | None = None, **keys: Any) -> Layer:
        """A layer opened on the grid of another file, or on its own."""
        job = mapper.load_job(self.job({layer: {"path": str(path), **keys}}))
        source = open_source(job.layers[layer])
        base = (
            source
            if grid is None
            else open_source(
                mapper.load_job(
                    self.job({layer: {"path": str(grid), "units": keys.get("units", "K")}})
                ).layers[layer]
            )
        )
        return open_layer(job.layers[layer], source, source_grid(base, where="grid"))

    def job(self, layers: dict[str, Any] | None = None, *, extra: str = "", **tables: Any) -> Path:
        """A job with a lithology of basalt, unless told otherwise, and a law of runoff alone."""
        found = {"lithology": self.lithology(), "runoff": self.runoff()} | (layers or {})
        lines = ['title = "bench"']
        for name, keys in found.items():
            lines.append(f"[layers.{name}]")
            lines += [f"{key} = {json.dumps(value)}" for key, value in keys.items()]
        tables.setdefault("law", {"default": "amiotte-suchet-1995"})
        tables.setdefault("output", {"folder": str(self.path("out"))})
        for name, keys in tables.items():
            lines.append(f"[{name}]")
            lines += [f"{key} = {json.dumps(value)}" for key, value in keys.items()]
        return self.text("job.toml", "\n".join([*lines, extra]) + "\n")

    def lithology(self) -> dict[str, Any]:
        path = self.path("lithology.tif")
        if not path.exists():
            self.tif("lithology.tif", np.ones((4, 6), dtype=np.uint8))
        return {"path": str(path), "legend": str(self.legend())}

    def legend(self, text: str = LEGEND) -> Path:
        path = self.path("legend.csv")
        return path if path.exists() else self.text("legend.csv", text)

    def runoff(self) -> dict[str, Any]:
        path = self.path("runoff.tif")
        if not path.exists():
            self.tif("runoff.tif", np.full((4, 6), 500.0, dtype=np.float32), unit="mm yr-1")
        return {"path": str(path)}

    def plan(self, layers: dict[str, Any] | None = None, **tables: Any) -> Any:
        return make_plan(mapper.load_job(self.job(layers, **tables)))

    def run(self, layers: dict[str, Any] | None = None, **tables: Any) -> Any:
        job = mapper.load_job(self.job(layers, **tables))
        return mapper.run(job, fresh=True, engine=Engine(threads=1))


def lat_lon(lat: Any, lon: Any) -> dict[str, Any]:
    """Latitude and longitude coordinates with their CF units."""
    return {
        "lat": ("lat", np.asarray(lat), {"units": "degrees_north", "standard_name": "latitude"}),
        "lon": ("lon", np.asarray(lon), {"units": "degrees_east", "standard_name": "longitude"}),
    }


@pytest.fixture
def bench(tmp_path: Path) -> Bench:
    return Bench(tmp_path)
