"""The same job as a plain script would do it: xarray, rioxarray, dask and exactextract.

Maps in one pass, totals class by class, and draws by evaluating every cell again. It knows the
job of `inputs` by heart: product law, basalt after Dessert, codes 1 to 16.
"""

from __future__ import annotations

import argparse
import json
import math
import threading
import time
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import dask
import dask.array as da
import geopandas as gpd
import numpy as np
import rioxarray
import xarray as xr
from exactextract import exact_extract
from pyproj import Geod
from rasterio.shutil import copy

from mapper.accounting import drawdown_share
from mapper.rocks import ROCKS
from tests.benchmarks.inputs import ROCKS as NAMES

CHUNK = 2048
CONCENTRATION = (
    0.479, 0.222, 0.222, 0.095, 0.095, 0.095, 0.095, 0.152, 0.627, 1.586, 1.586, 0.629, 0.152,
    0.282, 0.293, 0.0,
)  # fmt: skip
ENERGY = (50, 55, 60, 50, 60, 55, 55, 55, 55, 14, 14, 55, 55, 55, 14, 0)
CENTRAL: Mapping[str, Any] = {
    "concentration": np.array([math.nan, *CONCENTRATION]),
    "energy": np.array([0.0, *ENERGY]),
    "reference": 284.15,
    "plants": 2.0,
    "cover": 0.8,
    "bicarbonate": 323.44,
    "warming": 0.0642,
}
KEPT = np.array([0.0, *(drawdown_share(ROCKS[name]) for name in NAMES)])
T_PER_KM2 = 44.0095  # of one mol m-2


def open_layers(folder: Path) -> dict[str, xr.DataArray]:
    """The four layers, lazily."""
    names = ("lithology", "temperature", "runoff", "vegetation")
    chunks = {"x": CHUNK, "y": CHUNK}
    return {
        name: rioxarray.open_rasterio(
            folder / f"{name}.tif", chunks=chunks, masked=name != "lithology", lock=False
        ).squeeze("band", drop=True)
        for name in names
    }


def consumption(layers: Mapping[str, xr.DataArray], values: Mapping[str, Any]) -> xr.DataArray:
    """Short-term uptake [t CO2 km-2 yr-1], lazily."""

    def evaluate(code: Any, celsius: Any, runoff: Any, percent: Any) -> np.ndarray:
        kelvin = celsius.astype(np.float64) + 273.15
        energy = values["energy"][code] * 1000 / 8.314462618
        rate = values["concentration"][code] * runoff * 1e-3
        rate *= np.exp(-energy * (1 / kelvin - 1 / values["reference"]))
        more = values["plants"] - 1
        rate *= (1 + more * percent / 100) / (1 + more * values["cover"])
        basalt = values["bicarbonate"] * 1e-6 * np.exp(values["warming"] * (kelvin - 273.15))
        return np.where(code == 1, basalt * runoff, rate) * T_PER_KM2

    arrays = [layers[n].data for n in ("lithology", "temperature", "runoff", "vegetation")]
    found = da.map_blocks(evaluate, *arrays, dtype=np.float64)
    return layers["lithology"].copy(data=found)


def cell_areas(grid: xr.DataArray) -> np.ndarray:
    """km2 of a cell in each row."""
    geod, (dx, dy) = Geod(ellps="WGS84"), (abs(one) for one in grid.rio.resolution())
    steps = np.linspace(0, dx, 9)  # along the parallels
    found = []
    for lat in grid["y"].to_numpy():
        lons = np.concatenate([steps, steps[::-1]])
        lats = np.concatenate([np.full(9, lat - dy / 2), np.full(9, lat + dy / 2)])
        found.append(abs(geod.polygon_area_perimeter(lons, lats)[0]) / 1e6)
    return np.array(found)


def write_maps(layers: Mapping[str, xr.DataArray], out: Path) -> None:
    """Two maps and flags in one pass, then copied to COG."""
    rate = consumption(layers, CENTRAL)
    code = layers["lithology"].data
    kept = rate.copy(data=rate.data * code.map_blocks(lambda one: KEPT[one], dtype=np.float64))
    outside = (layers["runoff"].data > 3000) | (abs(layers["temperature"].data - 10) > 20)
    flags = rate.copy(data=(outside + 2 * da.isnan(rate.data)).astype(np.uint8))
    maps = {"consumption": rate.astype("float32"), "drawdown": kept.astype("float32")}
    waiting = []
    for name, values in {**maps, "flags": flags}.items():
        values.rio.write_nodata(None if name == "flags" else np.nan, inplace=True)
        waiting.append(
            values.rio.to_raster(
                out / f"{name}.part.tif",
                tiled=True,
                blockxsize=512,
                blockysize=512,
                lock=threading.Lock(),
                compute=False,
                compress=None,
                BIGTIFF="IF_SAFER",
            )
        )
    dask.compute(*waiting)
    for name in (*maps, "flags"):
        part = out / f"{name}.part.tif"
        copy(
            part, out / f"{name}.tif", driver="COG", compress="DEFLATE", level=6, blocksize=512,
            predictor="YES", num_threads=2, bigtiff="IF_SAFER",
        )  # fmt: skip
        part.unlink()


def totals(
    layers: Mapping[str, xr.DataArray], folder: Path, out: Path, values: Mapping[str, Any]
) -> dict[str, dict[str, float]]:
    """Tonnes of each rock and region, one rock after another."""
    rate = consumption(layers, values)
    areas = da.from_array(cell_areas(rate)[:, None], chunks=(CHUNK, 1))
    tonnes = rate.copy(data=rate.data * areas)
    regions = gpd.read_file(folder / "regions.gpkg")
    part = out / "class.part.tif"
    found = {}
    for code, rock in enumerate(NAMES, start=1):
        held = tonnes.where(layers["lithology"] == code, 0.0)
        held.rio.to_raster(part, tiled=True, lock=threading.Lock(), BIGTIFF="IF_SAFER")
        sums = exact_extract(part, regions, ["sum"], include_cols=["region"], output="pandas")
        found[rock] = dict(zip(sums["region"], sums["sum"].astype(float), strict=True))
        part.unlink()
    return found


def run_plain(folder: Path, out: Path, draws: int) -> dict[str, Any]:
    """Do the job; seconds of the maps, of the totals and of each draw, and the totals."""
    out.mkdir(parents=True, exist_ok=True)
    began = time.monotonic()
    layers = open_layers(folder)
    with dask.config.set(scheduler="threads", num_workers=2):
        write_maps(layers, out)
        maps_done = time.monotonic()
        found = totals(layers, folder, out, CENTRAL)
        totals_done = time.monotonic()
        rng = np.random.default_rng(1)
        for _ in range(draws):
            drawn = {**CENTRAL, "energy": CENTRAL["energy"] + 8 * rng.normal(size=17)}
            totals(layers, folder, out, drawn)
    return {
        "maps": maps_done - began,
        "totals": totals_done - maps_done,
        "per_draw": (time.monotonic() - totals_done) / max(draws, 1),
        "consumption": found,
    }


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("folder", type=Path)
    parser.add_argument("out", type=Path)
    parser.add_argument("--draws", type=int, default=2)
    chosen = parser.parse_args()
    print(json.dumps(run_plain(chosen.folder, chosen.out, chosen.draws)))
