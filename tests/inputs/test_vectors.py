"""Polygons as people draw them, name them and save them."""

from __future__ import annotations

import csv
import itertools
import math

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import shapely
from rasterio.transform import from_origin
from shapely.geometry import LineString, MultiPolygon, Polygon, box

from mapper.errors import FileFormatError, GridError, MapperError, RegionError
from mapper.grid import Window
from mapper.rocks import ROCK_NAMES

ALL = box(0, 0, 6, 4)


def regions(bench, shapes, names, *, name="regions.gpkg", crs="EPSG:4326", **how):
    frame = gpd.GeoDataFrame({"id": names}, geometry=list(shapes), crs=crs)
    frame.to_file(bench.path(name), engine="pyogrio", **how)
    return {"path": str(bench.path(name)), "id": "id"}


def totals(bench, *args, **how):
    return bench.run(regions=regions(bench, *args, **how)).totals


def area_of(found, name):
    return found.area[found.names.index(name)]


def test_47_a_bow_tie_is_repaired_and_the_change_of_area_told(bench):
    tie = Polygon([(0, 0), (2, 2), (2, 0), (0, 2)])
    plan = bench.plan(regions=regions(bench, [tie], ["tie"]))
    assert any("'tie' crossed itself" in note and "area" in note for note in plan.regions.notes)
    found = bench.run(regions=regions(bench, [tie], ["tie"])).totals
    square = bench.run(regions=regions(bench, [box(0, 0, 2, 2)], ["box"])).totals
    assert area_of(found, "tie") == pytest.approx(0.5 * area_of(square, "box"), rel=1e-3)


def test_47_the_parts_of_a_multipolygon_that_overlap_count_once(bench):
    twice = MultiPolygon([box(0, 0, 2, 2), box(1, 0, 3, 2)])
    once = bench.run(regions=regions(bench, [box(0, 0, 3, 2)], ["a"])).totals
    found = bench.run(regions=regions(bench, [twice], ["a"])).totals
    assert area_of(found, "a") == pytest.approx(area_of(once, "a"), rel=1e-12)


def test_47_an_island_in_a_lake_counts_and_the_lake_does_not(bench):
    lake = Polygon(box(0, 0, 4, 4).exterior, [box(1, 1, 3, 3).exterior])
    island = box(1.5, 1.5, 2.5, 2.5)
    found = bench.run(regions=regions(bench, [lake.union(island)], ["a"])).totals
    whole = bench.run(regions=regions(bench, [box(0, 0, 4, 4)], ["a"])).totals
    assert area_of(found, "a") == pytest.approx(area_of(whole, "a") * 13 / 16, rel=2e-3)


@pytest.mark.parametrize("empty", [None, Polygon()])
def test_48_a_region_without_geometry_stays_with_area_zero_and_harms_no_other(bench, empty):
    spec = regions(bench, [empty, box(0, 0, 2, 4)], ["none", "west"])
    plan = bench.plan(regions=spec)
    assert any("'none' has no geometry" in note for note in plan.regions.notes)
    found = bench.run(regions=spec).totals
    assert area_of(found, "none") == 0
    assert area_of(found, "west") == pytest.approx(found.area.sum() / 3, rel=1e-9)


def test_50_a_polygon_drawn_from_170_to_minus_170_is_refused(bench):
    drawn = Polygon([(170, 0), (-170, 0), (-170, 4), (170, 4)])
    with pytest.raises(RegionError, match=r"'fiji'.*340 degrees of longitude") as refused:
        bench.plan(regions=regions(bench, [drawn], ["fiji"]))
    assert "180" in refused.value.fix


def across(bench):
    codes = np.ones((4, 8), np.uint8)
    path = bench.tif("across.tif", codes, transform=from_origin(176, 4, 1, 1))
    runoff = bench.tif(
        "q.tif", np.full((4, 8), 500.0, np.float32), unit="mm yr-1",
        transform=from_origin(176, 4, 1, 1),
    )  # fmt: skip
    return {
        "lithology": {"path": str(path), "legend": str(bench.legend())},
        "runoff": {"path": str(runoff)},
    }


