"""Colours of the maps: perceptually uniform scales, and class colours of our own."""

from __future__ import annotations

import importlib.metadata
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from itertools import combinations
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from mapper.evaluation import Flag

_SCALES = {"consumption": "lajolla", "drawdown": "bamako"}
_OTHER_SCALE = "devon"

ROCK_COLOUR: Mapping[str, str] = MappingProxyType(
    # lightness differs between neighbours in the list, so that no pair rests on hue alone
    {
        "basalt": "#3b2f4a",
        "andesite": "#7a5c86",
        "rhyolite": "#c79ab8",
        "gabbro": "#24483f",
        "granite": "#d9776a",
        "gneiss": "#a34e57",
        "schist": "#6f7f3f",
        "sandstone": "#e3bd5c",
        "shale": "#8a6a3a",
        "limestone": "#4f93b8",
        "dolomite": "#2b5f8a",
        "mixed sediment": "#b7b07a",
        "alluvium": "#efe2a8",
        "loess": "#d8c7a0",
        "evaporite": "#f0b7a4",
        "ultramafic rock": "#1d6b53",
        "ice": "#dff0f5",
        "water": "#a9cfe0",
    }
)

CLEAR_COLOUR = "#d9e2cf"
FLAG_COLOUR: Mapping[Flag, str] = MappingProxyType(
    {
        Flag.NO_DATA: "#6f6a64",
        Flag.NOT_FINITE: "#7a0f3c",
        Flag.NEGATIVE_RUNOFF: "#3a6ea5",
        Flag.RUNOFF_OUTSIDE: "#d98a1f",
        Flag.TEMPERATURE_OUTSIDE: "#b5472f",
        Flag.OTHER_OUTSIDE: "#8a5a9e",
        Flag.CAPPED: "#2f4858",
        Flag.PARTLY_NO_DATA: "#b9b3aa",
    }
)
"""In the order in which one flag covers another on a map."""

FLAG_LABEL: Mapping[Flag, str] = MappingProxyType(
    {
        Flag.NO_DATA: "no result",
        Flag.NOT_FINITE: "no finite number",
        Flag.NEGATIVE_RUNOFF: "runoff below zero",
        Flag.RUNOFF_OUTSIDE: "runoff outside the law's range",
        Flag.TEMPERATURE_OUTSIDE: "temperature outside the law's range",
        Flag.OTHER_OUTSIDE: "another layer outside the law's range",
        Flag.CAPPED: "held at the supply limit",
        Flag.PARTLY_NO_DATA: "partly without a result",
    }
)


@dataclass(frozen=True)
class Stretch:
    """The values that a colour scale spans; what lies above takes its last colour."""

    low: float
    high: float
    largest: float

    def stops(self, n: int = 9) -> list[float]:
        """Values of equal steps from low to high."""
        return [float(one) for one in np.linspace(self.low, self.high, n)]


def scale_name(map_name: str) -> str:
    """The colour scale of a map; long and short term differ, so that none is taken for another."""
    return _SCALES.get(map_name, _OTHER_SCALE)


@lru_cache(maxsize=8)
def scale(map_name: str) -> NDArray[np.uint8]:
    """The 256 colours of a map's scale, light to dark, shape (256, 3).

    The numbers are those of the package cmcrameri, read from its data without importing it.
    """
    distribution = importlib.metadata.distribution("cmcrameri")
    path = distribution.locate_file(f"cmcrameri/cmaps/{scale_name(map_name)}.txt")
    colours = np.loadtxt(str(path))
    if colours[0].sum() < colours[-1].sum():
        colours = colours[::-1]
    return np.round(colours * 255.0).astype(np.uint8)


def hex_at(colours: NDArray[np.uint8], share: float) -> str:
    """The colour at a share 0..1 of a scale, as #rrggbb."""
    red, green, blue = colours[round(min(max(share, 0.0), 1.0) * 255)]
    return f"#{red:02x}{green:02x}{blue:02x}"


def rgb(colour: str) -> tuple[int, int, int]:
    """Red, green and blue of #rrggbb."""
    return int(colour[1:3], 16), int(colour[3:5], 16), int(colour[5:7], 16)


def stretch(values: NDArray[np.floating], largest: float | None = None) -> Stretch:
    """The span of a scale: from zero, or the least value below it, to a round number that
    99 of 100 display cells stay under.
    """  # noqa: D205 - one sentence on two lines
    good = values[np.isfinite(values)]
    if not good.size:
        return Stretch(0.0, 1.0, 1.0)
    top = max(float(good.max()), largest if largest is not None else -np.inf)
    low = min(0.0, float(good.min()))
    high = _round_up(float(np.quantile(good, 0.99)))
    if high <= low:
        high = _round_up(top) if top > low else low + 1.0
    return Stretch(low, high, max(top, high))


def _round_up(value: float) -> float:
    """The next of 1, 1.2, 1.5, 2, 2.5, 3, 4, 5, 6, 8 times a power of ten."""
    if value <= 0.0:
        return 0.0
    power = float(10.0 ** np.floor(np.log10(value)))
    steps = (1.0, 1.2, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0)
    return next(step * power for step in steps if step * power >= value * (1 - 1e-9))


def flag_colour(bits: int) -> str:
    """The colour of a value of the map of flags."""
    return next((hue for flag, hue in FLAG_COLOUR.items() if bits & flag), CLEAR_COLOUR)


def flag_label(bits: int) -> str:
    """The meaning of a value of the map of flags, in words."""
    names = [label for flag, label in FLAG_LABEL.items() if bits & flag]
    return "; ".join(names) if names else "nothing to report"


def flag_values(flagged: Mapping[str, float]) -> list[int]:
    """Every value that the map of flags can hold, from the flags whose area is not zero."""
    always = (Flag.NO_DATA, Flag.PARTLY_NO_DATA)
    present = [flag for flag in Flag if flag in always or flagged.get(flag_key(flag), 0.0) > 0.0]
    values = [sum(chosen) for n in range(len(present) + 1) for chosen in combinations(present, n)]
    both = Flag.NO_DATA | Flag.PARTLY_NO_DATA
    return sorted(int(one) for one in values if one & both != both)


def flag_key(flag: Flag) -> str:
    """The name under which totals hold a flag's area."""
    return str(flag.name).lower()
