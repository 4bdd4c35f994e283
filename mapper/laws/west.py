"""Silicate weathering that erosion feeds, after West."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from mapper.laws.law import GAS_CONSTANT, CheckPoint, Floats, Input, Law, Parameter, Spread, Values
from mapper.laws.responses import RUNOFF, TEMPERATURE
from mapper.laws.rock_groups import SILICATE_ROCKS

SQUARE_METRES_PER_KM2 = 1e6
LEAST_EROSION = 1e-12  # t m-2 yr-1: stands for none, so that no residence time is infinite

# Upper continental crust, mass percent (Rudnick & Gao 2003, from memory), molar mass of the oxide
# and mass of its metal [g mol-1], and charge. Gives 0.4161 mol of charge and 8.81 g of metal per
# 100 g of rock: the metal share is 0.088, close to the 0.09 of the source, so that W is read as a
# mass of metal (this project's reading).
UPPER_CRUST = (
    (3.59, 56.077, 40.078, 2.0),  # CaO
    (2.48, 40.304, 24.305, 2.0),  # MgO
    (3.27, 61.979, 45.980, 2.0),  # Na2O
    (2.80, 94.196, 78.197, 2.0),  # K2O
)


def charge_per_tonne_of_cations() -> float:
    """Divide the charge of the upper crust's base cations by their mass [mol t-1].

    Examples
    --------
    >>> round(charge_per_tonne_of_cations(), -1)
    47220.0
    """
    charge = sum(mass / oxide * each for mass, oxide, _, each in UPPER_CRUST)
    metal = sum(mass / oxide * element for mass, oxide, element, _ in UPPER_CRUST)
    return 1e6 * charge / metal


def weather_by_erosion(  # noqa: PLR0913 - three layers and the seven numbers of the source
    erosion: Floats,
    runoff: Floats,
    temperature: Floats,
    *,
    kinetic_rate: Values,
    runoff_scale: Values,
    activation_energy: Values,
    reference_temperature: Values,
    active_layer: Values,
    cation_share: Values,
    age_exponent: Values,
) -> Floats:
    """Mass of cations that silicate rock loses, limited by erosion or kinetics [t km-2 yr-1].

    The published part of `take_up_by_erosion`, which says what the arguments are.

    Examples
    --------
    >>> round(float(weather_by_erosion(100.0, 500.0, 284.2, kinetic_rate=2.6e-4,
    ...     runoff_scale=7.6e-5, activation_energy=36.0, reference_temperature=284.2,
    ...     active_layer=8.9, cation_share=0.09, age_exponent=0.89)), 3)
    2.176
    """
    eroded = np.maximum(erosion / SQUARE_METRES_PER_KM2, LEAST_EROSION)
    energy = 1000.0 * activation_energy / GAS_CONSTANT
    warmth = np.exp(energy * (1.0 / reference_temperature - 1.0 / temperature))
    wetness = -np.expm1(-runoff_scale * runoff)
    age = (active_layer / eroded) ** age_exponent / age_exponent
    dissolved_share = -np.expm1(-kinetic_rate * wetness * warmth * age)
    return np.asarray(erosion * cation_share * dissolved_share)


def take_up_by_erosion(  # noqa: PLR0913 - three layers, the source's seven numbers, one conversion
    erosion: Floats,
    runoff: Floats,
    temperature: Floats,
    *,
    kinetic_rate: Values,
    runoff_scale: Values,
    activation_energy: Values,
    reference_temperature: Values,
    active_layer: Values,
    cation_share: Values,
    age_exponent: Values,
    consumption_per_tonne: Values,
) -> Floats:
    """Uptake by silicate rock, limited by the supply of fresh rock or by its kinetics.

    Where erosion is slow all that comes up dissolves, and climate is idle; where it is fast, rock
    leaves before it has dissolved, and runoff and temperature decide. Fitted on catchments of
    granitic rock. It leaves out vegetation and the kind of silicate rock.

    Parameters
    ----------
    erosion : rock that leaves the ground [t km-2 yr-1].
    runoff : water that leaves the ground [mm yr-1].
    temperature : mean annual air temperature [K].
    kinetic_rate : K, 2.6e-4, from memory [yr^-s].
    runoff_scale : kw, 7.6e-5, from memory [yr mm-1].
    activation_energy : Ea, near 36, from memory, weak [kJ mol-1].
    reference_temperature : T0, near 284.2, from memory, weak [K].
    active_layer : z, mass of the layer that weathers; 8.9, from memory [t m-2].
    cation_share : X, cations in fresh rock; 0.09, from memory [1].
    age_exponent : s = sigma + 1, how rates fall with the age of a mineral; 0.89, memory [1].
    consumption_per_tonne : CO2 for each tonne of cations; 47 219, this project's [mol t-1].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    W = e X {1 - exp[-K (1 - exp(-kw q)) exp(Ea/(R T0) - Ea/(R T)) (z/e)^s / s]}, with e the
    erosion in t m-2 yr-1 and z/e the residence time. W is a mass; the source does not turn it
    into CO2. This project takes one mole of CO2 for each charge, and the mean charge per mass of
    the upper crust's Ca, Mg, Na and K.

    References
    ----------
    West 2012, Geology 40:811-814, doi 10.1130/G33041.1.

    Examples
    --------
    >>> central = WEST_2012.central_values("granite")
    >>> round(float(take_up_by_erosion(100.0, 500.0, 284.2, **central)), 4)
    0.1027
    """
    mass = weather_by_erosion(
        erosion,
        runoff,
        temperature,
        kinetic_rate=kinetic_rate,
        runoff_scale=runoff_scale,
        activation_energy=activation_energy,
        reference_temperature=reference_temperature,
        active_layer=active_layer,
        cation_share=cation_share,
        age_exponent=age_exponent,
    )
    return mass * consumption_per_tonne / SQUARE_METRES_PER_KM2


def _from_memory(
    name: str,
    symbol: str,
    unit: str,
    meaning: str,
    numbers: tuple[float, float, float],
    spread: Spread | None = None,
) -> Parameter:
    return Parameter(
        name=name,
        symbol=symbol,
        unit=unit,
        meaning=meaning,
        default=numbers[0],
        low=numbers[1],
        high=numbers[2],
        spread=spread,
        source="West 2012, from memory. Bounds and spread are the project's.",
        grade="memory",
    )


def _check(erosion: float, weathered: float) -> CheckPoint:
    return CheckPoint(
        inputs={"erosion": erosion, "runoff": 500.0, "temperature": 284.2},
        parameters={"consumption_per_tonne": 5e4},
        expected=weathered * 0.05,
        relative_tolerance=5e-4,
        source="W of the formula with the default numbers, at 50 000 mol of CO2 for each tonne",
        grade="computed",
        rock="granite",
    )


WEST_2012 = Law(
    name="west-2012",
    title="Silicate rock: limited by erosion or by kinetics",
    summary="cations that erosion brings up, as far as runoff and temperature dissolve them",
    year=2012,
    function=take_up_by_erosion,
    inputs=(
        Input(
            name="erosion",
            low=1.0,
            high=10000.0,
            range_source="the fitted range was not recovered; a bound for catchments",
            range_grade="project",
        ),
        RUNOFF,
        replace(TEMPERATURE, range_source="-10 to 30 degC; the fitted range was not recovered"),
    ),
    parameters=(
        _from_memory(
            "kinetic_rate",
            "K",
            "yr^-s",
            "rate at the reference temperature and ample water",
            (2.6e-4, 1e-6, 1e-2),
            Spread(kind="lognormal", sd=0.5),
        ),
        _from_memory(
            "runoff_scale", "kw", "yr mm-1", "how soon water is ample", (7.6e-5, 1e-6, 1e-2)
        ),
        _from_memory(
            "activation_energy",
            "Ea",
            "kJ mol-1",
            "apparent activation energy (weakly remembered)",
            (36.0, 0.0, 100.0),
            Spread(kind="normal", sd=8.0),
        ),
        _from_memory(
            "reference_temperature",
            "T0",
            "K",
            "temperature that K belongs to (weakly remembered)",
            (284.2, 273.15, 303.15),
        ),
        _from_memory(
            "active_layer", "z", "t m-2", "mass of the layer that weathers", (8.9, 0.5, 100.0)
        ),
        _from_memory(
            "cation_share",
            "X",
            "1",
            "mass share of base cations in fresh rock",
            (0.09, 0.01, 0.3),
            Spread(kind="normal", sd=0.015),
        ),
        _from_memory(
            "age_exponent",
            "s",
            "1",
            "sigma + 1, with sigma the power by which rates fall with a mineral's age",
            (0.89, 0.3, 1.0),
        ),
        Parameter(
            name="consumption_per_tonne",
            symbol="c",
            unit="mol t-1",
            meaning="CO2 taken up for each tonne of base cations dissolved",
            default=round(charge_per_tonne_of_cations(), 0),
            low=20000.0,
            high=85000.0,
            spread=Spread(kind="triangular", low=40000.0, high=60000.0),
            source=(
                "charge over mass of Ca, Mg, Na and K in upper crust (oxides of Rudnick & Gao "
                "2003, from memory), one mole of CO2 for each charge: the reading of W as a mass "
                "of metal is this project's. Pure K to pure Mg would be 25 600 to 82 300."
            ),
            grade="project",
        ),
    ),
    rocks=SILICATE_ROCKS,
    formula="F = c e X {1 - exp[-K (1-exp(-kw q)) exp(Ea/(R T0) - Ea/(R T)) (z/e)^s / s]}",
    reference="West 2012, Geology 40:811-814",
    doi="10.1130/G33041.1",
    cautions=(
        "all its numbers are from memory; Ea and T0 are weakly remembered",
        "made for silicate rock of about the upper crust's composition",
        "the step from mass to CO2 is this project's, not the source's",
    ),
    checks=(_check(10.0, 0.795), _check(100.0, 2.176), _check(1000.0, 3.152)),
    rises_with=("erosion", "runoff", "temperature"),
)