def test_50_a_polygon_split_at_the_antimeridian_is_whole_on_a_grid_across_it(bench):
    split = MultiPolygon([box(178, 0, 180, 4), box(-180, 0, -178, 4)])
    found = bench.run(across(bench), regions=regions(bench, [split], ["a"])).totals
    assert area_of(found, "a") == pytest.approx(found.area.sum() / 2, rel=1e-12)


def test_50_a_cap_closed_along_the_pole_is_exact_and_the_world_box_is_accepted(bench):
    cap = Polygon([(-180, 60), (180, 60), (180, 90), (-180, 90)])
    codes = np.ones((18, 36), np.uint8)
    path = bench.tif("w.tif", codes, transform=from_origin(-180, 90, 10, 10))
    layers = {"lithology": {"path": str(path), "legend": str(bench.legend())}}
    runoff = bench.tif("q.tif", codes, unit="mm yr-1", transform=from_origin(-180, 90, 10, 10))
    layers["runoff"] = {"path": str(runoff)}
    found = bench.run(layers, regions=regions(bench, [cap], ["cap"])).totals
    e2 = 6.69437999014e-3
    e = math.sqrt(e2)

    def half(sine):
        return sine / (1 - e2 * sine**2) + math.atanh(e * sine) / e

    closed = 6356.7523142**2 * math.pi * (half(1.0) - half(math.sin(math.radians(60))))
    assert area_of(found, "cap") == pytest.approx(closed, rel=1e-9)


def test_51_slivers_and_regions_smaller_than_a_cell_lose_nothing(bench):
    cuts = [0, 0.3, 0.31, 1.0, 2.5, 2.500001, 6]
    shapes = [box(a, 0, b, 4) for a, b in itertools.pairwise(cuts)]
    found = totals(bench, shapes, [f"r{n}" for n in range(6)])
    assert found.area[:-1].sum() == pytest.approx(found.area.sum(), rel=1e-12)
    assert found.area[2] == pytest.approx(found.area.sum() * 0.69 / 6, rel=1e-9)


def test_51_a_region_of_a_million_vertices_is_covered(bench):
    turn = np.linspace(0, 2 * np.pi, 1_000_001)
    disc = Polygon(np.stack([3 + 1.9 * np.cos(turn), 2 + 1.9 * np.sin(turn)], axis=1))
    found = totals(bench, [disc], ["disc"])
    assert area_of(found, "disc") == pytest.approx(found.area.sum() * np.pi * 1.9**2 / 24, rel=1e-3)


def test_52_overlapping_regions_are_refused(bench):
    spec = regions(bench, [box(0, 0, 3, 4), box(2, 0, 5, 4)], ["a", "b"])
    with pytest.raises(RegionError, match=r"regions overlap: they cover 2\.000"):
        bench.run(regions=spec)


@pytest.mark.parametrize("order", [(0, 1), (1, 0)])
def test_52_a_sliver_over_a_whole_cell_takes_nothing_from_it(bench, order):
    shapes = [box(0, 0, 3, 4), box(3 - 1e-8, 0, 6, 4)]
    names = ["west", "east"]
    spec = regions(bench, [shapes[at] for at in order], [names[at] for at in order])
    found = bench.run(regions=spec).totals
    assert area_of(found, "west") == pytest.approx(found.area.sum() / 2, rel=1e-7)
    assert found.area[-1] == 0


