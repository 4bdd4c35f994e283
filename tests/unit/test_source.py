"""Files: their kind, their headers, and raw values in normal order."""

import numpy as np
import pytest
import rasterio
import shapely
import xarray as xr

from mapper.errors import FileFormatError, GridError, MissingFileError, ValuesError
from mapper.job import LayerSpec
from mapper.layers.axis import plan_axis
from mapper.layers.layer import open_source
from mapper.layers.source import file_kind, runs
from tests.making import EQUAL_AREA, write_netcdf, write_polygons, write_raster


def opened(path, name="temperature", **about):
    return open_source(LayerSpec(name=name, path=str(path), **about))


def whole(source):
    rows = plan_axis(source.y, source.y.edges, source.y.centres, "nearest", sphere=False)
    cols = plan_axis(source.x, source.x.edges, source.x.centres, "nearest", sphere=False)
    raw, valid = source.read(rows, cols)
    return raw[np.ix_(rows.nearest, cols.nearest)], valid[np.ix_(rows.nearest, cols.nearest)]


@pytest.mark.parametrize(
    ("index", "pieces"),
    [
        ([0, 1, 2], [(0, 3, 1)]),
        ([2, 1, 0], [(0, 3, -1)]),
        ([2, 3, 0, 1], [(2, 4, 1), (0, 2, 1)]),
        ([1, 0, 3, 2], [(0, 2, -1), (2, 4, -1)]),
        ([5], [(5, 6, 1)]),
        ([0, 0], [(0, 1, 1), (0, 1, 1)]),
    ],
)
def test_positions_are_cut_into_runs(index, pieces):
    found = [(one.start, one.stop, one.step) for one in runs(np.array(index))]
    assert found == pieces


def test_runs_of_an_axis_of_two_cells_that_goes_round_give_it_back():
    index = np.array([0, 1, 0, 1, 0])
    back = np.concatenate([np.arange(9)[one.start : one.stop][:: one.step] for one in runs(index)])
    assert back.tolist() == index.tolist()


def test_the_kind_is_told_by_the_bytes_not_the_name(tmp_path):
    write_raster(tmp_path / "a.nc", np.ones((2, 2)))
    assert file_kind(str(tmp_path / "a.nc"), where="x") == "geotiff"


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"", "the file is empty"),
        (b"<html>not found</html>", "XML or HTML text"),
        (b"version https://git-lfs.github.com", "was not fetched"),
        (b"\x89PNG\r\n", "PNG picture"),
        (b"PK\x03\x04", "a ZIP archive"),
        (b"hello", "begins with b'hello'"),
    ],
)
def test_a_stranger_is_named(tmp_path, content, message):
    (tmp_path / "t.tif").write_bytes(content)
    with pytest.raises(FileFormatError, match=message) as caught:
        file_kind(str(tmp_path / "t.tif"), where="layers.temperature")
    assert caught.value.where == "layers.temperature"


def test_a_missing_file_and_a_folder_are_told_apart(tmp_path):
    with pytest.raises(MissingFileError, match=r"there is no file 't\.tif'"):
        file_kind(str(tmp_path / "t.tif"), where="x")
    with pytest.raises(FileFormatError, match="is a folder"):
        file_kind(str(tmp_path), where="x")


def test_a_geotiff_header_is_read(tmp_path):
    source = opened(write_raster(tmp_path / "t.tif", np.ones((2, 3)), unit="K", nodata=-9))
    assert source.shape == (2, 3)
    assert source.unit == "K"
    assert source.nodata == (-9.0,)
    assert source.x.edges.tolist() == [0, 1000, 2000, 3000]
    assert source.y.edges.tolist() == [-2000, -1000, 0]


@pytest.mark.parametrize("south_up", [False, True])
def test_rows_come_north_first_whichever_way_the_file_runs(tmp_path, south_up):
    values = np.array([[1.0, 2.0], [3.0, 4.0]])
    source = opened(write_raster(tmp_path / "t.tif", values, south_up=south_up))
    assert whole(source)[0].tolist() == values.tolist()


