"""The benchmarks, small: they run, and what they compare agrees; times are only printed."""

import csv

import numpy as np
import pytest
import rasterio

from tests.benchmarks import report

SIDE = 640


@pytest.fixture(scope="module")
def measured(tmp_path_factory):
    folder = tmp_path_factory.mktemp("benchmarks")
    found = report.measure_all(folder, SIDE, SIDE, draws=20, draws_tried=1)
    print("\n".join(report.lines(found)))
    return folder, found


def maps(folder, name="consumption"):
    with rasterio.open(folder / f"{name}.tif") as file:
        return file.read(1)


def test_the_plain_script_finds_the_same_maps(measured):
    folder, _ = measured
    for name in ("consumption", "drawdown"):
        ours, theirs = maps(folder / "full" / "maps", name), maps(folder / "plain", name)
        np.testing.assert_allclose(ours, theirs, rtol=1e-5)


def test_the_plain_script_finds_the_same_totals_of_every_region_and_rock(measured):
    folder, found = measured
    with (folder / "full" / "tables" / "regions_by_rock.csv").open(encoding="utf-8") as stream:
        rows = [row for row in csv.DictReader(stream) if row["rock"] in found["totals"]]
    ours = {
        (row["rock"], row["region"]): float(row["consumption_t_per_yr"])
        for row in rows
        if row["region"].startswith("R")
    }
    theirs = {
        (rock, region): value
        for rock, regions in found["totals"].items()
        for region, value in regions.items()
        if (rock, region) in ours or value
    }
    assert len(ours) > 100
    assert ours.keys() == theirs.keys()
    for key, value in ours.items():
        assert value == pytest.approx(theirs[key], rel=2e-5, abs=1e-3), key


def test_the_floor_writes_maps_of_the_same_shape_and_kind(measured):
    folder, _ = measured
    for name, kind in (("one", "float32"), ("two", "float32"), ("three", "uint8")):
        with rasterio.open(folder / "floor" / f"{name}.tif") as file:
            assert (file.shape, file.dtypes[0]) == ((SIDE, SIDE), kind)
            assert file.tags(ns="IMAGE_STRUCTURE")["LAYOUT"] == "COG"


def test_threads_processes_and_draws_leave_the_same_maps(measured):
    folder, _ = measured
    for name in ("consumption", "drawdown", "flags"):
        first = (folder / "map" / "maps" / f"{name}.tif").read_bytes()
        for other in ("full", "local"):
            assert (folder / other / "maps" / f"{name}.tif").read_bytes() == first


def test_a_larger_grid_of_the_same_land_has_the_same_totals(measured, tmp_path):
    folder, small = measured
    map_job, _ = report.make_jobs(tmp_path, 2 * SIDE, 2 * SIDE, 20)
    large = report.run_job(map_job, tmp_path / "map")
    cells = small["cells"]
    print(
        f"growth: {small['seconds']['maps and tables']:.2f} s for {cells / 1e6:.2f} million "
        f"cells, {large.seconds:.2f} s for {4 * cells / 1e6:.2f} million"
    )
    totals = []
    for out in (folder / "map", tmp_path / "map"):
        with (out / "tables" / "regions.csv").open(encoding="utf-8") as stream:
            totals.append(float(list(csv.DictReader(stream))[-1]["consumption_t_per_yr"]))
    assert totals[1] == pytest.approx(totals[0], rel=0.01)
