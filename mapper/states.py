"""States: how much ground of each region and rock lies under which climate and cover.

A state is a rock of a region with one bin of each layer that its law reads. A total depends on
the cells only through the area in each state, as long as the parameters hold for a whole draw.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from mapper.sums import UNIT_BITS

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

AREA_BITS = 22
"""A cell's area is counted in 2^-22 of the largest cell: with 8 bits of place inside a bin, the
sum over 2^20 cells stays below 2^53, and double precision adds it exactly in any order."""
PLACE_BITS = 8
MOST_DENSE = 2**21
KEY_BITS = 63


@dataclass(frozen=True)
class Axis:
    """The bins of one layer, on edges that no block or data set shifts.

    ``linear``: bins of ``width`` in the layer's unit from zero up. ``log``: each doubling divided
    into 2^``mantissa_bits`` equal steps, from 2^``lowest`` up; all that is less counts as zero.
    """

    width: float = 0.0
    mantissa_bits: int = 0
    lowest: int = 0
    bits: int = 9

    @property
    def is_log(self) -> bool:
        """Whether bins widen with the value."""
        return self.width == 0.0

    @property
    def _first(self) -> int:
        return (127 + self.lowest) << (self.mantissa_bits + PLACE_BITS)

    def place(self, values: Floats) -> NDArray[np.int32]:
        """Bin and place inside it as one whole number, the place in the low bits.

        The log axis reads the bits of a 32-bit float: exponent and leading digits in one number.
        """
        most = (1 << (self.bits + PLACE_BITS)) - 1
        if not self.is_log:
            steps = values * (2**PLACE_BITS / self.width)
            with np.errstate(invalid="ignore"):  # what is NaN has no result and is left out
                return np.asarray(np.clip(steps, 0, most, out=steps), dtype=np.int32)
        shift = 23 - self.mantissa_bits - PLACE_BITS
        digits = np.maximum(values, 0.0).astype(np.float32).view(np.int32) >> shift
        digits -= np.int32(self._first - (1 << PLACE_BITS))
        np.clip(digits, 0, most, out=digits)
        digits[digits < 1 << PLACE_BITS] = 0
        return np.asarray(digits, dtype=np.int32)

    def value(self, bins: Ints, place: Floats) -> Floats:
        """The value at a place inside a bin, place counted in 2^-PLACE_BITS of the bin."""
        if not self.is_log:
            steps = bins * 2.0**PLACE_BITS + place + 0.5
            return np.asarray(steps * (self.width / 2**PLACE_BITS), dtype=np.float64)
        step = 1 << self.mantissa_bits
        at = np.maximum(bins - 1, 0)
        inside = at % step + (place + 0.5) / 2**PLACE_BITS
        value = np.ldexp(1.0 + inside / step, (at // step + self.lowest).astype(np.int32))
        return np.where(bins > 0, value, 0.0)


AXES: Mapping[str, Axis] = {
    "temperature": Axis(width=1.0, bits=9),  # K
    "vegetation": Axis(width=0.1, bits=4),
    "soil_shielding": Axis(width=0.1, bits=4),
    "runoff": Axis(mantissa_bits=3, lowest=-6, bits=8),  # mm yr-1: steps of 6 to 12 %
    "precipitation": Axis(mantissa_bits=3, lowest=-6, bits=8),
    "evapotranspiration": Axis(mantissa_bits=3, lowest=-6, bits=8),
    "erosion": Axis(mantissa_bits=3, lowest=-10, bits=8),  # t km-2 yr-1
    "soil_co2": Axis(mantissa_bits=3, lowest=-20, bits=8),  # atm
    "reference_consumption": Axis(mantissa_bits=3, lowest=-20, bits=8),  # mol m-2 yr-1
}
"""Bins of each layer. Means inside a bin are kept, so that a width costs only curvature: on the
island every total of a draw lies within 2e-4 of the same draw cell by cell (see the tests)."""


class StateCounts(NamedTuple):
    """States of a block, or of several merged, in the order of their keys.

    ``key`` : region, rock and bins in one number. ``area`` : counts. ``place`` : (n_states,
    n_axes), the sum of area counts times place inside the bin.
    """

    key: Ints
    area: Ints
    place: Ints


@dataclass(frozen=True)
class StateLayout:
    """Which layers are binned, for all rocks alike; a rock that does not read one has bin 0."""

    names: tuple[str, ...]
    n_rocks: int

    @property
    def axis_bits(self) -> int:
        """Bits that the bins take in a key."""
        return sum(AXES[name].bits for name in self.names)

    def fits(self, n_regions: int) -> bool:
        """Whether region, rock and bins fit into one key."""
        return math.ceil(math.log2(max(n_regions * self.n_rocks, 2))) + self.axis_bits <= KEY_BITS


def area_step(exponent: int) -> float:
    """The area of one count [m2], for the unit exponent of a grid."""
    return math.ldexp(1.0, exponent + UNIT_BITS - AREA_BITS)


def count_states(
    layout: StateLayout,
    ground: Ints,
    area: Floats,
    places: Mapping[str, NDArray[np.int32]],
    exponent: int,
) -> StateCounts:
    """Count the area in each state of a block.

    Parameters
    ----------
    ground : region * n_rocks + rock of each piece. area : its area [m2].
    places : from `Axis.place`, for each layer of the layout; 0 where the rock does not read it.
    """
    counts = np.rint(area * (1.0 / area_step(exponent)))
    dense = _Dense.begin(ground)
    for name in layout.names:
        dense.add(places[name] >> PLACE_BITS, AXES[name].bits)
    number, keys = dense.close()
    n = keys.size
    summed = [np.bincount(number, weights=counts, minlength=n)]
    for name in layout.names:
        inside = places[name] & ((1 << PLACE_BITS) - 1)
        summed.append(np.bincount(number, weights=counts * inside, minlength=n))
    whole = np.stack(summed, axis=1).astype(np.int64)
    held = np.flatnonzero(whole[:, 0] > 0)
    return StateCounts(keys[held], whole[held, 0], whole[held, 1:])


@dataclass
class _Dense:
    """Numbers for combinations that occur, kept small enough for tables instead of sorting.

    ``number`` counts within ``size`` possible ones; ``keys`` gives each possible one's full key.
    Order is kept: a smaller number has a smaller key.
    """

    number: Ints
    keys: Ints

    @classmethod
    def begin(cls, first: Ints) -> _Dense:
        low = int(first.min()) if first.size else 0
        size = int(first.max()) - low + 1 if first.size else 0
        return cls(first - low, np.arange(low, low + size, dtype=np.int64))

    def add(self, bins: NDArray[np.int32], bits: int) -> None:
        """Combine with the bins of one more layer."""
        if not bins.size:
            return
        low, high = int(bins.min()), int(bins.max())
        size = high - low + 1
        if self.keys.size * size > MOST_DENSE:
            self._compact()
        inner = np.arange(low, high + 1, dtype=np.int64)
        if self.keys.size * size <= MOST_DENSE:
            self.number = self.number * size + (bins - np.int32(low))
            self.keys = ((self.keys[:, None] << bits) + inner).ravel()
            return
        full = (self.keys[self.number] << bits) + bins
        self.keys, self.number = np.unique(full, return_inverse=True)

    def _compact(self) -> None:
        occurs = np.zeros(self.keys.size, dtype=np.bool_)
        occurs[self.number] = True
        renumber = np.cumsum(occurs) - 1
        self.number = renumber[self.number]
        self.keys = self.keys[occurs]

    def close(self) -> tuple[Ints, Ints]:
        """The number of each piece, and the keys that the numbers stand for."""
        if self.keys.size > 2**14:
            self._compact()
        return self.number, self.keys


def merge_states(parts: list[StateCounts]) -> StateCounts:
    """Add states of several blocks; whole counts, so the order does not matter."""
    key = np.concatenate([part.key for part in parts])
    order = np.argsort(key, kind="stable")
    key = key[order]
    first = _firsts(key)
    if not first.size:
        return parts[0]
    area = np.concatenate([part.area for part in parts])[order]
    place = np.concatenate([part.place for part in parts])[order]
    return StateCounts(
        key[first], np.add.reduceat(area, first), np.add.reduceat(place, first, axis=0)
    )


def _firsts(ordered: Ints) -> Ints:
    """Where each value begins in an ordered array."""
    if not ordered.size:
        return np.empty(0, dtype=np.int64)
    return np.flatnonzero(np.concatenate([[True], ordered[1:] != ordered[:-1]]))


@dataclass(frozen=True, eq=False)
class States:
    """States as numbers: region and rock positions, area [m2], and each layer's mean.

    ``bins`` holds the bin of each layer, for states that can still be joined.
    """

    region: Ints
    rock: Ints
    area: Floats
    inputs: Mapping[str, Floats]
    bins: Mapping[str, Ints] = field(default_factory=dict)

    def of_rock(self, rock: int) -> States:
        """The states of one rock, by region."""
        at = np.flatnonzero(self.rock == rock)
        inputs = {name: values[at] for name, values in self.inputs.items()}
        return States(self.region[at], self.rock[at], self.area[at], inputs)


def to_states(counts: StateCounts, layout: StateLayout, exponent: int) -> States:
    """Turn counts into area and means weighted by area."""
    rest = counts.key
    inputs: dict[str, Floats] = {}
    bins: dict[str, Ints] = {}
    for at, name in reversed(list(enumerate(layout.names))):
        axis = AXES[name]
        bins[name] = rest & ((1 << axis.bits) - 1)
        inputs[name] = axis.value(bins[name], counts.place[:, at] / counts.area)
        rest = rest >> axis.bits
    area = np.asarray(counts.area * area_step(exponent), dtype=np.float64)
    return States(rest // layout.n_rocks, rest % layout.n_rocks, area, inputs, bins)


def join_bins(states: States, name: str) -> States:
    """Join each two neighbouring bins of one layer; area and means are kept."""
    bins = {**states.bins, name: states.bins[name] >> 1}
    columns = (*bins.values(), states.rock, states.region)  # the last is the first key
    order = np.lexsort(columns)
    changes = np.zeros(order.size - 1, dtype=np.bool_)
    for column in columns:
        changes |= np.diff(column[order]) != 0
    first = np.flatnonzero(np.concatenate([[True], changes]))
    area = np.add.reduceat(states.area[order], first)
    inputs = {
        one: np.add.reduceat((values * states.area)[order], first) / area
        for one, values in states.inputs.items()
    }
    kept = order[first]
    joined = {one: values[kept] for one, values in bins.items()}
    return States(states.region[kept], states.rock[kept], area, inputs, joined)
