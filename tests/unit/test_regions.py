"""Regions: read, checked, and joined with cells."""

import geopandas as gpd
import numpy as np
import pandas as pd
import pyogrio
import pytest
import shapely

from mapper.errors import GridError, ManyProblemsError, MissingFileError, RegionError
from mapper.grid import Grid, parse_crs
from mapper.job import RegionsSpec
from mapper.regions import open_regions, region_cells
from tests.making import EQUAL_AREA, LON_LAT, write_polygons

GRID = Grid(parse_crs(EQUAL_AREA).to_wkt(), 0.0, 3.0, 1.0, 1.0, 3, 3)
WEST, EAST = shapely.box(0, 0, 1.5, 3), shapely.box(1.5, 0, 2.75, 3)


def opened(tmp_path, shapes, grid=GRID, column="name", **about):
    path = write_polygons(tmp_path / "regions.gpkg", shapes, column=column, **about)
    return open_regions(RegionsSpec(path=str(path), id=column), grid)


def parts(regions, grid=GRID):
    """Part of each cell in each region, 'outside' last, rows and columns behind."""
    cells = region_cells(regions, grid, grid.window)
    pieces = cells.split(np.arange(grid.n_cells))
    dense = np.zeros((regions.n_keys, grid.n_cells))
    np.add.at(dense, (pieces.region, pieces.entry), pieces.part)
    return dense.reshape(-1, *grid.shape)


def test_what_lies_in_no_region_is_outside(tmp_path):
    found = parts(opened(tmp_path, {"west": WEST, "east": EAST}))
    assert found[:, 0].tolist() == [[1, 0.5, 0], [0, 0.5, 0.75], [0, 0, 0.25]]


def test_without_regions_everything_is_one():
    cells = region_cells(None, GRID, GRID.window)
    pieces = cells.split(np.array([0, 4, 4]))
    assert pieces.region.tolist() == [0, 0, 0]
    assert pieces.part.tolist() == [1, 1, 1]


def test_an_enclave_and_the_hole_round_it_share_no_ground(tmp_path):
    inner = shapely.box(1, 1, 2, 2)
    found = parts(opened(tmp_path, {"outer": shapely.box(0, 0, 3, 3) - inner, "inner": inner}))
    assert found[0].sum() == 8.0
    assert found[1].sum() == 1.0


@pytest.mark.parametrize(
    "inner", [shapely.box(1, 1, 2, 2), shapely.box(0.5, 0.5, 0.75, 0.75), shapely.box(0, 0, 3, 3)]
)
@pytest.mark.parametrize("turned", [False, True])
def test_regions_that_overlap_are_refused_with_the_place(tmp_path, inner, turned):
    shapes = {"outer": shapely.box(0, 0, 3, 3), "inner": inner}
    shapes = dict(reversed(shapes.items())) if turned else shapes
    with pytest.raises(RegionError, match=r"regions overlap: they cover .* of the cell at x"):
        parts(opened(tmp_path, shapes))


@pytest.mark.parametrize("gap", [1e-7, -1e-7])
def test_slivers_at_a_shared_border_are_no_overlap_and_lose_nothing(tmp_path, gap):
    shapes = {"west": shapely.box(0, 0, 1.5, 3), "east": shapely.box(1.5 + gap, 0, 3, 3)}
    found = parts(opened(tmp_path, shapes))
    assert found.sum(axis=0) == pytest.approx(1.0, abs=1e-15)
    assert found[2].sum() == 0.0


@pytest.mark.parametrize("gap", [1e-7, -1e-7])
def test_slivers_along_a_cell_border_lose_nothing(tmp_path, gap):
    shapes = {"west": shapely.box(0, 0, 1, 3), "east": shapely.box(1 + gap, 0, 3, 3)}
    found = parts(opened(tmp_path, shapes))
    assert found.sum(axis=0) == pytest.approx(1.0, abs=1e-15)
    assert found[0, :, 0].min() > 0.999_999
    assert found[2].sum() == 0.0


def test_regions_that_miss_the_grid_are_refused_with_both_extents(tmp_path):
    with pytest.raises(RegionError, match=r"no region touches the grid: regions x 10\.\.11") as c:
        opened(tmp_path, {"far": shapely.box(10, 10, 11, 11)})
    assert "right crs" in c.value.fix


