"""The catalogue of rate laws: pure functions of arrays, each with its description."""

from mapper.laws.cap import (
    CAP,
    CONSUMPTION_PER_TONNE,
    UNLIMITED_ROCKS,
    WEATHERING_LIMIT,
    Capped,
    cap_consumption,
    cap_law,
    supply_limit,
)
from mapper.laws.catalogue import LAWS, NOT_RECOVERED, find_law, load_laws
from mapper.laws.law import (
    GAS_CONSTANT,
    LAW_INPUTS,
    ZERO_CELSIUS,
    CheckPoint,
    Floats,
    Grade,
    Input,
    Law,
    Parameter,
    Spread,
    Values,
)
from mapper.laws.product import BASES, compose
from mapper.laws.responses import RESPONSES, Response, find_response

__all__ = [
    "BASES",
    "CAP",
    "CONSUMPTION_PER_TONNE",
    "GAS_CONSTANT",
    "LAWS",
    "LAW_INPUTS",
    "NOT_RECOVERED",
    "RESPONSES",
    "UNLIMITED_ROCKS",
    "WEATHERING_LIMIT",
    "ZERO_CELSIUS",
    "Capped",
    "CheckPoint",
    "Floats",
    "Grade",
    "Input",
    "Law",
    "Parameter",
    "Response",
    "Spread",
    "Values",
    "cap_consumption",
    "cap_law",
    "compose",
    "find_law",
    "find_response",
    "load_laws",
    "supply_limit",
]
