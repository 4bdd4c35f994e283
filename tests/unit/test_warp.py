"""Layers in another CRS, against PROJ point by point."""

import numpy as np
import pytest

from mapper.grid import Grid, Window, parse_crs, transformer
from mapper.job import LayerSpec
from mapper.layers.layer import open_layer, open_source
from tests.making import LON_LAT, UTM, write_netcdf, write_raster

POLAR = "EPSG:3413"


def layer_of(path, grid, name="temperature", **about):
    spec = LayerSpec(name=name, path=str(path), **about)
    return open_layer(spec, open_source(spec), grid)


def a_plane(tmp_path):
    """Temperature that is 250 + latitude / 10 on half-degree cells of the world."""
    lat, lon = np.arange(89.75, -90, -0.5), np.arange(-179.75, 180, 0.5)
    values = np.tile(250.0 + lat[:, None] / 10, (1, lon.size))
    return write_netcdf(tmp_path / "t.nc", values, lat=lat, lon=lon)


def a_ramp(tmp_path):
    """Temperature that is 270 + |longitude| / 10 on half-degree cells of the world."""
    lat, lon = np.arange(89.75, -90, -0.5), np.arange(-179.75, 180, 0.5)
    values = np.tile(270.0 + np.abs(lon) / 10, (lat.size, 1))
    return write_netcdf(tmp_path / "t.nc", values, lat=lat, lon=lon)


def centres(grid):
    x, y = np.meshgrid(grid.x_centres(0, grid.n_cols), grid.y_centres(0, grid.n_rows))
    return transformer(grid.crs, parse_crs(LON_LAT).to_wkt()).transform(x, y)


@pytest.mark.parametrize(
    ("crs", "left", "top", "cell"),
    [(UTM, 3e5, 6e6, 5000.0), (POLAR, -2e5, 2e5, 2e4), ("EPSG:3035", 3e6, 3.5e6, 1e5)],
)
def test_a_plane_is_sampled_where_each_centre_lies(tmp_path, crs, left, top, cell):
    grid = Grid(parse_crs(crs).to_wkt(), left, top, cell, cell, 20, 20)
    found = layer_of(a_plane(tmp_path), grid).values(grid.window)
    _, lat = centres(grid)
    expected = 250.0 + np.minimum(lat, 89.75) / 10
    # a sample point lies at most a quarter of a degree from the centre of its source cell
    assert np.abs(found - expected).max() <= 0.025


def test_longitude_is_right_round_the_pole_and_across_the_antimeridian(tmp_path):
    grid = Grid(parse_crs(POLAR).to_wkt(), -4e5, 4e5, 2e4, 2e4, 40, 40)
    found = layer_of(a_ramp(tmp_path), grid, resampling="nearest").values(grid.window)
    lon, lat = centres(grid)
    far = lat < 89.0
    # a sample point lies at most a quarter of a degree from its source cell's centre; the cell
    # itself spans up to 10 degrees at 89 degrees, over which |longitude| has a kink at 0 and 180
    off = np.abs(found - (270.0 + np.abs(lon) / 10))[far]
    assert off.max() < 0.25
    assert np.median(off) < 0.025


def test_what_lies_beyond_the_source_has_no_data(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[280.0]], left=15.0, top=50.0, cell=0.1, crs=LON_LAT,
                        unit="K")  # fmt: skip
    grid = Grid(parse_crs(UTM).to_wkt(), 4.9e5, 5.55e6, 1000.0, 1000.0, 30, 30)
    found = layer_of(path, grid).values(grid.window)
    assert 0 < np.isfinite(found).sum() < 900
    assert set(found[np.isfinite(found)]) == {280.0}


def test_cells_beyond_the_earth_have_no_data(tmp_path):
    grid = Grid(parse_crs("ESRI:54009").to_wkt(), -1.8e7, 9e6, 1e6, 1e6, 18, 36)
    found = layer_of(a_plane(tmp_path), grid).values(grid.window)
    assert np.isnan(found[0, 0])
    assert np.isfinite(found[9]).all()


def test_a_layer_far_from_the_middle_of_a_large_grid_is_found(tmp_path):
    path = write_raster(tmp_path / "t.tif", np.full((50, 50), 280.0), left=3e5, top=6e6,
                        cell=10_000.0, crs="EPSG:32755", unit="K")  # fmt: skip
    grid = Grid(parse_crs(LON_LAT).to_wkt(), -180.0, 90.0, 1.0, 1.0, 180, 360)
    with np.errstate(all="raise"):
        found = layer_of(path, grid).values(grid.window)
    assert np.isfinite(found).sum() == 0 or np.nanmax(found) == 280.0


def test_a_window_sees_what_the_whole_sees(tmp_path):
    grid = Grid(parse_crs(UTM).to_wkt(), 3e5, 6e6, 7000.0, 7000.0, 40, 40)
    path = a_ramp(tmp_path)
    for resampling in ("auto", "nearest"):
        layer = layer_of(path, grid, resampling=resampling)
        whole = layer.values(grid.window)
        part = layer.values(Window(11, 7, 13, 21))
        assert np.array_equal(part, whole[11:24, 7:28], equal_nan=True)
