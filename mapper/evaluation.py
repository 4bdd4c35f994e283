"""Evaluates a law on one rock's cells, and flags what a reader should know of each."""

from __future__ import annotations

from collections.abc import Mapping
from enum import IntFlag
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from mapper.laws import Capped
from mapper.scheme import RockLaw

Floats = NDArray[np.float64]
Bits = NDArray[np.uint8]


class Flag(IntFlag):
    """What a reader should know about a cell, as bits of ``maps/flags.tif``."""

    NO_DATA = 1
    PARTLY_NO_DATA = 2
    RUNOFF_OUTSIDE = 4
    TEMPERATURE_OUTSIDE = 8
    OTHER_OUTSIDE = 16
    CAPPED = 32
    NEGATIVE_RUNOFF = 64
    NOT_FINITE = 128


FLAG_MEANING: Mapping[Flag, str] = {
    Flag.NO_DATA: "no result: lithology or a layer that the law reads has no data",
    Flag.PARTLY_NO_DATA: "a part of the cell has no result",
    Flag.RUNOFF_OUTSIDE: "runoff outside the law's range",
    Flag.TEMPERATURE_OUTSIDE: "temperature outside the law's range",
    Flag.OTHER_OUTSIDE: "another layer outside the law's range",
    Flag.CAPPED: "held at the supply limit",
    Flag.NEGATIVE_RUNOFF: "runoff below zero, taken as zero",
    Flag.NOT_FINITE: "the law gave no finite number",
}


OUTSIDE_RANGE = Flag.RUNOFF_OUTSIDE | Flag.TEMPERATURE_OUTSIDE | Flag.OTHER_OUTSIDE


COUNTED_FLAGS: tuple[Flag, ...] = (
    Flag.RUNOFF_OUTSIDE,
    Flag.TEMPERATURE_OUTSIDE,
    Flag.OTHER_OUTSIDE,
    OUTSIDE_RANGE,
    Flag.CAPPED,
    Flag.NEGATIVE_RUNOFF,
    Flag.NOT_FINITE,
)
"""Causes whose area is added up; ground under two causes of one entry counts once in that entry.
The area without data is what is left of the rock's area."""


class RockResult(NamedTuple):
    """The rate of one rock's entries [mol m-2 yr-1], NaN without a result, and their flags."""

    rate: Floats
    flags: Bits


def evaluate_rock(law: RockLaw | None, inputs: Mapping[str, Floats]) -> RockResult:
    """Evaluate a law on one rock's entries.

    Parameters
    ----------
    law : None for a class that does not weather, whose rate is zero.
    inputs : layers in inner units, each of shape (n,).

    Notes
    -----
    Runoff below zero is taken as zero. Entries outside the law's ranges are computed and flagged.
    """
    n = next(iter(inputs.values())).size if inputs else 0
    flags = np.zeros(n, dtype=np.uint8)
    if law is None:
        return RockResult(np.zeros(n), flags)
    read: list[Floats] = []
    known = np.ones(n, dtype=np.bool_)
    for one in law.law.inputs:
        values = np.asarray(inputs[one.name], dtype=np.float64)
        known &= ~np.isnan(values)
        if one.name == "runoff" and (values < 0).any():
            flags[values < 0] |= bit(Flag.NEGATIVE_RUNOFF)
            values = np.maximum(values, 0.0)
        outside = (values < one.low) | (values > one.high)
        flags[outside] |= bit(_outside_flag(one.name))
        read.append(values)
    with np.errstate(all="ignore"):  # what is not finite is flagged below, cell by cell
        rate, held = _rate(law, read)
    rate = np.broadcast_to(rate, (n,))
    if held is not None:
        flags[held] |= bit(Flag.CAPPED)
    bad = known & ~np.isfinite(rate)
    flags[bad] |= bit(Flag.NOT_FINITE)
    flags[~known] = 0
    return RockResult(np.where(known & ~bad, rate, np.nan), flags)


def _rate(law: RockLaw, layers: list[Floats]) -> tuple[Floats, NDArray[np.bool_] | None]:
    """The law's rate, and where the supply limit held it, if the law has one."""
    function = law.law.function
    if isinstance(function, Capped):
        return function.hold(*layers, **law.values)
    return function(*layers, **law.values), None


def bit(flag: Flag) -> np.uint8:
    """A flag as the byte that arrays of flags hold."""
    return np.uint8(int(flag))


def _outside_flag(name: str) -> Flag:
    if name == "runoff":
        return Flag.RUNOFF_OUTSIDE
    return Flag.TEMPERATURE_OUTSIDE if name == "temperature" else Flag.OTHER_OUTSIDE
