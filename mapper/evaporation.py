"""Potential evapotranspiration from temperature: what the air could take up, month by month."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from mapper.laws.law import ZERO_CELSIUS

Floats = NDArray[np.float64]

MONTH_DAYS: tuple[float, ...] = (31, 28.25, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31)
MIDDLE_DAY: tuple[int, ...] = (16, 45, 75, 105, 136, 166, 197, 228, 258, 289, 319, 350)
"""Day of the year in the middle of each month, which stands for the month's sun."""

SOLAR_CONSTANT = 0.0820  # MJ m-2 min-1, as FAO Irrigation and Drainage Paper 56 rounds it


def _declination(day: int) -> float:
    return float(0.409 * np.sin(2.0 * np.pi * day / 365.0 - 1.39))


def sunset_angle(latitude: Floats, day: int) -> Floats:
    """Hour angle of sunset [rad]: 0 in polar night, pi in polar day. ``latitude`` in degrees."""
    cosine = -np.tan(np.deg2rad(latitude)) * np.tan(_declination(day))
    return np.asarray(np.arccos(np.clip(cosine, -1.0, 1.0)))


def day_length(latitude: Floats, day: int) -> Floats:
    """Hours of daylight [h]."""
    return np.asarray(24.0 / np.pi * sunset_angle(latitude, day))


def extraterrestrial_radiation(latitude: Floats, day: int) -> Floats:
    """Sunlight above the air on a level square metre in a day [MJ m-2 d-1].

    Equations 21 to 25 of FAO Irrigation and Drainage Paper 56 (Allen et al. 1998).

    Examples
    --------
    >>> import numpy as np
    >>> extraterrestrial_radiation(np.array([45.0]), 172).round(2)
    array([41.91])
    """
    phi, delta = np.deg2rad(latitude), _declination(day)
    omega = sunset_angle(latitude, day)
    distance = 1.0 + 0.033 * np.cos(2.0 * np.pi * day / 365.0)
    height = omega * np.sin(phi) * np.sin(delta) + np.cos(phi) * np.cos(delta) * np.sin(omega)
    return np.asarray(24.0 * 60.0 / np.pi * SOLAR_CONSTANT * distance * height)


def oudin_day(celsius: Floats, radiation: Floats) -> Floats:
    """Potential evapotranspiration of a day after Oudin et al. (2005) [mm d-1].

    PE = Re / 2.45 * (T + 5) / 100 where T > -5, else 0 (quoted).

    Parameters
    ----------
    celsius : air temperature [degC]. radiation : above the air [MJ m-2 d-1].

    References
    ----------
    Oudin, L. et al. (2005), Journal of Hydrology 303, doi 10.1016/j.jhydrol.2004.08.026.

    Examples
    --------
    >>> import numpy as np
    >>> oudin_day(np.array([18.0]), np.array([41.91])).round(3)
    array([3.934])
    """
    return np.asarray(radiation / 2.45 * np.maximum(celsius + 5.0, 0.0) / 100.0)


def hamon_day(celsius: Floats, hours: Floats) -> Floats:
    """Potential evapotranspiration of a day after Hamon (1963) [mm d-1].

    0.1651 (D / 12) rho, with the density rho of saturated vapour in g m-3 (quoted; several
    constants are in use).

    Parameters
    ----------
    celsius : air temperature [degC]. hours : daylight [h].

    Examples
    --------
    >>> import numpy as np
    >>> hamon_day(np.array([20.0]), np.array([12.0])).round(3)
    array([2.852])
    """
    pressure = 6.108 * np.exp(17.27 * celsius / (celsius + 237.3))
    density = 216.7 * pressure / (celsius + 273.3)
    return np.asarray(0.1651 * hours / 12.0 * density)


def thornthwaite_month(celsius: Floats) -> Floats:
    """Potential evapotranspiration of months of 30 days of 12 hours after Thornthwaite [mm].

    16 (10 T / I)^a with the year's heat index I = sum (T/5)^1.514; months at or below 0 degC
    give nothing (read). Above 26.5 degC -415.85 + 32.24 T - 0.43 T^2 takes its place (memory),
    T held at 37.5 degC, where it is greatest.

    Parameters
    ----------
    celsius : shape (12, n), mean of each month [degC].

    References
    ----------
    Thornthwaite, C. W. (1948), Geographical Review 38.

    Examples
    --------
    >>> import numpy as np
    >>> months = np.array([2, 3, 6, 10, 15, 18, 20, 20, 16, 11, 6, 3], float)[:, None]
    >>> thornthwaite_month(months).sum().round(1)
    np.float64(583.2)
    """
    warm = np.maximum(celsius, 0.0)
    index = ((warm / 5.0) ** 1.514).sum(axis=0)
    power = 6.75e-7 * index**3 - 7.71e-5 * index**2 + 1.792e-2 * index + 0.49239
    safe = np.where(index > 0.0, index, 1.0)
    usual = np.where(index > 0.0, 16.0 * (10.0 * warm / safe) ** power, 0.0)
    hot = np.minimum(celsius, 37.5)
    return np.where(celsius >= 26.5, -415.85 + 32.24 * hot - 0.43 * hot**2, usual)


def oudin_year(kelvin: Floats, latitude: Floats) -> Floats:
    """Sum of a year after Oudin et al. (2005) from the means of its months [mm yr-1]."""
    celsius = kelvin - ZERO_CELSIUS
    total = np.zeros(celsius.shape[1:])
    for month, (day, days) in enumerate(zip(MIDDLE_DAY, MONTH_DAYS, strict=True)):
        radiation = extraterrestrial_radiation(latitude, day)
        total += days * oudin_day(celsius[month], radiation)
    return total


def hamon_year(kelvin: Floats, latitude: Floats) -> Floats:
    """Sum of a year after Hamon (1963) from the means of its months [mm yr-1]."""
    celsius = kelvin - ZERO_CELSIUS
    total = np.zeros(celsius.shape[1:])
    for month, (day, days) in enumerate(zip(MIDDLE_DAY, MONTH_DAYS, strict=True)):
        total += days * hamon_day(celsius[month], day_length(latitude, day))
    return total


def thornthwaite_year(kelvin: Floats, latitude: Floats) -> Floats:
    """Sum of a year after Thornthwaite (1948), months by their days and daylight [mm yr-1]."""
    months = thornthwaite_month(kelvin - ZERO_CELSIUS)
    total = np.zeros(months.shape[1:])
    for month, (day, days) in enumerate(zip(MIDDLE_DAY, MONTH_DAYS, strict=True)):
        total += months[month] * (days / 30.0) * (day_length(latitude, day) / 12.0)
    return total


POTENTIAL: Mapping[str, Callable[[Floats, Floats], Floats]] = MappingProxyType(
    {
        "oudin-2005": oudin_year,
        "hamon-1963": hamon_year,
        "thornthwaite-1948": thornthwaite_year,
    }
)
"""Potential evapotranspiration of a year [mm yr-1] from the means of its months [K], shape
(12, n), and latitude [degrees], shape (n,), by name."""
