"""Laws, molar masses and stoichiometry against their sources and other libraries."""

import numpy as np
import periodictable
import phreeqpython
import pytest

from mapper.accounting import CO2_PER_CHARGE, KEPT_PER_CHARGE, MOLAR_MASS
from mapper.hydrology import METHODS, turc_power
from mapper.laws import LAWS
from mapper.rocks import ROCK_NAMES, Rock


@pytest.mark.parametrize("formula", MOLAR_MASS)
def test_molar_masses_are_those_of_periodictable(formula):
    assert MOLAR_MASS[formula] == pytest.approx(periodictable.formula(formula).mass, abs=0.003)


@pytest.mark.parametrize(
    ("rock", "a"),
    [
        # mmol/l: Amiotte Suchet & Probst 1993 as reproduced in Drever & Clow 1995, table 4 (read)
        ("granite", 0.095), ("sandstone", 0.152), ("rhyolite", 0.222), ("evaporite", 0.293),
        ("basalt", 0.479), ("shale", 0.627), ("limestone", 1.586),
    ],
)  # fmt: skip
def test_uptake_by_runoff_follows_the_published_table(rock, a):
    law = LAWS["amiotte-suchet-1995"]
    rate = law.function(300.0, **law.central_values(rock))
    assert rate * 1e6 == pytest.approx(1000.0 * a * 300.0, rel=1e-12)


@pytest.mark.parametrize(
    ("celsius", "runoff", "moles"), [(25, 1000, 1.610e6), (10, 500, 3.073e5), (2, 1800, 6.620e5)]
)
def test_uptake_by_basalt_gives_the_computed_points(celsius, runoff, moles):
    """Computed from F = q 323.44 exp(0.0642 T); the coefficients themselves are from memory."""
    law = LAWS["dessert-2003"]
    rate = law.function(float(runoff), celsius + 273.15, **law.central_values("basalt"))
    assert rate * 1e6 == pytest.approx(moles, rel=4e-4)


@pytest.mark.parametrize(
    ("rain", "celsius", "power", "evaporated"),
    [
        # computed from Turc's formula as quoted in later texts
        (1000, 20, 1200, 791.9), (600, 10, 600, 435.3), (2500, 26, 1828.8, 1502.4),
        (300, 15, 843.75, 296.1), (800, 5, 431.25, 384.0),
    ],
)  # fmt: skip
def test_turc_gives_the_computed_points(rain, celsius, power, evaporated):
    warmth = np.array([celsius + 273.15])
    assert turc_power(warmth)[0] == pytest.approx(power, abs=0.05)
    found = METHODS["turc-1954"](np.array([float(rain)]), warmth)[0]
    assert found == pytest.approx(evaporated, abs=0.05)


@pytest.mark.parametrize(("phi", "share"), [(0.5, 0.4472), (1, 0.7071), (2, 0.8944), (4, 0.9701)])
def test_turc_pike_gives_the_computed_points(phi, share):
    """Computed from 1/sqrt(1 + phi^-2), the form as quoted."""
    warmth = np.array([283.15])
    rain = turc_power(warmth) / phi
    assert METHODS["turc-pike"](rain, warmth)[0] / rain[0] == pytest.approx(share, abs=5e-5)


@pytest.mark.parametrize("mineral", ["Chrysotile", "Talc", "Anorthite"])
def test_silicate_releases_two_equivalents_for_each_mole_of_calcium_or_magnesium(mineral):
    """Source: phreeqpython with its default database. A little silicate dissolves in water under
    soil CO2, without aluminium in solution where it holds some (as gibbsite)."""
    phreeqc = phreeqpython.PhreeqPython()
    water = phreeqc.add_solution({"temp": 15})
    water.equalize(["CO2(g)", mineral, "Gibbsite"], [-1.8, 0.0, 0.0], [10.0, 2e-5, 0.0])
    cations = sum(water.total_element(one, units="mmol") for one in ("Ca", "Mg"))
    assert cations > 0.01
    released = 1e3 * alkalinity(water)
    # H3SiO4 and Al species carry the rest of the charge
    assert released / cations == pytest.approx(2.0, abs=0.03)
    assert CO2_PER_CHARGE == 1.0  # each equivalent of bicarbonate took one CO2 from the air
    assert KEPT_PER_CHARGE == 0.5  # CaCO3 holds one CO2 for two equivalents


def alkalinity(water):
    """Bicarbonate, carbonate and hydroxide less acid [mol]."""
    held = water.species_moles
    charge = {"HCO3-": 1, "CO3-2": 2, "OH-": 1, "H+": -1, "CaHCO3+": 1, "MgHCO3+": 1,
              "CaCO3": 2, "MgCO3": 2}  # fmt: skip
    return sum(held.get(name, 0.0) * n for name, n in charge.items())


def test_the_upper_crust_has_three_fifths_of_its_charge_in_calcium_and_magnesium():
    """Source: Rudnick & Gao 2014 upper crust as carried by pyrolite 0.3.8, mass %: CaO 3.59,
    MgO 2.48, Na2O 3.27, K2O 2.80; by charge 0.60."""
    crust = Rock(name="crust", kind="silicate", silicate_share=1.0,
                 oxides=(3.59, 2.48, 3.27, 2.80), cgi_term="")  # fmt: skip
    assert crust.calcium_magnesium_share == pytest.approx(0.60, abs=0.005)


@pytest.mark.parametrize("rock", [one for one in ROCK_NAMES if one in LAWS["product"].rocks])
@pytest.mark.parametrize("driver", ["runoff", "temperature", "vegetation"])
def test_the_rate_never_falls_as_a_driver_rises(rock, driver):
    """Common practice, no source: wetter, warmer and greener ground weathers no slower."""
    law = LAWS["product"]
    usual = {"runoff": 500.0, "temperature": 283.15, "vegetation": 0.5, "soil_shielding": 1.0}
    ends = {"runoff": (0, 3000), "temperature": (253.15, 303.15), "vegetation": (0, 1)}[driver]
    inputs = {**usual, driver: np.linspace(*ends, 61)}
    rate = law.function(*(inputs[one] for one in law.input_names), **law.central_values(rock))
    assert (np.diff(rate) > 0).all()
