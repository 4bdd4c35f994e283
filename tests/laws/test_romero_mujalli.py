"""The carbonate law with a best temperature."""

from __future__ import annotations

import numpy as np
import pytest

from mapper.laws import LAWS

LAW = LAWS["romero-mujalli-2019"]
VALUES = LAW.central_values("limestone")


def test_the_best_temperature_is_that_of_the_formula():
    # computed: 0.28 / (2 x 0.0157) = 8.9 degC
    celsius = np.linspace(0.0, 30.0, 3001)
    rate = LAW.function(1000.0, celsius + 273.15, **VALUES)
    assert celsius[rate.argmax()] == pytest.approx(8.917, abs=0.01)


def test_half_of_the_alkalinity_is_co2_from_the_air():
    # computed: the peak of the exponent is exp(-1.73 + 0.28^2 / (4 x 0.0157)) = 0.6178
    alkalinity = 10**0.6178
    rate = LAW.function(1000.0, 8.917 + 273.15, **VALUES)
    assert rate == pytest.approx(0.5 * alkalinity, rel=1e-3)


def test_it_is_not_said_to_rise_with_temperature():
    assert LAW.rises_with == ("runoff",)


def test_deep_frost_leaves_the_floor_of_one_millimole_and_the_law_says_so():
    assert LAW.function(1000.0, 223.15, **VALUES) == pytest.approx(0.5)
    assert any("never falls below 1 mmol" in caution for caution in LAW.cautions)
