"""Evaluates laws: on one rock's cells, on a block of the grid, or on a lazy dataset."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from mapper.accounting import drawdown_share
from mapper.classes import SUMMED, ClassLayer, cell_amounts, sum_classes
from mapper.coverage import MIXED
from mapper.evaluation import (
    COUNTED_FLAGS,
    OUTSIDE_RANGE,
    Bits,
    Flag,
    RockResult,
    bit,
    evaluate_rock,
)
from mapper.grid import Grid, Window, cell_areas
from mapper.job import WaterSpec
from mapper.layers.balance import FALLEN, NO_BALANCE, water_sums
from mapper.layers.layer import Layer
from mapper.layers.lithology import Lithology, RockCells
from mapper.layers.water import derive_water
from mapper.regions import RegionCells, Regions, region_cells
from mapper.rocks import ROCK_NAMES, ROCKS
from mapper.scheme import Alternative, Scheme
from mapper.states import AXES as STATE_AXES
from mapper.states import StateCounts, StateLayout, count_states, merge_states
from mapper.sums import LIMBS, Counts, Runs, add_repeated, add_up, runs_of, unit_exponent

Floats = NDArray[np.float64]


Ints = NDArray[np.int64]


N_ROCKS = len(ROCK_NAMES)


@dataclass(frozen=True, eq=False)
class Plan:
    """All that a block needs to be evaluated, ready to be sent to another process."""

    grid: Grid
    lithology: Lithology
    layers: Mapping[str, Layer]
    water_method: str
    scheme: Scheme
    regions: Regions | None
    notes: tuple[str, ...] = ()
    water: WaterSpec = field(default_factory=WaterSpec)
    month_shares: tuple[float, ...] = ()
    """Parts of a year that the twelve months take, where the rates of months are averaged."""
    classes: tuple[ClassLayer, ...] = ()

    def parts_of_year(self) -> list[tuple[int | None, float]]:
        """Months and their parts of the year where rates are averaged, else the year whole."""
        if not self.month_shares:
            return [(None, 1.0)]
        return list(enumerate(self.month_shares, start=1))

    @property
    def n_regions(self) -> int:
        """Number of regions, and one for 'outside'."""
        return 1 if self.regions is None else self.regions.n_keys


class BlockSums(NamedTuple):
    """Exact sums of one block, or of several added together.

    ``area`` [m2] by region; ``total`` of all cells, not split: area [m2], consumption and
    drawdown [mol yr-1]. The others are by region and rock, shape (n_regions, n_rocks, LIMBS):
    rock area, area with a result, consumption, and the area under each of `COUNTED_FLAGS`.
    ``laws`` holds for each alternative law consumption, area with a result, and area outside its
    range, shape (n_alternatives, 3, n_regions, n_rocks, LIMBS). ``water`` is that of `water_sums`,
    ``classes`` that of `sum_classes`.
    """

    area: Counts
    total: Counts
    rock_area: Counts
    valid_area: Counts
    consumption: Counts
    flagged: Counts
    laws: Counts
    water: Counts
    classes: Counts

    def plus(self, other: BlockSums) -> BlockSums:
        """Both sums together."""
        return BlockSums(*(one + two for one, two in zip(self, other, strict=True)))


class BlockMaps(NamedTuple):
    """A block of each map: rates over the whole cell [mol m-2 yr-1], NaN without a result."""

    consumption: Floats
    drawdown: Floats
    flags: Bits


def read_inputs(plan: Plan, window: Window, month: int | None = None) -> dict[str, Floats]:
    """The layers that the laws read, on a window, each of shape (n_cells,).

    Parameters
    ----------
    month : 1..12 for the mean of that month, None for the mean of whole years. Runoff that is
        derived is the year's in every month, since the methods hold for years.
    """
    needed = plan.scheme.read_names()
    inputs = {
        name: plan.layers[name].values(window, month).ravel()
        for name in needed
        if name in plan.layers
    }
    if "runoff" in needed and "runoff" not in plan.layers:
        water = derive_water(plan.water, plan.layers, plan.grid, window)
        inputs |= {"runoff": water.runoff, FALLEN: water.precipitation}
    return inputs


def evaluate_block(plan: Plan, window: Window) -> tuple[BlockMaps, BlockSums]:
    """Read, align and evaluate one block: its part of each map, and its sums."""
    maps, sums, _ = evaluate_block_states(plan, window, None)
    return maps, sums


def evaluate_block_states(
    plan: Plan, window: Window, layout: StateLayout | None
) -> tuple[BlockMaps, BlockSums, StateCounts | None]:
    """Evaluate one block, and count the area in each state where a layout is given."""
    rocks = plan.lithology.rock_cells(window)
    year = plan.parts_of_year()
    whole = read_inputs(plan, window) if len(year) == 1 else None  # read once, months in turn

    def inputs_of(month: int | None) -> dict[str, Floats]:
        return read_inputs(plan, window, month) if whole is None else whole

    parts = ((share, inputs_of(month)) for month, share in year)
    result, *others = _evaluate_window(plan, rocks, parts)
    maps = _to_cells(rocks, result.rate, result.flags, window)
    regions = region_cells(plan.regions, plan.grid, window)
    row_areas = cell_areas(plan.grid, window)
    areas = np.broadcast_to(row_areas, window.shape).ravel()
    ground = _split_ground(rocks, regions, areas)
    sums = _sum_block(plan, result, ground, (regions, row_areas, maps))
    if "runoff" not in plan.layers:
        of_year = read_inputs(plan, window) if whole is None else whole
        sums = sums._replace(water=water_sums(of_year, rocks, areas, unit_exponent(plan.grid)))
    if others:
        laws = [_sum_alternative(plan, one, ground) for one in others]
        sums = sums._replace(laws=np.stack(laws))
    if plan.classes:
        good = ~np.isnan(result.rate)[ground.entry]
        cells = cell_amounts(areas, (ground.cell[good], ground.area[good]), maps[:2])
        sums = sums._replace(classes=sum_classes(plan.classes, plan.grid, window, cells))
    if layout is None:
        return maps, sums, None
    counts = [
        _count_block(plan, layout, result, ground.part(share), inputs_of(month))
        for month, share in year
    ]
    return maps, sums, counts[0] if len(counts) == 1 else merge_states(counts)


class _Ground(NamedTuple):
    """Pieces of ground: position of the entry, cell, region * N_ROCKS + rock, and area [m2]."""

    entry: Ints
    cell: Ints
    key: Ints
    area: Floats

    def part(self, share: float) -> _Ground:
        """The same pieces for a part of the year."""
        return self if share == 1.0 else self._replace(area=self.area * share)


def _split_ground(rocks: RockCells, regions: RegionCells, areas: Floats) -> _Ground:
    """Every entry as one piece, then the pieces of divided cells, whose entries hold no area."""
    n = rocks.cell.size
    held = regions.single.take(rocks.cell)
    mixed = np.flatnonzero(held == MIXED)
    held[mixed] = 0
    divided = regions.split(rocks.cell[mixed])
    entry = np.concatenate([np.arange(n), mixed[divided.entry]])
    cell = rocks.cell if not mixed.size else rocks.cell.take(entry)
    key = np.empty(entry.size, dtype=np.int64)
    np.multiply(held, N_ROCKS, out=key[:n])
    key[n:] = divided.region * N_ROCKS
    key += rocks.rock if not mixed.size else rocks.rock.take(entry)
    area = areas.take(cell)
    area *= rocks.share if not mixed.size else rocks.share.take(entry)
    area[n:] *= divided.part
    area[mixed] = 0.0
    return _Ground(entry, cell, key, area)


def _count_block(
    plan: Plan,
    layout: StateLayout,
    result: RockResult,
    ground: _Ground,
    inputs: Mapping[str, Floats],
) -> StateCounts:
    """Count the states of the pieces that weather and have a result."""
    laws = [plan.scheme.by_rock.get(name) for name in ROCK_NAMES]
    weathers = np.array([one is not None for one in laws])
    rock = (ground.key % N_ROCKS).astype(np.int8)
    chosen = weathers[rock] & ~np.isnan(result.rate)[ground.entry]
    cell, key, area = ground.cell, ground.key, ground.area
    if not chosen.all():
        cell, key, area, rock = cell[chosen], key[chosen], area[chosen], rock[chosen]
    places: dict[str, NDArray[np.int32]] = {}
    for name in layout.names:
        reads = np.array([one is None or name in one.law.input_names for one in laws])
        places[name] = STATE_AXES[name].place(inputs[name])[cell]
        if not reads.all():
            places[name] *= reads[rock]
    return count_states(layout, key, area, places, unit_exponent(plan.grid))


def state_layout(plan: Plan) -> StateLayout:
    """Which layers the states of a plan are made of."""
    return StateLayout(plan.scheme.input_names(), N_ROCKS)


def _evaluate_window(
    plan: Plan, rocks: RockCells, parts: Iterable[tuple[float, dict[str, Floats]]]
) -> list[RockResult]:
    """Entries by the job's own laws and by each alternative: the mean over the parts of the year.

    Parameters
    ----------
    parts : each part's share of the year and its layers.
    """
    if not plan.month_shares and not plan.scheme.alternatives:
        ((_, inputs),) = parts
        return [RockResult(*_evaluate_entries(plan.scheme, rocks, inputs))]
    n = rocks.cell.size
    every = (None, *plan.scheme.alternatives)
    rates = [np.zeros(n) for _ in every]
    flags = [np.zeros(n, dtype=np.uint8) for _ in every]
    for share, inputs in parts:
        own = RockResult(*_evaluate_entries(plan.scheme, rocks, inputs))
        for at, one in enumerate(every):
            part = own if one is None else _replace_entries(one, rocks, inputs, own)
            rates[at] += part.rate if share == 1.0 else share * part.rate
            flags[at] |= part.flags
    return [RockResult(*one) for one in zip(rates, flags, strict=True)]


def _replace_entries(
    other: Alternative, rocks: RockCells, inputs: Mapping[str, Floats], result: RockResult
) -> RockResult:
    """The entries as the job's own laws gave them, and its own where the alternative serves."""
    rate, flags = result.rate.copy(), result.flags.copy()
    for rock, part in rock_parts(rocks):
        law = other.replaced.get(rock)
        if law is not None:
            cells = rocks.cell[part]
            taken = {name: inputs[name][cells] for name in law.law.input_names}
            rate[part], flags[part] = evaluate_rock(law, taken)
    return RockResult(rate, flags)


