"""Silica flux that fast water dilutes, after Maher and Chamberlain."""

from __future__ import annotations

import math

import numpy as np

from mapper.laws.law import CheckPoint, Floats, Input, Law, Parameter, Spread, Values
from mapper.laws.rock_groups import SILICATE_ROCKS

METRES_PER_MILLIMETRE = 1e-3
MOLES_PER_M3 = 1e-3  # of one umol L-1
FULL_REACTION = math.exp(2.0)  # the source's e^2: water that has reached 1 - e^-2 of saturation


def take_up_until_diluted(
    runoff: Floats,
    *,
    equilibrium_silica: Values,
    damkohler: Values,
    consumption_per_silica: Values,
) -> Floats:
    """Uptake by silicate rock that levels off where water passes too fast to saturate.

    Slow water leaves the ground saturated with silica, fast water diluted; how fast is fast
    depends on how fresh the rock is, which one number holds. Temperature and vegetation are
    inside the two numbers. It gives silica; the step to CO2 is this project's.

    Parameters
    ----------
    runoff : water that leaves the ground [mm yr-1].
    equilibrium_silica : Ceq, silica of saturated water; about 380, from memory [umol L-1].
    damkohler : Dw, runoff scale of the reaction; 0.03 typical, 0.3 the fastest, memory [m yr-1].
    consumption_per_silica : CO2 for each mole of silica; 1, this project's [1].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    C = Ceq x / (1 + x) with x = e^2 Dw / q, and flux = q C. Written here as
    Ceq q e^2 Dw / (q + e^2 Dw), which is the same and holds at q = 0. CO2 for each mole of silica
    is 2 from wollastonite and 0.5 from albite that turns to kaolinite (computed from the
    reactions); their geometric mean is taken.

    References
    ----------
    Maher & Chamberlain 2014, Science 343:1502-1504, doi 10.1126/science.1250770.

    Examples
    --------
    >>> round(float(take_up_until_diluted(1000.0, equilibrium_silica=380.0, damkohler=0.05011,
    ...     consumption_per_silica=1.0)), 4)
    0.1027
    """
    water = runoff * METRES_PER_MILLIMETRE
    most = FULL_REACTION * damkohler
    silica = equilibrium_silica * MOLES_PER_M3 * (water * most / (water + most))
    return np.asarray(consumption_per_silica * silica)


def _check(metres: float, moles_per_km2: float) -> CheckPoint:
    return CheckPoint(
        inputs={"runoff": metres * 1000.0},
        parameters={"equilibrium_silica": 380.0, "damkohler": 0.05011},
        expected=moles_per_km2 * 1e-6,
        relative_tolerance=1e-4,
        source="silica flux of the formula",
        grade="computed",
        rock="granite",
    )


MAHER_CHAMBERLAIN_2014 = Law(
    name="maher-chamberlain-2014",
    title="Silicate rock: silica flux that fast water dilutes",
    summary="saturated where water is slow, levels off where it is fast; runoff alone",
    year=2014,
    function=take_up_until_diluted,
    inputs=(
        Input(
            name="runoff",
            low=0.0,
            high=5000.0,
            range_source="the range of the source was not recovered; a bound for rivers",
            range_grade="project",
        ),
    ),
    parameters=(
        Parameter(
            name="equilibrium_silica",
            symbol="Ceq",
            unit="umol L-1",
            meaning="silica of water in equilibrium with the weathering rock",
            default=380.0,
            low=50.0,
            high=2000.0,
            spread=Spread(kind="lognormal", sd=0.2),
            source="Maher & Chamberlain 2014, from memory. The spread is the project's.",
            grade="memory",
        ),
        Parameter(
            name="damkohler",
            symbol="Dw",
            unit="m yr-1",
            meaning="runoff scale of the reaction: larger where rock is fresh",
            default=0.03,
            low=0.001,
            high=0.3,
            spread=Spread(kind="lognormal", sd=0.7),
            source=(
                "Maher & Chamberlain 2014: 0.03 typical, 0.3 the fastest, from memory. The spread "
                "is the project's."
            ),
            grade="memory",
        ),
        Parameter(
            name="consumption_per_silica",
            symbol="c",
            unit="1",
            meaning="moles of CO2 taken up for each mole of silica in the water",
            default=1.0,
            low=0.5,
            high=2.0,
            spread=Spread(kind="triangular", low=0.5, high=2.0),
            source=(
                "this project's: the geometric mean of 0.5 (albite to kaolinite) and 2 "
                "(wollastonite), both from their reactions"
            ),
            grade="project",
        ),
    ),
    rocks=SILICATE_ROCKS,
    formula="F = c Ceq q e^2 Dw / (q + e^2 Dw), q in m/yr",
    reference="Maher & Chamberlain 2014, Science 343:1502-1504",
    doi="10.1126/science.1250770",
    cautions=(
        "the step from silica to CO2 is this project's, not the source's",
        "one pair of numbers serves all silicate rock unless the job gives others",
    ),
    checks=(_check(0.1, 29919), _check(0.3, 62975), _check(1.0, 102681), _check(3.0, 125243)),
    rises_with=("runoff",),
)
