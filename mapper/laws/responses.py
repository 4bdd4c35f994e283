"""Responses to runoff, temperature, vegetation and soil, each by name, to compose a law from."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

import numpy as np

from mapper.laws.law import GAS_CONSTANT, Floats, Input, Parameter, Spread, Values

Driver = Literal["runoff", "temperature", "vegetation", "soil"]

METRES_PER_MILLIMETRE = 1e-3  # 1 mmol L-1 = 1 mol m-3, so mm yr-1 x mmol L-1 x 1e-3 = mol m-2 yr-1


@dataclass(frozen=True, kw_only=True)
class Response:
    """How a rate answers to one driver: a function and its description.

    ``function`` takes the inputs positionally and the parameters by keyword. A response to runoff
    gives the water that dissolves [m yr-1]; each other response gives a factor [1]. ``layer`` is
    None where the response is "none" and reads nothing.
    """

    name: str
    driver: Driver
    formula: str
    meaning: str
    function: Callable[..., Floats]
    layer: Input | None = None
    parameters: tuple[Parameter, ...] = ()
    rises: bool = True
    cautions: tuple[str, ...] = ()


def pass_water(runoff: Floats) -> Floats:
    """Water that dissolves: all the runoff [m yr-1].

    Examples
    --------
    >>> float(pass_water(1500.0))
    1.5
    """
    return runoff * METRES_PER_MILLIMETRE


def pass_water_by_power(
    runoff: Floats, *, reference_runoff: Values, runoff_exponent: Values
) -> Floats:
    """Water that dissolves where more runoff also dilutes it: q0 (q/q0)^b [m yr-1].

    Examples
    --------
    >>> float(pass_water_by_power(1600.0, reference_runoff=400.0, runoff_exponent=0.5))
    0.8
    """
    water = reference_runoff * (runoff / reference_runoff) ** runoff_exponent
    return water * METRES_PER_MILLIMETRE


def pass_water_until_diluted(runoff: Floats, *, half_runoff: Values) -> Floats:
    """Water that dissolves when it levels off: q / (1 + q/q_half) [m yr-1].

    Examples
    --------
    >>> float(pass_water_until_diluted(500.0, half_runoff=500.0))
    0.25
    """
    return runoff / (1.0 + runoff / half_runoff) * METRES_PER_MILLIMETRE


def arrhenius_factor(
    temperature: Floats, *, activation_energy: Values, reference_temperature: Values
) -> Floats:
    """Rate against that at the reference temperature, after Arrhenius [1].

    ``activation_energy`` is in kJ mol-1; both temperatures in K.

    Examples
    --------
    >>> round(float(arrhenius_factor(
    ...     298.15, activation_energy=50.0, reference_temperature=284.15)), 3)
    2.701
    """
    energy = 1000.0 * activation_energy / GAS_CONSTANT
    return np.asarray(np.exp(energy * (1.0 / reference_temperature - 1.0 / temperature)))


def exponential_factor(
    temperature: Floats, *, warming_scale: Values, reference_temperature: Values
) -> Floats:
    """Rate against that at the reference temperature: exp((T - T0) / D) [1].

    Examples
    --------
    >>> round(float(exponential_factor(
    ...     278.0, warming_scale=13.7, reference_temperature=288.0)), 3)
    0.482
    """
    return np.asarray(np.exp((temperature - reference_temperature) / warming_scale))


def cover_factor(
    vegetation: Floats, *, plant_enhancement: Values, reference_cover: Values
) -> Floats:
    """Rate against that at the reference cover: (1 + (E-1) v) / (1 + (E-1) v0) [1].

    ``plant_enhancement`` E is the rate under full cover over that on bare ground. The base rates
    were gauged on vegetated land, so the factor is 1 at the reference cover v0 and plants are
    not counted twice.

    Examples
    --------
    >>> float(cover_factor(0.0, plant_enhancement=3.0, reference_cover=0.5))
    0.5
    """
    gain = plant_enhancement - 1.0
    return (1.0 + gain * vegetation) / (1.0 + gain * reference_cover)


def shielding_factor(soil_shielding: Floats) -> Floats:
    """Let the soil pass the share of the rate that the layer gives [1].

    Examples
    --------
    >>> float(shielding_factor(0.1))
    0.1
    """
    return soil_shielding * 1.0


def no_factor() -> Floats:
    """Leave the rate as it is: 1.

    Examples
    --------
    >>> float(no_factor())
    1.0
    """
    return np.asarray(1.0)


RUNOFF = Input(
    name="runoff",
    low=0.0,
    high=3000.0,
    range_source="the fitted range was not recovered; a bound for most land",
    range_grade="project",
)
TEMPERATURE = Input(
    name="temperature",
    low=263.15,
    high=303.15,
    range_source="-10 to 30 degC, mean annual; the base rates are of about 5 to 12 degC (memory)",
    range_grade="project",
)
VEGETATION = Input(
    name="vegetation", low=0.0, high=1.0, range_source="a share", range_grade="project"
)
SOIL_SHIELDING = Input(
    name="soil_shielding",
    low=0.0,
    high=1.0,
    range_source="a share: 1 is unshielded; 0.1 deep leached or waterlogged soil (memory)",
    range_grade="project",
)

REFERENCE_TEMPERATURE = Parameter(
    name="reference_temperature",
    symbol="T0",
    unit="K",
    meaning="temperature that the base rate belongs to",
    default=284.15,
    low=273.15,
    high=303.15,
    spread=Spread(kind="triangular", low=278.15, high=288.15),
    source=(
        "T0 of the runoff-Arrhenius form as quoted from Hartmann et al. 2014; it lies within the "
        "5 to 12 degC of the French basins (memory). The spread is the project's."
    ),
    grade="quoted",
)
ACTIVATION_ENERGY = Parameter(
    name="activation_energy",
    symbol="Ea",
    unit="kJ mol-1",
    meaning="apparent activation energy of the field rate",
    by_rock={
        "basalt": 50.0,
        "andesite": 55.0,
        "rhyolite": 60.0,
        "gabbro": 50.0,
        "granite": 60.0,
        "gneiss": 55.0,
        "schist": 55.0,
        "sandstone": 55.0,
        "shale": 55.0,
        "limestone": 14.0,
        "dolomite": 14.0,
        "mixed sediment": 55.0,
        "alluvium": 55.0,
        "loess": 55.0,
        "evaporite": 14.0,
    },
    low=0.0,
    high=100.0,
    spread=Spread(kind="normal", sd=8.0),
    source=(
        "Hartmann et al. 2014, from memory: 14 carbonate, 50 basic, 60 acid igneous, about 55 "
        "other rock. Andesite as other and evaporite as carbonate: this project's reading. Spread: "
        "project, against 42.3 to 50 published for basalt and 48.7 to 77.0 for granite."
    ),
    grade="memory",
)
WARMING_SCALE = Parameter(
    name="warming_scale",
    symbol="D",
    unit="K",
    meaning="warming that multiplies the rate by e",
    default=13.7,
    low=5.0,
    high=50.0,
    spread=Spread(kind="triangular", low=10.0, high=40.0),
    source=(
        "Walker, Hays & Kasting 1981, quoted. Spread: project; Krissansen-Totton & Catling 2017 "
        "give 15 to 31 K for a doubling (read), that is D = 22 to 45 K (computed)."
    ),
    grade="quoted",
)
PLANT_ENHANCEMENT = Parameter(
    name="plant_enhancement",
    symbol="E",
    unit="1",
    meaning="rate under full plant cover over the rate on bare ground",
    default=2.0,
    low=1.0,
    high=8.0,
    spread=Spread(kind="triangular", low=1.0, high=8.0),
    source=(
        "the published values disagree: 3 to 8 in Iceland, trees against bare ground (read); up "
        "to 2 worldwide, Taylor et al. 2012 (read); no trend in Chile, Oeser & von Blanckenburg "
        "2020 (read). The default and the triangle over all of them are the project's."
    ),
    grade="project",
)
REFERENCE_COVER = Parameter(
    name="reference_cover",
    symbol="v0",
    unit="1",
    meaning="plant cover of the land on which the base rates were gauged",
    default=0.8,
    low=0.0,
    high=1.0,
    spread=Spread(kind="uniform", low=0.6, high=1.0),
    source="the cover of the gauged basins was not recovered: this project's choice",
    grade="project",
)
REFERENCE_RUNOFF = Parameter(
    name="reference_runoff",
    symbol="q0",
    unit="mm yr-1",
    meaning="runoff at which the power response equals the linear one",
    default=400.0,
    low=50.0,
    high=2000.0,
    source="this project's choice, within the runoff of temperate basins",
    grade="project",
)
RUNOFF_EXPONENT = Parameter(
    name="runoff_exponent",
    symbol="b",
    unit="1",
    meaning="power of runoff in the uptake; 1 is no dilution, 0 full dilution",
    default=0.8,
    low=0.1,
    high=1.0,
    spread=Spread(kind="uniform", low=0.6, high=1.0),
    source="this project's choice between no dilution (1) and strong dilution",
    grade="project",
)
HALF_RUNOFF = Parameter(
    name="half_runoff",
    symbol="q_half",
    unit="mm yr-1",
    meaning="runoff at which dilution has halved the concentration",
    default=221.7,
    low=20.0,
    high=20000.0,
    spread=Spread(kind="lognormal", sd=0.7),
    source=(
        "e^2 Dw of Maher & Chamberlain 2014 with the typical Dw of 0.03 m yr-1 (memory). The base "
        "concentration is then that of thin runoff. Spread: project."
    ),
    grade="memory",
)

_ALL = (
    Response(
        name="linear",
        driver="runoff",
        formula="q",
        meaning="runoff does not dilute",
        function=pass_water,
        layer=RUNOFF,
    ),
    Response(
        name="power",
        driver="runoff",
        formula="q0 (q/q0)^b",
        meaning="runoff dilutes by a power",
        function=pass_water_by_power,
        layer=RUNOFF,
        parameters=(REFERENCE_RUNOFF, RUNOFF_EXPONENT),
    ),
    Response(
        name="saturating",
        driver="runoff",
        formula="q / (1 + q/q_half)",
        meaning="runoff dilutes until the uptake levels off",
        function=pass_water_until_diluted,
        layer=RUNOFF,
        parameters=(HALF_RUNOFF,),
        cautions=("base rates fitted as a mean over runoff are too low for this response",),
    ),
    Response(
        name="arrhenius",
        driver="temperature",
        formula="exp[-(Ea/R)(1/T - 1/T0)]",
        meaning="Arrhenius, with an energy for each rock",
        function=arrhenius_factor,
        layer=TEMPERATURE,
        parameters=(ACTIVATION_ENERGY, REFERENCE_TEMPERATURE),
        cautions=(
            "carbonate rock dissolves less in warm water; the small energy only follows the source",
            "above about 10 degC a carbonate law serves carbonate rock better",
        ),
    ),
    Response(
        name="exponential",
        driver="temperature",
        formula="exp[(T - T0)/D]",
        meaning="one warming scale for all rock",
        function=exponential_factor,
        layer=TEMPERATURE,
        parameters=(WARMING_SCALE, REFERENCE_TEMPERATURE),
        cautions=("the warming scale is of the whole earth's silicate rock, not of carbonate",),
    ),
    Response(
        name="none",
        driver="temperature",
        formula="1",
        meaning="no temperature",
        function=no_factor,
    ),
    Response(
        name="cover",
        driver="vegetation",
        formula="(1 + (E-1) v) / (1 + (E-1) v0)",
        meaning="plants speed the rate, against a reference cover",
        function=cover_factor,
        layer=VEGETATION,
        parameters=(PLANT_ENHANCEMENT, REFERENCE_COVER),
        cautions=("published plant enhancements run from 1 to 8: give it a spread",),
    ),
    Response(
        name="none",
        driver="vegetation",
        formula="1",
        meaning="no vegetation",
        function=no_factor,
    ),
    Response(
        name="shielding",
        driver="soil",
        formula="f_soil",
        meaning="deep or waterlogged soil shields the rock",
        function=shielding_factor,
        layer=SOIL_SHIELDING,
    ),
    Response(name="none", driver="soil", formula="1", meaning="no soil", function=no_factor),
)

RESPONSES: Mapping[tuple[Driver, str], Response] = MappingProxyType(
    {(one.driver, one.name): one for one in _ALL}
)
"""Every response by driver and name."""


def find_response(driver: Driver, name: str) -> Response:
    """Find the response of a driver by name; a KeyError lists the names there are."""
    try:
        return RESPONSES[driver, name]
    except KeyError:
        known = ", ".join(one for other, one in RESPONSES if other == driver)
        raise KeyError(f"no response to {driver} is called {name!r}; there are: {known}") from None
