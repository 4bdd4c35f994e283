"""Inputs of any size for benchmarks: smooth fields with noise, rocks in belts, square regions."""

from __future__ import annotations

import argparse
from pathlib import Path

import geopandas as gpd
import numpy as np
import rasterio
import shapely
from rasterio.windows import Window

ROCKS = (
    "basalt", "andesite", "rhyolite", "gabbro", "granite", "gneiss", "schist", "sandstone",
    "shale", "limestone", "dolomite", "mixed sediment", "alluvium", "loess", "evaporite", "ice",
)  # fmt: skip
LEFT, TOP, WIDTH, HEIGHT = -60.0, 60.0, 120.0, 120.0


def write_inputs(folder: Path, n_rows: int, n_cols: int, *, tile: int = 512) -> Path:
    """Write four rasters, a legend, 36 regions and a job; returns the job's path."""
    folder.mkdir(parents=True, exist_ok=True)
    rng = np.random.default_rng(11)
    coarse = {name: _field(rng) for name in ("temperature", "runoff", "vegetation", "rock")}
    profile = {
        "driver": "GTiff", "width": n_cols, "height": n_rows, "count": 1, "crs": "EPSG:4326",
        "transform": rasterio.transform.from_bounds(
            LEFT, TOP - HEIGHT, LEFT + WIDTH, TOP, n_cols, n_rows
        ),
        "tiled": True, "blockxsize": tile, "blockysize": tile, "compress": "deflate",
        "bigtiff": "IF_SAFER", "num_threads": 2,
    }  # fmt: skip
    files = {
        "lithology": ("uint8", 0, ""),
        "temperature": ("float32", -9999, "degC"),
        "runoff": ("float32", -9999, "mm yr-1"),
        "vegetation": ("uint8", 255, "%"),
    }
    opened = {
        name: rasterio.open(folder / f"{name}.tif", "w", dtype=dtype, nodata=nodata, **profile)
        for name, (dtype, nodata, _) in files.items()
    }
    for name, (_, _, unit) in files.items():
        if unit:
            opened[name].units = (unit,)
    for row in range(0, n_rows, tile):
        rows = min(tile, n_rows - row)
        window = Window(0, row, n_cols, rows)
        for name, values in _band(coarse, row, rows, (n_rows, n_cols), rng).items():
            opened[name].write(values.astype(files[name][0]), 1, window=window)
    for dataset in opened.values():
        dataset.close()
    return _write_rest(folder)


def _field(rng: np.random.Generator) -> np.ndarray:
    total = np.zeros((257, 257))
    for size in (4, 8, 16, 32, 64, 128):
        nodes = rng.normal(size=(size + 1, size + 1)) / np.sqrt(size)
        at = np.linspace(0, size, 257)
        low = np.minimum(at.astype(int), size - 1)
        part = at - low
        across = nodes[:, low] * (1 - part) + nodes[:, low + 1] * part
        total += across[low] * (1 - part)[:, None] + across[low + 1] * part[:, None]
    return (total - total.min()) / np.ptp(total)


def _stretch(field: np.ndarray, row: int, rows: int, shape: tuple[int, int]) -> np.ndarray:
    y = (np.arange(row, row + rows) + 0.5) / shape[0] * 256
    x = (np.arange(shape[1]) + 0.5) / shape[1] * 256
    y_low, x_low = y.astype(int), x.astype(int)
    across = field[:, x_low] + (field[:, x_low + 1] - field[:, x_low]) * (x - x_low)
    return across[y_low] + (across[y_low + 1] - across[y_low]) * (y - y_low)[:, None]


def _band(
    coarse: dict[str, np.ndarray], row: int, rows: int, shape: tuple[int, int],
    rng: np.random.Generator,
) -> dict[str, np.ndarray]:  # fmt: skip
    fields = {name: _stretch(field, row, rows, shape) for name, field in coarse.items()}
    noise = rng.normal(size=(rows, shape[1]), scale=0.02)
    sea = fields["rock"] < 0.3
    rock = 1 + (np.floor(fields["rock"] * 97) % len(ROCKS))
    temperature = np.round(-5 + 32 * fields["temperature"] + noise * 5, 2)
    runoff = np.round(np.exp(3 + 4.5 * fields["runoff"] + noise), 1)
    vegetation = np.clip(np.round(100 * (fields["vegetation"] + noise)), 0, 100)
    return {
        "lithology": np.where(sea, 0, rock),
        "temperature": temperature,
        "runoff": np.where(sea, -9999, runoff),
        "vegetation": vegetation,
    }


def _write_rest(folder: Path) -> Path:
    lines = ["code,rock", *(f"{code},{rock}" for code, rock in enumerate(ROCKS, start=1))]
    (folder / "legend.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    edges_x = LEFT + np.linspace(0.03, 0.97, 7) * WIDTH
    edges_y = TOP - np.linspace(0.03, 0.97, 7) * HEIGHT
    boxes = [
        shapely.box(edges_x[i], edges_y[j + 1], edges_x[i + 1], edges_y[j])
        for j in range(6)
        for i in range(6)
    ]
    bent = shapely.transform(
        shapely.segmentize(boxes, 0.5),
        lambda xy: np.stack(
            [xy[:, 0] + 1.5 * np.sin(xy[:, 1] / 3), xy[:, 1] + 1.5 * np.cos(xy[:, 0] / 4)], axis=1
        ),
    )
    frame = gpd.GeoDataFrame({"region": [f"R{n:02d}" for n in range(36)]}, geometry=bent)
    frame.set_crs("EPSG:4326").to_file(folder / "regions.gpkg")
    job = folder / "job.toml"
    job.write_text(JOB, encoding="utf-8")
    return job


JOB = """title = "Benchmark"
[layers.lithology]
path = "lithology.tif"
legend = "legend.csv"
[layers.temperature]
path = "temperature.tif"
[layers.runoff]
path = "runoff.tif"
[layers.vegetation]
path = "vegetation.tif"
[law]
default = "product"
by_rock = { basalt = "dessert-2003" }
[regions]
path = "regions.gpkg"
id = "region"
[output]
folder = "out"
"""


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("folder", type=Path)
    parser.add_argument("--rows", type=int, default=6000)
    parser.add_argument("--cols", type=int, default=6000)
    chosen = parser.parse_args()
    print(write_inputs(chosen.folder, chosen.rows, chosen.cols))
