"""Files that are not what their name says, cut short, too large, or laid as a trap."""

from __future__ import annotations

import struct
import time

import numpy as np
import pytest
import rasterio
from rasterio.transform import from_origin

import mapper
from mapper.errors import FileFormatError, MapperError, MissingFileError
from mapper.grid import Window
from mapper.layers.layer import open_source

VRT = """<VRTDataset rasterXSize="6" rasterYSize="4"><SRS>EPSG:4326</SRS>
<GeoTransform>0,1,0,4,0,-1</GeoTransform><VRTRasterBand dataType="Byte" band="1"
subClass="VRTRawRasterBand"><SourceFilename>/etc/passwd</SourceFilename></VRTRasterBand>
</VRTDataset>"""
MRF = """<MRF_META><Raster><Size x="6" y="4" c="1"/><DataFile>{trap}</DataFile></Raster>
</MRF_META>"""


@pytest.mark.parametrize(
    ("content", "seen"),
    [
        (VRT, "XML or HTML"),
        (MRF, "XML or HTML"),
        ("<!DOCTYPE html><html>404</html>", "XML or HTML"),
        ("\n  <html>moved</html>", "XML or HTML"),
        ("version https://git-lfs.github.com/spec/v1\noid sha256:0\n", "was not fetched"),
        (b"\x89PNG\r\n\x1a\n" + bytes(32), "PNG picture"),
        (b"\xff\xd8\xff\xe0" + bytes(32), "JPEG picture"),
        (b"PK\x03\x04" + bytes(32), "ZIP archive"),
        (b"GRIB" + bytes(32), "GRIB"),
        (b"", "empty"),
        (bytes(64), "no known format"),
    ],
)
def test_55_what_is_no_raster_is_refused_by_its_first_bytes_and_nothing_is_written(
    bench, content, seen
):
    trap = bench.path("trap.dat")
    if isinstance(content, str):
        content = content.replace("{trap}", str(trap))
    bench.lithology()
    path = bench.text("rocks.tif", content)
    legend = str(bench.legend())
    bench.runoff()
    before = sorted(one.name for one in bench.folder.iterdir())
    job = bench.job({"lithology": {"path": str(path), "legend": legend}})
    with pytest.raises(FileFormatError, match=seen) as refused:
        mapper.inspect(mapper.load_job(job))
    assert "rocks.tif" in refused.value.where
    assert sorted(one.name for one in bench.folder.iterdir()) == sorted([*before, "job.toml"])


@pytest.mark.parametrize("text", ["/vsicurl/http://example.org/a.tif", "/vsizip/a.zip/a.tif"])
def test_55_virtual_paths_are_plain_names_that_do_not_exist(bench, text):
    with pytest.raises(MissingFileError):
        bench.plan({"lithology": {"path": text, "legend": str(bench.legend())}})


def big_raster(bench):
    rng = np.random.default_rng(5)
    values = rng.uniform(280, 300, (512, 512)).astype(np.float32)
    return bench.tif(
        "t.tif",
        values,
        unit="K",
        transform=from_origin(0, 4, 0.01, 0.01),
        tiled=True,
        blockxsize=128,
        blockysize=128,
        compress="deflate",
    )


def test_55_a_file_cut_in_its_last_tile_is_refused_with_block_rows_and_offset(bench):
    path = big_raster(bench)
    whole = path.read_bytes()
    with rasterio.open(path) as file:
        offsets = {
            (row, col): int(file.get_tag_item(f"BLOCK_OFFSET_{col}_{row}", "TIFF", bidx=1))
            for row in range(4)
            for col in range(4)
        }
    (row, col), offset = max(offsets.items(), key=lambda item: item[1])
    path.write_bytes(whole[: offset + 10])
    with pytest.raises(FileFormatError, match=f"block {row},{col}.*bytes {offset}"):
        bench.layer("temperature", path)


def test_55_a_file_cut_after_its_header_is_refused(bench):
    path = big_raster(bench)
    path.write_bytes(path.read_bytes()[:600])
    with pytest.raises(FileFormatError, match=r"cut short|cannot be opened"):
        bench.layer("temperature", path)


def test_55_a_damaged_tile_is_named_with_its_offset_when_it_is_read(bench):
    path = big_raster(bench)
    with rasterio.open(path) as file:
        offset = int(file.get_tag_item("BLOCK_OFFSET_2_1", "TIFF", bidx=1))
    data = bytearray(path.read_bytes())
    data[offset : offset + 400] = bytes(400)
    path.write_bytes(bytes(data))
    layer = bench.layer("temperature", path)
    assert np.isfinite(layer.values(Window(0, 0, 100, 512))).all()
    with pytest.raises(FileFormatError, match=f"block 1,2 at byte {offset} is damaged"):
        layer.values(Window(0, 0, 512, 512))


def refuse_within_two_seconds(bench, path, message):
    job = mapper.load_job(
        bench.job({"lithology": {"path": str(path), "legend": str(bench.legend())}})
    )
    began = time.monotonic()
    with pytest.raises(MapperError, match=message):
        open_source(job.layers["lithology"])
    assert time.monotonic() - began < 2.0


def test_56_a_sparse_raster_of_a_million_squared_is_refused_at_once(bench):
    path = bench.path("giant.tif")
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=10**6,
        height=10**6,
        count=1,
        dtype="uint8",
        crs="EPSG:4326",
        transform=from_origin(0, 1, 1e-6, 1e-6),
        sparse_ok=True,
        tiled=True,
        blockxsize=4096,
        blockysize=4096,
    ):
        pass
    assert path.stat().st_size < 2e6
    refuse_within_two_seconds(bench, path, "1000000 x 1000000 cells are more")


