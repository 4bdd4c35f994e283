"""Carbon bookkeeping: what is taken up in the short term, and what of it lasts."""

from __future__ import annotations

from typing import Literal

from mapper.rocks import Rock

MOLAR_MASS = {
    # g mol-1, IUPAC standard atomic weights; checked in the tests against periodictable
    "CO2": 44.0095,
    "C": 12.011,
    "HCO3": 61.017,
    "CaCO3": 100.087,
    "CaSiO3": 116.160,
    "SiO2": 60.084,
    "CaO": 56.077,
    "MgO": 40.304,
    "Na2O": 61.979,
    "K2O": 94.196,
}

DAYS_PER_YEAR = 365.25
GRAMS_PER_TONNE = 1e6
SQUARE_METRES_PER_KM2 = 1e6

CO2_PER_CHARGE = 1.0  # mol CO2 taken up per equivalent that silicate rock releases
KEPT_PER_CHARGE = 0.5  # mol CO2 that ends in carbonate per equivalent of Ca or Mg

AmountUnit = Literal["t CO2", "t C", "mol"]


def drawdown_share(rock: Rock) -> float:
    """Share of the short-term uptake that stays out of the air in the long term [1].

    Of the CO2 that silicate rock takes up, one mole per charge, the calcium and magnesium
    part comes down as carbonate in the sea and gives half of it back; the sodium and potassium
    part gives all of it back; so does carbonate rock. Reverse weathering is left out.

    Source: CaSiO3 + 2 CO2 + H2O -> Ca2+ + 2 HCO3- + SiO2; Ca2+ + 2 HCO3- -> CaCO3 + CO2 + H2O.

    Examples
    --------
    >>> drawdown_share(ROCKS["limestone"])
    0.0
    >>> round(drawdown_share(ROCKS["basalt"]), 3)
    0.427
    """
    kept = KEPT_PER_CHARGE / CO2_PER_CHARGE
    return kept * rock.silicate_share * rock.calcium_magnesium_share


def tonnes_per_mole(unit: AmountUnit = "t CO2") -> float:
    """How many tonnes of ``unit`` a mole of CO2 is (1 for "mol")."""
    if unit == "mol":
        return 1.0
    return MOLAR_MASS["CO2" if unit == "t CO2" else "C"] / GRAMS_PER_TONNE


def to_rate(moles_per_m2: float, unit: AmountUnit = "t CO2") -> float:
    """Convert mol CO2 m-2 yr-1 to ``unit`` km-2 yr-1."""
    return moles_per_m2 * tonnes_per_mole(unit) * SQUARE_METRES_PER_KM2