def _sum_alternative(plan: Plan, result: RockResult, ground: _Ground) -> Counts:
    """Add up consumption, area with a result and area outside the range, by region and rock."""
    exponent = unit_exponent(plan.grid)
    held = ground.area
    rate, flags = result.rate[ground.entry], result.flags[ground.entry]
    good = ~np.isnan(rate)
    rows = (
        np.where(good, rate, 0.0) * held,
        np.where(good, held, 0.0),
        np.where((flags & bit(OUTSIDE_RANGE)) != 0, held, 0.0),
    )
    runs = runs_of(ground.key)
    n_keys = plan.n_regions * N_ROCKS
    shape = (plan.n_regions, N_ROCKS, LIMBS)
    return np.stack([add_up(runs, row, n_keys, exponent).reshape(shape) for row in rows])


def _evaluate_entries(
    scheme: Scheme, rocks: RockCells, inputs: Mapping[str, Floats]
) -> tuple[Floats, Bits]:
    rate = np.empty(rocks.cell.size)
    flags = np.zeros(rocks.cell.size, dtype=np.uint8)
    for rock, part in rock_parts(rocks):
        law = scheme.by_rock.get(rock)
        if law is None:
            rate[part] = 0.0
            continue
        cells = rocks.cell.take(part)
        taken = {name: inputs[name].take(cells) for name in law.law.input_names}
        rate[part], flags[part] = evaluate_rock(law, taken)
    return rate, flags