def test_all_that_is_wrong_with_the_names_is_said_at_once(tmp_path):
    shapes = {"outside": WEST, "x": EAST}
    path = write_polygons(tmp_path / "r.gpkg", shapes)
    frame = gpd.read_file(path)
    frame = frame.iloc[[0, 1, 1]].reset_index(drop=True)
    frame.to_file(path, driver="GPKG", engine="pyogrio")
    with pytest.raises(ManyProblemsError) as caught:
        open_regions(RegionsSpec(path=str(path), id="name"), GRID)
    assert [one.problem for one in caught.value.problems] == [
        "1 ids occur more than once, first 'x'",
        "a region is called 'outside', which the tables use themselves",
    ]


@pytest.mark.parametrize("names", [[1.0, float("nan")], ["a", None]])
def test_a_region_without_an_id_is_refused_with_its_number(tmp_path, names):
    with pytest.raises(RegionError, match="feature 2 has no 'name'"):
        opened(tmp_path, dict(zip(names, (WEST, EAST), strict=True)))


def test_a_whole_number_as_id_is_written_as_one(tmp_path):
    assert opened(tmp_path, {7.0: WEST, 8.0: EAST}).names == ("7", "8")


def test_a_wrong_id_column_is_refused_with_the_nearest(tmp_path):
    path = write_polygons(tmp_path / "r.gpkg", {"west": WEST}, column="district")
    with pytest.raises(RegionError, match="no column 'distrct'; there are: district") as caught:
        open_regions(RegionsSpec(path=str(path), id="distrct"), GRID)
    assert caught.value.fix == '"district"'


def test_a_missing_file_is_named(tmp_path):
    with pytest.raises(MissingFileError, match=r"there is no file 'r\.gpkg'"):
        open_regions(RegionsSpec(path=str(tmp_path / "r.gpkg"), id="name"), GRID)


def test_a_missing_crs_is_refused(tmp_path):
    with pytest.raises(GridError, match="does not say its CRS") as caught:
        opened(tmp_path, {"west": WEST}, crs=None)
    assert "under [regions]" in caught.value.fix


def test_lines_are_refused_as_regions(tmp_path):
    with pytest.raises(RegionError, match="feature 1 is a LineString, and a polygon is needed"):
        opened(tmp_path, {"road": shapely.LineString([(0, 0), (3, 3)])})


def test_several_layers_in_a_file_are_refused_until_one_is_named(tmp_path):
    path = write_polygons(tmp_path / "r.gpkg", {"west": WEST})
    frame = gpd.GeoDataFrame({"name": ["east"]}, geometry=[EAST], crs=EQUAL_AREA)
    frame.to_file(path, layer="second", driver="GPKG", engine="pyogrio")
    with pytest.raises(RegionError, match="holds 2 layers: r, second") as caught:
        open_regions(RegionsSpec(path=str(path), id="name"), GRID)
    assert caught.value.fix == 'layer = "r"'
    named = open_regions(RegionsSpec(path=str(path), id="name", layer="second"), GRID)
    assert named.names == ("east",)


def test_a_table_without_shapes_is_refused(tmp_path):
    path = tmp_path / "r.gpkg"
    pyogrio.write_dataframe(pd.DataFrame({"name": ["a"]}), path, driver="GPKG")
    with pytest.raises(RegionError, match="a table without shapes"):
        open_regions(RegionsSpec(path=str(path), id="name"), GRID)


def test_a_shape_that_crosses_itself_is_repaired_and_noted(tmp_path):
    bow = shapely.Polygon([(0, 0), (3, 3), (3, 0), (0, 3)])
    regions = opened(tmp_path, {"bow": bow})
    assert "'bow' crossed itself" in regions.notes[0]
    assert parts(regions)[0].sum() == pytest.approx(4.5, abs=1e-12)


def test_regions_in_another_crs_are_brought_over(tmp_path):
    regions = opened(
        tmp_path,
        {"west": shapely.box(0.0, 0.0, 0.5, 1.0)},
        grid=Grid(parse_crs(EQUAL_AREA).to_wkt(), 0.0, 2e5, 1e4, 1e4, 20, 20),
        crs=LON_LAT,
    )
    assert "edges divided finely" in regions.notes[0]
    # half a degree of longitude in this projection is 48 243 m (computed with PROJ)
    assert regions.shapes[0].bounds[2] == pytest.approx(48_243.0, abs=1.0)
