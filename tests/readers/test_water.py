"""Runoff from climate: formulas against their tables, and jobs that derive it."""

from __future__ import annotations

import json
from pathlib import Path

import cftime
import numpy as np
import pandas as pd
import pyet
import pytest

import mapper
from mapper.cli import main
from mapper.engine import read_inputs
from mapper.errors import JobError
from mapper.evaporation import (
    POTENTIAL,
    day_length,
    extraterrestrial_radiation,
    oudin_day,
)
from mapper.grid import Window, cell_areas
from mapper.hydrology import CURVES, derive_runoff, evapotranspiration, zhang_2001
from mapper.planning import make_plan

# phi, then Budyko, Pike, Fu 2.6, Ol'dekop, Schreiber, Zhang 2, Zhang 0.5: computed from the
# published formulas for the project's reference collection, apart from this code
TABLE = [
    (0.5, 0.4355, 0.4472, 0.4395, 0.4820, 0.3935, 0.5000, 0.3846),
    (1.0, 0.6938, 0.7071, 0.6945, 0.7616, 0.6321, 0.7500, 0.6000),
    (2.0, 0.8940, 0.8944, 0.8790, 0.9242, 0.8647, 0.9091, 0.8000),
    (4.0, 0.9807, 0.9701, 0.9585, 0.9797, 0.9817, 0.9730, 0.9231),
]
NAMES = ["budyko-1974", "turc-pike", "fu-1981", "oldekop", "schreiber"]


@pytest.mark.parametrize("row", TABLE)
def test_curves_of_dryness_repeat_the_table_of_the_reference_collection(row):
    phi = np.array([row[0]])
    for name, expected in zip(NAMES, row[1:6], strict=True):
        assert CURVES[name](phi)[0] == pytest.approx(expected, abs=6e-5), name
    assert zhang_2001(phi, plants=2.0)[0] == pytest.approx(row[6], abs=6e-5)
    assert zhang_2001(phi, plants=0.5)[0] == pytest.approx(row[7], abs=6e-5)


@pytest.mark.parametrize(
    ("rain", "celsius", "runoff"),
    [(1000, 20, 208.1), (600, 10, 164.7), (2500, 26, 997.6), (300, 15, 3.9), (800, 5, 416.0)],
)
def test_turc_repeats_the_runoff_of_the_reference_collection(rain, celsius, runoff):
    found = derive_runoff("turc-1954", np.array([rain * 1.0]), np.array([celsius + 273.15]))
    assert found[0] == pytest.approx(runoff, abs=0.06)


@pytest.mark.parametrize("method", [*NAMES, "zhang-2001"])
def test_no_method_evaporates_more_than_falls_or_than_the_air_takes_up(method):
    rain, potential = np.meshgrid(np.geomspace(1, 5000, 30), np.geomspace(1, 3000, 30))
    found = evapotranspiration(method, rain, potential, np.full(rain.shape, 0.5))
    assert (found <= rain * (1 + 1e-12)).all()
    if method != "zhang-2001":  # with w = 2 its own formula passes the energy limit when wet
        assert (found <= potential * (1 + 1e-12)).all()
    assert (found > 0).all()


@pytest.mark.parametrize("method", [*NAMES, "zhang-2001"])
def test_nothing_falls_or_nothing_is_taken_up_and_nothing_evaporates(method):
    rain, potential = np.array([0.0, 500.0, np.nan]), np.array([900.0, 0.0, 900.0])
    found = evapotranspiration(method, rain, potential, np.ones(3))
    assert found[:2].tolist() == [0.0, 0.0]
    assert np.isnan(found[2])


def test_plants_lower_runoff_under_zhang():
    rain, potential = np.full(2, 1000.0), np.full(2, 1000.0)
    found = evapotranspiration("zhang-2001", rain, potential, np.array([0.0, 1.0]))
    np.testing.assert_allclose(found, [600.0, 750.0])


@pytest.mark.parametrize("latitude", [-55.0, 0.0, 23.4, 45.0, 65.0])
def test_sunlight_and_day_length_agree_with_pyet(latitude):
    days = pd.date_range("2001-01-01", "2001-12-31")
    lat = np.deg2rad(latitude)
    radiation = pyet.extraterrestrial_r(days, lat)
    hours = pyet.daylight_hours(days, lat)
    for day in (1, 80, 172, 266, 355):
        where = np.array([latitude])
        assert extraterrestrial_radiation(where, day)[0] == pytest.approx(
            np.ravel(radiation)[day - 1], rel=3e-3
        )
        assert day_length(where, day)[0] == pytest.approx(np.ravel(hours)[day - 1], rel=3e-3)