def rock_parts(rocks: RockCells) -> list[tuple[str, Ints]]:
    """The entries of each rock that occurs, in their own order."""
    small = rocks.rock.astype(np.uint8)  # a stable sort of bytes takes one pass
    order = np.argsort(small, kind="stable")
    edges = np.concatenate([[0], np.cumsum(np.bincount(small, minlength=N_ROCKS))])
    return [
        (ROCK_NAMES[at], order[edges[at] : edges[at + 1]])
        for at in range(N_ROCKS)
        if edges[at + 1] > edges[at]
    ]


WHOLE = 1.0 - 1e-6
"""Shares from here on count as the whole cell."""

KEPT = np.array([drawdown_share(ROCKS[name]) for name in ROCK_NAMES])
"""Share of the short-term uptake that lasts, by rock [1]."""


def _to_cells(rocks: RockCells, rate: Floats, flags: Bits, window: Window) -> BlockMaps:
    """Weigh each cell's rocks by their shares; what has no result counts as no data."""
    n, cell = window.n_cells, rocks.cell
    cell_flags = np.zeros(n, dtype=np.uint8)
    consumption: Floats = np.full(n, np.nan)
    drawdown: Floats = np.full(n, np.nan)
    if (cell[1:] > cell[:-1]).all():  # one rock a cell: nothing to add
        taken = rate * rocks.share
        consumption[cell], drawdown[cell] = taken, taken * KEPT.take(rocks.rock)
        cell_flags[cell] = flags
        partly = cell[rocks.share < WHOLE] if rocks.share.size else cell
        cell_flags[partly] |= bit(Flag.PARTLY_NO_DATA)
    else:
        good = ~np.isnan(rate)
        share = np.where(good, rocks.share, 0.0)
        taken = np.where(good, rate, 0.0) * share
        valid = np.bincount(cell, weights=share, minlength=n)
        held = valid > 0.0
        consumption[held] = np.bincount(cell, weights=taken, minlength=n)[held]
        drawdown[held] = np.bincount(cell, weights=taken * KEPT[rocks.rock], minlength=n)[held]
        np.bitwise_or.at(cell_flags, cell, flags)
        cell_flags[valid < WHOLE] |= bit(Flag.PARTLY_NO_DATA)
    empty = np.isnan(consumption)
    cell_flags[empty] &= ~bit(Flag.PARTLY_NO_DATA)
    cell_flags[empty] |= bit(Flag.NO_DATA)
    shape = window.shape
    return BlockMaps(consumption.reshape(shape), drawdown.reshape(shape), cell_flags.reshape(shape))


