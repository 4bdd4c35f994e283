"""What holds for any grid, cutting and polygon."""

import numpy as np
import pytest
import shapely
from hypothesis import example, given, settings
from hypothesis import strategies as st

import mapper
from mapper.coverage import cover_window, polygons_on
from mapper.engine import evaluate_block
from mapper.grid import Grid, Window, blocks, parse_crs
from mapper.job import LayerSpec
from mapper.layers.axis import around_the_earth, axis_from_centres, plan_axis, regular_axis
from mapper.layers.layer import open_layer, open_source
from mapper.layers.resample import resample
from mapper.planning import make_plan
from mapper.sums import add_up, totals
from tests.making import (
    EQUAL_AREA,
    LON_LAT,
    UTM,
    small_job,
    write_netcdf,
    write_polygons,
    write_raster,
)  # fmt: skip

GRID = Grid(parse_crs(EQUAL_AREA).to_wkt(), 0.0, 12.0, 1.0, 1.0, 12, 12)
SEEDS = st.integers(0, 2**32 - 1)


def dense(shapes, window=None, grid=GRID):
    window = window or grid.window
    names = tuple(map(str, range(len(shapes))))
    found = cover_window(polygons_on(grid, names, np.array(shapes, dtype=object)), grid, window)
    out = np.zeros((len(shapes), window.n_cells))
    cell, polygon, share = found.entries()
    np.add.at(out, (polygon, cell), share)
    return out.reshape(-1, *window.shape)


def partition(seed, n, bounds=(-1, -1, 13, 13)):
    """Cells nearest to random points, cut to a box: they share edges and leave no gap."""
    points = shapely.MultiPoint(np.random.default_rng(seed).uniform(0, 12, (n, 2)))
    box = shapely.box(*bounds)
    cells = shapely.get_parts(shapely.voronoi_polygons(points, extend_to=box))
    return [cell & box for cell in cells]


def window_of(draw):
    row, col = draw(st.integers(0, 11)), draw(st.integers(0, 11))
    return Window(row, col, draw(st.integers(1, 12 - row)), draw(st.integers(1, 12 - col)))


@given(SEEDS, st.integers(2, 12))
def test_a_partition_covers_each_cell_once(seed, n):
    assert dense(partition(seed, n)).sum(axis=0) == pytest.approx(1.0, abs=1e-9)


@given(SEEDS, st.integers(3, 9))
def test_coverage_is_the_area_of_the_intersection(seed, n):
    star = shapely.Polygon(np.random.default_rng(seed).uniform(-2, 14, (n, 2))).buffer(0)
    found = dense([star])[0]
    cells = shapely.box(
        *np.broadcast_arrays(
            np.arange(12)[None, :], np.arange(11, -1, -1)[:, None],
            np.arange(1, 13)[None, :], np.arange(12, 0, -1)[:, None],
        )
    )  # fmt: skip
    assert found == pytest.approx(shapely.area(shapely.intersection(cells, star)), abs=2e-9)


@given(SEEDS, st.data())
def test_coverage_has_the_same_bits_in_any_window(seed, data):
    shapes = partition(seed, 6)
    window = window_of(data.draw)
    rows, cols = slice(window.row, window.row_stop), slice(window.col, window.col_stop)
    assert np.array_equal(dense(shapes, window), dense(shapes)[:, rows, cols])


@given(SEEDS)
def test_splitting_a_region_keeps_the_total(seed):
    parts = partition(seed, 5, bounds=(1.3, 2.7, 10.1, 9.6))
    whole = dense([shapely.box(1.3, 2.7, 10.1, 9.6)])[0]
    assert dense(parts).sum(axis=0) == pytest.approx(whole, abs=1e-9)


@given(SEEDS, st.integers(1, 200), st.data())
def test_a_sum_does_not_depend_on_order_or_grouping(seed, n, data):
    draw = np.random.default_rng(seed)
    keys = draw.integers(0, 4, n)
    values = draw.normal(0, 1, n) * 10.0 ** draw.integers(-12, 4, n)
    whole = add_up(keys, values, 4, -40)
    order = draw.permutation(n)
    cut = data.draw(st.integers(0, n))
    one, other = order[:cut], order[cut:]
    parts = add_up(keys[one], values[one], 4, -40) + add_up(keys[other], values[other], 4, -40)
    assert totals(parts, -40).tolist() == totals(whole, -40).tolist()


