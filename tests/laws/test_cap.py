"""The supply limit on any law."""

from __future__ import annotations

import numpy as np
import pytest

from mapper.laws import LAWS, cap_consumption, cap_law, supply_limit

LIMIT = {"weathering_limit": 150.0, "limit_consumption_per_tonne": 11200.0}


def test_the_limit_is_the_mass_times_the_step_to_co2():
    # 150 t km-2 yr-1: Dixon & von Blanckenburg 2012 (read); the step is the project's
    assert supply_limit(**LIMIT) == pytest.approx(150.0 * 11200.0 * 1e-6)


def test_what_lies_below_the_limit_stays_and_what_lies_above_is_held():
    rate = cap_consumption(np.array([0.0, 1.0, 1.68, 5.0, np.nan]), **LIMIT)
    np.testing.assert_allclose(rate, [0.0, 1.0, 1.68, 1.68, np.nan])


def test_a_capped_law_is_the_law_until_the_limit():
    law, capped = LAWS["dessert-2003"], cap_law(LAWS["dessert-2003"])
    runoff = np.array([500.0, 4500.0])
    free = law.function(runoff, 298.15, **law.central_values("basalt"))
    held = capped.function(runoff, 298.15, **capped.central_values("basalt"))
    assert held[0] == free[0]
    assert held[1] == supply_limit(**LIMIT) < free[1]


def test_a_capped_law_says_so_in_its_name_and_cautions():
    capped = cap_law(LAWS["dessert-2003"])
    assert capped.name == "dessert-2003+supply-cap"
    assert any("modified" in caution for caution in capped.cautions)
    assert not capped.checks


def test_carbonate_rock_is_not_held_back_by_its_supply():
    law = LAWS["amiotte-suchet-1995"]
    capped = cap_law(law)
    free = law.function(2000.0, **law.central_values("limestone"))
    assert capped.function(2000.0, **capped.central_values("limestone")) == free


def test_a_capped_law_serves_no_rock_that_the_law_does_not():
    with pytest.raises(KeyError, match="no weathering_limit for rock 'granite'"):
        cap_law(LAWS["dessert-2003"]).central_values("granite")


def test_the_step_to_co2_lies_between_its_two_limits():
    # by hand from the upper crust: 0.4161 mol of charge in 12.14 g of oxides, in 100 g of rock
    one = cap_law(LAWS["dessert-2003"]).parameter("limit_consumption_per_tonne")
    assert one.low == pytest.approx(0.4161 / 100.0 * 1e6, rel=1e-3)
    assert one.high == pytest.approx(0.4161 / 12.14 * 1e6, rel=2e-3)
    assert one.default == pytest.approx(1e6 / (12.14 / 0.4161 + 60.084), rel=2e-3)


def test_a_law_that_only_ranks_cannot_be_capped():
    with pytest.raises(ValueError, match="only ranks"):
        cap_law(LAWS["palandri-kharaka-2004"])
