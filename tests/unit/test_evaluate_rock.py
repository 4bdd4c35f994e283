"""A law on one rock's entries: flags of the supply limit and of its range, and its numbers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from mapper.evaluation import Flag, evaluate_rock
from mapper.laws import LAWS, cap_law, supply_limit
from mapper.scheme import RockLaw


def rock_law(law, rock="basalt", **values):
    return RockLaw(law, {**law.central_values(rock), **values})


def test_an_entry_that_the_limit_holds_is_flagged_and_one_at_or_below_it_is_not():
    # amiotte-suchet: rate = concentration [mmol L-1] x runoff [mm yr-1] / 1000; limit 0.5
    law = cap_law(LAWS["amiotte-suchet-1995"])
    numbers = {
        "concentration": 0.5,
        "weathering_limit": 100.0,
        "limit_consumption_per_tonne": 5000.0,
    }
    found = evaluate_rock(
        rock_law(law, **numbers), {"runoff": np.array([500.0, 1000.0, 1500.0, np.nan])}
    )
    np.testing.assert_array_equal(found.rate, [0.25, 0.5, 0.5, np.nan])
    assert found.flags.tolist() == [0, 0, Flag.CAPPED, 0]


def test_a_capped_law_gives_the_same_bits_as_the_law_below_the_limit():
    law = LAWS["dessert-2003"]
    layers = {"runoff": np.linspace(200, 4500, 50), "temperature": np.linspace(265, 300, 50)}
    free = evaluate_rock(rock_law(law), layers).rate
    held = evaluate_rock(rock_law(cap_law(law)), layers)
    limit = supply_limit(weathering_limit=150.0, limit_consumption_per_tonne=11200.0)
    assert held.rate.tobytes() == np.minimum(free, limit).tobytes()
    capped = (held.flags & int(Flag.CAPPED)) != 0
    assert capped.tolist() == (free > limit).tolist()
    assert 0 < capped.sum() < 50


def test_a_law_gets_double_precision_whatever_the_layer_holds():
    given = []

    def note(runoff, *, concentration):
        given.append(runoff.dtype)
        return concentration * runoff

    law = replace(LAWS["amiotte-suchet-1995"], function=note)
    for kind in (np.float32, np.int16, np.float64):
        found = evaluate_rock(rock_law(law), {"runoff": np.array([1.0, 2.0], dtype=kind)})
        assert found.rate.dtype == np.float64
    assert given == [np.dtype(np.float64)] * 3


@pytest.mark.parametrize(
    ("layer", "value", "flag"),
    [
        ("runoff", 100.0, Flag.RUNOFF_OUTSIDE),
        ("temperature", 310.0, Flag.TEMPERATURE_OUTSIDE),
    ],
)
def test_what_lies_beyond_the_range_is_computed_and_flagged(layer, value, flag):
    layers = {"runoff": np.array([1000.0]), "temperature": np.array([290.0])}
    layers[layer] = np.array([value])
    found = evaluate_rock(rock_law(LAWS["dessert-2003"]), layers)
    assert found.rate[0] > 0
    assert found.flags[0] == flag
