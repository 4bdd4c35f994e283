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