def test_nodata_nan_and_infinity_are_no_data(tmp_path):
    values = np.array([[1.0, -9.0], [np.nan, np.inf]])
    source = opened(write_raster(tmp_path / "t.tif", values, nodata=-9.0))
    assert whole(source)[1].tolist() == [[True, False], [False, False]]


def test_a_nodata_value_is_compared_as_the_file_holds_it(tmp_path):
    values = np.array([[1.0, -3.4e38]], dtype="float32")
    source = opened(write_raster(tmp_path / "t.tif", values), nodata=(-3.4e38,))
    assert whole(source)[1].tolist() == [[True, False]]


@pytest.mark.parametrize("value", [300.0, 0.5, np.inf, np.nan])
def test_a_nodata_value_that_the_type_cannot_hold_matches_nothing(tmp_path, value):
    source = opened(write_raster(tmp_path / "t.tif", [[0, 255]], dtype="uint8"), nodata=(value,))
    assert whole(source)[1].all()


def test_a_mask_of_the_file_is_honoured(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[1, 2]], dtype="uint8")
    with rasterio.Env(GDAL_TIFF_INTERNAL_MASK=True), rasterio.open(path, "r+") as file:
        file.write_mask(np.array([[255, 0]], dtype="uint8"))
    assert whole(opened(path))[1].tolist() == [[True, False]]


def test_a_missing_crs_is_refused_with_the_line_to_write(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[1.0]], crs=None)
    with pytest.raises(GridError, match="the file does not say its CRS") as caught:
        opened(path)
    assert 'crs = "EPSG:4326"' in caught.value.fix
    assert "[layers.temperature]" in caught.value.fix
    assert opened(path, crs=EQUAL_AREA).shape == (1, 1)


def test_a_rotated_grid_is_refused(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[1.0]])
    with rasterio.open(path, "r+") as file:
        file.transform = rasterio.Affine(1, 0.5, 0, 0.5, -1, 0)
    with pytest.raises(GridError, match=r"rotated or sheared \(affine b = 0\.5"):
        opened(path)


def test_a_file_without_georeferencing_is_refused(tmp_path):
    path = tmp_path / "t.tif"
    with pytest.warns(rasterio.errors.NotGeoreferencedWarning), rasterio.open(
        path, "w", driver="GTiff", width=1, height=1, count=1, dtype="uint8"
    ) as file:  # fmt: skip
        file.write(np.array([[1]], "uint8"), 1)
    with pytest.raises(GridError, match="no georeferencing"):
        opened(path)


def test_several_bands_need_a_choice(tmp_path):
    path = tmp_path / "t.tif"
    profile = {"driver": "GTiff", "width": 1, "height": 1, "count": 2, "dtype": "float32"}
    transform = rasterio.Affine(1, 0, 0, 0, -1, 1)
    with rasterio.open(path, "w", crs=EQUAL_AREA, transform=transform, **profile) as file:
        file.write(np.array([[[1.0]], [[2.0]]], "float32"))
        file.set_band_description(2, "warm")
    with pytest.raises(FileFormatError, match="the file has 2 bands") as caught:
        opened(path)
    assert 'variable = "1"' in caught.value.fix
    assert whole(opened(path, variable="2"))[0].tolist() == [[2.0]]
    assert whole(opened(path, variable="warm"))[0].tolist() == [[2.0]]
    with pytest.raises(FileFormatError, match="there is no band 'cold'"):
        opened(path, variable="cold")


def test_a_file_that_was_cut_short_is_refused(tmp_path):
    path = write_raster(tmp_path / "t.tif", np.random.default_rng(1).random((400, 400)))
    path.write_bytes(path.read_bytes()[:200_000])
    with pytest.raises(FileFormatError, match="is cut short") as caught:
        whole(opened(path))
    assert "copy" in caught.value.fix


