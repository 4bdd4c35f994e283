from itertools import pairwise

import numpy as np
import pytest

from mapper.states import (
    AXES,
    Axis,
    StateLayout,
    area_step,
    count_states,
    join_bins,
    merge_states,
    to_states,
)
from mapper.uncertainty import spread

RANGES = {
    "temperature": (230.0, 320.0),
    "vegetation": (0.0, 1.0),
    "soil_shielding": (0.0, 1.0),
    "runoff": (0.02, 20_000.0),
    "precipitation": (0.02, 20_000.0),
    "evapotranspiration": (0.02, 5_000.0),
    "erosion": (0.01, 50_000.0),
    "soil_co2": (1e-5, 1.0),
    "reference_consumption": (1e-5, 50.0),
}
EXPONENT = 0


@pytest.mark.parametrize("name", AXES)
def test_a_value_comes_back_from_its_place(name):
    axis = AXES[name]
    low, high = RANGES[name]
    values = np.geomspace(max(low, 1e-6), high, 5000)
    place = axis.place(values)
    back = axis.value((place >> 8).astype(np.int64), (place & 255).astype(float))
    step = axis.width / 256 if axis.width else values / (1 << axis.mantissa_bits) / 256
    assert (np.abs(back - values) <= 0.51 * step + 1e-6 * values).all()
    assert (place >> 8).max() < 1 << axis.bits


def test_no_runoff_is_a_state_of_its_own():
    place = AXES["runoff"].place(np.array([0.0, 1e-9, -1.0]))
    assert place.tolist() == [0, 0, 0]
    assert AXES["runoff"].value(np.array([0]), np.array([0.0])).tolist() == [0.0]


def entries(n, seed=0):
    random = np.random.default_rng(seed)
    ground = random.integers(0, 40, n)
    area = random.uniform(0.1, 1.0, n) * area_step(EXPONENT) * 2**22
    inputs = {"temperature": random.normal(285, 6, n), "runoff": random.lognormal(6, 1, n)}
    return ground, area, inputs


LAYOUT = StateLayout(("temperature", "runoff"), 10)


def counted(ground, area, inputs, part=slice(None)):
    places = {name: AXES[name].place(values[part]) for name, values in inputs.items()}
    return count_states(LAYOUT, ground[part], area[part], places, EXPONENT)


def test_area_and_means_of_each_state_are_those_of_its_entries():
    ground, area, inputs = entries(20_000)
    states = to_states(counted(ground, area, inputs), LAYOUT, EXPONENT)
    assert states.area.sum() == pytest.approx(area.sum(), rel=1e-9)
    for key in (0, 17, 39):
        mine, theirs = ground == key, states.region * 10 + states.rock == key
        assert states.area[theirs].sum() == pytest.approx(area[mine].sum(), rel=1e-7)
        for name in LAYOUT.names:
            mean = np.average(inputs[name][mine], weights=area[mine])
            found = np.average(states.inputs[name][theirs], weights=states.area[theirs])
            assert found == pytest.approx(mean, rel=1e-4)


@pytest.mark.parametrize("cuts", [[7000], [1, 2, 3, 19_999], list(range(500, 20_000, 500))])
def test_states_of_parts_merge_to_the_same_bits_as_the_whole(cuts):
    ground, area, inputs = entries(20_000)
    whole = counted(ground, area, inputs)
    edges = [0, *cuts, 20_000]
    parts = [counted(ground, area, inputs, slice(a, b)) for a, b in pairwise(edges)]
    merged = merge_states(parts[::-1])
    for one, other in zip(whole, merged, strict=True):
        assert (one == other).all()


def test_many_combinations_are_sorted_to_the_same_states_as_by_table(monkeypatch):
    ground, area, inputs = entries(20_000)
    whole = counted(ground, area, inputs)
    monkeypatch.setattr("mapper.states.MOST_DENSE", 100)
    for one, other in zip(whole, counted(ground, area, inputs), strict=True):
        assert (one == other).all()


def test_a_block_without_ground_has_no_states():
    ground, area, inputs = entries(0)
    found = counted(ground, area, inputs)
    assert found.key.size == 0
    assert merge_states([found, counted(*entries(100))]).key.size > 0


def test_too_many_layers_for_one_key_are_noticed():
    assert StateLayout(("temperature", "runoff", "vegetation"), 18).fits(100_000)
    assert not StateLayout(tuple(AXES), 18).fits(100)


def test_an_axis_is_log_where_it_has_no_width():
    assert Axis(mantissa_bits=3).is_log
    assert not Axis(width=1.0).is_log


def test_joined_bins_keep_area_and_means_of_every_region_and_rock():
    ground, area, inputs = entries(20_000)
    states = to_states(counted(ground, area, inputs), LAYOUT, EXPONENT)
    joined = join_bins(join_bins(states, "runoff"), "temperature")
    assert joined.area.size < 0.7 * states.area.size
    for key in (0, 17, 39):
        one, other = (each.region * 10 + each.rock == key for each in (states, joined))
        assert joined.area[other].sum() == pytest.approx(states.area[one].sum())
        for name in LAYOUT.names:
            mean = np.average(states.inputs[name][one], weights=states.area[one])
            found = np.average(joined.inputs[name][other], weights=joined.area[other])
            assert found == pytest.approx(mean)
    assert (np.diff(joined.region * 10 + joined.rock) >= 0).all()


def test_states_are_joined_only_while_the_totals_stay_close(monkeypatch):
    states = to_states(counted(*entries(20_000)), LAYOUT, EXPONENT)
    monkeypatch.setattr(spread, "MOST_STATES", 10)
    assert spread.join_states(states, lambda _: 1e-3) is states
    assert spread.join_states(states, lambda _: 1e-5).area.size < states.area.size
    monkeypatch.setattr(spread, "MOST_STATES", 10**6)
    assert spread.join_states(states, lambda _: 0.0) is states
