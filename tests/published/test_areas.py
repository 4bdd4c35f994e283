"""Areas and coverage against libraries that nobody here wrote."""

import exactextract
import geopandas as gpd
import numpy as np
import pytest
import shapely
from pyproj import Geod, Transformer

from mapper.coverage import cover_window, polygons_on
from mapper.grid import Grid, band_areas, cell_areas, parse_crs
from tests.making import LON_LAT, UTM, write_raster

WGS84_KM2 = 510_065_621.724
"""Surface of the WGS84 ellipsoid, as printed in texts on geodesy."""


def geodesic_area(lon, lat):
    area, _ = Geod(ellps="WGS84").polygon_area_perimeter(lon, lat)
    return abs(area)


@pytest.mark.parametrize("step", [1.0, 0.25, 7.5])
def test_the_cells_of_the_world_add_up_to_the_ellipsoid(step):
    n_rows, n_cols = round(180 / step), round(360 / step)
    grid = Grid(parse_crs(LON_LAT).to_wkt(), -180.0, 90.0, step, step, n_rows, n_cols)
    total = cell_areas(grid, grid.window).sum() * n_cols / 1e6
    assert total == pytest.approx(WGS84_KM2, abs=0.001)


@pytest.mark.parametrize("top", [90.0, 75.0, 45.5, 0.25, -30.0, -89.5])
def test_a_cell_has_the_area_of_its_geodesic_polygon(top):
    """Source: pyproj.Geod. Parallels are no geodesics, so they are divided a thousandfold."""
    grid = Grid(parse_crs(LON_LAT).to_wkt(), 12.0, top, 0.5, 0.5, 1, 1)
    along = np.linspace(12.0, 12.5, 1001)
    lon = np.concatenate([along, along[::-1]])
    lat = np.concatenate([np.full(1001, top), np.full(1001, top - 0.5)])
    found = cell_areas(grid, grid.window)[0, 0]
    assert found == pytest.approx(geodesic_area(lon, lat), rel=1e-7)


def test_a_sphere_has_the_area_of_a_sphere():
    areas = band_areas(parse_crs("+proj=longlat +R=6371000"), np.array([90.0, 0.0, -90.0]))
    assert areas == pytest.approx([2 * np.pi * 6371000.0**2] * 2, rel=1e-15)


@pytest.mark.parametrize(
    ("crs", "left", "top"),
    [
        (UTM, 2e5, 5.5e6),
        ("EPSG:3857", 1e6, 8e6),
        ("EPSG:3413", -4e5, -1e6),
        ("EPSG:2154", 7e5, 6.6e6),
    ],
)
def test_a_projected_cell_has_the_area_of_its_geodesic_polygon(crs, left, top):
    """Source: pyproj.Geod on the cell's outline brought to longitude and latitude."""
    grid = Grid(parse_crs(crs).to_wkt(), left, top, 1000.0, 1000.0, 30, 30)
    areas = np.broadcast_to(cell_areas(grid, grid.window), (30, 30))
    outline = Transformer.from_crs(crs, LON_LAT, always_xy=True)
    ring = shapely.segmentize(shapely.box(0, -1000, 1000, 0), 50.0).exterior.coords
    for row, col in ((0, 0), (13, 7), (29, 29)):
        x, y = (np.array(ring) + np.array([left + 1000 * col, top - 1000 * row])).T
        assert areas[row, col] == pytest.approx(geodesic_area(*outline.transform(x, y)), rel=2e-6)


# ---- coverage ---------------------------------------------------------------------------------

GRID = Grid(parse_crs(UTM).to_wkt(), 0.0, 20.0, 1.0, 1.0, 20, 20)


def ours(shape, grid=GRID):
    polygons = polygons_on(grid, ("a",), np.array([shape], dtype=object))
    cell, _, share = cover_window(polygons, grid, grid.window).entries()
    dense = np.zeros(grid.n_cells)
    dense[cell] = share
    return dense.reshape(grid.shape)


def by_shapely(shape):
    rows, cols = np.mgrid[0:20, 0:20]
    cells = shapely.box(cols, 19 - rows, cols + 1, 20 - rows)
    return shapely.area(shapely.intersection(cells, shape))


def by_exactextract(tmp_path, shape):
    path = write_raster(tmp_path / "ones.tif", np.ones((20, 20)), cell=1.0, crs=UTM)
    frame = gpd.GeoDataFrame(geometry=[shape], crs=UTM)
    found = exactextract.exact_extract(str(path), frame, ["cell_id", "coverage"], output="pandas")
    dense = np.zeros(400)
    dense[found["cell_id"][0]] = found["coverage"][0]
    return dense.reshape(20, 20)


def star(seed):
    """A star with 11 points and a hole, no vertex on a corner of a cell."""
    draw = np.random.default_rng(seed)
    angle = np.sort(draw.uniform(0, 2 * np.pi, 11))
    reach = draw.uniform(4, 9, 11)
    outer = np.stack([10 + reach * np.cos(angle), 10 + reach * np.sin(angle)], axis=1)
    return shapely.Polygon(outer) - shapely.Point(10.1, 9.9).buffer(1.7)


