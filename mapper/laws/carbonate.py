"""Carbonate rock: water saturated with calcite under the CO2 of the soil."""

from __future__ import annotations

import numpy as np

from mapper.laws.law import (
    ZERO_CELSIUS,
    CheckPoint,
    Floats,
    Input,
    Law,
    Parameter,
    Spread,
    Values,
)
from mapper.laws.responses import RUNOFF, pass_water
from mapper.laws.rock_groups import CARBONATE_ROCKS

MILLIMOLES_PER_MOLE = 1e3
N_ITERATIONS = 8  # leaves less than 1e-8 of the concentration, over the whole range

# log10 K = a + b T + c/T + d log10 T + e/T^2, T in K, 0 to 90 degC: Plummer & Busenberg 1982,
# Geochim. Cosmochim. Acta 46:1011-1040, quoted. The constant of the pair CaHCO3+ is
# quoted from the phreeqc.dat database; the paper it goes back to was not seen.
FIRST_DISSOCIATION = (-356.3094, -0.06091964, 21834.37, 126.8339, -1684915.0)
SECOND_DISSOCIATION = (-107.8871, -0.03252849, 5151.79, 38.92561, -563713.9)
CALCITE_SOLUBILITY = (-171.9065, -0.077993, 2839.319, 71.595, 0.0)
CO2_SOLUBILITY = (108.3865, 0.01985076, -6919.53, -40.45154, 669365.0)
DISSOLUTION = tuple(  # CaCO3 + CO2 + H2O = Ca + 2 HCO3: K1 Kc KH / K2, term by term
    first - second + calcite + gas
    for first, second, calcite, gas in zip(
        FIRST_DISSOCIATION, SECOND_DISSOCIATION, CALCITE_SOLUBILITY, CO2_SOLUBILITY, strict=True
    )
)
BICARBONATE_PAIR = (1209.120, 0.31294, -34765.05, -478.782, 0.0)

# A of Debye and Hueckel, 0.4883 + 8.074e-4 t with t in degC, from memory (0.5085 at 25 degC), and
# the 0.3 of the Davies equation, from memory.
DEBYE_HUECKEL_AT_ZERO = 0.4883
DEBYE_HUECKEL_SLOPE = 8.074e-4
DAVIES = 0.3
LN_10 = 2.302585092994046


def equilibrium_constant(temperature: Floats, *, terms: tuple[float, ...]) -> Floats:
    """Evaluate log10 of an equilibrium constant at a temperature in K [1].

    Examples
    --------
    >>> round(float(equilibrium_constant(298.15, terms=CALCITE_SOLUBILITY)), 4)
    -8.4798
    """
    constant, slope, inverse, logarithm, square = terms
    fall = (inverse + square / temperature) / temperature
    return np.asarray(constant + slope * temperature + fall + logarithm * np.log10(temperature))


def activity_coefficient(temperature: Floats, ionic_strength: Floats) -> Floats:
    """Activity coefficient of an ion of charge one, by the Davies equation [1].

    An ion of charge two has its fourth power.

    Examples
    --------
    >>> round(float(activity_coefficient(298.15, 0.01)), 3)
    0.902
    """
    root = np.sqrt(ionic_strength)
    slope = DEBYE_HUECKEL_AT_ZERO + DEBYE_HUECKEL_SLOPE * (temperature - ZERO_CELSIUS)
    return np.asarray(np.exp(-LN_10 * slope * (root / (1.0 + root) - DAVIES * ionic_strength)))


def saturated_calcium(
    temperature: Floats, soil_co2: Floats, *, n_iterations: int = N_ITERATIONS
) -> Floats:
    """Calcium of water saturated with calcite, open to a gas with CO2 [mmol L-1].

    Parameters
    ----------
    temperature : temperature of the water [K].
    soil_co2 : partial pressure of CO2 in the soil [atm].
    n_iterations : rounds of the activity correction; 0 gives ideal water.

    Notes
    -----
    [Ca] = (pCO2 K1 Kc KH / (4 K2 gCa gHCO3^2))^(1/3) where ideal water holds calcium and twice as
    much bicarbonate. Here the activity coefficients follow from the ionic strength that comes
    out, round by round, and so does the pair CaHCO3+. Carbonate ion, the pair CaCO3 and hydroxide
    are left out: 1 to 3 % too little calcium under the CO2 of the open air, less in soil.

    Examples
    --------
    >>> round(float(saturated_calcium(283.15, 10**-2.5, n_iterations=0)), 3)
    1.205
    >>> round(float(saturated_calcium(283.15, 10**-2.5)), 2)
    1.4
    """
    product = soil_co2 * 10.0 ** equilibrium_constant(temperature, terms=DISSOLUTION)
    pairing = 10.0 ** equilibrium_constant(temperature, terms=BICARBONATE_PAIR)
    calcium = np.cbrt(product / 4.0)
    paired = 0.0 * calcium
    for _ in range(n_iterations):
        calcium, paired = _correct(temperature, product, pairing, (calcium, paired))
    return np.asarray(MILLIMOLES_PER_MOLE * calcium * (1.0 + paired))


