"""The evaluation of one rock's cells and of a block, with answers done in the head."""

import numpy as np
import pytest

import mapper
from mapper.engine import evaluate_block
from mapper.evaluation import FLAG_MEANING, Flag, RockResult, evaluate_rock
from mapper.laws import LAWS
from mapper.planning import make_plan
from mapper.scheme import RockLaw
from mapper.sums import totals, unit_exponent
from tests.making import EQUAL_AREA, small_job, write_raster


def basalt(law="amiotte-suchet-1995", **changed):
    return RockLaw(LAWS[law], {**LAWS[law].central_values("basalt"), **changed})


def evaluated(runoff, law=None) -> RockResult:
    return evaluate_rock(law or basalt(), {"runoff": np.array(runoff, dtype=float)})


def test_a_law_is_evaluated_on_each_entry():
    found = evaluated([0.0, 1000.0, 2000.0])
    assert found.rate.tolist() == [0.0, 0.479, 0.958]
    assert found.flags.tolist() == [0, 0, 0]


def test_no_data_has_no_rate_and_no_flag():
    found = evaluated([np.nan, 5000.0])
    assert np.isnan(found.rate).tolist() == [True, False]
    assert found.flags.tolist() == [0, Flag.RUNOFF_OUTSIDE]


def test_runoff_below_zero_is_zero_and_flagged():
    found = evaluated([-5.0])
    assert found.rate.tolist() == [0.0]
    assert found.flags.tolist() == [Flag.NEGATIVE_RUNOFF]


def test_what_is_outside_the_range_is_computed_and_flagged():
    law = basalt("dessert-2003")
    inputs = {"runoff": np.array([100.0]), "temperature": np.array([320.0])}
    found = evaluate_rock(law, inputs)
    assert found.rate[0] > 0
    assert found.flags[0] == Flag.RUNOFF_OUTSIDE | Flag.TEMPERATURE_OUTSIDE


def test_a_rate_that_is_not_finite_is_no_result_and_flagged():
    found = evaluated([1000.0], basalt(concentration=np.inf))
    assert np.isnan(found.rate).all()
    assert found.flags.tolist() == [Flag.NOT_FINITE]


def test_each_flag_is_one_bit_with_a_meaning():
    assert sorted(int(flag) for flag in Flag) == [2**n for n in range(8)]
    assert set(FLAG_MEANING) == set(Flag)


def block(tmp_path, **changes):
    plan = make_plan(mapper.load_job(small_job(tmp_path, **changes)))
    maps, sums = evaluate_block(plan, plan.grid.window)
    return plan, maps, sums


def test_a_cell_of_two_rocks_has_the_mean_by_share(tmp_path):
    grid = {"crs": EQUAL_AREA, "resolution": 2000, "bounds": [0, 0, 4000, 4000]}
    _, maps, _ = block(tmp_path, grid=grid)
    assert maps.consumption[0] == pytest.approx([(0.095 + 0.479) / 2] * 2, rel=1e-15)
    assert maps.consumption[1] == pytest.approx([1.586 / 2] * 2, rel=1e-15)


def test_a_hole_in_a_layer_is_no_result_and_counts_as_mapped(tmp_path):
    job = small_job(tmp_path)
    runoff = np.full((4, 4), 1000.0)
    runoff[0, 0] = np.nan
    write_raster(tmp_path / "runoff.tif", runoff, unit="mm yr-1")
    plan = make_plan(mapper.load_job(job))
    maps, sums = evaluate_block(plan, plan.grid.window)
    assert np.isnan(maps.consumption[0, 0])
    assert maps.flags[0, 0] == Flag.NO_DATA
    exponent = unit_exponent(plan.grid)
    assert totals(sums.rock_area, exponent).sum() == 16e6
    assert totals(sums.valid_area, exponent).sum() == 15e6


def test_sums_hold_each_region_and_rock(tmp_path):
    plan, _, sums = block(tmp_path)
    exponent = unit_exponent(plan.grid)
    assert totals(sums.area, exponent).tolist() == [4e6, 8e6, 4e6]
    taken = totals(sums.consumption, exponent)
    assert taken[0][taken[0] > 0] == pytest.approx([0.479e6, 0.095e6, 1.586e6], rel=1e-15)
    assert totals(sums.total, exponent)[1] == pytest.approx(4 * 2.16e6, rel=1e-15)
