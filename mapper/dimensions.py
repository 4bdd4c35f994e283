"""The dimension of a compound unit, and its size in metre, kilogram, year, kelvin and mole."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from types import MappingProxyType

from mapper.accounting import DAYS_PER_YEAR, MOLAR_MASS
from mapper.errors import UnitError
from mapper.units import SECONDS_PER_DAY, spell

BASES = ("mol", "kg", "m", "yr", "K")
GRAMS_PER_KILOGRAM = 1000.0
LARGEST_POWER = 9
LONGEST_UNIT = 80


@dataclass(frozen=True)
class Dimension:
    """Powers of amount, mass, length, time and temperature, in the order of `BASES`."""

    powers: tuple[Fraction, ...] = (Fraction(0),) * len(BASES)

    def __mul__(self, other: Dimension) -> Dimension:
        pairs = zip(self.powers, other.powers, strict=True)
        return Dimension(tuple(one + two for one, two in pairs))

    def __truediv__(self, other: Dimension) -> Dimension:
        return self * other ** Fraction(-1)

    def __pow__(self, power: Fraction) -> Dimension:
        return Dimension(tuple(one * power for one in self.powers))

    def __str__(self) -> str:
        named = [(base, power) for base, power in zip(BASES, self.powers, strict=True) if power]
        words = [base if power == 1 else f"{base}{_exponent(power)}" for base, power in named]
        return " ".join(words) or "1 (no unit)"


def _exponent(power: Fraction) -> str:
    return str(power) if power.denominator == 1 else f"^({power})"


@dataclass(frozen=True)
class Unit:
    """A unit: one of it is ``scale`` in the base units of ``dimension``."""

    scale: float
    dimension: Dimension


def _of(**powers: int) -> Dimension:
    return Dimension(tuple(Fraction(powers.get(base, 0)) for base in BASES))


NONE = Dimension()
UPTAKE = _of(mol=1, m=-2, yr=-1)
MASS_FLUX = _of(kg=1, m=-2, yr=-1)
_SECOND = 1.0 / (DAYS_PER_YEAR * SECONDS_PER_DAY)
_ENERGY = _of(kg=1, m=2, yr=-2)
_PRESSURE = _of(kg=1, m=-1, yr=-2)

UNITS: Mapping[str, Unit] = MappingProxyType(
    {
        "1": Unit(1.0, NONE),
        "%": Unit(0.01, NONE),
        "mol": Unit(1.0, _of(mol=1)),
        "mmol": Unit(1e-3, _of(mol=1)),
        "umol": Unit(1e-6, _of(mol=1)),
        "nmol": Unit(1e-9, _of(mol=1)),
        "kg": Unit(1.0, _of(kg=1)),
        "mg": Unit(1e-6, _of(kg=1)),
        "g": Unit(1e-3, _of(kg=1)),
        "t": Unit(1e3, _of(kg=1)),
        "m": Unit(1.0, _of(m=1)),
        "mm": Unit(1e-3, _of(m=1)),
        "cm": Unit(1e-2, _of(m=1)),
        "km": Unit(1e3, _of(m=1)),
        "ha": Unit(1e4, _of(m=2)),
        "L": Unit(1e-3, _of(m=3)),
        "yr": Unit(1.0, _of(yr=1)),
        "month": Unit(1.0 / 12.0, _of(yr=1)),
        "day": Unit(1.0 / DAYS_PER_YEAR, _of(yr=1)),
        "d": Unit(1.0 / DAYS_PER_YEAR, _of(yr=1)),
        "h": Unit(3600.0 * _SECOND, _of(yr=1)),
        "s": Unit(_SECOND, _of(yr=1)),
        "K": Unit(1.0, _of(K=1)),
        "J": Unit(_SECOND**-2, _ENERGY),
        "kJ": Unit(1e3 * _SECOND**-2, _ENERGY),
        "Pa": Unit(_SECOND**-2, _PRESSURE),
        "hPa": Unit(1e2 * _SECOND**-2, _PRESSURE),
        "atm": Unit(101_325.0 * _SECOND**-2, _PRESSURE),
    }
)
"""Every unit that a compound may be made of."""

SUBSTANCES = ("CO2", "C")
_WORD = re.compile(r"([A-Za-z%]+|1)(-?\d{1,2})?")


def read_unit(text: str, *, where: str) -> Unit:
    """Read a compound unit such as "mmol L-1", "kJ mol-1" or "t CO2 km-2 yr-1".

    A mass that names CO2 or C is read as moles: that is how a formula says what its mass is of.

    Raises
    ------
    UnitError where a word of it is not in the table; the message lists what is.

    Examples
    --------
    >>> unit = read_unit("mmol/L", where="here")
    >>> unit.scale, str(unit.dimension)
    (1.0, 'mol m-3')
    """
    words = spell(text[:LONGEST_UNIT]).replace("\u00b5", "u").split()
    if not words or len(text) > LONGEST_UNIT:
        raise _unreadable(text, "it is empty or too long", where)
    whole = Unit(1.0, NONE)
    last = Unit(1.0, NONE)
    for word in words:
        last = (
            _as_moles(last, word, text, where) if word in SUBSTANCES else _word(word, text, where)
        )
        whole = Unit(whole.scale * last.scale, whole.dimension * last.dimension)
    return whole


def _word(word: str, text: str, where: str) -> Unit:
    match = _WORD.fullmatch(word)
    if match is None or match[1] not in UNITS:
        raise _unreadable(text, f"{word!r} is not known", where)
    power = int(match[2] or 1)
    if abs(power) > LARGEST_POWER:
        raise _unreadable(text, f"the power in {word!r} is too large", where)
    one = UNITS[match[1]]
    return Unit(one.scale**power, one.dimension ** Fraction(power))


def _as_moles(before: Unit, substance: str, text: str, where: str) -> Unit:
    """Turn the word before, a mass or an amount, into moles of the substance."""
    if before.dimension == _of(mol=1):
        return Unit(1.0, NONE)
    if before.dimension != _of(kg=1):
        raise _unreadable(text, f"{substance} must follow a mass or an amount", where)
    per_kilogram = GRAMS_PER_KILOGRAM / MOLAR_MASS[substance]
    return Unit(per_kilogram, _of(mol=1, kg=-1))


def _unreadable(text: str, why: str, where: str) -> UnitError:
    hint = "give temperatures in K; " if "deg" in text.lower() or "\u00b0" in text else ""
    return UnitError(
        f"unit {text[:LONGEST_UNIT]!r} cannot be read: {why}",
        where=where,
        fix=f"{hint}write powers as in 'mmol L-1', from: {', '.join(UNITS)}; and CO2 or C",
    )