def test_oudin_agrees_with_pyet_through_a_year():
    days = pd.date_range("2001-01-01", "2001-12-31")
    celsius = pd.Series(10 - 15 * np.cos(2 * np.pi * np.arange(365) / 365), index=days)
    lat = 45.0
    # pyet's heat of vaporisation varies with temperature; the law's is 2.45 MJ kg-1
    expected = pyet.oudin(celsius, np.deg2rad(lat)) * (2.501 - 0.002361 * celsius) / 2.45
    radiation = np.array(
        [extraterrestrial_radiation(np.array([lat]), day)[0] for day in range(1, 366)]
    )
    found = oudin_day(celsius.to_numpy(), radiation)
    np.testing.assert_allclose(found, expected.to_numpy(), rtol=3e-3, atol=1e-9)
    # means of months stand for their days to two in a hundred
    months = celsius.groupby(celsius.index.month).mean().to_numpy()[:, None] + 273.15
    year = POTENTIAL["oudin-2005"](months, np.array([lat]))[0]
    assert year == pytest.approx(expected.sum(), rel=0.02)


@pytest.mark.parametrize("method", list(POTENTIAL))
def test_polar_night_frost_and_heat_give_finite_sums(method):
    for kelvin in (230.0, 273.15, 300.0, 312.0):
        found = POTENTIAL[method](np.full((12, 3), kelvin), np.array([-89.0, 0.0, 89.0]))
        assert np.isfinite(found).all()
        assert (found >= 0).all()


def monthly_temperature(bench, celsius):
    unit = "days since 1990-01-01"
    time = [
        cftime.date2num(cftime.datetime(1995, m, 15, calendar="noleap"), unit, "noleap")
        for m in range(1, 13)
    ]
    cube = np.broadcast_to(np.asarray(celsius, float)[:, None, None], (12, 4, 6))
    return bench.nc(
        "monthly.nc",
        {"v": (("time", "lat", "lon"), cube, {"units": "degC"})},
        {
            "time": ("time", time, {"units": unit, "calendar": "noleap"}),
            "lat": ("lat", [3.5, 2.5, 1.5, 0.5], {"units": "degrees_north"}),
            "lon": ("lon", np.arange(0.5, 6), {"units": "degrees_east"}),
        },
    )


CELSIUS = [20, 21, 22, 24, 26, 25, 24, 24, 24, 23, 22, 21]
WHOLE = Window(0, 0, 4, 6)


def climate_job(bench, water, *, monthly=True, law=None, **more):
    rain = bench.tif("p.tif", np.full((4, 6), 1500.0, np.float32), unit="mm yr-1")
    layers = {"precipitation": {"path": str(rain)}}
    if monthly:
        layers["temperature"] = {"path": str(monthly_temperature(bench, CELSIUS))}
    else:
        path = bench.tif("t.tif", np.full((4, 6), 296.0, np.float32), unit="K")
        layers["temperature"] = {"path": str(path)}
    spec = bench.job(layers | more, water=water, law=law or {"default": "amiotte-suchet-1995"})
    lines, keep = spec.read_text().split("\n"), []
    skip = False
    for line in lines:  # the bench adds a runoff layer; here it is derived
        skip = line == "[layers.runoff]" or (skip and not line.startswith("["))
        if not skip:
            keep.append(line)
    spec.write_text("\n".join(keep))
    return mapper.load_job(spec)


@pytest.mark.parametrize("method", [*NAMES, "zhang-2001"])
@pytest.mark.parametrize("potential", list(POTENTIAL))
def test_a_job_derives_runoff_by_each_method(bench, method, potential):
    cover = bench.tif("v.tif", np.full((4, 6), 0.5, np.float32), unit="1")
    job = climate_job(
        bench, {"method": method, "potential": potential}, vegetation={"path": str(cover)}
    )
    plan = make_plan(job)
    found = read_inputs(plan, WHOLE)["runoff"]
    months = np.repeat(np.array(CELSIUS, float)[:, None] + 273.15, 24, axis=1)
    latitude = np.repeat([3.5, 2.5, 1.5, 0.5], 6)
    rain = np.full(24, 1500.0)
    expected = rain - evapotranspiration(
        method, rain, POTENTIAL[potential](months, latitude), np.full(24, 0.5)
    )
    np.testing.assert_allclose(found, expected, rtol=1e-9)
    assert mapper.run(job).totals.consumption.sum() > 0