def _correct(
    temperature: Floats, product: Floats, pairing: Floats, before: tuple[Floats, Floats]
) -> tuple[Floats, Floats]:
    """Free calcium [mol L-1] and pairs for each free calcium, one round further.

    Charge: 2 Ca + CaHCO3 = HCO3, so HCO3 is Ca (2 + x) with x the pairs for each free Ca.
    """
    calcium, paired = before
    bicarbonate = calcium * (2.0 + paired)
    single = activity_coefficient(temperature, 0.5 * calcium * (4.0 + (2.0 + paired) + paired))
    double = np.square(np.square(single))
    paired = pairing * double * bicarbonate
    calcium = np.cbrt(product / (double * np.square(single * (2.0 + paired))))
    return calcium, paired


def soil_co2_by_evapotranspiration(
    evapotranspiration: Floats, *, co2_floor: Values, co2_rise: Values, co2_scale: Values
) -> Floats:
    """CO2 of the soil from actual evapotranspiration, after Brook and others [atm].

    log10 pCO2 = -3.47 + 2.09 (1 - exp(-0.00172 AET)), all three from memory.

    Examples
    --------
    >>> pressure = soil_co2_by_evapotranspiration(
    ...     500.0, co2_floor=-3.47, co2_rise=2.09, co2_scale=0.00172)
    >>> round(float(np.log10(pressure)), 2)
    -2.26
    """
    logarithm = co2_floor - co2_rise * np.expm1(-co2_scale * evapotranspiration)
    return np.asarray(10.0**logarithm)


def take_up_saturated(
    runoff: Floats, temperature: Floats, soil_co2: Floats, *, saturation: Values
) -> Floats:
    """Uptake by carbonate rock whose water leaves saturated with calcite.

    Water meets the CO2 of the soil and dissolves calcite until it is full; runoff carries that
    away. Cold water holds more. It leaves out kinetics, degassing on the way and magnesium.

    Parameters
    ----------
    runoff : water that leaves the ground [mm yr-1].
    temperature : temperature of the water, taken as mean annual air temperature [K].
    soil_co2 : partial pressure of CO2 in the soil, 10^-3.5 to 10^-1.5 [atm].
    saturation : calcium over that of saturated water; 1 as published [1].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    F = [Ca] q, with [Ca] of `saturated_calcium`: one mole of CO2 from the air for each mole of
    calcium, half of the bicarbonate. All of it is given back when carbonate forms in the sea.

    References
    ----------
    White 1984 (book chapter); Plummer & Busenberg 1982, Geochim. Cosmochim. Acta 46:1011-1040.

    Examples
    --------
    >>> round(float(take_up_saturated(1000.0, 283.15, 0.01, saturation=1.0)), 1)
    2.1
    """
    return saturation * saturated_calcium(temperature, soil_co2) * pass_water(runoff)


def take_up_saturated_by_plants(  # noqa: PLR0913 - three layers and the numbers of both sources
    runoff: Floats,
    temperature: Floats,
    evapotranspiration: Floats,
    *,
    saturation: Values,
    co2_floor: Values,
    co2_rise: Values,
    co2_scale: Values,
) -> Floats:
    """Uptake by carbonate rock, saturated under the soil CO2 that evapotranspiration gives.

    As `take_up_saturated`, with the CO2 of the soil from Brook and others: plants breathe where
    water and warmth let them. It leaves out the kind of plant and soil.

    Parameters
    ----------
    runoff : water that leaves the ground [mm yr-1].
    temperature : temperature of the water, taken as mean annual air temperature [K].
    evapotranspiration : actual evapotranspiration [mm yr-1].
    saturation : calcium over that of saturated water; 1 as published [1].
    co2_floor : log10 of soil CO2 without plants; -3.47, from memory [1].
    co2_rise : most that plants add to it; 2.09, from memory [1].
    co2_scale : how soon they add it; 0.00172, from memory [yr mm-1].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    F = [Ca] q; log10 pCO2 = -3.47 + 2.09 (1 - exp(-0.00172 AET)), pCO2 in atm.

    References
    ----------
    White 1984 (book chapter); Brook, Folkoff & Box 1983, doi 10.1002/esp.3290080108.

    Examples
    --------
    >>> values = WHITE_1984_BROOK.central_values("limestone")
    >>> round(float(take_up_saturated_by_plants(500.0, 283.15, 500.0, **values)), 2)
    0.85
    """
    soil_co2 = soil_co2_by_evapotranspiration(
        evapotranspiration, co2_floor=co2_floor, co2_rise=co2_rise, co2_scale=co2_scale
    )
    return take_up_saturated(runoff, temperature, soil_co2, saturation=saturation)


