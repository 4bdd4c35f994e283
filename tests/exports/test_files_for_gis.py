"""GeoPackage, styles and pictures, read by what nobody here wrote."""

from __future__ import annotations

import sqlite3
import xml.etree.ElementTree as ET
from contextlib import closing
from pathlib import Path

import numpy as np
import pyogrio
import pytest
import rasterio
from PIL import Image

from mapper.evaluation import Flag
from mapper.exports.colours import flag_colour, flag_values, stretch
from mapper.exports.contents import read_table

SLD = "{http://www.opengis.net/sld}"


def test_regions_open_in_ogr_with_the_numbers_of_the_table(island_run: Path) -> None:
    frame = pyogrio.read_dataframe(island_run / "regions.gpkg", layer="regions")
    table = read_table(island_run / "tables" / "regions.csv").by_region
    assert list(frame["region"]) == [name for name in table if name not in ("outside", "all")]
    for column in ("area_km2", "drawdown_t_per_yr", "consumption_t_per_km2_yr"):
        wanted = [table[name][column] for name in frame["region"]]
        np.testing.assert_allclose(frame[column], wanted, rtol=1e-9)
    assert frame.crs.to_epsg() == 4326
    assert set(frame.geom_type) == {"MultiPolygon"}


def test_geopackage_meets_the_basic_requirements_of_its_standard(island_run: Path) -> None:
    path = island_run / "regions.gpkg"
    assert path.read_bytes()[:16] == b"SQLite format 3\x00"
    with closing(sqlite3.connect(path)) as database:
        ask = database.execute
        assert ask("PRAGMA application_id").fetchone()[0] == 0x47504B47  # "GPKG"
        assert ask("PRAGMA user_version").fetchone()[0] >= 10200
        assert ask("PRAGMA integrity_check").fetchone()[0] == "ok"
        assert ask("PRAGMA foreign_key_check").fetchall() == []
        contents = ask("SELECT table_name, data_type, srs_id FROM gpkg_contents").fetchall()
        assert ("regions", "features", 4326) in contents
        columns = ask("SELECT table_name, column_name FROM gpkg_geometry_columns").fetchall()
        assert {name for name, _ in columns} == {"regions", "hotspots"}
        known = {row[0] for row in ask("SELECT srs_id FROM gpkg_spatial_ref_sys")}
        assert {-1, 0, 4326} <= known


def test_geoparquet_holds_the_same_regions(island_run: Path) -> None:
    import geopandas

    frame = geopandas.read_parquet(island_run / "regions.parquet")
    other = pyogrio.read_dataframe(island_run / "regions.gpkg", layer="regions")
    assert list(frame["region"]) == list(other["region"])
    assert frame.crs == other.crs
    assert frame.geometry.geom_equals(other.geometry).all()


def test_unkind_names_come_through_the_geopackage_unchanged(
    unkind_run: Path, names: tuple[str]
) -> None:
    frame = pyogrio.read_dataframe(unkind_run / "regions.gpkg", layer="regions")
    assert tuple(frame["region"]) == names


@pytest.mark.parametrize("name", ["consumption", "drawdown"])
def test_a_style_spans_its_map(island_run: Path, name: str) -> None:
    root = ET.parse(island_run / "maps" / f"{name}.sld").getroot()
    assert root.tag == f"{SLD}StyledLayerDescriptor"
    assert root.get("version") == "1.0.0"
    values = [float(one.get("quantity", "nan")) for one in root.iter(f"{SLD}ColorMapEntry")]
    with rasterio.open(island_run / "maps" / f"{name}.tif") as dataset:
        cells = dataset.read(1)
    assert values == sorted(values)
    assert values[0] <= np.nanmin(cells)
    assert np.nanmax(cells) * (1 - 1e-6) <= values[-1] <= 1.25 * np.nanmax(cells)


def test_the_style_of_flags_knows_every_value_of_the_map(island_run: Path) -> None:
    root = ET.parse(island_run / "maps" / "flags.sld").getroot()
    values = {int(one.get("quantity", "-1")) for one in root.iter(f"{SLD}ColorMapEntry")}
    with rasterio.open(island_run / "maps" / "flags.tif") as dataset:
        assert set(np.unique(dataset.read(1)).tolist()) <= values


def test_a_style_keeps_the_order_of_elements_that_the_schema_asks_for(island_run: Path) -> None:
    root = ET.parse(island_run / "maps" / "drawdown.sld").getroot()
    style = root.find(f"{SLD}NamedLayer/{SLD}UserStyle")
    assert style is not None
    order = [one.tag.removeprefix(SLD) for one in style]
    assert order == ["Name", "Title", "Abstract", "IsDefault", "FeatureTypeStyle"]
    symbol = style.find(f"{SLD}FeatureTypeStyle/{SLD}Rule/{SLD}RasterSymbolizer")
    assert symbol is not None
    assert [one.tag.removeprefix(SLD) for one in symbol] == ["Opacity", "ColorMap"]
    for entry in symbol.iter(f"{SLD}ColorMapEntry"):
        assert set(entry.attrib) <= {"color", "opacity", "quantity", "label"}


def test_every_map_has_a_picture_and_a_legend(island_run: Path) -> None:
    for path in (island_run / "maps").glob("*.tif"):
        with Image.open(path.with_suffix(".png")) as picture:
            assert min(picture.size) > 700
        with Image.open(path.with_name(f"{path.stem}_legend.png")) as legend:
            assert min(legend.size) > 60


def test_a_scale_ends_at_a_round_number_above_most_cells() -> None:
    span = stretch(np.append(np.linspace(0.0, 46.0, 999), 500.0))
    assert (span.low, span.high, span.largest) == (0.0, 50.0, 500.0)


def test_values_of_flags_follow_from_the_flags_that_occur() -> None:
    assert flag_values({"runoff_outside": 3.0}) == [0, 1, 2, 4, 5, 6]
    assert flag_colour(int(Flag.NO_DATA | Flag.RUNOFF_OUTSIDE)) == flag_colour(int(Flag.NO_DATA))
