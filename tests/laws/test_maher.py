"""The dilution-limited law: its two limits."""

from __future__ import annotations

import math

import numpy as np
import pytest

from mapper.laws import LAWS

LAW = LAWS["maher-chamberlain-2014"]
VALUES = {"equilibrium_silica": 380.0, "damkohler": 0.05, "consumption_per_silica": 1.0}


def test_slow_water_is_saturated():
    runoff = 1e-6
    concentration = LAW.function(runoff, **VALUES) / (runoff * 1e-3)  # mol m-3
    assert concentration == pytest.approx(0.380, rel=1e-6)


def test_fast_water_carries_no_more_than_the_reaction_gives():
    most = math.exp(2.0) * 0.05 * 0.380
    assert LAW.function(1e12, **VALUES) == pytest.approx(most, rel=1e-6)


def test_the_uptake_rises_with_runoff_ever_more_slowly():
    rate = LAW.function(np.linspace(0.0, 5000.0, 100), **VALUES)
    assert (np.diff(rate) > 0).all()
    assert (np.diff(rate, 2) < 0).all()


def test_the_ratio_of_co2_to_silica_is_the_mean_of_the_two_reactions():
    one = LAW.parameter("consumption_per_silica")
    assert one.default == pytest.approx(math.sqrt(0.5 * 2.0))
    assert (one.low, one.high, one.grade) == (0.5, 2.0, "project")
