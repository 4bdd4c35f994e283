"""From a job to a plan: the grid, and what is refused before anything is computed."""

import numpy as np
import pytest
import shapely

from mapper.errors import GridError, JobError, ManyProblemsError
from mapper.grid import Grid, parse_crs
from mapper.job import load_job
from mapper.planning import block_shape, make_plan, open_job, sample_layer, sample_windows
from tests.making import EQUAL_AREA, LON_LAT, small_job, write_polygons, write_raster


def plan_of(tmp_path, **changes):
    return make_plan(load_job(small_job(tmp_path, **changes)))


def test_the_grid_is_that_of_the_lithology_unless_told(tmp_path):
    assert plan_of(tmp_path).grid.bounds == (0, 0, 4000, 4000)


def test_bounds_cut_the_grid_and_keep_cells_whole(tmp_path):
    grid = plan_of(tmp_path, grid={"bounds": [1500, 1000, 4000, 2500]}).grid
    assert grid.bounds == (1000, 1000, 4000, 3000)
    assert grid.dx == 1000


def test_bounds_apart_from_the_grid_are_refused(tmp_path):
    with pytest.raises(GridError, match=r"lie outside the grid \[0\.0, 0\.0, 4000\.0, 4000\.0\]"):
        plan_of(tmp_path, grid={"bounds": [5000, 0, 6000, 1000]})


def test_a_grid_may_be_spelled_out(tmp_path):
    grid = {"crs": EQUAL_AREA, "resolution": [2000, 1000], "bounds": [0, 0, 4000, 3000]}
    found = plan_of(tmp_path, grid=grid).grid
    assert found.shape == (3, 2)
    assert (found.dx, found.dy) == (2000, 1000)


def test_bounds_that_hold_no_whole_number_of_cells_are_refused(tmp_path):
    grid = {"crs": EQUAL_AREA, "resolution": 1500, "bounds": [0, 0, 4000, 3000]}
    with pytest.raises(GridError, match="do not hold a whole number of cells of 1500") as caught:
        plan_of(tmp_path, grid=grid)
    assert caught.value.fix == "bounds = [0, 0, 4500, 3000]"


@pytest.mark.parametrize("grid", [{"crs": EQUAL_AREA}, {"resolution": 1000, "crs": EQUAL_AREA}])
def test_half_a_grid_is_refused(tmp_path, grid):
    with pytest.raises(JobError, match="needs crs, resolution and bounds together"):
        plan_of(tmp_path, grid=grid)


def test_a_grid_from_a_layer_that_is_not_there_is_refused(tmp_path):
    with pytest.raises(JobError, match="from = 'temperature' is not a layer") as caught:
        plan_of(tmp_path, grid={"from": "temperature"})
    assert caught.value.fix == "one of: lithology, runoff"


def test_a_grid_that_goes_round_the_earth_more_than_once_is_refused(tmp_path):
    job = small_job(tmp_path, regions=None)
    write_raster(tmp_path / "rock.tif", np.ones((1, 73)), dtype="uint8", left=-180.0, top=5.0,
                 cell=5.0, crs=LON_LAT)  # fmt: skip
    write_raster(tmp_path / "runoff.tif", np.ones((1, 72)), left=-180.0, top=5.0, cell=5.0,
                 crs=LON_LAT, unit="mm yr-1")  # fmt: skip
    with pytest.raises(GridError, match="spans 365 degrees of longitude"):
        make_plan(load_job(job))


def test_a_law_without_its_layer_is_refused_with_the_table_to_write(tmp_path):
    with pytest.raises(JobError, match="needs a temperature layer and the job has none") as caught:
        plan_of(tmp_path, law={"default": "product"})
    assert "[layers.temperature]" in caught.value.fix


def test_polygons_of_rock_with_no_grid_that_opens_report_what_is_missing(tmp_path):
    write_polygons(tmp_path / "rock.gpkg", {1: shapely.box(0, 0, 4000, 4000)}, column="code")
    layers = {
        "lithology": {"path": "rock.gpkg", "legend": "legend.csv", "column": "code"},
        "runoff": {"path": "nowhere.tif"},
    }
    with pytest.raises(FileNotFoundError, match=r"there is no file 'nowhere\.tif'"):
        plan_of(tmp_path, layers=layers, regions=None)


def test_problems_of_the_file_do_not_hide_those_of_what_it_names(tmp_path):
    job = small_job(tmp_path, titel="x")
    (tmp_path / "runoff.tif").unlink()
    with pytest.raises(ManyProblemsError) as caught:
        open_job(job)
    assert [one.problem for one in caught.value.problems] == [
        "unknown key 'titel'", "there is no file 'runoff.tif'",
    ]  # fmt: skip


def test_a_look_at_a_layer_gives_its_range_and_cover(tmp_path):
    job = small_job(tmp_path)
    runoff = np.full((4, 4), 500.0)
    runoff[0] = [np.nan, 100, 900, 500]
    write_raster(tmp_path / "runoff.tif", runoff, unit="mm yr-1")
    sample = sample_layer(make_plan(load_job(job)).layers["runoff"])
    assert (sample.low, sample.median, sample.high) == (100, 500, 900)
    assert sample.coverage == 15 / 16


def test_large_grids_are_looked_at_in_samples():
    grid = Grid(parse_crs(LON_LAT).to_wkt(), -180.0, 90.0, 0.01, 0.01, 18000, 36000)
    windows = sample_windows(grid)
    assert len(windows) == 16
    assert max(one.row_stop for one in windows) == 18000
    assert max(one.col_stop for one in windows) == 36000


def test_blocks_are_no_larger_than_the_grid(tmp_path):
    assert block_shape(plan_of(tmp_path)) == (4, 4)
