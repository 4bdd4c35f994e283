"""A layer on the job's grid: decoded once, aligned, checked for sense."""

import numpy as np
import pytest

from mapper.errors import GridError, UnitError, ValuesError
from mapper.grid import Grid, Window, parse_crs
from mapper.job import LayerSpec
from mapper.layers.layer import how_aligned, open_layer, open_source, source_grid
from tests.making import EQUAL_AREA, LON_LAT, UTM, write_netcdf, write_raster


def grid_of(n_rows, n_cols, cell, left=0.0, top=None, crs=EQUAL_AREA):
    top = cell * n_rows if top is None else top
    return Grid(parse_crs(crs).to_wkt(), left, top, cell, cell, n_rows, n_cols)


def layer_of(path, grid, name="temperature", **about):
    spec = LayerSpec(name=name, path=str(path), **about)
    return open_layer(spec, open_source(spec), grid)


def values(path, grid, window=None, **about):
    return layer_of(path, grid, **about).values(window or grid.window)


TWO = np.array([[281.0, 282.0], [283.0, 284.0]])


def test_celsius_becomes_kelvin_by_the_unit_of_the_file(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[10.0]], unit="degC")
    assert values(path, grid_of(1, 1, 1000.0)).tolist() == [[283.15]]


def test_the_unit_of_the_job_wins_over_the_file(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[10.0]], unit="K")
    assert values(path, grid_of(1, 1, 1000.0), units="degC").tolist() == [[283.15]]


def test_scale_and_offset_of_the_file_come_before_the_unit(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[100]], dtype="int16", unit="degC", scale=0.1,
                        offset=2.0)  # fmt: skip
    assert values(path, grid_of(1, 1, 1000.0))[0, 0] == pytest.approx(285.15, abs=1e-12)


def test_a_layer_without_unit_is_refused(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[10.0]])
    with pytest.raises(UnitError, match="no unit, and temperature must have one") as caught:
        values(path, grid_of(1, 1, 1000.0))
    assert "layers.temperature" in caught.value.where


def test_degrees_read_as_kelvin_are_refused_with_the_unit(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[10.0, 12.0]], unit="K")
    with pytest.raises(ValuesError, match="2 of 2 values cannot be temperature") as caught:
        values(path, grid_of(1, 2, 1000.0))
    assert "read as 'K' now" in caught.value.fix


def test_a_stray_value_is_refused_as_a_nodata_value_that_nobody_named(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[10.0, 12.0, -9999.0]], unit="degC")
    with pytest.raises(ValuesError, match="1 of 3 values cannot be temperature") as caught:
        values(path, grid_of(1, 3, 1000.0))
    assert "nodata = -9999" in caught.value.fix
    found = values(path, grid_of(1, 3, 1000.0), nodata=(-9999.0,))
    assert np.isnan(found).tolist() == [[False, False, True]]


@pytest.mark.parametrize(("kind", "cover"), [("ndvi", 0.5), ("ndvi-squared", 0.25)])
def test_an_index_becomes_cover(tmp_path, kind, cover):
    path = write_raster(tmp_path / "v.tif", [[0.455]])
    found = values(path, grid_of(1, 1, 1000.0), name="vegetation", kind=kind)
    assert found[0, 0] == pytest.approx(cover, abs=1e-12)


def test_an_index_above_one_is_refused(tmp_path):
    path = write_raster(tmp_path / "v.tif", [[4550.0]])
    with pytest.raises(ValuesError, match="cannot be NDVI"):
        values(path, grid_of(1, 1, 1000.0), name="vegetation", kind="ndvi")


@pytest.mark.parametrize(
    ("grid", "how"),
    [
        (grid_of(2, 2, 1000.0), "same"),
        (grid_of(1, 1, 1000.0, left=1000.0), "same"),
        (grid_of(2, 2, 1000.0, left=500.0), "bilinear"),
        (grid_of(4, 4, 500.0), "bilinear"),
        (grid_of(1, 1, 2000.0), "mean"),
        (grid_of(2, 2, 1000.0, crs=UTM), "points"),
    ],
)
def test_alignment_follows_the_cells(tmp_path, grid, how):
    source = open_source(
        LayerSpec(name="temperature", path=str(write_raster(tmp_path / "t.tif", TWO)))
    )
    assert how_aligned(source, grid, "auto") == how


def test_a_window_that_reaches_beyond_the_file_has_no_data_there(tmp_path):
    path = write_raster(tmp_path / "t.tif", TWO, unit="K")
    grid = grid_of(4, 4, 1000.0, left=-1000.0, top=3000.0)
    found = values(path, grid)
    assert np.isnan(found).sum() == 12
    assert found[1:3, 1:3].tolist() == TWO.tolist()


def test_a_coarse_grid_takes_the_mean(tmp_path):
    path = write_raster(tmp_path / "t.tif", TWO, unit="K")
    assert values(path, grid_of(1, 1, 2000.0)).tolist() == [[282.5]]


def test_a_finer_grid_runs_smoothly_and_nearest_does_so_in_steps(tmp_path):
    path = write_raster(tmp_path / "t.tif", TWO, unit="K")
    smooth = values(path, grid_of(4, 4, 500.0))
    assert smooth[1].tolist() == [281.5, 281.75, 282.25, 282.5]
    steps = values(path, grid_of(4, 4, 500.0), resampling="nearest")
    assert steps[1].tolist() == [281, 281, 282, 282]


@pytest.mark.parametrize("crs", [EQUAL_AREA, UTM])
def test_a_layer_that_misses_the_grid_is_refused(tmp_path, crs):
    left, top = (1e7, 2000.0) if crs == EQUAL_AREA else (5e5, 6e6)
    path = write_raster(tmp_path / "t.tif", TWO, unit="K", left=left, top=top, crs=crs)
    with pytest.raises(GridError, match="the layer lies apart from the grid") as caught:
        layer_of(path, grid_of(2, 2, 1000.0))
    assert "right crs" in caught.value.fix


def test_longitudes_from_0_to_360_serve_a_grid_west_of_greenwich(tmp_path):
    lon = np.arange(5.0, 360.0, 10.0)
    path = write_netcdf(tmp_path / "t.nc", np.tile(200.0 + lon / 4, (2, 1)), lat=[5, -5], lon=lon)
    grid = grid_of(2, 2, 10.0, left=-20.0, top=10.0, crs=LON_LAT)
    assert values(path, grid)[0].tolist() == [286.25, 288.75]


def test_a_source_of_uneven_cells_is_no_grid(tmp_path):
    path = write_netcdf(tmp_path / "t.nc", np.ones((3, 2)), lat=[5, 3, 0], lon=[0, 1])
    source = open_source(LayerSpec(name="temperature", path=str(path)))
    with pytest.raises(GridError, match="cells are not all of one size"):
        source_grid(source, where="x")


@pytest.mark.parametrize("resampling", ["nearest", "bilinear", "mean"])
def test_a_window_sees_what_the_whole_sees(tmp_path, resampling):
    field = np.random.default_rng(3).uniform(270, 290, (9, 11))
    field[2:4, 5] = np.nan
    path = write_raster(tmp_path / "t.tif", field, unit="K", cell=700.0, left=-300.0, top=6100.0)
    layer = layer_of(path, grid_of(8, 8, 900.0), resampling=resampling)
    whole = layer.values(Window(0, 0, 8, 8))
    part = layer.values(Window(2, 3, 4, 5))
    assert np.array_equal(part, whole[2:6, 3:8], equal_nan=True)
