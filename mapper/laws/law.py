"""What a rate law is: a pure function of arrays and its frozen description."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Values = Floats | float
"""A parameter: one number, or one a draw in an array of shape (n_draws, 1)."""

Grade = Literal["read", "quoted", "memory", "computed", "project"]
"""How sure a number is: read in the paper; quoted from it elsewhere; from memory;
computed from the formula; or this project's own choice."""

SpreadKind = Literal["normal", "lognormal", "uniform", "triangular"]

GAS_CONSTANT = 8.314462618  # J mol-1 K-1, CODATA 2018, exact
ZERO_CELSIUS = 273.15  # K, exact by definition

LAW_INPUTS: Mapping[str, str] = MappingProxyType(
    {
        "runoff": "mm yr-1",
        "temperature": "K",
        "vegetation": "1",
        "soil_shielding": "1",
        "erosion": "t km-2 yr-1",
        "evapotranspiration": "mm yr-1",
        "soil_co2": "atm",
        "reference_consumption": "mol m-2 yr-1",
        "precipitation": "mm yr-1",
    }
)
"""The layers that a law may ask for, and the unit each arrives in."""


@dataclass(frozen=True, kw_only=True)
class Spread:
    """How far a parameter may lie from its central value.

    ``normal``: ``sd`` in the parameter's unit. ``lognormal``: ``sd`` of the natural logarithm,
    the central value being the median. ``uniform`` and ``triangular``: between ``low`` and
    ``high``, the triangle's top at the central value. ``per_rock`` draws each rock for itself;
    otherwise all rocks lie at the same quantile of their spread in a draw.
    """

    kind: SpreadKind
    sd: float = 0.0
    low: float = 0.0
    high: float = 0.0
    per_rock: bool = False


@dataclass(frozen=True, kw_only=True)
class Parameter:
    """One number of a law, where it comes from, and how far it can be trusted.

    ``default`` is None where the value depends on the rock; ``by_rock`` then holds it for each.
    ``low`` and ``high`` bound what a job may set and what a draw may take.
    """

    name: str
    symbol: str
    unit: str
    meaning: str
    default: float | None = None
    by_rock: Mapping[str, float] = field(default_factory=dict)
    low: float
    high: float
    spread: Spread | None = None
    source: str
    grade: Grade

    def value(self, rock: str) -> float | None:
        """The central value for ``rock``, or None where the law has none for it."""
        return self.by_rock.get(rock, self.default)


@dataclass(frozen=True, kw_only=True)
class Input:
    """A layer that a law reads, with the range in which the law holds."""

    name: str
    low: float
    high: float
    range_source: str
    range_grade: Grade


@dataclass(frozen=True, kw_only=True)
class CheckPoint:
    """A value that the law must give, and who says so.

    ``inputs`` are in the units of `LAW_INPUTS`; ``expected`` in the law's output unit.
    """

    inputs: Mapping[str, float]
    expected: float
    relative_tolerance: float
    source: str
    grade: Grade
    rock: str
    parameters: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, kw_only=True)
class Law:
    """The description of a rate law beside its function.

    ``function`` takes the inputs positionally, in the order of ``inputs``, and the parameters by
    keyword; it uses numpy operators alone and broadcasts. It returns mol CO2 m-2 yr-1 taken up
    in the short term, unless ``output`` is "relative": then a number without unit that only ranks.
    ``rises_with`` names the inputs that never lower the rate.
    """

    name: str
    title: str
    summary: str
    year: int
    function: Callable[..., Floats]
    inputs: tuple[Input, ...]
    parameters: tuple[Parameter, ...]
    rocks: tuple[str, ...]
    formula: str
    reference: str
    doi: str = ""
    output: Literal["consumption", "relative"] = "consumption"
    cautions: tuple[str, ...] = ()
    checks: tuple[CheckPoint, ...] = ()
    rises_with: tuple[str, ...] = ()

    @property
    def input_names(self) -> tuple[str, ...]:
        """The layers in the order in which the function takes them."""
        return tuple(one.name for one in self.inputs)

    def parameter(self, name: str) -> Parameter:
        """The parameter called ``name``; a KeyError lists the names there are."""
        for one in self.parameters:
            if one.name == name:
                return one
        known = ", ".join(one.name for one in self.parameters)
        raise KeyError(f"law {self.name!r} has no parameter {name!r}; it has: {known}")

    def central_values(self, rock: str) -> dict[str, float]:
        """Each parameter's central value for ``rock``.

        Raises KeyError where the law has no value for this rock.
        """
        values: dict[str, float] = {}
        for one in self.parameters:
            value = one.value(rock)
            if value is None:
                raise KeyError(f"law {self.name!r} has no {one.name} for rock {rock!r}")
            values[one.name] = value
        return values
