"""Saturated carbonate water: constants, ideal water, and an independent chemistry library."""

from __future__ import annotations

import warnings

import numpy as np
import pytest

from mapper.laws import LAWS
from mapper.laws.carbonate import (
    BICARBONATE_PAIR,
    CALCITE_SOLUBILITY,
    CO2_SOLUBILITY,
    FIRST_DISSOCIATION,
    N_ITERATIONS,
    SECOND_DISSOCIATION,
    activity_coefficient,
    equilibrium_constant,
    saturated_calcium,
    soil_co2_by_evapotranspiration,
)

BROOK = {"co2_floor": -3.47, "co2_rise": 2.09, "co2_scale": 0.00172}


@pytest.mark.parametrize(
    ("celsius", "expected"),
    [
        # computed from the equations of Plummer & Busenberg 1982 (quoted)
        (25.0, (-6.3519, -10.3289, -8.4798, -1.4679)),
        (10.0, (-6.4633, -10.4879, -8.4105, -1.2694)),
        (0.0, (-6.5786, -10.6286, -8.3814, -1.1084)),
    ],
)
def test_the_constants_follow_their_equations(celsius, expected):
    terms = (FIRST_DISSOCIATION, SECOND_DISSOCIATION, CALCITE_SOLUBILITY, CO2_SOLUBILITY)
    found = [float(equilibrium_constant(celsius + 273.15, terms=one)) for one in terms]
    np.testing.assert_allclose(found, expected, atol=1.01e-4)


def test_the_pair_has_the_constant_of_the_database_at_25_degrees():
    # phreeqc.dat: 11.435 for Ca + CO3 + H less 10.329 for CO3 + H
    found = float(equilibrium_constant(298.15, terms=BICARBONATE_PAIR))
    assert found == pytest.approx(11.435 - 10.329, abs=1e-3)


@pytest.mark.parametrize(
    ("celsius", "pressure", "calcium"),
    [
        # computed, no activity: White 1984 with the constants above
        (10.0, -2.5, 1.205),
        (10.0, -2.0, 1.768),
        (10.0, -1.5, 2.595),
        (25.0, -2.0, 1.388),
        (0.0, -3.5, 0.660),
    ],
)
def test_ideal_water_holds_the_calcium_of_the_cube_root(celsius, pressure, calcium):
    found = saturated_calcium(celsius + 273.15, 10.0**pressure, n_iterations=0)
    assert float(found) == pytest.approx(calcium, abs=6e-4)


@pytest.fixture(scope="module")
def chemistry():
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # the library's own, at import
        library = pytest.importorskip("phreeqpython")
        return library.PhreeqPython(database="phreeqc.dat")


@pytest.mark.parametrize("celsius", [0.0, 5.0, 10.0, 15.0, 20.0, 25.0, 30.0])
@pytest.mark.parametrize("pressure", [-3.5, -2.5, -1.5])
def test_calcium_is_within_three_percent_of_an_independent_library(chemistry, celsius, pressure):
    # Independent in its activities, its species and the solubility of CO2; the constants of the
    # two dissociations and of calcite go back to the same paper. The largest gap, 2.9 % at 30
    # degC under open air, is the carbonate ion and the pair CaCO3, which the law leaves out.
    water = chemistry.add_solution({"temp": celsius})
    water.equalize(["Calcite", "CO2(g)"], [0.0, pressure])
    expected = water.total("Ca", "mmol")
    found = float(saturated_calcium(celsius + 273.15, 10.0**pressure))
    assert found == pytest.approx(expected, rel=0.03)


def test_the_iteration_has_settled_over_the_whole_range():
    temperature, pressure = np.meshgrid(np.linspace(273.15, 363.15, 7), np.geomspace(1e-5, 0.1, 7))
    few, many = (
        saturated_calcium(temperature, pressure, n_iterations=n) for n in (N_ITERATIONS, 60)
    )
    np.testing.assert_allclose(few, many, rtol=1e-8)


def test_the_activity_term_is_not_small():
    ideal = saturated_calcium(283.15, 10**-1.5, n_iterations=0)
    assert saturated_calcium(283.15, 10**-1.5) / ideal > 1.2


def test_the_activity_of_pure_water_is_one_and_falls_with_ions():
    ions = np.array([0.0, 0.001, 0.01, 0.1])
    found = activity_coefficient(298.15, ions)
    assert found[0] == 1.0
    assert (np.diff(found) < 0).all()


def test_cold_water_holds_more():
    calcium = saturated_calcium(np.linspace(273.15, 303.15, 20), 0.003)
    assert (np.diff(calcium) < 0).all()


def test_no_co2_no_calcium_and_no_warning():
    assert float(saturated_calcium(283.15, 0.0)) == 0.0


@pytest.mark.parametrize(("water", "pressure"), [(100, -3.14), (500, -2.26), (1000, -1.75)])
def test_soil_co2_follows_evapotranspiration(water, pressure):
    # computed from the form of Brook et al. 1983 with the default numbers
    found = np.log10(soil_co2_by_evapotranspiration(float(water), **BROOK))
    assert float(found) == pytest.approx(pressure, abs=6e-3)


def test_both_laws_agree_where_the_soil_co2_is_the_same():
    given, by_plants = LAWS["white-1984"], LAWS["white-1984-brook"]
    soil_co2 = soil_co2_by_evapotranspiration(700.0, **BROOK)
    one = given.function(400.0, 285.0, soil_co2, saturation=1.0)
    assert by_plants.function(400.0, 285.0, 700.0, saturation=1.0, **BROOK) == one


def test_the_sink_form_of_a_metre_and_calcium_is_half_the_dissolved_carbon():
    # read: t C km-2 yr-1 = 0.5 x 12 x R [m yr-1] x DIC [mmol L-1]; R 0.5, DIC 3 -> 9.0
    calcium = 3.0 / 2.0  # mmol L-1: dissolved carbon is two moles for each calcium
    assert calcium * 0.5 * 12.0 == 9.0
    temperature, soil_co2 = 283.15, 10**-2.5
    rate = LAWS["white-1984"].function(500.0, temperature, soil_co2, saturation=1.0)
    carbon = 2.0 * saturated_calcium(temperature, soil_co2)
    assert rate * 12.0 == pytest.approx(0.5 * 12.0 * 0.5 * carbon)