def _sum_block(
    plan: Plan,
    result: RockResult,
    ground: _Ground,
    cells: tuple[RegionCells, Floats, BlockMaps],
) -> BlockSums:
    regions, row_areas, maps = cells
    window = Window(0, 0, *maps.flags.shape)
    areas = np.broadcast_to(row_areas, window.shape).ravel()
    exponent = unit_exponent(plan.grid)
    n_regions = plan.n_regions
    area = _sum_regions(plan, regions, row_areas, window)
    key, held = ground.key, ground.area
    rate = result.rate[ground.entry]
    good = ~np.isnan(rate)
    n_keys = n_regions * N_ROCKS
    shape = (n_regions, N_ROCKS, LIMBS)
    flags = result.flags[ground.entry]
    runs = runs_of(key)
    rock_area = valid_area = add_up(runs, held, n_keys, exponent)
    if not good.all():
        valid_area = add_up(runs, np.where(good, held, 0.0), n_keys, exponent)
        rate = np.where(good, rate, 0.0)
    flagged = [_flagged(key, held, flags, flag, n_keys, exponent) for flag in COUNTED_FLAGS]
    return BlockSums(
        area=area,
        total=_sum_cells(maps, areas, exponent),
        rock_area=rock_area.reshape(shape),
        valid_area=valid_area.reshape(shape),
        consumption=add_up(runs, rate * held, n_keys, exponent).reshape(shape),
        flagged=np.stack(flagged).reshape(len(flagged), *shape),
        laws=np.zeros((0, 3, *shape), dtype=np.int64),
        water=NO_BALANCE,
        classes=np.zeros((len(SUMMED), 0, LIMBS), dtype=np.int64),
    )


def _sum_regions(plan: Plan, regions: RegionCells, areas: Floats, window: Window) -> Counts:
    """Area of each region and of 'outside'.

    Divided cells piece by piece, whole ones by counting where the cells of a row are alike.

    Parameters
    ----------
    areas : from `cell_areas`.
    """
    exponent, n_regions = unit_exponent(plan.grid), plan.n_regions
    flat = np.broadcast_to(areas, window.shape)
    divided = regions.split(regions.cell)
    at = np.unravel_index(regions.cell[divided.entry], window.shape)
    counts = add_up(divided.region, flat[at] * divided.part, n_regions, exponent)
    whole = regions.single != MIXED
    if areas.shape[1] != 1:
        return counts + add_up(regions.single[whole], flat.ravel()[whole], n_regions, exponent)
    held = np.where(whole, regions.single, n_regions).reshape(window.shape)
    keys = held + np.arange(window.n_rows, dtype=np.int32)[:, None] * np.int32(n_regions + 1)
    times = np.bincount(keys.ravel(), minlength=window.n_rows * (n_regions + 1))
    times = times.reshape(window.n_rows, n_regions + 1)[:, :-1]
    return counts + add_repeated(areas[:, 0], times, exponent)


def _flagged(
    key: Ints, held: Floats, flags: Bits, flag: Flag, n_keys: int, exponent: int
) -> Counts:
    here = (flags & bit(flag)) != 0
    if not here.any():
        return np.zeros((n_keys, LIMBS), dtype=np.int64)
    return add_up(key[here], held[here], n_keys, exponent)


def _sum_cells(maps: BlockMaps, areas: Floats, exponent: int) -> Counts:
    """Area, consumption and drawdown of all cells, without regions or rocks: the check sum."""
    one_key = Runs(np.zeros(1, dtype=np.int64), np.zeros(1, dtype=np.int64), areas.size)
    rows = [areas]
    for values in (maps.consumption, maps.drawdown):
        flat = values.ravel()
        rows.append(np.where(np.isnan(flat), 0.0, flat) * areas)
    return np.concatenate([add_up(one_key, row, 1, exponent) for row in rows])
