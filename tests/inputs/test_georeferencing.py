"""Georeferencing that files get wrong, and what is done about it."""

from __future__ import annotations

import numpy as np
import pytest
import rasterio
from affine import Affine
from rasterio.transform import from_origin

from mapper.errors import GridError
from mapper.grid import Window, cell_areas

RAMP = np.arange(24, dtype=np.float32).reshape(4, 6) + 280
WHOLE = Window(0, 0, 4, 6)


def test_01_a_south_up_raster_is_turned_and_equals_its_north_up_twin(bench):
    up = bench.tif("up.tif", RAMP, unit="K", transform=Affine(1, 0, 0, 0, -1, 6))
    down = bench.tif("down.tif", RAMP[::-1], unit="K", transform=Affine(1, 0, 0, 0, 1, 2))
    first, second = bench.layer("temperature", up), bench.layer("temperature", down)
    assert first.grid == second.grid
    np.testing.assert_array_equal(first.values(WHOLE), RAMP)
    np.testing.assert_array_equal(second.values(WHOLE), RAMP)


def test_01_totals_of_a_south_up_lithology_equal_those_of_its_twin(bench):
    codes = np.array([[1, 1, 1, 2, 2, 2]] * 3 + [[2] * 6], dtype=np.uint8)
    twins = [
        bench.tif("up.tif", codes, transform=Affine(1, 0, 0, 0, -1, 5)),
        bench.tif("down.tif", codes[::-1], transform=Affine(1, 0, 0, 0, 1, 1)),
    ]
    legend = str(bench.legend())
    found = [bench.run({"lithology": {"path": str(p), "legend": legend}}).totals for p in twins]
    np.testing.assert_array_equal(found[0].consumption, found[1].consumption)
    assert found[0].consumption.sum() > 0


@pytest.mark.parametrize("shear", [(0.1, 0.0), (0.0, 0.1)])
def test_02_a_rotated_or_sheared_grid_is_refused(bench, shear):
    path = bench.tif("t.tif", RAMP, unit="K", transform=Affine(1, shear[0], 0, shear[1], -1, 4))
    with pytest.raises(GridError, match=r"rotated or sheared.*0\.1") as refused:
        bench.layer("temperature", path)
    assert "gdalwarp" in refused.value.fix


def test_03_a_raster_without_crs_is_refused_with_the_line_to_write(bench):
    path = bench.tif("t.tif", RAMP, unit="K", crs=None)
    with pytest.raises(GridError, match="does not say its CRS") as refused:
        bench.layer("temperature", path)
    assert refused.value.fix.startswith('crs = "EPSG:4326"')


def test_03_with_the_crs_in_the_job_it_is_read_and_noted(bench):
    path = bench.tif("t.tif", RAMP, unit="K", crs=None)
    layer = bench.layer("temperature", path, crs="EPSG:4326")
    np.testing.assert_array_equal(layer.values(WHOLE), RAMP)
    assert any("EPSG:4326 is taken from the job" in note for note in layer.source.notes)


@pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning")
def test_04_a_raster_without_a_transform_is_refused(bench):
    path = bench.tif("t.tif", RAMP, unit="K", transform=None)
    with pytest.raises(GridError, match="no georeferencing"):
        bench.layer("temperature", path)


ESRI = (
    'GEOGCS["GCS_WGS_1984",DATUM["D_WGS_1984",SPHEROID["WGS_1984",6378137.0,298.257223563]],'
    'PRIMEM["Greenwich",0.0],UNIT["Degree",0.0174532925199433]]'
)


@pytest.mark.parametrize("crs", ["OGC:CRS84", ESRI, "EPSG:4979"])
def test_05_spellings_of_longitude_and_latitude_are_one_family(bench, crs):
    grid = bench.tif("grid.tif", RAMP, unit="K")
    path = bench.tif("t.tif", RAMP, unit="K")
    layer = bench.layer("temperature", path, grid=grid, crs=crs)
    assert layer.how == "same"
    np.testing.assert_array_equal(layer.values(WHOLE), RAMP)


def test_06_another_datum_is_transformed_and_the_shift_is_told(bench):
    grid = bench.tif("grid.tif", RAMP, unit="K")
    path = bench.tif("t.tif", RAMP, unit="K", crs="EPSG:4230")
    layer = bench.layer("temperature", path, grid=grid)
    assert layer.how == "points"
    assert any("shift" in note and " m" in note for note in layer.source.notes)
    inner = Window(1, 1, 2, 4)
    np.testing.assert_allclose(layer.values(inner), RAMP[1:3, 1:5], atol=0.02)


def test_08_a_raster_whose_points_stand_for_areas_lies_half_a_cell_off_its_tie_point(bench):
    area = bench.tif("area.tif", RAMP, unit="K")
    point = bench.tif("point.tif", RAMP, unit="K")
    with rasterio.open(point, "r+") as file:
        file.update_tags(AREA_OR_POINT="Point")
    one, two = bench.layer("temperature", area), bench.layer("temperature", point)
    assert one.grid == two.grid
    np.testing.assert_array_equal(one.values(WHOLE), two.values(WHOLE))


