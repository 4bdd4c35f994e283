"""The grid as a value; areas against outside sources are in tests/published."""

import numpy as np
import pytest

from mapper.errors import GridError
from mapper.grid import Grid, Window, blocks, cell_areas, parse_crs, same_crs, tiles_of
from tests.making import EQUAL_AREA, LON_LAT, UTM


def grid_of(n_rows=3, n_cols=4, crs=EQUAL_AREA, cell=10.0, left=0.0, top=30.0):
    return Grid(parse_crs(crs).to_wkt(), left, top, cell, cell, n_rows, n_cols)


def test_rows_run_down_and_columns_run_right():
    grid = grid_of()
    assert grid.x_centres(0, 4).tolist() == [5.0, 15.0, 25.0, 35.0]
    assert grid.y_centres(0, 3).tolist() == [25.0, 15.0, 5.0]
    assert grid.y_edges(1, 3).tolist() == [20.0, 10.0, 0.0]
    assert grid.bounds == (0.0, 0.0, 40.0, 30.0)
    assert grid.window_bounds(Window(1, 2, 1, 2)) == (20.0, 10.0, 40.0, 20.0)


def test_blocks_cover_each_cell_once():
    count = np.zeros((5, 7), dtype=int)
    for window in blocks(grid_of(5, 7), (2, 3)):
        count[window.row : window.row_stop, window.col : window.col_stop] += 1
    assert (count == 1).all()


def test_tiles_do_not_depend_on_the_window_that_asks():
    grid = grid_of(10, 10)
    assert list(tiles_of(grid, Window(5, 5, 1, 1), (4, 4))) == [Window(4, 4, 4, 4)]
    assert list(tiles_of(grid, Window(9, 9, 1, 1), (4, 4))) == [Window(8, 8, 2, 2)]


@pytest.mark.parametrize(
    ("one", "other", "same"),
    [
        ("EPSG:4326", "OGC:CRS84", True),
        ("EPSG:4326", "EPSG:4979", True),
        ("EPSG:4326", "+proj=longlat +R=6371000", True),
        ("EPSG:4326", "EPSG:4267", False),
        ("EPSG:4326", "EPSG:3857", False),
        ("EPSG:32633", "EPSG:32634", False),
    ],
)
def test_crs_are_one_when_numbers_mean_the_same_spot(one, other, same):
    assert same_crs(parse_crs(one).to_wkt(), parse_crs(other).to_wkt()) is same


def test_a_crs_that_cannot_be_read_is_named():
    with pytest.raises(GridError, match="CRS 'EPSG:999999' cannot be read") as caught:
        parse_crs("EPSG:999999")
    assert "EPSG:4326" in caught.value.fix


def test_cells_of_an_equal_area_projection_are_width_times_height():
    assert cell_areas(grid_of(), Window(0, 0, 3, 4)).tolist() == [[100.0]] * 3


def test_feet_are_metres_before_they_are_areas():
    areas = cell_areas(grid_of(crs="EPSG:2263", cell=1000.0, left=1e6, top=2e5), Window(0, 0, 1, 1))
    assert areas[0, 0] == pytest.approx((1000.0 * 1200 / 3937) ** 2, rel=1e-3)


@pytest.mark.parametrize("crs", [LON_LAT, UTM])
def test_a_cell_has_the_same_area_in_any_window(crs):
    cell, left, top = (0.1, 10.0, 60.0) if crs == LON_LAT else (700.0, 3e5, 6e6)
    grid = grid_of(40, 40, crs, cell, left, top)
    whole = np.broadcast_to(cell_areas(grid, grid.window), (40, 40))
    part = cell_areas(grid, Window(13, 17, 9, 5))
    assert np.array_equal(np.broadcast_to(part, (9, 5)), whole[13:22, 17:22])


def test_a_grid_beyond_its_projection_is_refused():
    grid = grid_of(2, 2, "+proj=ortho +lat_0=0 +lon_0=0", 1e7, 0.0, 1e7)
    with pytest.raises(GridError, match="beyond where its projection is defined") as caught:
        cell_areas(grid, grid.window)
    assert "bounds" in caught.value.fix
