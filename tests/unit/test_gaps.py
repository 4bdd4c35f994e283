"""What inspection says of cells that will have no result."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import mapper
from mapper import gaps, planning
from mapper.gaps import find_gaps
from mapper.inspection import inspect
from mapper.planning import make_plan
from tests.making import small_job, write_raster

TWO_LAYERS = {
    "lithology": {"path": "rock.tif", "legend": "legend.csv"},
    "runoff": {"path": "runoff.tif"},
    "temperature": {"path": "warmth.tif"},
}


def holed_job(folder: Path) -> Path:
    """No rock in a corner; runoff lacks the left column, temperature the top two rows."""
    path = small_job(folder, layers=TWO_LAYERS, law={"default": "dessert-2003"} | BY_ROCK)
    rock = np.repeat([[1], [2], [2], [4]], 4, axis=1)
    rock[2, 3] = 0
    write_raster(folder / "rock.tif", rock, dtype="uint8", nodata=0)
    runoff, warmth = np.full((4, 4), 1000.0), np.full((4, 4), 290.0)
    runoff[:, 0], warmth[:2] = -9999, -9999
    write_raster(folder / "runoff.tif", runoff, unit="mm yr-1", nodata=-9999)
    write_raster(folder / "warmth.tif", warmth, unit="K", nodata=-9999)
    return path


BY_ROCK = {
    "by_rock": {
        "granite": "amiotte-suchet-1995",
        "limestone": "amiotte-suchet-1995",
    }
}


def test_cells_without_a_result_are_counted_by_the_layer_that_lacks(tmp_path):
    job = mapper.load_job(holed_job(tmp_path))
    found = find_gaps(make_plan(job))
    # granite reads runoff alone; the lake in the south needs nothing
    assert (found.looked_at, found.mapped, found.without) == (16, 15, 6)
    assert dict(found.lacking) == {"temperature": 4, "runoff": 3}
    result = mapper.run(job)
    assert result.totals.valid_area.sum() == pytest.approx(15 - found.without, rel=1e-9)
    text = inspect(job).lines()
    assert "unmapped    1 of 16 cells (6.2 %): no rock" in text
    line = "no result   on 6 of 15 mapped cells (40.0 %): no data in temperature on 4, runoff on 3"
    assert line in text


def test_of_derived_runoff_the_layer_behind_it_is_named(tmp_path):
    rain = np.full((4, 4), 1500.0)
    rain[0] = -9999
    write_raster(tmp_path / "rain.tif", rain, unit="mm yr-1", nodata=-9999)
    write_raster(tmp_path / "warmth.tif", np.full((4, 4), 290.0), unit="K")
    layers = {
        "lithology": TWO_LAYERS["lithology"],
        "precipitation": {"path": "rain.tif"},
        "temperature": {"path": "warmth.tif"},
    }
    found = find_gaps(make_plan(mapper.load_job(small_job(tmp_path, layers=layers))))
    assert dict(found.lacking) == {"precipitation": 4, "temperature": 0}
    assert found.lines() == [
        "no result   on 4 of 16 mapped cells (25.0 %): no data in precipitation on 4"
    ]


def test_a_job_without_gaps_says_so_and_a_sample_is_called_one(tmp_path, monkeypatch):
    plan = make_plan(mapper.load_job(small_job(tmp_path)))
    assert find_gaps(plan).lines() == ["no result   on none of the mapped cells"]
    some = planning.sample_windows(plan.grid)[0]
    part = type(some)(0, 0, 2, 4)
    monkeypatch.setattr(gaps, "sample_windows", lambda _: [part])
    assert not find_gaps(plan).whole
