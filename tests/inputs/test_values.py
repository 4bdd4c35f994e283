"""Values, types, nodata and units as files get them wrong."""

from __future__ import annotations

import h5py
import numpy as np
import pytest
import rasterio

from mapper.errors import FileFormatError, LegendError, UnitError, ValuesError
from mapper.grid import Window
from mapper.rocks import ROCK_NAMES

WHOLE = Window(0, 0, 4, 6)
BIG = 302_011_022


def lithology(bench, codes, legend, **how):
    path = bench.tif("codes.tif", codes, **how)
    return {"lithology": {"path": str(path), "legend": str(bench.legend(legend))}}


def coded(plan):
    return {code: seen[0] for code, seen in plan.lithology.codes_in(WHOLE).items()}


def test_22_codes_beyond_two_to_the_24_stay_exact_at_any_resampling(bench):
    codes = np.array([[BIG, BIG + 1] * 3] * 4, dtype=np.int32)
    layers = lithology(bench, codes, f"code,rock\n{BIG},basalt\n{BIG + 1},granite\n")
    assert coded(bench.plan(layers)) == {str(BIG): 12.0, str(BIG + 1): 12.0}
    grid = {"crs": "EPSG:4326", "resolution": 2, "bounds": [0, 0, 6, 4]}
    rocks = bench.plan(layers, grid=grid).lithology.rock_cells(Window(0, 0, 2, 3))
    np.testing.assert_allclose(rocks.share, 0.5, rtol=1e-12)


def test_23_minus_one_zero_and_255_are_classes_like_others(bench):
    codes = np.array([[-1, 0, 255, 1, 1, 1]] * 4, dtype=np.int16)
    legend = "code,rock\n-1,basalt\n0,granite\n255,shale\n1,gneiss\n"
    found = coded(bench.plan(lithology(bench, codes, legend)))
    names, counts = np.unique(codes, return_counts=True)
    assert found == {str(n): float(c) for n, c in zip(names, counts, strict=True)}


def test_25_a_code_that_the_legend_lacks_is_refused_with_its_count(bench):
    codes = np.ones((4, 6), dtype=np.uint8)
    codes[0, :3] = 9
    with pytest.raises(LegendError, match=r"code 9 \(3 cells") as refused:
        bench.plan(lithology(bench, codes, "code,rock\n1,basalt\n"))
    assert 'unknown = "nodata"' in refused.value.fix
    assert "km2" in refused.value.problem


def test_25_as_nodata_it_leaves_its_cells_without_a_result(bench):
    codes = np.ones((4, 6), dtype=np.uint8)
    codes[:, :3] = 9
    layers = lithology(bench, codes, "code,rock\n1,basalt\n")
    layers["lithology"]["unknown"] = "nodata"
    found = bench.run(layers).totals
    assert found.valid_area.sum() == pytest.approx(found.area.sum() / 2, rel=1e-9)


def test_26_a_class_of_the_legend_that_the_map_lacks_is_noted(bench):
    layers = lithology(bench, np.ones((4, 6), np.uint8), "code,rock\n1,basalt\n7,granite\n")
    assert any("7" in note and "not on the map" in note for note in bench.plan(layers).notes)


def test_27_a_float64_nodata_tag_masks_float32_data(bench):
    values = np.full((4, 6), 280.0, dtype=np.float32)
    values[0, 0] = -3.4e38
    path = bench.tif("t.tif", values, unit="K", nodata=float(np.float32(-3.4e38)))
    found = bench.layer("temperature", path).values(WHOLE)
    assert np.isnan(found[0, 0])
    assert np.isfinite(found).sum() == 23


def test_28_minus_9999_beside_a_nan_tag_is_refused_with_the_line_to_write(bench):
    values = np.full((4, 6), 280.0, dtype=np.float32)
    values[0, 0], values[0, 1] = -9999, np.nan
    path = bench.tif("t.tif", values, unit="K", nodata=np.nan)
    with pytest.raises(ValuesError, match=r"1 of 23 values.*-9999") as refused:
        bench.layer("temperature", path).values(WHOLE)
    assert "nodata = -9999" in refused.value.fix
    mended = bench.layer("temperature", path, nodata=-9999).values(WHOLE)
    assert np.isnan(mended).sum() == 2


def test_29_a_nodata_tag_that_the_type_cannot_hold_counts_as_none(bench):
    path = bench.tif("v.tif", np.full((4, 6), 1, np.uint8), unit="1")
    with rasterio.open(path, "r+") as file:
        file.update_tags(ns="", GDAL_NODATA="-9999")
    patched = path.read_bytes()
    assert b"-9999" in patched
    layer = bench.layer("vegetation", path)
    assert (layer.values(WHOLE) == 1).all()