def test_52_geology_polygons_that_overlap_are_refused(bench):
    frame = gpd.GeoDataFrame(
        {"unit": ["basalt", "granite"]}, geometry=[ALL, box(1, 1, 3, 3)], crs="EPSG:4326"
    )
    frame.to_file(bench.path("g.gpkg"), engine="pyogrio")
    legend = bench.text("units.csv", "code,rock\ngranite,granite\nbasalt,basalt\n")
    spec = {"path": str(bench.path("g.gpkg")), "legend": str(legend), "column": "unit"}
    with pytest.raises(RegionError, match=r"cover 2\.000 of the cell.*\(basalt, granite\)"):
        bench.plan({"lithology": spec}, grid=GRID)


@pytest.mark.parametrize(
    ("names", "message"),
    [
        (["a", "a"], "occur more than once, first 'a'"),
        (["a", None], "feature 2 has no 'id'"),
        ([1.0, float("nan")], "feature 2 has no 'id'"),
        (["outside", "b"], "'outside', which the tables use"),
    ],
)
def test_52_ids_that_do_not_tell_regions_apart_are_refused(bench, names, message):
    with pytest.raises(RegionError, match=message):
        bench.plan(regions=regions(bench, [box(0, 0, 1, 4), box(1, 0, 2, 4)], names))


def test_52_a_region_partly_off_the_grid_counts_with_the_part_that_lies_on_it(bench):
    found = totals(bench, [box(5, 0, 9, 4)], ["edge"])
    assert area_of(found, "edge") == pytest.approx(found.area.sum() / 6, rel=1e-9)


def test_52_lines_in_place_of_polygons_are_refused(bench):
    with pytest.raises(RegionError, match="feature 1 is a LineString"):
        bench.plan(regions=regions(bench, [LineString([(0, 0), (1, 1)])], ["a"]))


NASTY = [
    "=cmd|' /C calc'!A0", "<script>alert(1)</script>", "../../x", "\U0001f30b volcano",
    "\u05e9\u05dc\u05d5\u05dd", "n" * 300, "+1", "@sum", 'quote"and,comma', "line\nbreak",
]  # fmt: skip


def test_54_nasty_names_arrive_whole_and_harmless_in_the_tables(bench):
    shapes = [box(0.5 * n, 0, 0.5 * n + 0.5, 4) for n in range(len(NASTY))]
    result = bench.run(regions=regions(bench, shapes, NASTY))
    with (result.folder / "tables" / "regions.csv").open(encoding="utf-8", newline="") as stream:
        read = [row["region"] for row in csv.DictReader(stream)]
    for name, cell in zip(NASTY, read, strict=False):
        assert cell == (f"'{name}" if name[0] in "=+@" else name)
    files = {one.name for one in bench.path("out").rglob("*")}
    assert not any("script" in one or ".." in one for one in files)


def test_54_a_shapefile_in_latin_1_keeps_its_names(bench):
    spec = regions(
        bench, [box(0, 0, 2, 4)], ["C\u00f4te-Nord"], name="r.shp", encoding="ISO-8859-1"
    )
    assert bench.plan(regions=spec).regions.names == ("C\u00f4te-Nord",)


FORMATS = {"r.shp": {}, "r.geojson": {}, "r.fgb": {}, "r.gpkg": {}}


@pytest.mark.parametrize("name", [*FORMATS, "r.parquet"])
def test_regions_are_read_from_every_format_alike(bench, name):
    frame = gpd.GeoDataFrame({"id": ["w"]}, geometry=[box(0, 0, 2, 4)], crs="EPSG:4326")
    if name.endswith("parquet"):
        frame.to_parquet(bench.path(name))
    else:
        frame.to_file(bench.path(name), engine="pyogrio")
    found = bench.run(regions={"path": str(bench.path(name)), "id": "id"}).totals
    assert area_of(found, "w") == pytest.approx(found.area.sum() / 3, rel=1e-9)


def test_a_parquet_file_without_geometry_is_refused(bench):
    pd.DataFrame({"id": ["a"]}).to_parquet(bench.path("r.parquet"))
    with pytest.raises(FileFormatError, match="GeoParquet"):
        bench.plan(regions={"path": str(bench.path("r.parquet")), "id": "id"})


