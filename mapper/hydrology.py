"""Runoff from climate where none is given: what falls less what evaporates, over a year."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from mapper.laws.law import ZERO_CELSIUS

Floats = NDArray[np.float64]


def turc_evapotranspiration(precipitation: Floats, temperature: Floats) -> Floats:
    """Actual evapotranspiration of a year after Turc (1954) [mm yr-1].

    Parameters
    ----------
    precipitation : [mm yr-1]. temperature : mean of the year [K].

    Notes
    -----
    AET = P / sqrt(0.9 + (P/L)^2), and P itself where P/L <= 0.316, with L = 300 + 25 T + 0.05 T^3
    and T in degrees Celsius, taken as 0 in colder cells. The formula is quoted from later texts;
    the clamp is common practice.

    References
    ----------
    Turc, L. (1954), Annales agronomiques 5.

    Examples
    --------
    >>> import numpy as np
    >>> turc_evapotranspiration(np.array([1000.0]), np.array([293.15])).round(1)
    array([791.9])
    """
    celsius = np.maximum(temperature - ZERO_CELSIUS, 0.0)
    power = 300.0 + 25.0 * celsius + 0.05 * celsius**3
    ratio = precipitation / power
    wet = precipitation / np.sqrt(0.9 + ratio**2)
    return np.where(ratio <= 0.316, precipitation, np.minimum(wet, precipitation))


def runoff(precipitation: Floats, temperature: Floats) -> Floats:
    """Runoff of a year as precipitation less Turc evapotranspiration [mm yr-1]."""
    evaporated = turc_evapotranspiration(precipitation, temperature)
    return np.maximum(precipitation - evaporated, 0.0)