def test_56_a_raster_of_one_huge_strip_is_refused_at_once(bench):
    path = bench.path("strip.tif")
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=40_000,
        height=40_000,
        count=1,
        dtype="uint8",
        crs="EPSG:4326",
        transform=from_origin(0, 1, 1e-5, 1e-5),
        sparse_ok=True,
        compress="deflate",
        blockysize=40_000,
    ):
        pass
    refuse_within_two_seconds(bench, path, "one block of the file holds 40000 x 40000 cells")


def test_56_a_hundred_thousand_bands_are_refused_at_once(bench):
    refuse_within_two_seconds(bench, many_bands(bench), "bands|cannot be opened")


def many_bands(bench):
    """A header that promises 65 535 bands, the most that one can."""
    tags = [
        (256, 3, 1, 6), (257, 3, 1, 4), (258, 3, 1, 8), (259, 3, 1, 1), (262, 3, 1, 1),
        (273, 4, 1, 8), (277, 3, 1, 65_535), (278, 3, 1, 4), (279, 4, 1, 24),
    ]  # fmt: skip
    body = b"II*\x00" + struct.pack("<I", 8) + struct.pack("<H", len(tags))
    for tag, kind, count, value in tags:
        body += struct.pack("<HHI", tag, kind, count) + struct.pack("<I", value)
    return bench.text("bands.tif", body + bytes(64))


def test_56_a_header_with_absurdly_many_entries_is_refused_at_once(bench):
    big = b"II+\x00" + struct.pack("<HHQ", 8, 0, 16) + struct.pack("<Q", 10**9) + bytes(64)
    refuse_within_two_seconds(bench, bench.text("ifd.tif", big), "cannot be opened")


def test_57_a_striped_file_is_read_in_bands_and_equals_its_tiled_twin(bench):
    rng = np.random.default_rng(7)
    codes = rng.integers(1, 3, (40, 2000)).astype(np.uint8)
    options = {"transform": from_origin(0, 4, 0.003, 0.003), "compress": "deflate"}
    strips = bench.tif("strips.tif", codes, blockysize=1, tiled=False, **options)
    tiles = bench.tif("tiles.tif", codes, tiled=True, blockxsize=128, blockysize=32, **options)
    legend = str(bench.legend())
    found = [
        bench.run({"lithology": {"path": str(path), "legend": legend}}).totals.consumption
        for path in (strips, tiles)
    ]
    np.testing.assert_array_equal(*found)


def test_59_overviews_and_sidecars_do_not_change_what_is_read(bench):
    values = np.full((4, 6), 280.0, np.float32)
    path = bench.tif("t.tif", values, unit="K")
    bench.text(
        "t.tif.aux.xml",
        "<PAMDataset><SRS>EPSG:3857</SRS><PAMRasterBand band='1'><NoDataValue>280</NoDataValue>"
        "</PAMRasterBand></PAMDataset>",
    )
    bench.text("t.tif.ovr", b"II*\x00" + bytes(32))
    layer = bench.layer("temperature", path)
    assert (layer.values(Window(0, 0, 4, 6)) == 280).all()
    notes = " ".join(layer.source.notes)
    assert "t.tif.aux.xml" in notes
    assert "t.tif.ovr" in notes


def test_59_stale_overviews_inside_the_file_are_not_read(bench):
    values = np.tile(np.array([280.0, 290.0], np.float32), (64, 32))
    path = bench.tif("t.tif", values, unit="K", transform=from_origin(0, 4, 0.01, 0.01))
    with rasterio.open(path, "r+") as file:
        file.build_overviews([2, 4])
        file.write(values[:, ::-1].copy(), 1)
    found = bench.layer("temperature", path).values(Window(0, 0, 64, 64))
    np.testing.assert_array_equal(found, values[:, ::-1])


def test_a_folder_in_place_of_a_raster_is_refused(bench):
    bench.path("rocks").mkdir()
    with pytest.raises(FileFormatError, match="is a folder"):
        bench.plan({"lithology": {"path": str(bench.path("rocks")), "legend": str(bench.legend())}})


def test_a_vector_file_in_place_of_a_climate_grid_is_refused(bench):
    path = bench.text("t.geojson", '{"type": "FeatureCollection", "features": []}')
    with pytest.raises(MapperError, match="holds vectors"):
        bench.layer("temperature", path)


def test_two_bands_are_asked_about(bench):
    path = bench.tif("t.tif", np.full((2, 4, 6), 280.0, np.float32), unit="K")
    with pytest.raises(FileFormatError, match="2 bands") as refused:
        bench.layer("temperature", path)
    assert refused.value.fix.startswith('variable = "1"')
    assert bench.layer("temperature", path, variable="2").source.variable == "2"


def test_every_problem_of_a_job_is_told_at_once(bench):
    bad = bench.tif("t.tif", np.full((4, 6), 280.0, np.float32))
    html = bench.text("r.tif", "<html>")
    with pytest.raises(MapperError) as refused:
        bench.plan({"temperature": {"path": str(bad)}, "runoff": {"path": str(html)}})
    text = str(refused.value)
    assert "no unit" in text
    assert "HTML" in text
