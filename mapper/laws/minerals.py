"""Mineral kinetics of Palandri and Kharaka, for ranking rocks and climates only."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from types import MappingProxyType

import numpy as np

from mapper.laws.law import GAS_CONSTANT, CheckPoint, Floats, Input, Law, Parameter, Values

REFERENCE_TEMPERATURE = 298.15  # K, of the rate constants
UNIT_RATE = 1e-12  # mol m-2 s-1 of mineral surface: the rate that counts as 1


@dataclass(frozen=True, kw_only=True)
class Mineral:
    """Rate constants of one mineral: log10 in mol m-2 s-1 at 25 degC, energies in kJ mol-1."""

    log_acid: float
    acid_energy: float
    acid_order: float
    log_neutral: float
    neutral_energy: float


def _mineral(acid: tuple[float, float, float], neutral: tuple[float, float]) -> Mineral:
    return Mineral(
        log_acid=acid[0],
        acid_energy=acid[1],
        acid_order=acid[2],
        log_neutral=neutral[0],
        neutral_energy=neutral[1],
    )


MINERALS: Mapping[str, Mineral] = MappingProxyType(
    # Palandri & Kharaka 2004, USGS Open-File Report 2004-1068, quoted
    {
        "albite": _mineral((-10.16, 65.0, 0.457), (-12.56, 69.8)),
        "oligoclase": _mineral((-9.67, 65.0, 0.457), (-11.84, 69.8)),
        "andesine": _mineral((-8.88, 53.5, 0.541), (-11.47, 57.4)),
        "labradorite": _mineral((-7.87, 42.1, 0.626), (-10.91, 45.2)),
        "bytownite": _mineral((-5.85, 29.3, 1.018), (-9.82, 31.5)),
        "anorthite": _mineral((-3.50, 16.6, 1.411), (-9.12, 17.8)),
        "K-feldspar": _mineral((-10.06, 51.7, 0.500), (-12.41, 38.0)),
        "forsterite": _mineral((-6.85, 67.2, 0.470), (-10.64, 79.0)),
        "augite": _mineral((-6.82, 78.0, 0.700), (-11.97, 78.0)),
        "diopside": _mineral((-6.36, 96.1, 0.710), (-11.11, 40.6)),
        "enstatite": _mineral((-9.02, 80.0, 0.600), (-12.72, 80.0)),
        "wollastonite": _mineral((-5.37, 54.7, 0.400), (-8.88, 54.7)),
        "hornblende": _mineral((-7.00, 75.5, 0.600), (-10.30, 94.4)),
        "biotite": _mineral((-9.84, 22.0, 0.525), (-12.55, 22.0)),
        "muscovite": _mineral((-11.85, 22.0, 0.370), (-13.55, 22.0)),
        "calcite": _mineral((-0.30, 14.4, 1.000), (-5.81, 23.5)),
    }
)

# The mineral that stands for a rock: this project's choice, to be edited.
MINERAL_BY_ROCK: Mapping[str, str] = MappingProxyType(
    {
        "basalt": "labradorite",
        "andesite": "andesine",
        "rhyolite": "K-feldspar",
        "gabbro": "labradorite",
        "granite": "oligoclase",
        "gneiss": "oligoclase",
        "schist": "biotite",
        "sandstone": "K-feldspar",
        "shale": "muscovite",
        "limestone": "calcite",
        "ultramafic rock": "forsterite",
    }
)


def parameters_of(mineral: str) -> dict[str, float]:
    """Give the law's parameters for one mineral; a KeyError lists the minerals there are.

    Examples
    --------
    >>> parameters_of("albite")["log_neutral"]
    -12.56
    """
    try:
        return asdict(MINERALS[mineral])
    except KeyError:
        raise KeyError(f"no mineral {mineral!r}; there are: {', '.join(MINERALS)}") from None


def rank_minerals(  # noqa: PLR0913 - the numbers of one mineral, and the pH
    temperature: Floats,
    *,
    log_acid: Values,
    acid_energy: Values,
    acid_order: Values,
    log_neutral: Values,
    neutral_energy: Values,
    ph: Values,
) -> Floats:
    """Dissolution of one mineral's surface by temperature and acidity, for ranking only.

    Laboratory rates far from equilibrium, an acid and a neutral term. They exceed field rates by
    a factor of 1e2 to 1e5 (from memory), differently for each mineral: use them to rank and for
    the response to temperature, never as a flux.

    Parameters
    ----------
    temperature : temperature of the water [K].
    log_acid : log10 of the acid rate constant at 25 degC; -10.16 for albite [mol m-2 s-1].
    acid_energy : activation energy of the acid term; 65.0 for albite [kJ mol-1].
    acid_order : power of the activity of hydrogen; 0.457 for albite [1].
    log_neutral : log10 of the neutral rate constant; -12.56 for albite [mol m-2 s-1].
    neutral_energy : activation energy of the neutral term; 69.8 for albite [kJ mol-1].
    ph : pH of the water [1].

    Returns
    -------
    Rate of the mineral's surface over 1e-12 mol m-2 s-1: it only ranks [1].

    Notes
    -----
    r = 10^lgk exp[-(E/R)(1/T - 1/298.15)] aH^n, acid, plus the same without aH, neutral. All
    numbers are quoted from the report. The mineral that stands for a rock is this project's.

    References
    ----------
    Palandri & Kharaka 2004, U.S. Geological Survey Open-File Report 2004-1068.

    Examples
    --------
    >>> rate = rank_minerals(298.15, **parameters_of("albite"), ph=5.0)
    >>> round(float(np.log10(rate) - 12), 3)
    -12.198
    """
    cold = 1.0 / REFERENCE_TEMPERATURE - 1.0 / temperature
    acid = 10.0 ** (log_acid - acid_order * ph) * np.exp(1000.0 * acid_energy / GAS_CONSTANT * cold)
    neutral = 10.0**log_neutral * np.exp(1000.0 * neutral_energy / GAS_CONSTANT * cold)
    return np.asarray((acid + neutral) / UNIT_RATE)


def _parameter(
    name: str, symbol: str, unit: str, meaning: str, bounds: tuple[float, float]
) -> Parameter:
    return Parameter(
        name=name,
        symbol=symbol,
        unit=unit,
        meaning=meaning,
        by_rock={
            rock: asdict(MINERALS[mineral])[name] for rock, mineral in MINERAL_BY_ROCK.items()
        },
        low=bounds[0],
        high=bounds[1],
        source=(
            "Palandri & Kharaka 2004, quoted. Which mineral stands for a rock is the project's: "
            + ", ".join(f"{rock} {mineral}" for rock, mineral in MINERAL_BY_ROCK.items())
        ),
        grade="quoted",
    )


def _check(mineral: str, celsius: float, ph: float, log_rate: float) -> CheckPoint:
    return CheckPoint(
        inputs={"temperature": celsius + 273.15},
        parameters={**parameters_of(mineral), "ph": ph},
        expected=10.0 ** (log_rate + 12.0),
        relative_tolerance=1.5e-3,  # half of the last place of the logarithm
        source=f"log r of {mineral} by the formula",
        grade="computed",
        rock="granite",
    )


PALANDRI_KHARAKA_2004 = Law(
    name="palandri-kharaka-2004",
    title="Mineral kinetics: temperature and pH, for ranking only",
    summary="laboratory rate of the mineral that stands for a rock; it ranks, it is no flux",
    year=2004,
    function=rank_minerals,
    inputs=(
        Input(
            name="temperature",
            low=273.15,
            high=373.15,
            range_source="0 to 100 degC; the range of each mineral was not recovered",
            range_grade="project",
        ),
    ),
    parameters=(
        _parameter("log_acid", "lgk acid", "1", "log10 of the acid constant", (-16.0, 0.0)),
        _parameter("acid_energy", "E acid", "kJ mol-1", "energy of the acid term", (0.0, 120.0)),
        _parameter("acid_order", "n", "1", "power of the hydrogen activity", (0.0, 2.0)),
        _parameter("log_neutral", "lgk neutral", "1", "log10, neutral constant", (-16.0, 0.0)),
        _parameter("neutral_energy", "E neutral", "kJ mol-1", "energy, neutral term", (0.0, 120.0)),
        Parameter(
            name="ph",
            symbol="pH",
            unit="1",
            meaning="pH of the water at the mineral",
            default=6.0,
            low=3.0,
            high=8.0,
            source="this project's choice for soil water; the base term of the report is left out",
            grade="project",
        ),
    ),
    rocks=tuple(MINERAL_BY_ROCK),
    formula="r = 10^lgk_a exp[-(Ea/R)(1/T - 1/298.15)] aH^n + 10^lgk_n exp[-(En/R)(...)]",
    reference="Palandri & Kharaka 2004, USGS Open-File Report 2004-1068",
    output="relative",
    cautions=(
        "ranking only: laboratory rates exceed field rates by 1e2 to 1e5 (from memory)",
        "one mineral stands for a rock: this project's choice",
        "above pH 8 the base term is missing",
    ),
    checks=(
        _check("albite", 25.0, 5.0, -12.198),
        _check("forsterite", 25.0, 5.0, -9.185),
        _check("forsterite", 15.0, 6.5, -10.251),
        _check("wollastonite", 15.0, 6.5, -8.252),
        _check("biotite", 25.0, 5.0, -12.204),
    ),
    rises_with=("temperature",),
)
