"""The island as a whole: states against cells, bytes against bytes."""

from dataclasses import replace

import numpy as np
import pytest
from worlds import ISLAND

import mapper.engine
import mapper.pipeline
from mapper.accounting import tonnes_per_mole
from mapper.engine import KEPT, evaluate_block, evaluate_block_states
from mapper.grid import Window
from mapper.job import load_job
from mapper.pipeline import Engine, run
from mapper.planning import make_plan
from mapper.scheme import Scheme
from mapper.states import to_states
from mapper.sums import totals, unit_exponent
from mapper.uncertainty.propagate import propagate, shifted
from mapper.uncertainty.spread import MOST_APART, make_draws

TABLES = ("regions", "regions_by_rock", "ranking", "sensitivity")


def with_values(one, values):
    """The same law with some numbers replaced, for a draw."""
    return replace(one, values={**one.values, **values})


@pytest.fixture(scope="module")
def island():
    job = load_job(ISLAND)
    job = replace(job, uncertainty=replace(job.uncertainty, draws=200))
    plan = make_plan(job)
    draws = make_draws(job, plan)
    window = Window(0, 0, *plan.grid.shape)
    _, sums, counts = evaluate_block_states(plan, window, draws.layout)
    exponent = unit_exponent(plan.grid)
    central = totals(sums.consumption, exponent) * tonnes_per_mole()
    states = to_states(counts, draws.layout, exponent)
    drawn = propagate(plan.scheme, states, draws.samples, central, KEPT)
    return plan, draws, window, drawn


def cell_by_cell(plan, draws, window, row, monkeypatch):
    """Consumption of one draw by region and rock, each cell evaluated [t yr-1]."""
    samples = draws.samples
    scheme = {
        rock: with_values(
            law, {name: float(v[row, 0]) for name, v in samples.parameters[rock].items()}
        )
        for rock, law in plan.scheme.by_rock.items()
    }
    read = mapper.engine.read_inputs

    def read_shifted(*where):
        return {
            name: shifted(name, values, samples.layers[name][row])
            if name in samples.layers
            else values
            for name, values in read(*where).items()
        }

    with monkeypatch.context() as patched:
        patched.setattr(mapper.engine, "read_inputs", read_shifted)
        sums = evaluate_block(replace(plan, scheme=Scheme(scheme)), window)[1]
    return totals(sums.consumption, unit_exponent(plan.grid)) * tonnes_per_mole()


@pytest.mark.parametrize("row", [1, 57, 120, 200])
def test_a_draw_over_states_is_within_a_thousandth_of_the_draw_cell_by_cell(
    island, row, monkeypatch
):
    plan, draws, window, drawn = island
    cells = cell_by_cell(plan, draws, window, row, monkeypatch)
    states = np.zeros_like(cells)
    states[drawn.region, drawn.rock] = drawn.consumption[row - 1]
    for axis in (0, 1, (0, 1), ()):
        expected, found = cells.sum(axis=axis), states.sum(axis=axis)
        some = expected != 0
        apart = np.abs(found[some] / expected[some] - 1).max()
        assert apart < 3e-4  # the bound is 1e-3; this is what was measured, rounded up


def test_the_central_run_over_states_is_within_the_bound(island):
    apart = island[3].apart
    assert set(apart) == {"all", "regions", "rocks", "regions_by_rock"}
    assert 0 < max(apart.values()) < 3e-4 < MOST_APART


def test_tables_have_the_same_bytes_for_any_block_shape_and_threads(tmp_path, monkeypatch):
    job = load_job(ISLAND)
    found = []
    for at, (shape, threads) in enumerate((((700, 900), 1), ((256, 300), 2), ((97, 900), 2))):
        monkeypatch.setattr(mapper.pipeline, "block_shape", lambda *_, shape=shape: shape)
        run(job, out=tmp_path / str(at), engine=Engine(threads=threads))
        found.append([(tmp_path / str(at) / f"tables/{name}.csv").read_bytes() for name in TABLES])
    assert found[0] == found[1] == found[2]


def test_intervals_hold_the_central_total_and_widen_no_area(tmp_path):
    import pandas as pd

    job = load_job(ISLAND)
    run(replace(job, uncertainty=None, ranking=None), out=tmp_path / "plain")
    run(job, out=tmp_path / "drawn")
    plain, drawn = (
        pd.read_csv(tmp_path / name / "tables/regions_by_rock.csv") for name in ("plain", "drawn")
    )
    assert (drawn[plain.columns] == plain).where(plain.notna(), other=True).all(axis=None)
    at = list(drawn.columns).index("drawdown_t_per_yr")
    assert list(drawn.columns[at : at + 4]) == [
        "drawdown_t_per_yr",
        "drawdown_t_per_yr_p05",
        "drawdown_t_per_yr_p50",
        "drawdown_t_per_yr_p95",
    ]
    some = drawn[drawn.drawdown_t_per_yr > 0]
    assert (some.drawdown_t_per_yr_p05 < some.drawdown_t_per_yr).all()
    assert (some.drawdown_t_per_yr < some.drawdown_t_per_yr_p95).all()
    rate = some.drawdown_t_per_yr_p95 / some.valid_area_km2
    assert rate.to_numpy() == pytest.approx(some.drawdown_t_per_km2_yr_p95.to_numpy(), rel=1e-8)
    assert not (tmp_path / "plain/tables/sensitivity.csv").exists()