def plans(axis, start, stop, method):
    edges = np.linspace(0.0, 9.0, 8)
    part = edges[start : stop + 1]
    return plan_axis(axis, part, 0.5 * (part[1:] + part[:-1]), method, sphere=False)


@given(
    SEEDS,
    st.sampled_from(["nearest", "bilinear", "mean"]),
    st.sampled_from([1 / 3, 0.7, 1.0, 2.3]),
    st.integers(0, 6),
    st.data(),
)
def test_resampling_has_the_same_bits_in_any_window(seed, method, step, start, data):
    stop = data.draw(st.integers(start + 1, 7))
    axis = regular_axis(-0.2, step, int(9.5 / step))
    draw = np.random.default_rng(seed)
    values = draw.normal(280, 9, (axis.size, axis.size))
    valid = draw.random(values.shape) > 0.2

    def on(first, last):
        one = plans(axis, first, last, method)
        return resample(
            one, one, values[one.start : one.stop, one.start : one.stop],
            valid[one.start : one.stop, one.start : one.stop], method,
        )  # fmt: skip

    part, whole = on(start, stop), on(0, 7)
    assert np.array_equal(part, whole[start:stop, start:stop], equal_nan=True)


@given(SEEDS, st.integers(1, 9), st.integers(1, 15))
def test_the_area_mean_keeps_the_integral(seed, n_target, n_source):
    values = np.random.default_rng(seed).normal(0, 1, (n_source, n_source))
    axis = regular_axis(0.0, 9.0 / n_source, n_source)
    edges = np.linspace(0.0, 9.0, n_target + 1)
    one = plan_axis(axis, edges, 0.5 * (edges[1:] + edges[:-1]), "mean", sphere=False)
    found = resample(one, one, values, np.ones(values.shape, bool), "mean")
    assert found.mean() == pytest.approx(values.mean(), abs=1e-12)


@given(SEEDS, st.integers(1, 11), st.sampled_from(["nearest", "bilinear", "mean"]))
def test_rolled_longitudes_give_what_unrolled_ones_give(seed, roll, method):
    values = np.random.default_rng(seed).normal(280, 9, 12)
    lon = np.arange(-165.0, 180.0, 30.0)
    edges = np.arange(-200.0, 201.0, 8.0)[np.abs(np.arange(-200.0, 201.0, 8.0)) <= 180]

    def on(lon, values):
        axis = around_the_earth(axis_from_centres(lon, None, longitude=True, where="lon"))
        plan = plan_axis(axis, edges, 0.5 * (edges[1:] + edges[:-1]), method, sphere=False)
        return plan.weights @ values[plan.file_index]

    turned = np.roll(np.where(lon < 0, lon + 360, lon), 0)
    plain = on(lon, values)
    assert on(np.roll(lon, roll), np.roll(values, roll)) == pytest.approx(plain, abs=1e-9)
    order = np.argsort(turned)
    assert on(turned[order], values[order]) == pytest.approx(plain, abs=1e-9)


