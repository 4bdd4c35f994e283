"""Grids of every kind brought onto one: longitudes, latitudes, other CRSs, files side by side."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from rasterio.transform import from_origin

from mapper.errors import FileFormatError, GridError, JobError, MissingFileError
from mapper.grid import Window, blocks

EAST = np.arange(5.0, 360.0, 10.0)
NORTH = np.arange(85.0, -90.0, -10.0)
GLOBE = 280 + 10 * np.cos(np.deg2rad(EAST))[None, :] + 0.1 * NORTH[:, None]
WHOLE = Window(0, 0, 18, 36)


@pytest.fixture
def globe(bench):
    """A global raster of -180..180 whose cells the test grids share."""
    rolled = np.roll(GLOBE, 18, axis=1).astype(np.float64)
    return bench.tif("globe.tif", rolled, unit="K", transform=from_origin(-180, 90, 10, 10))


def on_globe(bench, globe, lat, lon, values):
    path = bench.field("g.nc", values, lat, lon, units="K")
    return bench.layer("temperature", path, grid=globe)


def expected(bench, globe):
    return bench.layer("temperature", globe).values(WHOLE)


def test_09_a_file_of_0_to_360_equals_its_rolled_twin_seam_and_all(bench, globe):
    layer = on_globe(bench, globe, NORTH, EAST, GLOBE)
    assert layer.how == "same"
    np.testing.assert_array_equal(layer.values(WHOLE), expected(bench, globe))


def test_09_bilinear_across_the_seam_knows_no_edge(bench):
    fine = bench.tif(
        "fine.tif", np.full((1, 8), 280.0), unit="K", transform=from_origin(-10, 5, 2.5, 2.5)
    )
    path = bench.field("g.nc", GLOBE, NORTH, EAST, units="K")
    found = bench.layer("temperature", path, grid=fine).values(Window(0, 0, 1, 8))[0]
    assert np.isfinite(found).all()
    np.testing.assert_allclose(found, found[::-1], atol=1e-12)  # the field is even about 0 E


def test_11_descending_longitudes_equal_ascending_ones(bench, globe):
    layer = on_globe(bench, globe, NORTH, EAST[::-1], GLOBE[:, ::-1])
    np.testing.assert_array_equal(layer.values(WHOLE), expected(bench, globe))


def test_11_longitudes_that_start_at_180_equal_the_others(bench, globe):
    lon = np.roll(EAST, 18)
    layer = on_globe(bench, globe, NORTH, lon, np.roll(GLOBE, 18, axis=1))
    np.testing.assert_array_equal(layer.values(WHOLE), expected(bench, globe))


def test_11_longitudes_that_turn_back_are_refused(bench):
    lon = EAST.copy()
    lon[[3, 4]] = lon[[4, 3]]
    path = bench.field("g.nc", GLOBE, NORTH, lon, units="K")
    with pytest.raises(GridError, match="neither rise nor fall"):
        bench.layer("temperature", path)


def test_12_ascending_latitudes_equal_descending_ones(bench, globe):
    layer = on_globe(bench, globe, NORTH[::-1], EAST, GLOBE[::-1])
    np.testing.assert_array_equal(layer.values(WHOLE), expected(bench, globe))


def gaussian(n):
    return np.rad2deg(np.arcsin(np.polynomial.legendre.leggauss(n)[0]))[::-1]


def test_13_gaussian_latitudes_are_read_at_their_true_places(bench, globe):
    lat = gaussian(64)
    values = np.repeat(250.0 + 0.5 * lat[:, None], 36, axis=1)
    layer = on_globe(bench, globe, lat, EAST, values)
    assert not layer.source.y.is_regular
    grid = bench.tif(
        "line.tif", np.full((60, 1), 280.0), unit="K", transform=from_origin(0, 60, 1, 2)
    )
    fine = bench.layer("temperature", bench.path("g.nc"), grid=grid, resampling="bilinear").values(
        Window(0, 0, 60, 1)
    )
    centres = 60 - 2 * (np.arange(60) + 0.5)
    np.testing.assert_allclose(fine[:, 0], 250.0 + 0.5 * centres, atol=1e-9)


def test_13_gaussian_latitudes_cannot_be_the_grid_of_a_job(bench):
    path = bench.field("g.nc", np.full((64, 36), 280.0), gaussian(64), EAST, units="K")
    with pytest.raises(GridError, match="not all of one size"):
        bench.layer("temperature", path)


@pytest.mark.parametrize("kind", ["rotated", "curvilinear"])
def test_15_rotated_and_curvilinear_grids_are_refused_by_name(bench, kind):
    values = np.full((4, 6), 280.0)
    if kind == "rotated":
        coords = {
            "rlat": ("rlat", np.arange(4.0), {"standard_name": "grid_latitude"}),
            "rlon": ("rlon", np.arange(6.0), {"standard_name": "grid_longitude"}),
        }
        attrs = {"units": "K", "grid_mapping": "rotated_pole"}
        pole = xr.DataArray(0, attrs={"grid_mapping_name": "rotated_latitude_longitude"})
        variables = {"v": (("rlat", "rlon"), values, attrs), "rotated_pole": pole}
        message = "rotated pole"
    else:
        coords = {}
        flat = np.zeros((4, 6))
        attrs = {"units": "K", "coordinates": "lat2 lon2"}
        variables = {
            "v": (("j", "i"), values, attrs),
            "lat2": (("j", "i"), flat, {"units": "degrees_north"}),
            "lon2": (("j", "i"), flat, {"units": "degrees_east"}),
        }
        message = "curvilinear"
    path = bench.nc("r.nc", variables, coords)
    with pytest.raises(GridError, match=message):
        bench.layer("temperature", path, variable="v")


def test_17_float32_coordinates_lose_no_cell(bench):
    lat = np.arange(3.95, 0, -0.1)
    lon = np.arange(0.05, 6, 0.1)
    grid = bench.tif(
        "g.tif", np.full((40, 60), 280.0), unit="K", transform=from_origin(0, 4, 0.1, 0.1)
    )
    values = np.random.default_rng(1).uniform(270, 300, (40, 60))
    path = bench.field("f.nc", values, lat.astype("f4"), lon.astype("f4"), units="K")
    layer = bench.layer("temperature", path, grid=grid)
    assert layer.how == "same"
    np.testing.assert_array_equal(layer.values(Window(0, 0, 40, 60)), values)


@pytest.mark.parametrize("crs", ["EPSG:32631", "EPSG:3035"])
def test_a_projected_grid_takes_a_lon_lat_layer_the_same_in_any_window(bench, crs):
    lat, lon = np.arange(60, 30, -0.5), np.arange(-10, 20, 0.5)
    values = 250.0 + 0.5 * lat[:, None] + 0.2 * lon[None, :]
    path = bench.field("c.nc", values, lat, lon, units="K")
    origin = (400_000, 5_200_000) if crs == "EPSG:32631" else (4_000_000, 3_000_000)
    grid = bench.tif(
        "p.tif", np.full((50, 70), 280.0), unit="K", crs=crs,
        transform=from_origin(*origin, 5000, 5000),
    )  # fmt: skip
    layer = bench.layer("temperature", path, grid=grid)
    whole = layer.values(Window(0, 0, 50, 70))
    assert np.isfinite(whole).all()
    for window in blocks(layer.grid, (17, 23)):
        part = whole[window.row : window.row_stop, window.col : window.col_stop]
        np.testing.assert_array_equal(layer.values(window), part)


@pytest.mark.parametrize("resampling", ["auto", "nearest"])
def test_from_another_crs_the_seam_of_a_global_file_is_no_edge(bench, resampling):
    lat, lon = np.arange(85.0, -90, -10), np.arange(-175.0, 180, 10)
    values = 280.0 + 10.0 * np.cos(np.deg2rad(lon + 50.0)) + 0.0 * lat[:, None]
    seam = bench.field("seam.nc", values, lat, lon, units="K")
    rolled = bench.field(
        "rolled.nc", np.roll(values, 18, 1), lat, np.arange(5.0, 360, 10), units="K"
    )
    grid = bench.tif(
        "p.tif", np.full((8, 30), 280.0), unit="K", crs="EPSG:32660",
        transform=from_origin(300_000, 4_000_000, 50_000, 50_000),
    )  # fmt: skip
    found = [
        bench.layer("temperature", path, grid=grid, resampling=resampling).values(
            Window(0, 0, 8, 30)
        )
        for path in (seam, rolled)
    ]
    np.testing.assert_allclose(found[0], found[1], atol=1e-9)
    assert np.ptp(found[0]) > 1.0


HALF = np.arange(24, dtype=np.float32).reshape(4, 6) + 280


def tiles(bench, **second):
    one = bench.tif("tile_w.tif", HALF[:, :3], unit="K")
    options = {"transform": from_origin(3, 4, 1, 1), "unit": "K"} | second
    two = bench.tif("tile_x.tif", HALF[:, 3:], **options)
    return one, two


@pytest.mark.parametrize("how", ["list", "pattern", "turned"])
def test_files_side_by_side_are_one_layer(bench, how):
    one, two = tiles(bench)
    path = {
        "list": [str(one), str(two)],
        "turned": [str(two), str(one)],
        "pattern": str(bench.path("tile_*.tif")),
    }[how]
    grid = bench.tif("grid.tif", HALF, unit="K")
    plan = bench.plan({"temperature": {"path": path}})
    np.testing.assert_array_equal(plan.layers["temperature"].values(Window(0, 0, 4, 6)), HALF)
    np.testing.assert_array_equal(
        plan.layers["temperature"].values(Window(1, 2, 2, 2)), HALF[1:3, 2:4]
    )
    assert any("2 files side by side" in note for note in plan.notes)
    assert grid.exists()


def test_lithology_in_tiles_gives_the_totals_of_the_whole(bench):
    codes = np.array([[1, 1, 2, 2, 1, 2]] * 4, np.uint8)
    whole = bench.tif("whole.tif", codes)
    upper = bench.tif("u.tif", codes[:1])
    lower = bench.tif("l.tif", codes[1:], transform=from_origin(0, 3, 1, 1))
    legend = str(bench.legend())
    found = [
        bench.run({"lithology": {"path": path, "legend": legend}}).totals.consumption
        for path in (str(whole), [str(upper), str(lower)])
    ]
    np.testing.assert_array_equal(*found)


def test_a_gap_between_files_is_without_data(bench):
    one = bench.tif("a.tif", HALF[:, :2], unit="K")
    two = bench.tif("b.tif", HALF[:, 4:], unit="K", transform=from_origin(4, 4, 1, 1))
    plan = bench.plan({"temperature": {"path": [str(one), str(two)]}})
    found = plan.layers["temperature"].values(Window(0, 0, 4, 6))
    assert np.isnan(found[:, 2:4]).all()
    assert np.isfinite(found).sum() == 16


@pytest.mark.parametrize(
    ("second", "error", "message"),
    [
        ({"crs": "EPSG:3857"}, GridError, "differ in CRS"),
        ({"unit": "degC"}, FileFormatError, "differ in unit"),
        ({"transform": from_origin(2, 4, 1, 1)}, GridError, "overlap by 4 x 1 cells"),
        ({"transform": from_origin(3.4, 4, 1, 1)}, GridError, "0.400 cells off the lattice"),
        ({"transform": from_origin(3, 4, 0.5, 0.5)}, GridError, "cells of 1 and 0.5"),
    ],
)
def test_files_that_do_not_fit_one_another_are_refused(bench, second, error, message):
    paths = [str(one) for one in tiles(bench, **second)]
    with pytest.raises(error, match=message):
        bench.plan({"temperature": {"path": paths}})


def test_a_pattern_that_no_file_matches_is_refused(bench):
    with pytest.raises(JobError, match="no_such"):
        bench.plan({"temperature": {"path": str(bench.path("no_such_*.tif"))}})


def test_a_listed_file_that_is_not_there_is_named(bench):
    one, _ = tiles(bench)
    with pytest.raises(MissingFileError, match="gone.tif"):
        bench.plan({"temperature": {"path": [str(one), str(bench.path("gone.tif"))]}})


@pytest.mark.parametrize("version", [2, 3])
def test_a_zarr_store_is_read_as_its_netcdf_twin_is(bench, version):
    lat, lon = [3.5, 2.5, 1.5, 0.5], np.arange(0.5, 6)
    values = HALF.astype("f8")
    twin = bench.field("t.nc", values, lat, lon, units="K")
    data = xr.open_dataset(twin, engine="h5netcdf").load()
    data.to_zarr(bench.path("t.zarr"), zarr_format=version, consolidated=False)
    data.close()
    plan = bench.plan({"temperature": {"path": str(bench.path("t.zarr"))}})
    layer = plan.layers["temperature"]
    assert layer.source.kind == "zarr"
    np.testing.assert_array_equal(layer.values(Window(0, 0, 4, 6)), HALF)


def test_a_run_with_a_zarr_store_records_the_hash_of_the_store(bench):
    lat, lon = [3.5, 2.5, 1.5, 0.5], np.arange(0.5, 6)
    twin = bench.field("q.nc", np.full((4, 6), 500.0), lat, lon, units="mm yr-1")
    with xr.open_dataset(twin, engine="h5netcdf") as data:
        data.to_zarr(bench.path("q.zarr"), zarr_format=2, consolidated=True)
    result = bench.run({"runoff": {"path": str(bench.path("q.zarr"))}})
    assert '"q.zarr"' in (result.folder / "run.json").read_text(encoding="utf-8")


def fine_and_coarse(bench):
    """Hills of 0 and 1000 m in one coarse cell each of 3 x 4 fine cells."""
    fine = np.zeros((4, 6), np.float32)
    fine[:, 1::2] = 1000.0
    coarse = bench.tif(
        "t.tif", np.full((1, 2), 290.0, np.float32), unit="K", transform=from_origin(0, 4, 3, 4)
    )
    height = bench.tif("z.tif", fine, unit="m")
    return coarse, height, fine


def test_the_lapse_rate_cools_hills_and_warms_valleys_about_the_mean_of_the_cell(bench):
    coarse, height, fine = fine_and_coarse(bench)
    plan = bench.plan(
        {
            "temperature": {
                "path": str(coarse), "downscale": "lapse-rate", "resampling": "nearest",
            },
            "elevation": {"path": str(height)},
        }
    )  # fmt: skip
    found = plan.layers["temperature"].values(Window(0, 0, 4, 6))
    means = np.repeat([[1000 / 3, 2000 / 3]], 3, axis=1)
    np.testing.assert_allclose(found, 290.0 - 6.5e-3 * (fine - means), atol=1e-6)
    part = plan.layers["temperature"].values(Window(1, 2, 2, 3))
    np.testing.assert_array_equal(part, found[1:3, 2:5])
    assert any("lapse rate of 6.5 K per km" in note for note in plan.notes)


def test_the_lapse_rate_may_be_set_and_the_coarse_elevation_given(bench):
    coarse, height, fine = fine_and_coarse(bench)
    low = bench.tif(
        "c.tif", np.full((1, 2), 500.0, np.float32), unit="m", transform=from_origin(0, 4, 3, 4)
    )
    plan = bench.plan(
        {
            "temperature": {
                "path": str(coarse),
                "downscale": "lapse-rate",
                "lapse_rate": 5.0,
                "resampling": "nearest",
            },
            "elevation": {"path": str(height)},
            "coarse_elevation": {"path": str(low)},
        }
    )
    found = plan.layers["temperature"].values(Window(0, 0, 4, 6))
    np.testing.assert_allclose(found, 290.0 - 5e-3 * (fine - 500.0), atol=1e-6)


def test_a_lapse_rate_without_elevation_is_refused(bench):
    coarse, _, _ = fine_and_coarse(bench)
    with pytest.raises(JobError, match="needs an elevation layer") as refused:
        bench.plan({"temperature": {"path": str(coarse), "downscale": "lapse-rate"}})
    assert "[layers.elevation]" in refused.value.fix