def test_the_record_and_the_terminal_balance_the_water_over_the_mapped_land(bench, capsys):
    rock = np.ones((4, 6), np.uint8)
    rock[0], rock[1, :3] = 0, 3  # no rock in the north; three cells of a lake
    path = bench.tif("some_rock.tif", rock, nodata=0)
    legend = bench.legend("code,rock\n1,basalt\n3,water\n")
    job = climate_job(
        bench,
        {"method": "turc-1954"},
        monthly=False,
        lithology={"path": str(path), "legend": str(legend)},
    )
    assert main(["run", job.path]) == 0
    found = json.loads((Path(job.folder) / "run.json").read_text())["result"]["water_balance"]
    areas = np.repeat(cell_areas(make_plan(job).grid, WHOLE).reshape(4, -1)[:, :1], 6, axis=1)
    land = areas[rock == 1].sum()
    runoff = derive_runoff("turc-1954", np.array([1500.0]), np.array([296.0]))[0]
    assert found["land_area_km2"] == pytest.approx(land / 1e6, rel=1e-12)
    assert found["precipitation_km3_per_yr"] == pytest.approx(1.5 * land / 1e9, rel=1e-9)
    assert found["runoff_km3_per_yr"] == pytest.approx(runoff / 1e3 * land / 1e9, rel=1e-7)
    assert found["closure"] < 1e-14
    line = next(one for one in capsys.readouterr().out.splitlines() if "runs off" in one)
    assert f"({100 * runoff / 1500:.0f} % of it)" in line


def test_runoff_that_is_given_has_no_balance(bench):
    assert bench.run().totals.water == {}


def test_a_curve_without_potential_evapotranspiration_is_refused_with_two_ways_out(bench):
    with pytest.raises(JobError, match="'budyko-1974' needs potential") as refused:
        make_plan(climate_job(bench, {"method": "budyko-1974"}))
    assert "oudin-2005" in refused.value.fix
    assert "layers.potential_evapotranspiration" in refused.value.fix


def test_potential_evapotranspiration_from_the_mean_of_a_year_is_refused(bench):
    job = climate_job(bench, {"method": "fu-1981", "potential": "oudin-2005"}, monthly=False)
    with pytest.raises(JobError, match="holds no months") as refused:
        make_plan(job)
    assert "turc-1954" in refused.value.fix


def test_zhang_without_vegetation_is_refused(bench):
    with pytest.raises(JobError, match="needs vegetation to derive runoff by zhang-2001"):
        make_plan(climate_job(bench, {"method": "zhang-2001", "potential": "oudin-2005"}))


def test_potential_evapotranspiration_may_be_given(bench):
    pet = bench.tif("pet.tif", np.full((4, 6), 1500.0, np.float32), unit="mm yr-1")
    job = climate_job(
        bench, {"method": "schreiber"}, potential_evapotranspiration={"path": str(pet)}
    )
    found = read_inputs(make_plan(job), WHOLE)["runoff"]
    np.testing.assert_allclose(found, 1500 * np.exp(-1.0))


def rates_job(bench, mean):
    bench.legend("code,rock\n1,basalt\n")
    path = bench.path("monthly.nc")
    if not path.exists():
        monthly_temperature(bench, np.linspace(-10, 25, 12))
    spec = bench.job(
        {"temperature": {"path": str(path)}},
        law={"default": "dessert-2003"},
        time={"mean": mean},
        output={"folder": str(bench.path(f"out-{mean}"))},
    )
    return mapper.load_job(spec)


def test_the_mean_of_monthly_rates_exceeds_the_rate_of_the_mean_where_the_law_bends_up(bench):
    climate = mapper.run(rates_job(bench, "climate")).totals.consumption.sum()
    rates = mapper.run(rates_job(bench, "rates")).totals.consumption.sum()
    law = mapper.LAWS["dessert-2003"]
    days = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
    kelvin = np.linspace(-10, 25, 12) + 273.15
    values = law.central_values("basalt")
    monthly = [law.function(np.array([500.0]), np.array([one]), **values)[0] for one in kelvin]
    at_mean = law.function(
        np.array([500.0]), np.array([np.average(kelvin, weights=days)]), **values
    )[0]
    expected = np.average(monthly, weights=days) / at_mean
    assert rates / climate == pytest.approx(expected, rel=1e-9)
    assert rates > 1.05 * climate


def test_the_record_says_by_how_much_the_two_means_differ(bench):
    plan = make_plan(rates_job(bench, "rates"))
    note = next(one for one in plan.notes if one.startswith("time:"))
    assert "%" in note


def test_monthly_rates_without_months_are_refused(bench):
    spec = bench.job(time={"mean": "rates"})
    with pytest.raises(JobError, match='mean = "rates", and no layer holds months'):
        make_plan(mapper.load_job(spec))
