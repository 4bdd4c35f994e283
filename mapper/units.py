"""The only parser of units: a closed table of spellings, and what each is in inner units."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

from mapper.errors import UnitError

Quantity = Literal["temperature", "water", "fraction", "erosion", "elevation", "pressure", "rate"]

INNER_UNIT: Mapping[Quantity, str] = MappingProxyType(
    {
        "temperature": "K",
        "water": "mm yr-1",
        "fraction": "1",
        "erosion": "t km-2 yr-1",
        "elevation": "m",
        "pressure": "atm",
        "rate": "mol m-2 yr-1",
    }
)

DAYS_PER_YEAR = 365.25
SECONDS_PER_DAY = 86_400.0
MONTHS_PER_YEAR = 12.0


@dataclass(frozen=True)
class Conversion:
    """Inner value = raw * factor + offset; ``per_month`` values are sums over one month."""

    unit: str
    factor: float
    offset: float = 0.0
    per_month: bool = False


def _water(mm: float) -> dict[str, float]:
    return {
        "yr-1": mm,
        "month-1": mm * MONTHS_PER_YEAR,
        "day-1": mm * DAYS_PER_YEAR,
        "s-1": mm * DAYS_PER_YEAR * SECONDS_PER_DAY,
    }


def _rates(amounts: Mapping[str, Mapping[str, float]]) -> dict[str, Conversion]:
    return {
        f"{amount} {period}": Conversion(f"{amount} {period}", factor, 0.0, period == "month-1")
        for amount, periods in amounts.items()
        for period, factor in periods.items()
    }


_TABLE: Mapping[Quantity, Mapping[str, Conversion]] = MappingProxyType(
    {
        "temperature": {
            "K": Conversion("K", 1.0),
            "degC": Conversion("degC", 1.0, 273.15),
            "degF": Conversion("degF", 5.0 / 9.0, 273.15 - 32.0 * 5.0 / 9.0),
        },
        "water": _rates(
            {
                "mm": _water(1.0),
                "cm": _water(10.0),
                "m": _water(1000.0),
                "kg m-2": _water(1.0),
                "m3 m-2": _water(1000.0),
            }
        ),
        "fraction": {"1": Conversion("1", 1.0), "%": Conversion("%", 0.01)},
        "erosion": {
            "t km-2 yr-1": Conversion("t km-2 yr-1", 1.0),
            "t ha-1 yr-1": Conversion("t ha-1 yr-1", 100.0),
            "kg m-2 yr-1": Conversion("kg m-2 yr-1", 1000.0),
            "t m-2 yr-1": Conversion("t m-2 yr-1", 1e6),
        },
        "elevation": {"m": Conversion("m", 1.0), "km": Conversion("km", 1000.0)},
        "pressure": {
            "atm": Conversion("atm", 1.0),
            "Pa": Conversion("Pa", 1.0 / 101_325.0),
            "hPa": Conversion("hPa", 100.0 / 101_325.0),
            "ppm": Conversion("ppm", 1e-6),
        },
        "rate": {
            "mol m-2 yr-1": Conversion("mol m-2 yr-1", 1.0),
            "mol km-2 yr-1": Conversion("mol km-2 yr-1", 1e-6),
            "t CO2 km-2 yr-1": Conversion("t CO2 km-2 yr-1", 1.0 / 44.0095),
            "t C km-2 yr-1": Conversion("t C km-2 yr-1", 1.0 / 12.011),
        },
    }
)

_SYNONYMS: Mapping[str, str] = MappingProxyType(
    {
        "kelvin": "K",
        "degk": "K",
        "deg k": "K",
        "degrees kelvin": "K",
        "degc": "degC",
        "deg c": "degC",
        "°c": "degC",
        "celsius": "degC",
        "degree celsius": "degC",
        "degrees celsius": "degC",
        "degree_celsius": "degC",
        "degrees_celsius": "degC",
        "degree_c": "degC",
        "degrees_c": "degC",
        "degf": "degF",
        "°f": "degF",
        "fahrenheit": "degF",
        "fraction": "1",
        "dimensionless": "1",
        "none": "1",
        "percent": "%",
        "pct": "%",
        "metre": "m",
        "metres": "m",
        "meter": "m",
        "meters": "m",
        "pascal": "Pa",
        "ppmv": "ppm",
        "umol mol-1": "ppm",
        "unitless": "1",
    }
)

_PERIODS = {
    "yr": "yr-1",
    "year": "yr-1",
    "a": "yr-1",
    "annum": "yr-1",
    "month": "month-1",
    "mon": "month-1",
    "day": "day-1",
    "d": "day-1",
    "s": "s-1",
    "sec": "s-1",
    "second": "s-1",
}


def spell(text: str) -> str:
    """Bring a unit's spelling to the table's: powers, slashes, blanks, periods, synonyms.

    Examples
    --------
    >>> spell("mm/year"), spell("kg m**-2 s^-1"), spell(" Kelvin ")
    ('mm yr-1', 'kg m-2 s-1', 'K')
    """
    plain = " ".join(text.replace("\u00b7", " ").replace("*", "^").split())
    plain = plain.replace("\u2212", "-").replace("\u207b\u00b9", "-1").replace("\u207b\u00b2", "-2")
    plain = plain.replace("\u00ba", "\u00b0").replace("^^", "^").replace("^", "")
    if plain.lower() in _SYNONYMS:
        return _SYNONYMS[plain.lower()]
    plain = re.sub(r"\s*/\s*([A-Za-z]+)(\d?)", lambda m: f" {m[1]}-{m[2] or 1}", plain)
    words = [_period(word) for word in plain.split()]
    return " ".join(words)


def _period(word: str) -> str:
    match = re.fullmatch(r"([A-Za-z]+?)s?-1", word) or re.fullmatch(r"([A-Za-z]+)-1", word)
    if match and match[1].lower() in _PERIODS:
        return _PERIODS[match[1].lower()]
    if word == "s-1":
        return word
    return word


def conversion(text: str | None, quantity: Quantity, *, where: str) -> Conversion:
    """Find how ``text`` becomes the inner unit of ``quantity``.

    Raises
    ------
    UnitError where the unit is missing or not in the table; the message lists what is.
    """
    known = _TABLE[quantity]
    accepted = ", ".join(known)
    if text is None or not text.strip():
        raise UnitError(
            f"no unit, and {quantity} must have one",
            where=where,
            fix=f'units = "..." in the job file; one of: {accepted}',
        )
    spelled = spell(text)
    if spelled in known:
        return known[spelled]
    if quantity == "water" and f"{spelled} yr-1" in known:
        raise UnitError(
            f"the unit is {text.strip()!r}, and a rate is needed: the period is not said",
            where=where,
            fix=f'units = "{spelled} yr-1" if the values are yearly sums, '
            f'"{spelled} month-1" if monthly',
        )
    raise UnitError(
        f"unit {text.strip()!r} is not one that {quantity} may have",
        where=where,
        fix=f'units = "..." in the job file; one of: {accepted}',
    )