@pytest.mark.parametrize("how", ["same", "mean", "bilinear"])
def test_south_up_gives_what_north_up_gives(tmp_path, how):
    field = np.random.default_rng(5).uniform(270, 290, (6, 6))
    cell = {"same": 1000.0, "mean": 3000.0, "bilinear": 700.0}[how]
    n = int(6000 // cell)
    grid = Grid(parse_crs(EQUAL_AREA).to_wkt(), 0.0, 6000.0, cell, cell, n, n)
    found = []
    for south_up in (False, True):
        path = write_raster(tmp_path / f"{south_up}.tif", field, unit="K", south_up=south_up)
        spec = LayerSpec(name="temperature", path=str(path))
        layer = open_layer(spec, open_source(spec), grid)
        assert layer.how == how
        found.append(layer.values(grid.window))
    assert np.array_equal(*found)


class Mixed:
    """A plan and its evaluation in one block; shows itself briefly where a test fails."""

    def __init__(self, plan):
        self.plan = plan
        self.maps, self.sums = evaluate_block(plan, plan.grid.window)

    def __repr__(self):
        return "the mixed plan"


@pytest.fixture(scope="module", params=["raster", "polygons"])
def mixed_plan(request, tmp_path_factory):
    """23 x 31 cells; layers in other CRS and resolutions, holes, rock by raster or polygons."""
    folder = tmp_path_factory.mktemp("mixed")
    draw = np.random.default_rng(11)
    job = small_job(
        folder,
        layers={
            "lithology": {"path": "rock.tif", "legend": "legend.csv"}
            if request.param == "raster"
            else {"path": "rock.gpkg", "column": "code", "legend": "legend.csv"},
            "runoff": {"path": "runoff.tif"},
            "temperature": {"path": "warm.nc"},
            "vegetation": {"path": "cover.tif"},
        },
        law={"default": "product", "by_rock": {"basalt": "dessert-2003"}},
        grid={"crs": LON_LAT, "resolution": 0.1, "bounds": [10.0, 44.7, 13.1, 47.0]},
    )
    codes = draw.integers(1, 5, (80, 110)).astype("uint8")
    write_raster(folder / "rock.tif", codes, left=9.97, top=47.1, cell=0.031, crs=LON_LAT, nodata=4)
    box = shapely.box(10.05, 44.5, 12.95, 46.9)
    points = shapely.MultiPoint(draw.uniform([10, 44.7], [13.1, 47.0], (25, 2)))
    cells = shapely.get_parts(shapely.voronoi_polygons(points, extend_to=box))
    write_polygons(
        folder / "rock.gpkg",
        {f"{n % 3 + 1}.{'0' * (n + 1)}": cell & box for n, cell in enumerate(cells)},
        column="code", crs=LON_LAT,
    )  # fmt: skip
    runoff = draw.uniform(100, 2000, (60, 60))
    runoff[20:25, 30:50] = np.nan
    write_raster(folder / "runoff.tif", runoff, left=8e4, top=5.25e6, cell=6000.0, crs=UTM,
                 unit="mm yr-1")  # fmt: skip
    write_netcdf(folder / "warm.nc", draw.uniform(270, 290, (8, 9)), lat=np.arange(43, 51),
                 lon=np.arange(7, 16))  # fmt: skip
    cover = draw.uniform(0, 1, (50, 70))
    cover[5:9, 8:30] = np.nan
    write_raster(
        folder / "cover.tif", cover, left=9.99, top=47.02, cell=0.05, crs=LON_LAT, unit="1"
    )
    areas = [
        cell & shapely.box(10.4, 44.9, 12.7, 46.8)
        for cell in shapely.get_parts(
            shapely.voronoi_polygons(
                shapely.MultiPoint(draw.uniform([10.4, 44.9], [12.7, 46.8], (6, 2))),
                extend_to=box,
            )
        )
    ]
    write_polygons(folder / "regions.gpkg", {f"r{n}": one for n, one in enumerate(areas)},
                   crs=LON_LAT)  # fmt: skip
    plan = make_plan(mapper.load_job(job))
    assert {layer.how for layer in plan.layers.values()} == {"points", "bilinear", "mean"}
    return Mixed(plan)


@settings(max_examples=5)
@given(st.tuples(st.integers(1, 23), st.integers(1, 31)))
@example((4, 5))  # leaves a block of one column at the right
def test_any_block_shape_gives_the_same_maps_and_the_same_sums(mixed_plan, shape):
    plan, whole, sums = mixed_plan.plan, mixed_plan.maps, mixed_plan.sums
    # a handful of blocks is enough to see a seam, and many blocks of a cell take long
    shape = (max(shape[0], 8), max(shape[1], 10)) if shape != (4, 5) else shape
    added = None
    for window in blocks(plan.grid, shape):
        maps, part = evaluate_block(plan, window)
        rows, cols = slice(window.row, window.row_stop), slice(window.col, window.col_stop)
        for one, all_of_it in zip(maps, whole, strict=True):
            assert np.array_equal(one, all_of_it[rows, cols], equal_nan=one.dtype.kind == "f")
        added = part if added is None else added.plus(part)
    for one, other in zip(added, sums, strict=True):
        assert np.array_equal(one, other)


def test_the_mixed_plan_has_holes_and_whole_cells(mixed_plan):
    maps = mixed_plan.maps
    assert 0 < np.isnan(maps.consumption).sum() < maps.consumption.size / 2
    assert len(np.unique(maps.flags)) > 2
