"""Whole-earth feedback forms: a reference uptake, scaled by warming, CO2 and land plants."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from mapper.laws.law import CheckPoint, Floats, Input, Law, Parameter, Spread, Values
from mapper.laws.rock_groups import CARBONATE_ROCKS, MIXED_ROCKS, SILICATE_ROCKS


def scale_by_walker(
    reference_consumption: Floats,
    temperature: Floats,
    *,
    co2_ratio: Values,
    co2_exponent: Values,
    warming_scale: Values,
    reference_temperature: Values,
) -> Floats:
    """Scale a reference uptake of silicate rock by CO2 and warming, after Walker and others.

    A thermostat for the whole earth: warmer and richer in CO2 means faster weathering. It leaves
    out plants, relief and rock. On a map the scaling is applied cell by cell, so the reference
    must be what each cell would take up at the reference temperature.

    Parameters
    ----------
    reference_consumption : uptake at the reference temperature and CO2 [mol m-2 yr-1].
    temperature : temperature now; in the source, the whole earth's mean [K].
    co2_ratio : CO2 of the air over that of the reference; 1 is no change [1].
    co2_exponent : 0.3, quoted [1].
    warming_scale : warming that multiplies the rate by e; 13.7, quoted [K].
    reference_temperature : 288 or 285 by author [K].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    W/W0 = (p/p0)^0.3 exp((T - T0)/13.7). Authors differ in T0: 288 K is taken.

    References
    ----------
    Walker, Hays & Kasting 1981, J. Geophys. Res. 86:9776-9782, doi 10.1029/JC086iC10p09776.

    Examples
    --------
    >>> round(float(scale_by_walker(1.0, 293.0, co2_ratio=2.0, co2_exponent=0.3,
    ...     warming_scale=13.7, reference_temperature=288.0)), 3)
    1.773
    """
    warmth = np.exp((temperature - reference_temperature) / warming_scale)
    return np.asarray(reference_consumption * co2_ratio**co2_exponent * warmth)


def scale_by_berner(  # noqa: PLR0913 - the numbers of the source
    reference_consumption: Floats,
    temperature: Floats,
    *,
    carbonate_share: Values,
    warming_exponent: Values,
    runoff_rise: Values,
    runoff_power: Values,
    carbonate_rise: Values,
    reference_temperature: Values,
    co2_ratio: Values,
    fertilisation: Values,
    land_plant_factor: Values,
) -> Floats:
    """Scale a reference uptake by warming, CO2 and land plants, after Berner.

    Warming speeds silicate rock by itself and through runoff, carbonate rock less. The source is
    a model of the whole earth over the last 600 million years; on a map the scaling is applied
    cell by cell. It leaves out the source's relief, continents and runoff of each age.

    Parameters
    ----------
    reference_consumption : uptake at the reference temperature, CO2 and plants [mol m-2 yr-1].
    temperature : temperature now; in the source, the whole earth's mean [K].
    carbonate_share : share of carbonate in the uptake of this rock: 0, 1, or 0.5 mixed [1].
    warming_exponent : 0.09, from memory [K-1].
    runoff_rise : r, 0.038 (1994); 0.025 or 0.045 (2001), from memory [K-1].
    runoff_power : 0.65, from memory [1].
    carbonate_rise : 0.087, from memory [K-1].
    reference_temperature : 288, this project's [K].
    co2_ratio : CO2 of the air over that of the reference; 1 is no change [1].
    fertilisation : power of the CO2 term, 0.4, from memory [1].
    land_plant_factor : 1 with today's plants; 0.15 (1994) or 0.25 (2001) without [1].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    Silicate: exp(0.09 dT) (1 + r dT)^0.65; carbonate: 1 + 0.087 dT; both times the plants' factor
    and (2 p/(1 + p))^0.4, with p the CO2 ratio (this term from memory). 1 + r dT is held at zero
    or above, so that deep cold gives no uptake instead of no number.

    References
    ----------
    Berner 1994, Am. J. Sci. 294:56-91; Berner & Kothavala 2001, Am. J. Sci. 301:182-204.

    Examples
    --------
    >>> values = BERNER_1994.central_values("granite")
    >>> round(float(scale_by_berner(1.0, 290.0, **values)), 3)
    1.256
    """
    warming = temperature - reference_temperature
    wetting = np.maximum(1.0 + runoff_rise * warming, 0.0) ** runoff_power
    silicate = np.exp(warming_exponent * warming) * wetting
    carbonate = np.maximum(1.0 + carbonate_rise * warming, 0.0)
    mixture = (1.0 - carbonate_share) * silicate + carbonate_share * carbonate
    air = (2.0 * co2_ratio / (1.0 + co2_ratio)) ** fertilisation
    return np.asarray(reference_consumption * mixture * air * land_plant_factor)


REFERENCE_CONSUMPTION = Input(
    name="reference_consumption",
    low=0.0,
    high=20.0,
    range_source="a bound for maps of uptake",
    range_grade="project",
)
TEMPERATURE = Input(
    name="temperature",
    low=273.15,
    high=308.15,
    range_source="the source speaks of the whole earth's mean; 0 to 35 degC",
    range_grade="project",
)
CO2_RATIO = Parameter(
    name="co2_ratio",
    symbol="p/p0",
    unit="1",
    meaning="CO2 of the air over that of the reference; 1 is no change",
    default=1.0,
    low=0.1,
    high=50.0,
    source="the user's scenario; 1 leaves the reference as it is",
    grade="project",
)
REFERENCE_TEMPERATURE = Parameter(
    name="reference_temperature",
    symbol="T0",
    unit="K",
    meaning="temperature at which the reference uptake holds",
    default=288.0,
    low=278.15,
    high=298.15,
    source="Walker, Hays & Kasting 1981: 288 or 285 by author (quoted)",
    grade="quoted",
)
RUNOFF_RISE = Parameter(
    name="runoff_rise",
    symbol="r",
    unit="K-1",
    meaning="relative rise of runoff per kelvin of warming",
    default=0.038,
    low=0.0,
    high=0.06,
    spread=Spread(kind="triangular", low=0.025, high=0.045),
    source="Berner 1994, from memory. The spread takes in the 0.025 and 0.045 of 2001.",
    grade="memory",
)
CARBONATE_SHARE = Parameter(
    name="carbonate_share",
    symbol="s",
    unit="1",
    meaning="share of carbonate in the uptake of the rock",
    by_rock={
        **dict.fromkeys((*SILICATE_ROCKS, "ultramafic rock"), 0.0),
        **dict.fromkeys(CARBONATE_ROCKS, 1.0),
        **dict.fromkeys(MIXED_ROCKS, 0.5),
    },
    low=0.0,
    high=1.0,
    source="the kind of rock; half for mixed sediment and loess is this project's choice",
    grade="project",
)


def _from_memory(
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
        source="Berner 1994, from memory. The bounds are the project's.",
        grade="memory",
    )


_LAND_PLANTS = _from_memory(
    "land_plant_factor",
    "f_plants",
    "1",
    "rate with the land plants of the scenario over that with today's; without vascular plants "
    "0.15 (1994) or 0.25 (2001)",
    (1.0, 0.05, 1.5),
)
_BERNER_PARAMETERS = (
    CARBONATE_SHARE,
    _from_memory("warming_exponent", "Z", "K-1", "direct effect of warming", (0.09, 0.0, 0.2)),
    RUNOFF_RISE,
    _from_memory("runoff_power", "n", "1", "power of runoff in the uptake", (0.65, 0.0, 1.0)),
    _from_memory("carbonate_rise", "k", "K-1", "rise of carbonate per kelvin", (0.087, 0.0, 0.2)),
    replace(
        REFERENCE_TEMPERATURE,
        source="not recovered for this source; 288 K as in Walker et al.: this project's choice",
        grade="project",
    ),
    CO2_RATIO,
    _from_memory("fertilisation", "f", "1", "power of the CO2 term", (0.4, 0.0, 1.0)),
    _LAND_PLANTS,
)
_CAUTIONS = (
    "a form for the whole earth: on a map each cell is scaled by its own warming",
    "the reference map must be the uptake at the reference temperature, not at today's",
    "how strongly weathering answers to warming is contested (Krissansen-Totton & Catling 2017)",
)


def _check(kelvin: float, ratio: float, expected: float, rock: str = "granite") -> CheckPoint:
    return CheckPoint(
        inputs={"reference_consumption": 1.0, "temperature": 288.0 + kelvin},
        parameters={"co2_ratio": ratio, "reference_temperature": 288.0},
        expected=expected,
        relative_tolerance=5e-4,
        source="the formula, worked by hand",
        grade="computed",
        rock=rock,
    )


WALKER_1981 = Law(
    name="walker-1981",
    title="Whole-earth thermostat: CO2 and warming on a reference",
    summary="scales a reference map of silicate uptake by CO2 and warming",
    year=1981,
    function=scale_by_walker,
    inputs=(REFERENCE_CONSUMPTION, TEMPERATURE),
    parameters=(
        CO2_RATIO,
        Parameter(
            name="co2_exponent",
            symbol="0.3",
            unit="1",
            meaning="power of CO2 in the uptake",
            default=0.3,
            low=0.0,
            high=1.0,
            source="Walker, Hays & Kasting 1981, quoted",
            grade="quoted",
        ),
        Parameter(
            name="warming_scale",
            symbol="13.7",
            unit="K",
            meaning="warming that multiplies the uptake by e",
            default=13.7,
            low=5.0,
            high=50.0,
            spread=Spread(kind="triangular", low=10.0, high=40.0),
            source="Walker, Hays & Kasting 1981, quoted. The spread is the project's.",
            grade="quoted",
        ),
        REFERENCE_TEMPERATURE,
    ),
    rocks=(*SILICATE_ROCKS, "ultramafic rock"),
    formula="F = F0 (p/p0)^0.3 exp[(T - T0)/13.7]",
    reference="Walker, Hays & Kasting 1981, J. Geophys. Res. 86:9776-9782",
    doi="10.1029/JC086iC10p09776",
    cautions=(*_CAUTIONS, "silicate rock only; it has no plants"),
    checks=(_check(5.0, 2.0, 1.773), _check(-10.0, 1.0, 0.482)),
    rises_with=("reference_consumption", "temperature"),
)

BERNER_1994 = Law(
    name="berner-1994",
    title="Whole-earth model of 1994: warming, CO2 and land plants on a reference",
    summary="scales a reference map, silicate and carbonate rock each its own way",
    year=1994,
    function=scale_by_berner,
    inputs=(REFERENCE_CONSUMPTION, TEMPERATURE),
    parameters=_BERNER_PARAMETERS,
    rocks=tuple(CARBONATE_SHARE.by_rock),
    formula=(
        "silicate F = F0 exp(0.09 dT) (1 + r dT)^0.65 (2p/(1+p))^0.4 f_plants; "
        "carbonate (1 + 0.087 dT) in place of the first two"
    ),
    reference="Berner 1994, Am. J. Sci. 294:56-91",
    cautions=(*_CAUTIONS, "its numbers are from memory, the CO2 term included"),
    checks=(_check(2.0, 1.0, 1.256), _check(2.0, 1.0, 1.174, "limestone")),
    rises_with=("reference_consumption", "temperature"),
)

BERNER_KOTHAVALA_2001 = replace(
    BERNER_1994,
    name="berner-kothavala-2001",
    title="Whole-earth model of 2001: warming, CO2 and land plants on a reference",
    year=2001,
    parameters=tuple(
        replace(
            one,
            default=0.025,
            source=(
                "Berner & Kothavala 2001, from memory: 0.025 or 0.045 by period, the colder one "
                "taken. The spread takes in both and the 0.038 of 1994."
            ),
        )
        if one is RUNOFF_RISE
        else one
        for one in _BERNER_PARAMETERS
    ),
    reference="Berner & Kothavala 2001, Am. J. Sci. 301:182-204",
    checks=(_check(0.0, 1.0, 1.0), _check(2.0, 1.0, 1.174, "limestone")),
)