TEMPERATURE = Input(
    name="temperature",
    low=273.15,
    high=363.15,
    range_source="0 to 90 degC, range of the constants of Plummer & Busenberg 1982",
    range_grade="quoted",
)
SATURATION = Parameter(
    name="saturation",
    symbol="S",
    unit="1",
    meaning="calcium in the water over that of water saturated with calcite",
    default=1.0,
    low=0.05,
    high=2.0,
    spread=Spread(kind="lognormal", sd=0.2),
    source="1 as published; that rivers lie about it, and by how much, is the project's spread",
    grade="project",
)


def _brook(
    name: str, symbol: str, unit: str, meaning: str, numbers: tuple[float, float, float]
) -> Parameter:
    return Parameter(
        name=name,
        symbol=symbol,
        unit=unit,
        meaning=meaning,
        default=numbers[0],
        low=numbers[1],
        high=numbers[2],
        source="Brook, Folkoff & Box 1983, from memory. The bounds are the project's.",
        grade="memory",
    )


def _check(celsius: float, pressure: float, calcium: float) -> CheckPoint:
    return CheckPoint(
        inputs={
            "runoff": 1000.0,
            "temperature": celsius + ZERO_CELSIUS,
            "soil_co2": 10.0**pressure,
        },
        expected=calcium,
        relative_tolerance=0.03,
        source="calcite and CO2 gas in equilibrium, phreeqc.dat database (phreeqpython)",
        grade="computed",
        rock="limestone",
    )


_CAUTIONS = (
    "an upper bound where water passes too fast to saturate, or degasses on the way",
    "dolomite is taken as limestone: this project's reading",
    "short term only: all of it is given back when carbonate forms in the sea",
)

WHITE_1984 = Law(
    name="white-1984",
    title="Carbonate rock: water saturated with calcite, soil CO2 given",
    summary="calcium of saturated water by temperature and soil CO2, times runoff",
    year=1984,
    function=take_up_saturated,
    inputs=(
        RUNOFF,
        TEMPERATURE,
        Input(
            name="soil_co2",
            low=1e-4,
            high=0.1,
            range_source="from below the open air to rich soil",
            range_grade="project",
        ),
    ),
    parameters=(SATURATION,),
    rocks=CARBONATE_ROCKS,
    formula="F = S [Ca] q, [Ca] = (pCO2 K1 Kc KH / (4 K2 gCa gHCO3^2))^(1/3), with CaHCO3+",
    reference="White 1984 (book chapter); constants of Plummer & Busenberg 1982",
    cautions=_CAUTIONS,
    checks=(_check(0.0, -1.5, 3.8386), _check(10.0, -2.5, 1.4019), _check(20.0, -3.5, 0.5343)),
    rises_with=("runoff", "soil_co2"),
)

WHITE_1984_BROOK = Law(
    name="white-1984-brook",
    title="Carbonate rock: water saturated with calcite, soil CO2 from evapotranspiration",
    summary="as white-1984, with the soil CO2 that plants make where water and warmth let them",
    year=1984,
    function=take_up_saturated_by_plants,
    inputs=(
        RUNOFF,
        TEMPERATURE,
        Input(
            name="evapotranspiration",
            low=0.0,
            high=1800.0,
            range_source="the fitted range was not recovered; a bound for land",
            range_grade="project",
        ),
    ),
    parameters=(
        SATURATION,
        _brook("co2_floor", "l0", "1", "log10 of soil CO2 without plants", (-3.47, -4.0, -2.5)),
        _brook("co2_rise", "l1", "1", "most that plants add to the log10", (2.09, 0.0, 3.0)),
        _brook("co2_scale", "k", "yr mm-1", "how soon they add it", (0.00172, 1e-4, 0.01)),
    ),
    rocks=CARBONATE_ROCKS,
    formula="as white-1984, log10 pCO2 = -3.47 + 2.09 (1 - exp(-0.00172 AET))",
    reference="White 1984 (book chapter); Brook, Folkoff & Box 1983",
    doi="10.1002/esp.3290080108",
    cautions=(*_CAUTIONS, "the three numbers of the soil CO2 are from memory"),
    rises_with=("runoff", "evapotranspiration"),
)
