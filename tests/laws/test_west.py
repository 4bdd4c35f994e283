"""The erosion-limited law: its limits, and the step from mass to CO2."""

from __future__ import annotations

import numpy as np
import pytest

from mapper.laws import LAWS
from mapper.laws.west import charge_per_tonne_of_cations, weather_by_erosion

LAW = LAWS["west-2012"]
VALUES = {
    name: value
    for name, value in LAW.central_values("granite").items()
    if name != "consumption_per_tonne"
}


def weathered(erosion, runoff=500.0, temperature=284.2, **changed):
    return weather_by_erosion(np.asarray(erosion), runoff, temperature, **{**VALUES, **changed})


def test_no_more_dissolves_than_erosion_brings_up():
    erosion = np.geomspace(0.01, 1e5, 50)
    assert (weathered(erosion, 5000.0, 300.0) <= erosion * 0.09).all()


def test_slow_erosion_is_limited_by_supply_and_climate_is_idle():
    # the law nears this limit slowly: at 0.01 t km-2 yr-1 all but a trace has dissolved
    slow = weathered(0.01)
    assert slow == pytest.approx(0.01 * 0.09, rel=1e-6)
    assert weathered(0.01, temperature=300.0) == pytest.approx(slow, rel=1e-6)


def test_fast_erosion_is_limited_by_kinetics_and_climate_decides():
    # computed: where little dissolves, W follows exp(Ea/R (1/T0 - 1/T))
    ratio = weathered(1e7, temperature=294.2) / weathered(1e7)
    expected = np.exp(36000.0 / 8.314462618 * (1 / 284.2 - 1 / 294.2))
    assert ratio == pytest.approx(expected, rel=1e-3)


def test_the_dissolved_share_falls_as_erosion_grows():
    erosion = np.geomspace(1.0, 1e4, 30)
    assert (np.diff(weathered(erosion) / erosion) < 0).all()


def test_no_erosion_no_uptake_and_no_warning():
    rate = LAW.function(np.array([0.0]), 500.0, 284.2, **LAW.central_values("granite"))
    assert rate == 0.0


def test_a_tonne_of_the_upper_crusts_cations_is_the_charge_worked_by_hand():
    # by hand: 0.1280 + 0.1231 + 0.1055 + 0.0594 mol of charge over 2.566 + 1.496 + 2.426 + 2.324 g
    by_hand = 1e6 * (0.1280 + 0.1231 + 0.1055 + 0.0594) / (2.566 + 1.496 + 2.426 + 2.324)
    assert charge_per_tonne_of_cations() == pytest.approx(by_hand, rel=5e-4)
    assert LAW.parameter("consumption_per_tonne").default == pytest.approx(by_hand, rel=5e-4)


@pytest.mark.parametrize(("metal", "charge"), [(39.0983, 1), (12.1525, 1)])
def test_the_bounds_of_the_step_take_in_pure_potassium_and_pure_magnesium(metal, charge):
    one = LAW.parameter("consumption_per_tonne")
    assert one.low < 1e6 * charge / metal < one.high
