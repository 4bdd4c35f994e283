"""The invented island, end to end, with overviews and every layer on its own cells."""

import csv

import numpy as np
import rasterio
from rio_cogeo.cogeo import cog_validate

from tests.making import command


def test_the_island_runs_and_its_tables_add_up(tmp_path):
    done = command("run", "configs/island.toml", "--out", tmp_path / "island")
    assert done.returncode == 0, done.stderr
    with (tmp_path / "island" / "tables" / "regions.csv").open(encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    assert [row["region"] for row in rows[-2:]] == ["outside", "all"]
    assert len(rows) >= 10
    for column in ("area_km2", "consumption_t_per_yr", "drawdown_t_per_yr"):
        parts = [float(row[column]) for row in rows]
        assert abs(sum(parts[:-1]) / parts[-1] - 1) < 1e-8
    for name in ("consumption", "drawdown", "flags"):
        path = tmp_path / "island" / "maps" / f"{name}.tif"
        assert cog_validate(str(path), strict=True, quiet=True)[0]
        with rasterio.open(path) as file:
            assert file.overviews(1)
    with rasterio.open(tmp_path / "island" / "maps" / "consumption.tif") as short, rasterio.open(
        tmp_path / "island" / "maps" / "drawdown.tif"
    ) as long:  # fmt: skip
        taken, kept = short.read(1), long.read(1)
    good = ~np.isnan(taken)
    assert 0.02 < good.mean() < 0.98
    assert (kept[good] <= 0.5 * taken[good] * (1 + 1e-6)).all()
