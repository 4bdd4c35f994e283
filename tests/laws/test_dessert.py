"""The basalt law."""

from __future__ import annotations

import math

import pytest

from mapper.laws import LAWS

LAW = LAWS["dessert-2003"]
VALUES = LAW.central_values("basalt")


def test_it_holds_for_basalt_alone():
    assert LAW.rocks == ("basalt",)


def test_ten_degrees_multiply_the_uptake_by_the_warming_rate_alone():
    ratio = LAW.function(700.0, 293.15, **VALUES) / LAW.function(700.0, 283.15, **VALUES)
    assert ratio == pytest.approx(math.exp(0.642))


def test_its_warming_rate_is_the_stated_activation_energy_at_288_kelvin():
    # computed: 0.0642 K-1 x R x (288 K)^2 = 44.3 kJ mol-1
    energy = VALUES["warming_rate"] * 8.314462618 * 288.0**2 / 1000.0
    assert energy == pytest.approx(44.3, abs=0.05)


def test_warm_basalt_takes_up_several_times_what_granite_does():
    # Dupre et al. 2003 (read): basalt weathers about 8 times faster than granite
    granite = LAWS["amiotte-suchet-1995"]
    by_granite = granite.function(1000.0, **granite.central_values("granite"))
    assert 4 < LAW.function(1000.0, 284.15, **VALUES) / by_granite < 12
