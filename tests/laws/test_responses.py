"""The responses that a law is composed of: each is neutral at its reference."""

from __future__ import annotations

import inspect

import numpy as np
import pytest

from mapper.laws import RESPONSES
from mapper.laws.responses import (
    arrhenius_factor,
    cover_factor,
    exponential_factor,
    pass_water,
    pass_water_by_power,
    pass_water_until_diluted,
    shielding_factor,
)


@pytest.mark.parametrize(
    ("celsius", "energy", "factor"),
    [
        # computed, against 284.15 K; the table's gas constant was rounded: half a thousandth
        (0.0, 14.0, 0.788),
        (0.0, 50.0, 0.426),
        (0.0, 60.0, 0.360),
        (25.0, 14.0, 1.321),
        (25.0, 50.0, 2.702),
        (25.0, 60.0, 3.296),
    ],
)
def test_the_arrhenius_factor_is_that_of_the_table(celsius, energy, factor):
    found = arrhenius_factor(
        celsius + 273.15, activation_energy=energy, reference_temperature=284.15
    )
    assert float(found) == pytest.approx(factor, abs=8e-4)


def test_temperature_factors_are_one_at_the_reference():
    reference = {"reference_temperature": 284.15}
    assert arrhenius_factor(284.15, activation_energy=50.0, **reference) == 1.0
    assert exponential_factor(284.15, warming_scale=13.7, **reference) == 1.0


@pytest.mark.parametrize("enhancement", [1.0, 2.0, 8.0])
@pytest.mark.parametrize("cover", [0.0, 0.3, 0.8, 1.0])
def test_the_vegetation_factor_is_one_at_the_reference_cover(enhancement, cover):
    assert cover_factor(cover, plant_enhancement=enhancement, reference_cover=cover) == 1.0


def test_full_cover_over_bare_ground_is_the_enhancement():
    values = {"plant_enhancement": 3.0, "reference_cover": 0.8}
    assert cover_factor(1.0, **values) / cover_factor(0.0, **values) == pytest.approx(3.0)


def test_plants_that_do_nothing_leave_the_rate():
    cover = np.linspace(0.0, 1.0, 5)
    assert (cover_factor(cover, plant_enhancement=1.0, reference_cover=0.8) == 1.0).all()


def test_runoff_by_power_meets_the_linear_at_its_reference():
    values = {"reference_runoff": 400.0, "runoff_exponent": 0.6}
    assert pass_water_by_power(400.0, **values) == pass_water(400.0)
    assert pass_water_by_power(800.0, **values) < pass_water(800.0)
    linear = pass_water_by_power(800.0, reference_runoff=400.0, runoff_exponent=1.0)
    assert linear == pytest.approx(pass_water(800.0))


def test_saturating_runoff_halves_at_its_half_and_levels_off():
    half = pass_water_until_diluted(300.0, half_runoff=300.0)
    assert half == pytest.approx(pass_water(300.0) / 2)
    assert pass_water_until_diluted(1e12, half_runoff=300.0) == pytest.approx(0.3, rel=1e-6)
    assert pass_water_until_diluted(1e-3, half_runoff=300.0) == pytest.approx(1e-6, rel=1e-5)


def test_the_soil_lets_its_share_pass():
    assert shielding_factor(0.1) == 0.1


@pytest.mark.parametrize("one", RESPONSES.values(), ids=lambda one: f"{one.driver}-{one.name}")
def test_each_response_takes_what_it_describes(one):
    taken = list(inspect.signature(one.function).parameters)
    layers = [one.layer.name] if one.layer else []
    assert taken == [*layers, *(each.name for each in one.parameters)]
    assert one.meaning
    assert one.formula


def test_no_two_responses_share_the_name_of_a_parameter_with_different_meaning():
    seen = {}
    for one in RESPONSES.values():
        for each in one.parameters:
            assert seen.setdefault(each.name, each) is each
