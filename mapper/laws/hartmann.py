"""Runoff, rock, Arrhenius and soil shielding, in the form of Hartmann and others."""

from __future__ import annotations

from mapper.laws.amiotte_suchet import CONCENTRATION
from mapper.laws.law import ZERO_CELSIUS, CheckPoint, Floats, Law, Values
from mapper.laws.responses import (
    ACTIVATION_ENERGY,
    REFERENCE_TEMPERATURE,
    RUNOFF,
    SOIL_SHIELDING,
    TEMPERATURE,
    arrhenius_factor,
    pass_water,
    shielding_factor,
)


def take_up_under_soil(
    runoff: Floats,
    temperature: Floats,
    soil_shielding: Floats,
    *,
    concentration: Values,
    activation_energy: Values,
    reference_temperature: Values,
) -> Floats:
    """Uptake by any rock from runoff, temperature and the shielding of the soil.

    The form is published; the rates by rock that belong to it were not recovered, so those of
    Amiotte Suchet and Probst stand in. The combination is this project's own. It leaves out
    relief and vegetation.

    Parameters
    ----------
    runoff : water that leaves the ground [mm yr-1].
    temperature : mean annual air temperature [K].
    soil_shielding : share of the rate that the soil lets pass: 1 where the rock is not shielded,
        0.1 on deep leached or waterlogged soil, from memory [1].
    concentration : CO2 taken up per litre of runoff at the reference temperature; 0.095 (granite)
        to 1.586 (limestone), Drever & Clow 1995, table 4 [mmol L-1].
    activation_energy : 14 (carbonate) to 60 (acid igneous), from memory [kJ mol-1].
    reference_temperature : 284.15, quoted [K].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    F = b q exp[-(Ea/R)(1/T - 1/284.15)] f_soil, with b the concentration. The soils with f_soil of
    0.1 are Ferralsols, Acrisols, Nitisols, Lixisols, Histosols and Gleysols (from memory).

    References
    ----------
    Hartmann et al. 2014, Chem. Geol. 363:145-163, doi 10.1016/j.chemgeo.2013.10.025.

    Examples
    --------
    >>> round(float(take_up_under_soil(1000.0, 298.15, 0.1, concentration=0.479,
    ...     activation_energy=50.0, reference_temperature=284.15)), 4)
    0.1294
    """
    factor = arrhenius_factor(
        temperature,
        activation_energy=activation_energy,
        reference_temperature=reference_temperature,
    )
    return concentration * pass_water(runoff) * factor * shielding_factor(soil_shielding)


def _check(celsius: float, rock: str, factor: float) -> CheckPoint:
    return CheckPoint(
        inputs={"runoff": 1000.0, "temperature": celsius + ZERO_CELSIUS, "soil_shielding": 1.0},
        parameters={"concentration": 1.0},
        expected=factor,
        relative_tolerance=1.5e-3,  # the factors are given to three places
        source="the Arrhenius factor against 284.15 K, from the formula",
        grade="computed",
        rock=rock,
    )


HARTMANN_2014_FORM = Law(
    name="hartmann-2014-form",
    title="Runoff, rock, Arrhenius and soil shielding",
    summary="the form of Hartmann et al. 2014 on the base rates of Amiotte Suchet & Probst",
    year=2014,
    function=take_up_under_soil,
    inputs=(RUNOFF, TEMPERATURE, SOIL_SHIELDING),
    parameters=(CONCENTRATION, ACTIVATION_ENERGY, REFERENCE_TEMPERATURE),
    rocks=tuple(CONCENTRATION.by_rock),
    formula="F = b q exp[-(Ea/R)(1/T - 1/T0)] f_soil",
    reference="form: Hartmann et al. 2014, Chem. Geol. 363:145-163; b: this project's stand-in",
    doi="10.1016/j.chemgeo.2013.10.025",
    cautions=(
        "this project's combination: the published b for each rock was not recovered",
        "carbonate rock dissolves less in warm water; above about 10 degC a carbonate law serves",
    ),
    checks=(
        _check(0.0, "limestone", 0.788),
        _check(0.0, "basalt", 0.426),
        _check(0.0, "granite", 0.360),
        _check(25.0, "limestone", 1.321),
        _check(25.0, "basalt", 2.702),
        _check(25.0, "granite", 3.296),
    ),
    rises_with=("runoff", "temperature", "soil_shielding"),
)
