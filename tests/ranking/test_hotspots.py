import numpy as np
import pytest
import rasterio

import mapper.hotspots
from mapper.doubts import HotspotsSpec
from mapper.hotspots import find_hotspots, hotspot_rows


def written(folder, values, crs="EPSG:6933"):
    """A map of 1 km cells on equal-area ground, its top left corner at 0, 0."""
    values = np.asarray(values, dtype=np.float32)
    path = folder / "drawdown.tif"
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=values.shape[1],
        height=values.shape[0],
        count=1,
        dtype="float32",
        crs=crs,
        nodata=np.nan,
        transform=rasterio.Affine(1000, 0, 0, 0, -1000, 0),
    ) as target:
        target.write(values, 1)
    return path


NAN = float("nan")
FIELD = [
    [9, 9, 0, 0, 5],
    [9, 0, 0, 0, 5],
    [0, 8, 0, 0, 5],
    [0, 0, NAN, 0, 0],
]


def test_cells_that_share_a_side_are_one_place_and_corners_are_not(tmp_path):
    found = find_hotspots(written(tmp_path, FIELD), HotspotsSpec(above=5.0))
    assert found.total_t_per_yr.tolist() == pytest.approx([27.0, 15.0, 8.0], rel=1e-3)
    assert found.area_km2.tolist() == pytest.approx([3.0, 3.0, 1.0], rel=1e-3)
    assert found.mean_t_per_km2_yr.tolist() == pytest.approx([9.0, 5.0, 8.0])
    assert found.geometry.area.tolist() == [3e6, 3e6, 1e6]
    assert found.hotspot.tolist() == [1, 2, 3]
    point = found.geometry.iloc[1].representative_point()
    assert (point.x, point.y) == (found.x[1], found.y[1]) == pytest.approx((4500, -1500), abs=600)


def test_small_places_are_left_out(tmp_path):
    spec = HotspotsSpec(above=5.0, least_area_km2=2.0)
    assert len(find_hotspots(written(tmp_path, FIELD), spec)) == 2


def test_the_richest_share_of_the_area_sets_the_threshold(tmp_path):
    path = written(tmp_path, [[1, 2, 3, 4, 5], [6, 7, 8, 9, 10], [NAN] * 5])
    found = find_hotspots(path, HotspotsSpec(richest_area_share=0.2))
    assert found.attrs["above"] == 9.0
    assert found.area_km2.sum() == pytest.approx(2.0, rel=1e-3)


def test_no_cell_above_gives_an_empty_table(tmp_path):
    found = find_hotspots(written(tmp_path, FIELD), HotspotsSpec(above=100.0))
    assert hotspot_rows(found) == []
    assert found.crs.to_epsg() == 6933


@pytest.mark.parametrize("rows", [1, 3, 7])
def test_strips_do_not_cut_places(tmp_path, monkeypatch, rows):
    random = np.random.default_rng(4)
    path = written(tmp_path, random.uniform(0, 1, (40, 30)))
    spec = HotspotsSpec(above=0.45)  # near the threshold of percolation: long winding places
    whole = find_hotspots(path, spec)
    monkeypatch.setattr(mapper.hotspots, "CELLS_AT_ONCE", 30 * rows)
    strips = find_hotspots(path, spec)
    assert whole.total_t_per_yr.tolist() == pytest.approx(strips.total_t_per_yr.tolist())
    assert all(a.equals(b) for a, b in zip(whole.geometry, strips.geometry, strict=True))