def test_30_an_internal_mask_is_honoured(bench):
    path = bench.tif("t.tif", np.full((4, 6), 280.0, np.float32), unit="K")
    with rasterio.Env(GDAL_TIFF_INTERNAL_MASK=True), rasterio.open(path, "r+") as file:
        mask = np.full((4, 6), 255, np.uint8)
        mask[1, 2] = 0
        file.write_mask(mask)
    found = bench.layer("temperature", path).values(WHOLE)
    assert np.argwhere(np.isnan(found)).tolist() == [[1, 2]]


def test_30_an_alpha_band_is_honoured_and_not_taken_for_data(bench):
    bands = np.full((2, 4, 6), 200, np.uint8)
    bands[1, 3, 5] = 0
    path = bench.tif("v.tif", bands, photometric="MINISBLACK", alpha="YES")
    found = bench.layer("vegetation", path, units="%", scale=0.5).values(WHOLE)
    assert np.argwhere(np.isnan(found)).tolist() == [[3, 5]]
    assert np.nanmax(found) == 1.0


def test_31_scale_and_offset_are_applied_once_in_geotiff_and_netcdf(bench):
    tif = bench.tif("t.tif", np.full((4, 6), 185, np.int16), unit="degC", scale=(0.1, 0.0))
    assert bench.layer("temperature", tif).values(WHOLE)[0, 0] == pytest.approx(291.65)
    packed = bench.field(
        "t.nc",
        np.full((4, 6), 185, np.int16),
        [3.5, 2.5, 1.5, 0.5],
        np.arange(0.5, 6),
        units="degC",
        scale_factor=0.1,
        add_offset=1.0,
        _FillValue=np.int16(-1),
    )
    assert bench.layer("temperature", packed).values(WHOLE)[0, 0] == pytest.approx(292.65)


LAT, LON = [3.5, 2.5, 1.5, 0.5], np.arange(0.5, 6)


def test_32_fill_value_and_a_vector_of_missing_values_are_all_masked(bench):
    values = np.full((4, 6), 280.0, np.float32)
    values[0, :3] = -999, -888, -777
    path = bench.field(
        "t.nc",
        values,
        LAT,
        LON,
        units="K",
        missing_value=np.array([-888, -777], np.float32),
        _FillValue=np.float32(-999),
    )
    found = bench.layer("temperature", path).values(WHOLE)
    assert np.isnan(found[0, :3]).all()
    assert np.isfinite(found).sum() == 21


def test_33_the_untagged_fill_is_masked_and_noted(bench):
    values = np.full((4, 6), 500.0, np.float32)
    values[0, 0] = 9.96921e36
    path = bench.field("r.nc", values, LAT, LON, units="mm yr-1")
    plan = bench.plan({"runoff": {"path": str(path)}})
    assert np.isnan(plan.layers["runoff"].values(WHOLE)[0, 0])
    assert any("9.96921e+36" in note for note in plan.notes)


@pytest.mark.parametrize("attrs", [{"valid_range": [200, 330]}, {"valid_max": 330}])
def test_33_values_outside_the_valid_range_are_masked(bench, attrs):
    values = np.full((4, 6), 280.0, np.float32)
    values[0, 0] = 331
    attrs = {key: np.array(value, np.float32) for key, value in attrs.items()}
    path = bench.field("t.nc", values, LAT, LON, units="K", **attrs)
    assert np.isnan(bench.layer("temperature", path).values(WHOLE)[0, 0])


def test_33_a_fractional_valid_range_of_packed_numbers_is_one_of_what_they_mean(bench):
    values = np.full((4, 6), 2800, np.int16)
    values[0, :2] = 3300, 3301
    path = bench.field(
        "t.nc", values, LAT, LON, units="K", scale_factor=0.1, valid_range=np.array([200.0, 330.0])
    )
    found = bench.layer("temperature", path).values(WHOLE)
    assert found[0, 0] == pytest.approx(330.0)
    assert np.isnan(found).sum() == 1
    assert np.isnan(found[0, 1])