def test_regions_without_crs_are_refused_with_the_line_to_write(bench):
    spec = regions(bench, [box(0, 0, 2, 4)], ["a"], name="r.shp")
    bench.path("r.prj").unlink()
    with pytest.raises(GridError, match="does not say its CRS") as refused:
        bench.plan(regions=spec)
    assert "[regions]" in refused.value.fix


def test_an_id_column_that_is_not_there_gets_the_nearest(bench):
    spec = regions(bench, [box(0, 0, 2, 4)], ["a"]) | {"id": "idd"}
    with pytest.raises(RegionError, match="no column 'idd'") as refused:
        bench.plan(regions=spec)
    assert refused.value.fix == '"id"'


def test_a_broken_vector_file_is_refused(bench):
    path = bench.text("r.gpkg", b"SQLite format 3\x00" + bytes(100))
    with pytest.raises(MapperError, match="cannot be read as vectors"):
        bench.plan(regions={"path": str(path), "id": "id"})


def geology(bench, name="geology.gpkg"):
    """Granite over basalt, with a border that cuts cells aslant."""
    border = [(0, 1.25), (6, 2.75)]
    upper = Polygon([*border, (6, 4), (0, 4)])
    lower = Polygon([*border[::-1], (0, 0), (6, 0)][::-1])
    frame = gpd.GeoDataFrame(
        {"unit": ["granite", "basalt"]}, geometry=[upper, lower], crs="EPSG:4326"
    )
    frame.to_file(bench.path(name), engine="pyogrio")
    legend = bench.text("units.csv", "code,rock\ngranite,granite\nbasalt,basalt\n")
    return {"path": str(bench.path(name)), "legend": str(legend), "column": "unit"}


GRID = {"crs": "EPSG:4326", "resolution": 1, "bounds": [0, 0, 6, 4]}


@pytest.mark.parametrize("name", ["geology.gpkg", "geology.shp", "geology.fgb", "geology.geojson"])
def test_polygon_geology_gives_each_cell_the_exact_share_of_each_rock(bench, name):
    plan = bench.plan({"lithology": geology(bench, name)}, grid=GRID)
    rocks = plan.lithology.rock_cells(Window(0, 0, 4, 6))
    granite = rocks.rock == ROCK_NAMES.index("granite")
    found = np.zeros(24)
    found[rocks.cell[granite]] = rocks.share[granite]
    upper = Polygon([(0, 1.25), (6, 2.75), (6, 4), (0, 4)])
    expected = [
        shapely.area(shapely.intersection(upper, box(col, 3 - row, col + 1, 4 - row)))
        for row in range(4)
        for col in range(6)
    ]
    np.testing.assert_allclose(found, expected, atol=1e-12)


def test_polygon_geology_equals_its_fine_raster(bench):
    exact = bench.run({"lithology": geology(bench)}, grid=GRID).totals
    n = 50
    y = 4 - (np.arange(4 * n) + 0.5) / n
    x = (np.arange(6 * n) + 0.5) / n
    codes = np.where(y[:, None] > 1.25 + 0.25 * x[None, :], 2, 1).astype(np.uint8)
    path = bench.tif("fine.tif", codes, transform=from_origin(0, 4, 1 / n, 1 / n))
    fine = {"lithology": {"path": str(path), "legend": str(bench.legend())}}
    coarse = bench.run(fine, grid=GRID).totals
    np.testing.assert_allclose(exact.consumption, coarse.consumption, rtol=2e-3)


def test_a_unit_that_the_legend_lacks_is_refused_with_a_likely_rock(bench):
    spec = geology(bench)
    bench.text("units.csv", "code,rock\nbasalt,basalt\n")
    with pytest.raises(MapperError, match=r"code granite \(.*km2\)") as refused:
        bench.plan({"lithology": spec}, grid=GRID)
    assert "granite,granite" in refused.value.fix
