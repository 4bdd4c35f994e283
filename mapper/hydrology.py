"""Runoff from climate where none is given: what falls less what evaporates, over a year."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from mapper.laws.law import ZERO_CELSIUS

Floats = NDArray[np.float64]


def turc_power(temperature: Floats) -> Floats:
    """The evaporating power of the air after Turc (1954) [mm yr-1].

    L = 300 + 25 T + 0.05 T^3 with the year's mean T in degrees Celsius, taken as 0 in colder
    cells. Quoted from later texts; the clamp is common practice.

    Parameters
    ----------
    temperature : [K].
    """
    celsius = np.maximum(temperature - ZERO_CELSIUS, 0.0)
    return 300.0 + 25.0 * celsius + 0.05 * celsius**3


def evapotranspiration_turc(precipitation: Floats, temperature: Floats) -> Floats:
    """Actual evapotranspiration of a year after Turc (1954) [mm yr-1].

    AET = P / sqrt(0.9 + (P/L)^2), and P itself where P/L <= 0.316: dry ground then sheds nothing.

    Parameters
    ----------
    precipitation : [mm yr-1]. temperature : mean of the year [K].

    References
    ----------
    Turc, L. (1954), Annales agronomiques 5. Quoted from later texts.

    Examples
    --------
    >>> import numpy as np
    >>> evapotranspiration_turc(np.array([1000.0]), np.array([293.15])).round(1)
    array([791.9])
    """
    ratio = precipitation / turc_power(temperature)
    wet = precipitation / np.sqrt(0.9 + ratio**2)
    return np.where(ratio <= 0.316, precipitation, np.minimum(wet, precipitation))


def evapotranspiration_turc_pike(precipitation: Floats, temperature: Floats) -> Floats:
    """Actual evapotranspiration after Turc-Pike, with Turc's power of the air [mm yr-1].

    AET/P = 1 / sqrt(1 + (P/L)^2): never all of P, so that dry ground sheds a little. The form is
    quoted; that L stands for the potential evapotranspiration is this project's choice.

    Examples
    --------
    >>> import numpy as np
    >>> evapotranspiration_turc_pike(np.array([1200.0]), np.array([293.15])).round(1)
    array([848.5])
    """
    ratio = precipitation / turc_power(temperature)
    return np.asarray(precipitation / np.sqrt(1.0 + ratio**2))


METHODS: Mapping[str, Callable[[Floats, Floats], Floats]] = MappingProxyType(
    {"turc-1954": evapotranspiration_turc, "turc-pike": evapotranspiration_turc_pike}
)
"""Evapotranspiration of a year from precipitation [mm yr-1] and temperature [K], by name."""


def derive_runoff(method: str, precipitation: Floats, temperature: Floats) -> Floats:
    """Runoff of a year as precipitation less evapotranspiration by a named method [mm yr-1]."""
    return np.asarray(precipitation - METHODS[method](precipitation, temperature))


def budyko_1974(dryness: Floats) -> Floats:
    """Evaporated part of precipitation after Budyko (1974) [1].

    sqrt(phi tanh(1/phi) (1 - exp(-phi))) with the dryness phi = PET/P (read).

    Examples
    --------
    >>> import numpy as np
    >>> budyko_1974(np.array([1.0])).round(4)
    array([0.6938])
    """
    return np.sqrt(dryness * np.tanh(1.0 / dryness) * (1.0 - np.exp(-dryness)))


def turc_pike(dryness: Floats) -> Floats:
    """Evaporated part of precipitation after Turc-Pike, 1/sqrt(1 + phi^-2) (quoted) [1].

    Examples
    --------
    >>> import numpy as np
    >>> turc_pike(np.array([1.0])).round(4)
    array([0.7071])
    """
    return np.asarray(1.0 / np.sqrt(1.0 + dryness**-2.0))


def fu_1981(dryness: Floats, *, shape: float = 2.6) -> Floats:
    """Evaporated part of precipitation after Fu (1981), 1 + phi - (1 + phi^w)^(1/w) [1].

    The formula was read; w = 2.6 is from memory.

    Examples
    --------
    >>> import numpy as np
    >>> fu_1981(np.array([1.0])).round(4)
    array([0.6945])
    """
    return np.asarray(1.0 + dryness - (1.0 + dryness**shape) ** (1.0 / shape))


def oldekop(dryness: Floats) -> Floats:
    """Evaporated part of precipitation after Ol'dekop, phi tanh(1/phi) (memory) [1].

    Examples
    --------
    >>> import numpy as np
    >>> oldekop(np.array([1.0])).round(4)
    array([0.7616])
    """
    return np.asarray(dryness * np.tanh(1.0 / dryness))


def schreiber(dryness: Floats) -> Floats:
    """Evaporated part of precipitation after Schreiber, 1 - exp(-phi) (memory) [1].

    Examples
    --------
    >>> import numpy as np
    >>> schreiber(np.array([1.0])).round(4)
    array([0.6321])
    """
    return np.asarray(1.0 - np.exp(-dryness))


def zhang_2001(dryness: Floats, *, plants: float) -> Floats:
    """Evaporated part of precipitation after Zhang et al. (2001) [1].

    (1 + w phi) / (1 + w phi + 1/phi) (quoted).

    Parameters
    ----------
    plants : the water that plants can reach, w: 2 for forest, 0.5 for grass (quoted).

    Examples
    --------
    >>> import numpy as np
    >>> zhang_2001(np.array([1.0]), plants=2.0).round(4)
    array([0.75])
    """
    wet = 1.0 + plants * dryness
    return np.asarray(wet / (wet + 1.0 / dryness))


FOREST, GRASS = 2.0, 0.5

CURVES: Mapping[str, Callable[[Floats], Floats]] = MappingProxyType(
    {
        "budyko-1974": budyko_1974,
        "turc-pike": turc_pike,
        "fu-1981": fu_1981,
        "oldekop": oldekop,
        "schreiber": schreiber,
    }
)
"""Evaporated part of precipitation as a function of dryness, by name."""


def evapotranspiration(
    method: str, precipitation: Floats, potential: Floats, cover: Floats | None = None
) -> Floats:
    """Actual evapotranspiration of a year by a named method [mm yr-1].

    Parameters
    ----------
    precipitation, potential : [mm yr-1].
    cover : plant cover 0..1, read by "zhang-2001" alone: covered ground evaporates as forest and
        the rest as grass, weighed by cover; that plant cover stands for forest is this project's
        choice.

    Notes
    -----
    Where nothing falls or the air can take up nothing, nothing evaporates.
    """
    both = (precipitation > 0.0) & (potential > 0.0)
    unknown = np.isnan(precipitation) | np.isnan(potential)
    dryness = np.where(both, potential, 1.0) / np.where(both, precipitation, 1.0)
    if method == "zhang-2001":
        if cover is None:
            msg = "zhang-2001 needs plant cover"
            raise TypeError(msg)
        part = cover * zhang_2001(dryness, plants=FOREST)
        part = part + (1.0 - cover) * zhang_2001(dryness, plants=GRASS)
    else:
        part = CURVES[method](dryness)
    found = np.where(both, part * precipitation, 0.0)
    return np.where(unknown, np.nan, found)