def test_bytes_marked_as_unsigned_are_read_so_and_their_attributes_too(bench):
    values = np.full((4, 6), 100, np.int8)
    values[0, :3] = -1, -56, -55  # 255, 200 and 201 as bytes are meant
    path = bench.field(
        "v.nc",
        values,
        LAT,
        LON,
        units="1",
        scale_factor=0.005,
        missing_value=np.int8(-1),
        valid_max=np.int8(-56),
        _Unsigned="true",
    )
    found = bench.layer("vegetation", path, units="1").values(WHOLE)
    np.testing.assert_array_equal(np.isnan(found[0]), [True, False, True, False, False, False])
    assert found[0, 1] == pytest.approx(1.0)
    assert found[0, 3] == pytest.approx(0.5)


def test_36_infinities_are_masked_and_counted(bench):
    values = np.full((4, 6), 500.0, np.float32)
    values[0, :4] = np.inf, -np.inf, 1e-42, -0.0
    path = bench.tif("r.tif", values, unit="mm yr-1")
    plan = bench.plan({"runoff": {"path": str(path)}})
    found = plan.layers["runoff"].values(WHOLE)
    assert np.isnan(found[0, :2]).all()
    assert (found[0, 2:4] < 1e-40).all()
    assert any("2 infinite" in note for note in plan.notes)


def test_36_negative_runoff_counts_as_zero_and_is_flagged(bench):
    values = np.full((4, 6), 500.0, np.float32)
    values[0] = -10
    path = bench.tif("r.tif", values, unit="mm yr-1")
    found = bench.run({"runoff": {"path": str(path)}}).totals
    flagged = found.flagged["negative_runoff"]
    assert flagged == pytest.approx(found.area.sum() / 4, rel=5e-3)
    assert found.valid_area.sum() == pytest.approx(found.area.sum(), rel=1e-12)


def test_37_a_layer_without_any_data_gives_zero_totals_and_an_empty_map(bench):
    path = bench.tif("r.tif", np.full((4, 6), np.nan, np.float32), unit="mm yr-1")
    layers = {"runoff": {"path": str(path)}}
    assert any("runoff: no cell looked at has data" in note for note in bench.plan(layers).notes)
    result = bench.run(layers)
    assert result.totals.consumption.sum() == 0
    assert result.totals.valid_area.sum() == 0
    with rasterio.open(result.folder / "maps" / "drawdown.tif") as file:
        assert np.isnan(file.read(1)).all()


def test_37_a_geological_map_that_maps_no_cell_is_refused_with_what_to_check(bench):
    path = bench.tif("none.tif", np.zeros((4, 6), np.uint8), nodata=0)
    lithology = {"path": str(path), "legend": str(bench.legend())}
    with pytest.raises(ValuesError, match="not a single cell") as caught:
        bench.plan({"lithology": lithology})
    assert "check nodata" in str(caught.value)


@pytest.mark.parametrize("dtype", ["int8", "uint16", "int64", "uint64", "float64"])
def test_38_real_number_types_are_exact(bench, dtype):
    path = bench.tif("r.tif", np.full((4, 6), 100, dtype), unit="mm yr-1")
    plan = bench.plan({"runoff": {"path": str(path)}})
    assert (plan.layers["runoff"].values(WHOLE) == 100).all()


def test_38_half_floats_are_read(bench):
    path = bench.field("r.nc", np.full((4, 6), 100.5, np.float16), LAT, LON, units="mm yr-1")
    plan = bench.plan({"runoff": {"path": str(path)}})
    assert (plan.layers["runoff"].values(WHOLE) == 100.5).all()


@pytest.mark.parametrize("dtype", ["complex64", "complex_int16"])
def test_38_complex_bands_are_refused(bench, dtype):
    path = bench.tif("r.tif", np.full((4, 6), 1, np.complex64), unit="mm yr-1", dtype=dtype)
    with pytest.raises(FileFormatError, match=f"holds {dtype}"):
        bench.plan({"runoff": {"path": str(path)}})


def test_38_whole_numbers_beyond_two_to_the_53_are_refused(bench):
    values = np.full((4, 6), 100, np.int64)
    values[2, 2] = 2**53 + 1
    path = bench.tif("r.tif", values, unit="mm yr-1")
    with pytest.raises(ValuesError, match="9007199254740993"):
        bench.plan({"runoff": {"path": str(path)}})


def test_38_fractional_codes_are_refused(bench):
    codes = np.ones((4, 6), np.float32)
    codes[0, 0] = 1.5
    with pytest.raises(ValuesError, match=r"1 codes are not whole numbers.*1\.5"):
        bench.plan(lithology(bench, codes, "code,rock\n1,basalt\n"))


