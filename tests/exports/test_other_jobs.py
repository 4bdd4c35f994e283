"""Jobs unlike the island: no regions, another CRS, no result anywhere, only some outputs."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import rasterio
from PIL import Image

from mapper.cli import main
from mapper.errors import JobError
from mapper.exports.display import display_shape, round_length, ticks
from mapper.exports.verify import verify
from mapper.grid import Grid
from mapper.job import load_job
from mapper.pipeline import run

_JOB = """
title = "Plain"
[layers.lithology]
path = "rocks.tif"
legend = "legend.csv"
[layers.runoff]
path = "runoff.tif"
units = "mm yr-1"
[law]
default = "amiotte-suchet-1995"
"""


def _write(path: Path, values: np.ndarray, nodata: float) -> None:
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=values.shape[1],
        height=values.shape[0],
        count=1,
        dtype=values.dtype,
        crs="EPSG:32633",
        transform=rasterio.Affine(1000.0, 0, 400_000.0, 0, -1000.0, 5_400_000.0),
        nodata=nodata,
    ) as dataset:
        dataset.write(values, 1)


def _job(folder: Path, runoff: float, output: str = "") -> Path:
    _write(folder / "rocks.tif", np.full((20, 30), 1, dtype=np.uint8), 0)
    _write(folder / "runoff.tif", np.full((20, 30), runoff, dtype=np.float32), -9999.0)
    (folder / "legend.csv").write_text("code,rock\n1,granite\n")
    (folder / "job.toml").write_text(_JOB + output)
    return folder / "job.toml"


def _names(folder: Path) -> set[str]:
    return {path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file()}


def test_a_job_without_regions_in_a_projected_crs_has_its_page(tmp_path: Path) -> None:
    run(load_job(_job(tmp_path, 500.0)), out=tmp_path / "out")
    text = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "regions.gpkg" not in _names(tmp_path / "out")
    assert 'id="regions"' not in text
    assert "10 km" not in text.split("<main>")[0]
    assert "5 km" in text
    assert verify(tmp_path / "out").differs == []


def test_a_job_whose_layers_hold_nothing_is_handed_over_all_the_same(tmp_path: Path) -> None:
    run(load_job(_job(tmp_path, -9999.0)), out=tmp_path / "out")
    text = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "100\u00a0%) have no result" in text
    with Image.open(tmp_path / "out" / "maps" / "drawdown.png") as picture:
        assert picture.width > 700
    assert verify(tmp_path / "out").differs == []


def test_only_what_is_asked_for_is_written(tmp_path: Path) -> None:
    path = _job(tmp_path, 500.0, '[output]\nwrite = ["styles"]\nalso = ["netcdf"]\n')
    run(load_job(path), out=tmp_path / "out")
    found = {name for name in _names(tmp_path / "out") if not name.endswith(".csv")}
    assert found == {
        *(f"maps/{name}.{kind}" for name in _MAPS for kind in ("tif", "sld")),
        "maps/maps.nc",
        "run.json",
    }


_MAPS = ("consumption", "drawdown", "flags")


def test_maps_of_the_interval_are_layers_of_the_page(tmp_path: Path) -> None:
    more = "[uncertainty]\ndraws = 50\nseed = 1\nmaps = true\n"
    run(load_job(_job(tmp_path, 500.0, more)), out=tmp_path / "out")
    text = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    for name in ("drawdown_p05", "drawdown_p95"):
        assert f'data-layer="{name}"' in text
        assert f"maps/{name}.tif" in _names(tmp_path / "out")


def test_nothing_of_an_earlier_run_passes_for_this_one(tmp_path: Path) -> None:
    out = tmp_path / "out"
    run(load_job(_job(tmp_path, 500.0)), out=out)
    (out / "notes.txt").write_text("the user's own")
    record = json.loads((out / "run.json").read_text())
    record["files"].append({"name": "../job.toml"})
    (out / "run.json").write_text(json.dumps(record))
    run(load_job(_job(tmp_path, 700.0, '[output]\nwrite = ["styles"]\n')), out=out)
    assert not {"report.html", "tables/tables.xlsx", "maps/flags.png"} & _names(out)
    assert (out / "notes.txt").exists()
    assert (tmp_path / "job.toml").exists()


def test_an_output_that_there_is_not_is_refused(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = _job(tmp_path, 500.0, '[output]\nwrite = ["pages"]\n')
    with pytest.raises(JobError, match=r"write = \['pages'\], and a list of styles, pictures"):
        load_job(path)
    assert main(["run", str(path)]) == 2
    assert 'fix:   write = ["styles"' in capsys.readouterr().err


def test_the_record_is_written_last_and_names_no_folder(tmp_path: Path) -> None:
    run(load_job(_job(tmp_path, 500.0)), out=tmp_path / "out")
    record = tmp_path / "out" / "run.json"
    newest = max(path.stat().st_mtime_ns for path in (tmp_path / "out").rglob("*.*"))
    assert record.stat().st_mtime_ns == newest
    for name in ("run.json", "report.html", "ro-crate-metadata.json", "maps/drawdown.sld"):
        assert str(tmp_path) not in (tmp_path / "out" / name).read_text(encoding="utf-8")
    assert json.loads(record.read_text())["files"]


@pytest.mark.parametrize(
    ("rows", "cols", "wanted"),
    [
        (20, 30, (20, 30)),
        (700, 900, (700, 900)),
        (21_600, 43_200, (554, 1108)),
        (1, 5000, (1, 1000)),
    ],
)
def test_a_display_takes_a_whole_fraction_of_the_grid(
    rows: int, cols: int, wanted: tuple[int, int]
) -> None:
    assert display_shape(Grid("EPSG:4326", 0.0, 0.0, 1.0, 1.0, rows, cols)) == wanted


def test_ticks_and_scale_bars_have_round_lengths() -> None:
    assert ticks(-31.1, -28.85, 5) == [-31.0, -30.5, -30.0, -29.5, -29.0]
    assert round_length(62.0) == 50.0
    assert round_length(0.3) == pytest.approx(0.2)