@pytest.mark.parametrize("seed", range(5))
def test_coverage_is_that_of_shapely_and_of_exactextract(tmp_path, seed):
    shape = star(seed)
    assert ours(shape) == pytest.approx(by_shapely(shape), abs=1e-9)
    # exactextract keeps coverage in single precision
    assert ours(shape) == pytest.approx(by_exactextract(tmp_path, shape), abs=1e-6)


def test_a_vertex_on_a_corner_of_cells_loses_nothing():
    """Source: shapely. The polygons turn at corners of cells, where exactextract 0.3.0 may lose
    a whole cell; therefore it is not the reference here."""
    for shape in (
        shapely.Polygon([(2, 2), (9, 5), (12, 12), (5, 9)]),
        shapely.Polygon([(1, 1), (8, 1), (8, 8), (5, 5), (1, 8)]),
        shapely.Polygon([(3, 3), (7, 3), (5, 5), (7, 7), (3, 7)]),
    ):
        assert ours(shape) == pytest.approx(by_shapely(shape), abs=1e-12)
        assert ours(shape).sum() == pytest.approx(shape.area, abs=1e-10)


# ---- real geology -----------------------------------------------------------------------------

CLASS_KM2 = {
    # map2loop 3.5.1, Hamersley geology by rocktype1 (Geological Survey of Western Australia)
    "igneous mafic volcanic": 857.76,
    "sedimentary siliciclastic": 532.27,
    "sedimentary other chemical or biochemical": 447.60,
    "sedimentary carbonate": 138.53,
    "meta-igneous felsic intrusive": 134.09,
    "igneous mafic intrusive": 71.40,
    "igneous felsic volcanic": 65.22,
}


@pytest.fixture(scope="module")
def geology(open_data):
    return gpd.read_file(open_data / "prepared" / "hamersley_geology.gpkg")


def test_the_real_geology_is_covered_exactly(geology):
    west, _, _, north = geology.total_bounds
    grid = Grid(
        parse_crs("EPSG:28350").to_wkt(), west - 333.0, north + 271.0, 500.0, 500.0, 150, 150
    )
    polygons = polygons_on(grid, tuple(geology["rocktype1"]), geology.geometry.to_numpy())
    cell, polygon, share = cover_window(polygons, grid, grid.window).entries()
    km2 = share * 0.25
    assert km2.sum() == pytest.approx(2246.882, abs=0.0006)
    by_class = geology["rocktype1"].to_numpy()[polygon]
    found = {name: km2[by_class == name].sum() for name in CLASS_KM2}
    assert found == pytest.approx(CLASS_KM2, abs=0.006)
    # an exact partition: no cell is covered more than once
    assert np.bincount(cell, weights=share).max() <= 1.0 + 1e-6
    by_polygon = np.bincount(polygon, weights=km2, minlength=len(geology))
    assert by_polygon == pytest.approx(geology.area.to_numpy() / 1e6, abs=1e-6)


def test_the_real_geology_agrees_with_exactextract(geology, tmp_path):
    west, south, east, north = geology.total_bounds
    n_rows, n_cols = (int((high - low) // 700) + 2 for low, high in ((south, north), (west, east)))
    path = write_raster(tmp_path / "ones.tif", np.ones((n_rows, n_cols)), left=west - 433.7,
                        top=north + 371.3, cell=700.0, crs="EPSG:28350")  # fmt: skip
    theirs = exactextract.exact_extract(str(path), geology, ["count"], output="pandas")["count"]
    grid = Grid(parse_crs("EPSG:28350").to_wkt(), west - 433.7, north + 371.3, 700.0, 700.0,
                n_rows, n_cols)  # fmt: skip
    polygons = polygons_on(grid, tuple(map(str, geology.index)), geology.geometry.to_numpy())
    _, polygon, share = cover_window(polygons, grid, grid.window).entries()
    found = np.bincount(polygon, weights=share, minlength=len(geology))
    assert found == pytest.approx(theirs.to_numpy(), rel=1e-5, abs=1e-5)


def test_the_geodesic_area_of_the_real_geology_follows_from_the_projection(geology):
    """Source: 2248.586 km2, geodesic, by pyproj on the same polygons."""
    west, _, _, north = geology.total_bounds
    grid = Grid(parse_crs("EPSG:28350").to_wkt(), west, north, 500.0, 500.0, 150, 150)
    polygons = polygons_on(grid, tuple(map(str, geology.index)), geology.geometry.to_numpy())
    cell, _, share = cover_window(polygons, grid, grid.window).entries()
    areas = np.broadcast_to(cell_areas(grid, grid.window), grid.shape).ravel()
    assert (areas[cell] * share).sum() / 1e6 == pytest.approx(2248.586, rel=2e-6)