def test_a_polygon_file_is_no_grid(tmp_path):
    path = write_polygons(tmp_path / "p.gpkg", {"a": shapely.box(0, 0, 1, 1)})
    with pytest.raises(ValuesError, match="the file holds vectors, and a grid is needed"):
        opened(path)


def test_a_netcdf_header_is_read(tmp_path):
    path = write_netcdf(tmp_path / "t.nc", [[1, 2], [3, 4]], lat=[10, 20], lon=[0, 1])
    source = opened(path)
    assert source.variable == "tas"
    assert source.unit == "K"
    assert whole(source)[0].tolist() == [[3, 4], [1, 2]]


def test_fill_values_of_netcdf_are_no_data(tmp_path):
    values = [[1.0, 1e20], [-999.0, 9.969209968386869e36]]
    path = write_netcdf(
        tmp_path / "t.nc", values, lat=[20, 10], lon=[0, 1], missing_value=[1e20, -999.0]
    )
    assert whole(opened(path))[1].tolist() == [[True, False], [False, False]]


def test_packed_values_are_unpacked_once(tmp_path):
    dataset = xr.Dataset(
        {"tas": (("lat", "lon"), np.array([[280.0, 281.0], [282.0, np.nan]]), {"units": "K"})},
        coords={
            "lat": ("lat", [20.0, 10.0], {"units": "degrees_north"}),
            "lon": ("lon", [0.0, 10.0], {"units": "degrees_east"}),
        },
    )
    packing = {"dtype": "int16", "scale_factor": 0.5, "add_offset": 270.0, "_FillValue": -99}
    dataset.to_netcdf(tmp_path / "t.nc", engine="h5netcdf", encoding={"tas": packing})
    source = opened(tmp_path / "t.nc")
    raw, valid = whole(source)
    assert raw.dtype == np.int16
    assert (source.scale, source.offset) == (0.5, 270.0)
    assert raw[valid].tolist() == [20, 22, 24]


def test_a_time_axis_of_several_steps_is_refused(tmp_path):
    dataset = xr.Dataset(
        {"tas": (("time", "lat", "lon"), np.ones((3, 2, 2)), {"units": "K"})},
        coords={
            "lat": ("lat", [20.0, 10.0], {"units": "degrees_north"}),
            "lon": ("lon", [0.0, 10.0], {"units": "degrees_east"}),
        },
    )
    dataset.to_netcdf(tmp_path / "t.nc", engine="h5netcdf")
    with pytest.raises(ValuesError, match="'tas' has 3 values along 'time', and one is needed"):
        opened(tmp_path / "t.nc")


def test_a_wrong_variable_is_refused_with_the_nearest(tmp_path):
    path = write_netcdf(tmp_path / "t.nc", [[1, 2], [3, 4]], lat=[10, 20], lon=[0, 1])
    with pytest.raises(FileFormatError, match="there is no variable 'tos'; there are: tas") as c:
        opened(path, variable="tos")
    assert c.value.fix == 'variable = "tas"'


def test_a_file_that_changed_is_read_anew(tmp_path):
    path = write_raster(tmp_path / "t.tif", [[1.0]])
    assert whole(opened(path))[0].tolist() == [[1.0]]
    write_raster(path, [[25.0]], dtype="float32")
    assert whole(opened(path))[0].tolist() == [[25.0]]
    nc = write_netcdf(tmp_path / "t.nc", [[1, 2], [3, 4]], lat=[20, 10], lon=[0, 1])
    assert whole(opened(nc))[0].tolist() == [[1, 2], [3, 4]]
    nc.unlink()
    write_netcdf(nc, [[5, 6, 7], [8, 9, 9]], lat=[20, 10], lon=[0, 1, 2])
    assert whole(opened(nc))[0].tolist() == [[5, 6, 7], [8, 9, 9]]
