"""Carbonate rock with a best temperature, after Romero-Mujalli and others."""

from __future__ import annotations

import numpy as np

from mapper.laws.law import ZERO_CELSIUS, CheckPoint, Floats, Input, Law, Parameter, Spread, Values
from mapper.laws.responses import RUNOFF, pass_water
from mapper.laws.rock_groups import CARBONATE_ROCKS

CO2_PER_ALKALINITY = 0.5  # half of the bicarbonate of carbonate rock is CO2 from the air


def take_up_about_optimum(
    runoff: Floats,
    temperature: Floats,
    *,
    optimum_offset: Values,
    optimum_rise: Values,
    optimum_fall: Values,
) -> Floats:
    """Uptake by carbonate rock, with the alkalinity that a mean temperature allows.

    Warmth feeds plants and so soil CO2, but warm water holds less calcite: alkalinity has its
    best at about 9 degC. It leaves out soil and plants other than through temperature.

    Parameters
    ----------
    runoff : water that leaves the ground [mm yr-1].
    temperature : mean annual air temperature [K].
    optimum_offset : -1.73, from memory [1].
    optimum_rise : 0.28, from memory [K-1].
    optimum_fall : 0.0157, from memory [K-2].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    Alkalinity in mmol L-1 is 10^(exp(-1.73 + 0.28 T - 0.0157 T^2)) with T in degC; half of it is
    CO2 from the air. The formula peaks at 8.9 degC, texts say near 11, and others 10 to 15: the
    formula is kept. It never falls below 1 mmol L-1, not even in deep frost.

    References
    ----------
    Romero-Mujalli et al. 2019, Chem. Geol., doi 10.1016/j.chemgeo.2018.08.010.

    Examples
    --------
    >>> round(float(take_up_about_optimum(1000.0, 282.05, optimum_offset=-1.73,
    ...     optimum_rise=0.28, optimum_fall=0.0157)), 2)
    2.07
    """
    celsius = temperature - ZERO_CELSIUS
    height = np.exp(optimum_offset + optimum_rise * celsius - optimum_fall * celsius**2)
    return np.asarray(CO2_PER_ALKALINITY * 10.0**height * pass_water(runoff))


def _parameter(
    name: str, unit: str, numbers: tuple[float, float, float], spread: Spread | None = None
) -> Parameter:
    return Parameter(
        name=name,
        symbol=str(numbers[0]),
        unit=unit,
        meaning=f"term of the exponent in {unit} of temperature in degC",
        default=numbers[0],
        low=numbers[1],
        high=numbers[2],
        spread=spread,
        source="Romero-Mujalli et al. 2019, from memory. Bounds and spread are the project's.",
        grade="memory",
    )


ROMERO_MUJALLI_2019 = Law(
    name="romero-mujalli-2019",
    title="Carbonate rock: alkalinity with a best temperature",
    summary="alkalinity by temperature with a peak near 9 degC, times runoff",
    year=2019,
    function=take_up_about_optimum,
    inputs=(
        RUNOFF,
        Input(
            name="temperature",
            low=273.15,
            high=303.15,
            range_source="0 to 30 degC; the fitted range was not recovered",
            range_grade="project",
        ),
    ),
    parameters=(
        _parameter("optimum_offset", "1", (-1.73, -3.0, 0.0), Spread(kind="normal", sd=0.1)),
        _parameter("optimum_rise", "K-1", (0.28, 0.0, 0.4)),
        _parameter("optimum_fall", "K-2", (0.0157, 0.01, 0.05)),
    ),
    rocks=CARBONATE_ROCKS,
    formula="F = 0.5 x 10^(exp(-1.73 + 0.28 T - 0.0157 T^2)) q, T in degC",
    reference="Romero-Mujalli et al. 2019, Chem. Geol.",
    doi="10.1016/j.chemgeo.2018.08.010",
    cautions=(
        "its numbers are from memory; the best temperature is 8.9, 11 or 10 to 15 degC by source",
        "alkalinity never falls below 1 mmol L-1, so frozen ground with runoff still takes up CO2",
        "short term only: all of it is given back when carbonate forms in the sea",
    ),
    checks=(
        CheckPoint(
            inputs={"runoff": 1000.0, "temperature": ZERO_CELSIUS},
            expected=0.7523,
            relative_tolerance=5e-4,
            source="the formula at 0 degC: 0.5 x 10^exp(-1.73), worked by hand",
            grade="computed",
            rock="limestone",
        ),
    ),
    rises_with=("runoff",),
)