@pytest.mark.parametrize(
    ("value", "unit", "seen"), [(290.0, "degC", "563.15"), (15.0, "K", "15"), (5.0, "K", "5")]
)
def test_39_a_temperature_under_the_wrong_unit_is_refused_with_the_median(bench, value, unit, seen):
    path = bench.tif("t.tif", np.full((4, 6), value, np.float32), unit=unit)
    with pytest.raises(ValuesError, match=f"median {seen}"):
        bench.layer("temperature", path).values(WHOLE)


def test_39_a_temperature_without_unit_is_refused(bench):
    path = bench.tif("t.tif", np.full((4, 6), 290.0, np.float32))
    with pytest.raises(UnitError, match="no unit"):
        bench.layer("temperature", path)


def test_40_an_amount_without_its_period_is_asked_about(bench):
    path = bench.tif("r.tif", np.full((4, 6), 50.0, np.float32), unit="mm")
    with pytest.raises(UnitError, match="period is not said") as refused:
        bench.plan({"runoff": {"path": str(path)}})
    assert "mm yr-1" in refused.value.fix


def test_40_a_flux_is_read_per_year_of_365_25_days(bench):
    path = bench.tif("r.tif", np.full((4, 6), 1e-5, np.float32), unit="kg m-2 s-1")
    plan = bench.plan({"runoff": {"path": str(path)}})
    expected = float(np.float32(1e-5)) * 365.25 * 86_400
    np.testing.assert_allclose(plan.layers["runoff"].values(WHOLE), expected, rtol=1e-12)


@pytest.mark.parametrize(
    ("unit", "kelvin"),
    [("deg C", 283.15), ("°C", 283.15), (" degC  ", 283.15), ("Celsius", 283.15)],
)
def test_41_listed_spellings_of_celsius_are_read(bench, unit, kelvin):
    path = bench.field("t.nc", np.full((4, 6), 10.0), LAT, LON, units=unit)
    assert bench.layer("temperature", path).values(WHOLE)[0, 0] == pytest.approx(kelvin)


def test_41_a_degree_sign_in_latin_1_is_read(bench):
    path = bench.field("t.nc", np.full((4, 6), 10.0), LAT, LON)
    with h5py.File(path, "r+") as file:
        file["v"].attrs["units"] = np.bytes_("\u00b0C".encode("latin-1"))
    assert bench.layer("temperature", path).values(WHOLE)[0, 0] == pytest.approx(283.15)


@pytest.mark.parametrize("unit", ["g C m-2 yr-1", "1e-3 m", "mm/h", "furlong yr-1", "1"])
def test_41_units_that_are_not_listed_are_refused_with_the_list(bench, unit):
    path = bench.tif("r.tif", np.full((4, 6), 10.0, np.float32), unit=unit)
    with pytest.raises(UnitError, match="is not one that water may have") as refused:
        bench.plan({"runoff": {"path": str(path)}})
    assert "mm yr-1" in refused.value.fix


@pytest.mark.parametrize("top", [100, 255, 10_000])
def test_42_a_cover_above_one_without_a_scale_is_refused(bench, top):
    path = bench.tif("v.tif", np.full((4, 6), top, np.int16), unit="1")
    with pytest.raises(ValuesError, match=f"median {top}"):
        bench.layer("vegetation", path).values(WHOLE)
    mended = bench.layer("vegetation", path, scale=1 / top)
    assert mended.values(WHOLE)[0, 0] == pytest.approx(1.0)


def test_42_a_cover_without_unit_is_refused(bench):
    path = bench.tif("v.tif", np.full((4, 6), 50, np.uint8))
    with pytest.raises(UnitError, match="no unit"):
        bench.layer("vegetation", path)


def test_the_class_count_of_a_run_matches_a_count_of_the_codes(bench):
    rng = np.random.default_rng(3)
    codes = rng.integers(1, 3, (4, 6)).astype(np.uint8)
    layers = lithology(bench, codes, "code,rock\n1,basalt\n2,granite\n")
    plan = bench.plan(layers)
    rocks = plan.lithology.rock_cells(WHOLE)
    basalt = ROCK_NAMES.index("basalt")
    np.testing.assert_array_equal(
        np.sort(rocks.cell[rocks.rock == basalt]), np.flatnonzero(codes == 1)
    )


def test_a_text_fill_value_is_refused_by_name(bench):
    path = bench.field("t.nc", np.full((4, 6), 280.0), LAT, LON, units="K", missing_value="none")
    with pytest.raises(ValuesError, match="missing_value is 'none'"):
        bench.layer("temperature", path)
