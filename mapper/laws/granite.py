"""Uptake by granite: the published temperature responses on a stated base rate."""

from __future__ import annotations

from dataclasses import replace

from mapper.laws.amiotte_suchet import CONCENTRATIONS
from mapper.laws.law import ZERO_CELSIUS, CheckPoint, Floats, Input, Law, Parameter, Spread, Values
from mapper.laws.responses import REFERENCE_TEMPERATURE, arrhenius_factor, pass_water


def take_up_by_granite(
    runoff: Floats,
    temperature: Floats,
    *,
    concentration: Values,
    activation_energy: Values,
    reference_temperature: Values,
) -> Floats:
    """Uptake by granite that is linear in runoff and follows Arrhenius in temperature.

    The response to temperature is that of granitic catchments the world over; the rate that it
    stands on is another source's, as the prefactor of the first was not confirmed. It leaves out
    erosion, which decides the rate where soil is thick.

    Parameters
    ----------
    runoff : water that leaves the ground [mm yr-1].
    temperature : mean annual air temperature [K].
    concentration : CO2 taken up per litre at the reference temperature; 0.095, Drever & Clow
        1995, table 4 [mmol L-1].
    activation_energy : 59.4 (White & Blum 1995, silica, from memory) or 48.7 (Oliva et al. 2003,
        silica) [kJ mol-1].
    reference_temperature : temperature that the concentration belongs to; 284.15 [K].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    Q = a P exp[-(Ea/R)(1/T - 1/278.15)] in White & Blum, with P the precipitation. Here a P is
    replaced by concentration x runoff, and 278.15 by the reference temperature of that
    concentration: the product is this project's, the response alone is published. From 5 to
    15 degC it gives x 2.439 (silica) or, with 62.5 kJ mol-1 (sodium, from memory), x 2.555.
    Oliva et al. find their energy at high runoff only, above about 1000 mm yr-1 (from memory).

    References
    ----------
    White & Blum 1995, Geochim. Cosmochim. Acta 59:1729-1747.
    Oliva, Viers & Dupre 2003, Chem. Geol. 202:225-256.

    Examples
    --------
    >>> round(float(take_up_by_granite(1000.0, 288.15, concentration=0.095,
    ...     activation_energy=59.4, reference_temperature=278.15)), 3)
    0.232
    """
    factor = arrhenius_factor(
        temperature,
        activation_energy=activation_energy,
        reference_temperature=reference_temperature,
    )
    return concentration * pass_water(runoff) * factor


CONCENTRATION_OF_GRANITE = Parameter(
    name="concentration",
    symbol="a",
    unit="mmol L-1",
    meaning="CO2 taken up per litre of runoff at the reference temperature",
    default=CONCENTRATIONS["plutonic and metamorphic"],
    low=0.01,
    high=1.0,
    spread=Spread(kind="lognormal", sd=0.25),
    source=(
        "plutonic and metamorphic rock of Amiotte Suchet & Probst 1993, in Drever & Clow 1995, "
        "table 4 (read). To use it as the base rate of this law is this project's choice."
    ),
    grade="read",
)
ENERGY_OF_WHITE_AND_BLUM = Parameter(
    name="activation_energy",
    symbol="Ea",
    unit="kJ mol-1",
    meaning="apparent activation energy of the silica flux",
    default=59.4,
    low=20.0,
    high=100.0,
    spread=Spread(kind="normal", sd=8.0),
    source=(
        "White & Blum 1995, silica, from memory; 62.5 for sodium (memory). Spread: project, "
        "against 48.7 (Oliva et al. 2003, read) and 77.0 (Velbel 1993, read)."
    ),
    grade="memory",
)
ENERGY_OF_OLIVA = replace(
    ENERGY_OF_WHITE_AND_BLUM,
    default=48.7,
    source=(
        "Oliva, Viers & Dupre 2003, silica, at high runoff (read). Spread: project, against 59.4 "
        "(White & Blum 1995, memory) and 77.0 (Velbel 1993, read)."
    ),
    grade="read",
)
TEMPERATURE = Input(
    name="temperature",
    low=275.15,
    high=298.15,
    range_source="2 to 25 degC at 42 granitic sites, Riebe et al. 2004",
    range_grade="read",
)
_CAUTIONS = (
    "only the response to temperature is published; the rate it stands on is another source's",
    "where soil is thick the supply of fresh rock decides, not temperature: see the supply cap",
)


def _ratio_check(energy: float, ratio: float, source: str) -> CheckPoint:
    return CheckPoint(
        inputs={"runoff": 1000.0, "temperature": 15.0 + ZERO_CELSIUS},
        parameters={
            "concentration": 1.0,
            "activation_energy": energy,
            "reference_temperature": 5.0 + ZERO_CELSIUS,
        },
        expected=ratio,
        relative_tolerance=5e-4,
        source=source,
        grade="computed",
        rock="granite",
    )


WHITE_BLUM_1995 = Law(
    name="white-blum-1995",
    title="Granite: runoff times the Arrhenius response of White & Blum",
    summary="temperature response of granitic catchments on the base rate of French granite",
    year=1995,
    function=take_up_by_granite,
    inputs=(
        Input(
            name="runoff",
            low=0.0,
            high=4200.0,
            range_source="rain at 42 granitic sites was 220 to 4200 mm yr-1, Riebe et al. 2004",
            range_grade="read",
        ),
        TEMPERATURE,
    ),
    parameters=(CONCENTRATION_OF_GRANITE, ENERGY_OF_WHITE_AND_BLUM, REFERENCE_TEMPERATURE),
    rocks=("granite",),
    formula="F = a q exp[-(Ea/R)(1/T - 1/T0)]",
    reference="White & Blum 1995, Geochim. Cosmochim. Acta 59:1729-1747",
    cautions=(*_CAUTIONS, "the source drives it by precipitation, this law by runoff"),
    checks=(
        _ratio_check(59.4, 2.439, "5 to 15 degC, silica, from the formula"),
        _ratio_check(62.5, 2.555, "5 to 15 degC, sodium, from the formula"),
    ),
    rises_with=("runoff", "temperature"),
)

OLIVA_2003 = Law(
    name="oliva-2003",
    title="Granite at high runoff: the Arrhenius response of Oliva and others",
    summary="temperature response of wet granitic catchments on the base rate of French granite",
    year=2003,
    function=take_up_by_granite,
    inputs=(
        Input(
            name="runoff",
            low=1000.0,
            high=4200.0,
            range_source="holds above about 1000 mm yr-1; the upper end is rain in Riebe et al.",
            range_grade="memory",
        ),
        TEMPERATURE,
    ),
    parameters=(CONCENTRATION_OF_GRANITE, ENERGY_OF_OLIVA, REFERENCE_TEMPERATURE),
    rocks=("granite",),
    formula="F = a q exp[-(Ea/R)(1/T - 1/T0)]",
    reference="Oliva, Viers & Dupre 2003, Chem. Geol. 202:225-256",
    cautions=(*_CAUTIONS, "found at high runoff only"),
    checks=(_ratio_check(48.7, 2.077, "5 to 15 degC, silica, from the formula"),),
    rises_with=("runoff", "temperature"),
)
