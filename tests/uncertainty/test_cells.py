from dataclasses import replace

import numpy as np
import pytest
import rasterio
from scipy.special import ndtri
from worlds import ISLAND

from mapper.doubts import UncertaintySpec
from mapper.engine import evaluate_block
from mapper.grid import Window
from mapper.job import load_job
from mapper.laws import Spread
from mapper.lawspec import LawSpec, ParameterSpec
from mapper.pipeline import run
from mapper.planning import make_plan
from mapper.uncertainty.cells import cell_intervals, first_draws
from mapper.uncertainty.spread import make_draws

WINDOW = Window(300, 400, 60, 70)


def prepared(spec, **parameters):
    job = load_job(ISLAND)
    asked = {
        "concentration": ParameterSpec(
            by_rock={"ultramafic rock": 0.479}, spread=Spread(kind="lognormal", sd=0.0)
        ),
        **parameters,
    }
    law = LawSpec(default="amiotte-suchet-1995", parameters=asked)
    job = replace(job, law=law, uncertainty=spec)
    plan = make_plan(job)
    return plan, make_draws(job, plan)


def test_a_factor_of_the_runoff_map_is_a_factor_of_every_cells_interval():
    spec = UncertaintySpec(
        draws=200,
        layers={"runoff": Spread(kind="lognormal", sd=0.3)},
        kept_share=Spread(kind="lognormal", sd=0.0),
    )
    plan, draws = prepared(spec)
    low, high = cell_intervals(plan, WINDOW, first_draws(draws.samples, 200))
    central = evaluate_block(plan, WINDOW)[0].drawdown
    assert (np.isnan(low) == np.isnan(central)).all()
    some = central > 0
    assert some.any()
    for found, level in ((low, 0.05), (high, 0.95)):
        ratio = found[some] / central[some]
        assert np.ptp(ratio) < 1e-12
        assert ratio[0] == pytest.approx(np.exp(0.3 * ndtri(level)), rel=0.03)


def test_without_spread_the_interval_of_a_cell_is_its_value():
    spec = UncertaintySpec(draws=3, kept_share=Spread(kind="lognormal", sd=0.0))
    plan, draws = prepared(spec)
    low, high = cell_intervals(plan, WINDOW, first_draws(draws.samples, 3))
    central = evaluate_block(plan, WINDOW)[0].drawdown
    np.testing.assert_allclose(low, central, rtol=1e-14)
    np.testing.assert_allclose(high, central, rtol=1e-14)


def test_maps_of_intervals_are_written_where_the_job_asks(tmp_path):
    job = load_job(ISLAND)
    job = replace(job, uncertainty=replace(job.uncertainty, draws=20, maps=True))
    run(job, out=tmp_path)
    read = {}
    for name in ("drawdown_p05", "drawdown", "drawdown_p95"):
        with rasterio.open(tmp_path / "maps" / f"{name}.tif") as source:
            read[name] = source.read(1)
    some = read["drawdown"] > 0
    assert (np.isnan(read["drawdown_p05"]) == np.isnan(read["drawdown"])).all()
    assert (read["drawdown_p05"][some] < read["drawdown_p95"][some]).all()
    inside = (read["drawdown_p05"] <= read["drawdown"]) & (read["drawdown"] <= read["drawdown_p95"])
    assert inside[some].mean() > 0.9
