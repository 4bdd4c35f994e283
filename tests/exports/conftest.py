"""A small run whose names are as unkind as names can be, and the island of the demo."""

from __future__ import annotations

import shutil
from dataclasses import replace
from pathlib import Path

import geopandas
import numpy as np
import pytest
import rasterio
import shapely

from mapper.job import ALSO, load_job
from mapper.pipeline import run

ROOT = Path(__file__).parents[2]
NAMES = (
    "<script>alert(1)</script>",
    "=1+1",
    "@SUM(1)",
    'it\'s a "quote" & more',
    "منطقة الشمال",
    "../../etc/x",
    "long " + "name " * 59,
    "🌋 volcano",
    "</script><img src=x onerror=alert(2)>",
)
TITLE = "=2+3 </title><script>alert(3)</script> & $x_1$ \"q\" 'a' \u202eturned"


@pytest.fixture
def names() -> tuple[str, ...]:
    """The unkind names, in the order of the regions."""
    return NAMES


@pytest.fixture(scope="session")
def unkind_run(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A run of 40 x 60 cells with a region of each unkind name."""
    folder = tmp_path_factory.mktemp("unkind")
    _write_grids(folder)
    (folder / "legend.csv").write_text("code,rock\n1,basalt\n2,granite\n3,limestone\n")
    boxes = [shapely.box(0.1 * at, 0.05, 0.1 * at + 0.1, 0.35) for at in range(len(NAMES) - 3)]
    boxes += [shapely.box(0.1 * at, 0.0, 0.1 * at + 0.1, 0.05) for at in range(3)]
    frame = geopandas.GeoDataFrame({"name": list(NAMES)}, geometry=boxes, crs="EPSG:4326")
    frame.to_file(folder / "regions.gpkg", layer="regions")
    (folder / "job.toml").write_text(_JOB, encoding="utf-8")
    job = replace(load_job(folder / "job.toml"), title=TITLE)
    run(job, out=folder / "out")
    return folder / "out"


@pytest.fixture(scope="session")
def island_run(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The island with everything that can be asked for."""
    job = load_job(ROOT / "configs" / "island.toml")
    out = tmp_path_factory.mktemp("island") / "run"
    run(replace(job, write=(*job.write, *ALSO)), out=out)
    return out


@pytest.fixture
def copied_run(unkind_run: Path, tmp_path: Path) -> Path:
    """A copy of the small run, to be damaged."""
    return Path(shutil.copytree(unkind_run, tmp_path / "copy"))


def _write_grids(folder: Path) -> None:
    rows, cols = 40, 60
    codes = (np.arange(rows * cols).reshape(rows, cols) // 20 % 4).astype(np.uint8)
    runoff = np.linspace(100.0, 2500.0, rows * cols, dtype=np.float32).reshape(rows, cols)
    warmth = np.full((rows, cols), 15.0, dtype=np.float32)
    for name, values, unit, nodata in (
        ("rocks", codes, "", 0),
        ("runoff", runoff, "mm yr-1", -9999.0),
        ("warmth", warmth, "degC", -9999.0),
    ):
        with rasterio.open(
            folder / f"{name}.tif",
            "w",
            driver="GTiff",
            width=cols,
            height=rows,
            count=1,
            dtype=values.dtype,
            crs="EPSG:4326",
            transform=rasterio.Affine(0.01, 0, 0.0, 0, -0.01, 0.4),
            nodata=nodata,
        ) as dataset:
            dataset.write(values, 1)
            dataset.units = (unit,)


_JOB = """
title = "replaced by the test"
[layers.lithology]
path = "rocks.tif"
legend = "legend.csv"
[layers.runoff]
path = "runoff.tif"
units = "mm yr-1"
[layers.temperature]
path = "warmth.tif"
units = "degC"
[regions]
path = "regions.gpkg"
id = "name"
"""
