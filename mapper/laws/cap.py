"""The most that the supply of fresh rock allows, on any law."""

from __future__ import annotations

import inspect
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from mapper.laws.law import Floats, Law, Parameter, Spread, Values
from mapper.laws.rock_groups import CARBONATE_ROCKS

CAP = "dixon-von-blanckenburg-2012"
"""The name by which a job asks for the supply limit."""

SQUARE_METRES_PER_KM2 = 1e6
SILICATE_LIMIT = 150.0  # t km-2 yr-1, Dixon & von Blanckenburg 2012, read
NO_LIMIT = 1e9  # t km-2 yr-1: rock that dissolves whole is not held back by its supply
UNLIMITED_ROCKS = (*CARBONATE_ROCKS, "evaporite")

WEATHERING_LIMIT = Parameter(
    name="weathering_limit",
    symbol="W_max",
    unit="t km-2 yr-1",
    meaning="most mass that silicate rock can lose in solution",
    default=SILICATE_LIMIT,
    low=10.0,
    high=NO_LIMIT,
    spread=Spread(kind="triangular", low=100.0, high=200.0),
    source=(
        "Dixon & von Blanckenburg 2012, C. R. Geosci. 344:597-609: near 150 (read). No limit for "
        "carbonate rock and evaporite, and the spread: project."
    ),
    grade="read",
)
CONSUMPTION_PER_TONNE = Parameter(
    name="limit_consumption_per_tonne",
    symbol="c",
    unit="mol t-1",
    meaning="CO2 taken up for each tonne of silicate rock lost in solution",
    default=11200.0,
    low=4161.0,
    high=34300.0,
    source=(
        "this project's: base cations of upper crust as oxides (29.2 g for each mole of charge; "
        "Rudnick & Gao 2003, from memory) and one mole of SiO2 (60.1 g) with them, one mole of CO2 "
        "for each charge. Low: the whole rock dissolves; high: the oxides alone."
    ),
    grade="project",
)


def supply_limit(*, weathering_limit: Values, limit_consumption_per_tonne: Values) -> Values:
    """Most CO2 that silicate rock can take up for want of fresh rock [mol m-2 yr-1].

    Parameters
    ----------
    weathering_limit : most mass lost in solution; near 150 [t km-2 yr-1].
    limit_consumption_per_tonne : CO2 for each tonne of it; 11 200, this project's [mol t-1].

    References
    ----------
    Dixon & von Blanckenburg 2012, C. R. Geosci. 344:597-609.

    Examples
    --------
    >>> round(supply_limit(weathering_limit=150.0, limit_consumption_per_tonne=11200.0), 2)
    1.68
    """
    return weathering_limit * limit_consumption_per_tonne / SQUARE_METRES_PER_KM2


def cap_consumption(
    consumption: Floats, *, weathering_limit: Values, limit_consumption_per_tonne: Values
) -> Floats:
    """Hold an uptake at the supply limit where it lies above [mol m-2 yr-1].

    Examples
    --------
    >>> rate = cap_consumption(
    ...     np.array([0.5, 9.0]), weathering_limit=150.0, limit_consumption_per_tonne=11200.0)
    >>> rate.round(2).tolist()
    [0.5, 1.68]
    """
    limit = supply_limit(
        weathering_limit=weathering_limit,
        limit_consumption_per_tonne=limit_consumption_per_tonne,
    )
    return np.asarray(np.minimum(consumption, limit))


@dataclass(frozen=True)
class Capped:
    """The function of a law, held at the supply limit."""

    function: Callable[..., Floats]

    def __post_init__(self) -> None:
        signature = inspect.signature(self.function)
        added = [
            inspect.Parameter(one.name, inspect.Parameter.KEYWORD_ONLY)
            for one in (WEATHERING_LIMIT, CONSUMPTION_PER_TONNE)
        ]
        whole = signature.replace(parameters=[*signature.parameters.values(), *added])
        object.__setattr__(self, "__signature__", whole)

    def __call__(self, *layers: Floats, **parameters: Values) -> Floats:
        """Evaluate the law and hold it at the limit [mol m-2 yr-1]."""
        return self.hold(*layers, **parameters)[0]

    def hold(
        self,
        *layers: Floats,
        weathering_limit: Values,
        limit_consumption_per_tonne: Values,
        **parameters: Values,
    ) -> tuple[Floats, NDArray[np.bool_]]:
        """Evaluate the law; gives the rate held at the limit, and where the limit held it."""
        free = self.function(*layers, **parameters)
        limits = {
            "weathering_limit": weathering_limit,
            "limit_consumption_per_tonne": limit_consumption_per_tonne,
        }
        return cap_consumption(free, **limits), np.asarray(free > supply_limit(**limits))


def cap_law(law: Law) -> Law:
    """Give the law with its uptake held at the supply limit, under a name that says so.

    A law that is capped is no longer the published one. A law that only ranks raises ValueError.
    """
    if law.output != "consumption":
        raise ValueError(f"law {law.name!r} only ranks: there is no uptake to hold at a limit")
    limits = {rock: NO_LIMIT if rock in UNLIMITED_ROCKS else SILICATE_LIMIT for rock in law.rocks}
    limit = replace(WEATHERING_LIMIT, default=None, by_rock=limits)
    return replace(
        law,
        name=f"{law.name}+supply-cap",
        title=f"{law.title}, held at the supply limit",
        function=Capped(law.function),
        parameters=(*law.parameters, limit, CONSUMPTION_PER_TONNE),
        formula=f"min({law.formula}; c W_max)",
        reference=f"{law.reference}; limit: Dixon & von Blanckenburg 2012",
        cautions=(*law.cautions, "modified by the supply limit; its step to CO2 is the project's"),
        checks=(),
    )