def node_registered(bench):
    values = np.tile(np.arange(280.0, 289.0, dtype=np.float32), (5, 1))
    return bench.tif("nodes.tif", values, unit="K", transform=from_origin(-202.5, 112.5, 45, 45))


def test_08_nodes_that_repeat_the_first_meridian_are_refused_until_the_job_says_so(bench):
    with pytest.raises(GridError, match="405 degrees") as refused:
        bench.layer("temperature", node_registered(bench))
    assert refused.value.fix.startswith('registration = "node"')


def test_08_with_registration_the_repeated_column_is_dropped_and_the_poles_clipped(bench):
    layer = bench.layer("temperature", node_registered(bench), registration="node")
    assert layer.source.x.size == 8
    assert layer.source.x.period == 360.0
    assert (layer.source.y.edges[0], layer.source.y.edges[-1]) == (-90.0, 90.0)
    np.testing.assert_array_equal(
        layer.values(Window(2, 0, 1, 8)), [np.arange(280.0, 288.0, dtype=np.float32)]
    )


def test_14_cells_half_beyond_a_pole_are_clipped_and_the_earth_keeps_its_area(bench):
    values = np.full((181, 4), 280.0, dtype=np.float32)
    path = bench.tif("t.tif", values, unit="K", transform=from_origin(-180, 90.5, 90, 1))
    layer = bench.layer("temperature", path)
    assert layer.how == "same"
    area = cell_areas(layer.grid, layer.grid.window).sum() * 4
    assert area == pytest.approx(510_065_621_724_088, rel=1e-12)


def test_14_cells_further_beyond_a_pole_are_refused(bench):
    values = np.full((182, 4), 280.0, dtype=np.float32)
    path = bench.tif("t.tif", values, unit="K", transform=from_origin(-180, 91.5, 90, 1))
    with pytest.raises(GridError, match=r"1\.5 degrees beyond a pole"):
        bench.layer("temperature", path)


def test_16_one_row_without_bounds_is_refused_in_netcdf_and_read_in_geotiff(bench):
    nc = bench.field("row.nc", [[280.0, 281.0]], [0.5], [0.5, 1.5], units="K")
    with pytest.raises(GridError, match="one coordinate alone"):
        bench.layer("temperature", nc)
    tif = bench.tif("row.tif", np.array([[280.0, 281.0]]), unit="K")
    np.testing.assert_array_equal(
        bench.layer("temperature", tif).values(Window(0, 0, 1, 2)), [[280.0, 281.0]]
    )


def test_18_a_layer_that_covers_part_of_the_grid_leaves_the_rest_without_data(bench):
    half = bench.tif("half.tif", np.full((4, 3), 500.0, dtype=np.float32), unit="mm yr-1")
    found = bench.run({"runoff": {"path": str(half)}}).totals
    assert found.valid_area.sum() == pytest.approx(found.rock_area.sum() / 2, rel=1e-12)


def test_18_a_layer_that_misses_the_grid_is_refused_with_both_extents(bench):
    far = bench.tif("far.tif", RAMP, unit="mm yr-1", transform=from_origin(100, 4, 1, 1))
    with pytest.raises(GridError, match=r"x 100\.\.106.*against x 0\.\.6"):
        bench.plan({"runoff": {"path": str(far)}})


def test_19_a_grid_across_the_antimeridian_is_one_grid(bench):
    legend = str(bench.legend())
    codes = np.ones((4, 6), dtype=np.uint8)
    across = bench.tif("a.tif", codes, transform=from_origin(177, 4, 1, 1))
    east = np.arange(0.5, 360, 1.0)
    runoff = bench.field(
        "r.nc", np.tile(east * 2, (10, 1)), np.arange(-4.5, 5.5), east, units="mm yr-1"
    )
    plan = bench.plan(
        {
            "lithology": {"path": str(across), "legend": legend},
            "runoff": {"path": str(runoff)},
        }
    )
    np.testing.assert_array_equal(
        plan.layers["runoff"].values(Window(0, 0, 1, 6)), [(np.arange(177, 183) + 0.5) * 2]
    )


@pytest.mark.parametrize("shape", [(1, 1), (43_200, 1), (300, 517)])
def test_21_odd_shapes_are_read_whole(bench, shape):
    rng = np.random.default_rng(1)
    values = rng.uniform(280, 300, shape).astype(np.float32)
    options = {"tiled": True, "blockxsize": 256, "blockysize": 256} if shape[1] > 1 else {}
    path = bench.tif(
        "t.tif", values, unit="K", transform=from_origin(0, 80, 1 / 300, 1 / 300), **options
    )
    layer = bench.layer("temperature", path)
    np.testing.assert_array_equal(layer.values(Window(0, 0, *shape)), values)
