"""Draws of a job that averages the rates of months, against every cell, month and draw."""

import numpy as np
import pytest
import xarray as xr

from mapper.accounting import tonnes_per_mole
from mapper.engine import KEPT
from mapper.grid import Window, cell_areas
from mapper.job import load_job
from mapper.pipeline import run
from mapper.planning import make_plan
from mapper.rocks import ROCK_NAMES
from mapper.uncertainty import cells
from mapper.uncertainty.cells import MAP_LEVELS, cell_intervals, first_draws
from mapper.uncertainty.spread import make_draws
from tests.making import LON_LAT, write_legend, write_raster

DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
SHAPE = (5, 7)
WHOLE = Window(0, 0, *SHAPE)


@pytest.fixture
def job(tmp_path):
    """Basalt on 35 cells under months from frost to heat, and spreads that bend the mean."""
    random = np.random.default_rng(5)
    season = np.linspace(-12.0, 24.0, 12)[:, None, None]
    degrees = season + random.uniform(-6.0, 6.0, (12, *SHAPE))
    lat, lon = 40.0 - 0.1 * np.arange(SHAPE[0]), 10.0 + 0.1 * np.arange(SHAPE[1])
    xr.Dataset(
        {"tas": (("time", "lat", "lon"), degrees + 273.15, {"units": "K"})},
        coords={
            "time": xr.date_range("2001-01-01", periods=12, freq="MS"),
            "lat": ("lat", lat, {"units": "degrees_north"}),
            "lon": ("lon", lon, {"units": "degrees_east"}),
        },
    ).to_netcdf(tmp_path / "tas.nc", engine="h5netcdf")
    place = {"cell": 0.1, "left": 9.95, "top": 40.05, "crs": LON_LAT}
    write_raster(tmp_path / "rock.tif", np.ones(SHAPE), dtype="uint8", **place)
    runoff = random.uniform(200.0, 1500.0, SHAPE)
    write_raster(tmp_path / "runoff.tif", runoff, unit="mm yr-1", **place)
    write_legend(tmp_path / "legend.csv", "code,rock\n1,basalt\n")
    (tmp_path / "job.toml").write_text(
        """
        layers.lithology = { path = "rock.tif", legend = "legend.csv" }
        layers.runoff.path = "runoff.tif"
        layers.temperature.path = "tas.nc"
        law.default = "dessert-2003"
        time.mean = "rates"
        uncertainty.draws = 60
        uncertainty.seed = 11
        uncertainty.layers.temperature.sd = 2.0
        uncertainty.layers.runoff.sd = 0.2
        output.write = []
        """,
        encoding="utf-8",
    )
    return load_job(tmp_path / "job.toml"), degrees + 273.15, runoff


def by_hand(plan, samples, kelvin, runoff):
    """Drawdown of every draw and cell [mol m-2 yr-1], (n_draws, *SHAPE)."""
    law = plan.scheme.by_rock["basalt"]
    out = np.zeros((samples.n_draws, *SHAPE))
    for draw in range(samples.n_draws):
        at = draw + 1  # the central run comes first
        values = {
            **law.values,
            **{name: float(one[at, 0]) for name, one in samples.parameters["basalt"].items()},
        }
        bias, factor = (float(samples.layers[one][at, 0]) for one in ("temperature", "runoff"))
        read = {"runoff": runoff * factor}
        for month in range(12):
            read["temperature"] = kelvin[month] + bias
            rate = law.law.function(*(read[one] for one in law.law.input_names), **values)
            out[draw] += DAYS[month] / 365 * rate
        out[draw] *= float(samples.kept["basalt"][at, 0])
    return out * KEPT[ROCK_NAMES.index("basalt")]


def test_totals_of_draws_are_those_of_every_cell_and_month(job, tmp_path):
    spec, kelvin, runoff = job
    found = run(spec, out=tmp_path / "out").spread
    plan = make_plan(spec)
    rates = by_hand(plan, found.draws.samples, kelvin, runoff)
    expected = (rates * cell_areas(plan.grid, WHOLE)).sum(axis=(1, 2)) * tonnes_per_mole()
    drawn = found.drawn.drawdown.sum(axis=1)
    np.testing.assert_allclose(drawn, expected, rtol=1e-3)
    of_mean = by_hand(
        plan, found.draws.samples, np.tile(np.average(kelvin, 0, DAYS), (12, 1, 1)), runoff
    )
    assert (rates.sum(axis=(1, 2)) > 1.02 * of_mean.sum(axis=(1, 2))).mean() > 0.9


def test_intervals_of_cells_are_those_of_every_month(job, monkeypatch):
    spec, kelvin, runoff = job
    plan = make_plan(spec)
    samples = make_draws(spec, plan).samples
    expected = np.quantile(by_hand(plan, samples, kelvin, runoff), MAP_LEVELS, axis=0)
    for at_once in (2**17, 15):
        monkeypatch.setattr(cells, "CELLS_OF_MONTHS", at_once)
        found = cell_intervals(plan, WHOLE, first_draws(samples, spec.uncertainty.draws))
        np.testing.assert_allclose(found, expected, rtol=1e-9)
