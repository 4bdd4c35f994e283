"""Uptake by basalt from runoff and temperature, after Dessert and others."""

from __future__ import annotations

import numpy as np

from mapper.laws.law import ZERO_CELSIUS, CheckPoint, Floats, Input, Law, Parameter, Spread, Values
from mapper.laws.responses import pass_water

MILLIMOLES_PER_MICROMOLE = 1e-3


def take_up_by_basalt(
    runoff: Floats,
    temperature: Floats,
    *,
    bicarbonate_at_zero: Values,
    warming_rate: Values,
) -> Floats:
    """Uptake by basalt that is linear in runoff and exponential in temperature.

    River bicarbonate of basalt provinces against their mean annual temperature, carried by the
    runoff. It leaves out age, soil and relief: thick soils, pyroclastics and inactive fields do
    not follow it, and Holocene lava takes up about ten times as much.

    Parameters
    ----------
    runoff : water that leaves the ground [mm yr-1].
    temperature : mean annual air temperature [K].
    bicarbonate_at_zero : bicarbonate of the rivers at 0 degC; 323.44, from memory [umol L-1].
    warming_rate : relative rise of the bicarbonate per kelvin; 0.0642, from memory [K-1].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    F = q 323.44 exp(0.0642 T) in mol km-2 yr-1, with q the runoff and T the temperature in degC:
    one mole of CO2 for each mole of bicarbonate. The coefficients are from memory; they reproduce
    the published total of 4.08e12 mol yr-1. 0.0642 K-1 equals 44.3 kJ mol-1 at 288 K (computed).

    References
    ----------
    Dessert, Dupre, Gaillardet, Francois & Allegre 2003, Chem. Geol. 202:257-273,
    doi 10.1016/j.chemgeo.2002.10.001.

    Examples
    --------
    >>> round(float(take_up_by_basalt(
    ...     1000.0, 298.15, bicarbonate_at_zero=323.44, warming_rate=0.0642)), 3)
    1.61
    """
    bicarbonate = bicarbonate_at_zero * np.exp(warming_rate * (temperature - ZERO_CELSIUS))
    return bicarbonate * MILLIMOLES_PER_MICROMOLE * pass_water(runoff)


def _check(celsius: float, runoff: float, expected: float) -> CheckPoint:
    return CheckPoint(
        inputs={"runoff": runoff, "temperature": celsius + ZERO_CELSIUS},
        expected=expected,
        relative_tolerance=5e-4,
        source="F = q 323.44 exp(0.0642 T), worked by hand",
        grade="computed",
        rock="basalt",
    )


DESSERT_2003 = Law(
    name="dessert-2003",
    title="Basalt: runoff times an exponential of temperature",
    summary="bicarbonate of basalt rivers by temperature, times runoff",
    year=2003,
    function=take_up_by_basalt,
    inputs=(
        Input(
            name="runoff",
            low=200.0,
            high=4500.0,
            range_source="range of the basalt provinces, from memory",
            range_grade="memory",
        ),
        Input(
            name="temperature",
            low=263.15,
            high=300.15,
            range_source="-10 to 27 degC, range of the basalt provinces, from memory",
            range_grade="memory",
        ),
    ),
    parameters=(
        Parameter(
            name="bicarbonate_at_zero",
            symbol="323.44",
            unit="umol L-1",
            meaning="bicarbonate of basalt rivers at 0 degC",
            default=323.44,
            low=50.0,
            high=2000.0,
            spread=Spread(kind="lognormal", sd=0.3),
            source="Dessert et al. 2003, from memory. The spread is the project's.",
            grade="memory",
        ),
        Parameter(
            name="warming_rate",
            symbol="0.0642",
            unit="K-1",
            meaning="relative rise of the bicarbonate per kelvin",
            default=0.0642,
            low=0.0,
            high=0.15,
            spread=Spread(kind="normal", sd=0.01),
            source="Dessert et al. 2003, from memory. The spread is the project's.",
            grade="memory",
        ),
    ),
    rocks=("basalt",),
    formula="F = 323.44 exp(0.0642 T) q, T in degC",
    reference="Dessert et al. 2003, Chem. Geol. 202:257-273",
    doi="10.1016/j.chemgeo.2002.10.001",
    cautions=(
        "thick soils and pyroclastics do not fit (Lesser Antilles)",
        "Li et al. 2016 see no runoff control on inactive fields",
        "Boerker et al. 2019: Holocene basalt takes up about ten times as much as old fields",
    ),
    checks=(
        _check(25.0, 1000.0, 1.610),
        _check(10.0, 500.0, 0.3073),
        _check(2.0, 1800.0, 0.6620),
    ),
    rises_with=("runoff", "temperature"),
)
