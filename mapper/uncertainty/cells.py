"""Intervals of single cells: some of the draws evaluated cell by cell, on request."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from mapper.engine import KEPT, Plan, read_inputs
from mapper.grid import Window
from mapper.layers.lithology import RockCells
from mapper.rocks import ROCK_NAMES
from mapper.uncertainty.propagate import Samples, shifted

Floats = NDArray[np.float64]

MAP_DRAWS = 200
"""Draws behind the maps of intervals, the first of the run's: a quantile of 200 draws lies within
about 0.15 standard deviations of that of many (sqrt(p (1 - p) / n) over the normal density)."""

MAP_LEVELS = (0.05, 0.95)
CELLS_AT_ONCE = 4096
CELLS_OF_MONTHS = 2**17
"""Cells whose twelve months are held at once, where the rates of months are averaged."""

Part = tuple[float, Mapping[str, Floats]]
"""A part of the year, and the layers that hold in it."""


def first_draws(samples: Samples, n: int) -> Samples:
    """The first draws alone, without the central run."""
    rows = slice(1, 1 + min(n, samples.n_draws))

    def cut(values: Mapping[str, Floats]) -> dict[str, Floats]:
        return {name: one[rows] for name, one in values.items()}

    return Samples(
        parameters={rock: cut(values) for rock, values in samples.parameters.items()},
        layers=cut(samples.layers),
        kept=cut(samples.kept),
        held={},
        n_draws=rows.stop - 1,
    )


def cell_intervals(plan: Plan, window: Window, samples: Samples) -> Floats:
    """Quantiles of the drawdown of each cell [mol m-2 yr-1], (2, n_rows, n_cols) by `MAP_LEVELS`.

    Parameters
    ----------
    samples : from `first_draws`.
    """
    n_rows = window.n_rows
    if plan.month_shares:
        n_rows = max(1, CELLS_OF_MONTHS // window.n_cols)
    bands = [
        Window(row, window.col, min(n_rows, window.row_stop - row), window.n_cols)
        for row in range(window.row, window.row_stop, n_rows)
    ]
    return np.concatenate([_band_intervals(plan, one, samples) for one in bands], axis=1)


def _band_intervals(plan: Plan, window: Window, samples: Samples) -> Floats:
    rocks = plan.lithology.rock_cells(window)
    year = [(share, _read(plan, window, month)) for month, share in plan.parts_of_year()]
    order = np.argsort(rocks.cell, kind="stable")
    rocks = RockCells(rocks.cell[order], rocks.rock[order], rocks.share[order])
    out = np.full((len(MAP_LEVELS), window.n_cells), np.nan)
    for start in range(0, window.n_cells, CELLS_AT_ONCE):
        stop = min(start + CELLS_AT_ONCE, window.n_cells)
        first, last = np.searchsorted(rocks.cell, (start, stop))
        part = slice(int(first), int(last))
        entries = RockCells(rocks.cell[part] - start, rocks.rock[part], rocks.share[part])
        here = [
            (share, {name: values[start:stop] for name, values in inputs.items()})
            for share, inputs in year
        ]
        drawn, known = _draw_cells(plan, entries, here, samples)
        found = np.quantile(drawn[:, known], MAP_LEVELS, axis=0)
        out[:, start:stop][:, known] = found
    return out.reshape(len(MAP_LEVELS), *window.shape)


def _read(plan: Plan, window: Window, month: int | None) -> dict[str, Floats]:
    """The layers of a window as the laws take them: no runoff below zero."""
    inputs = read_inputs(plan, window, month)
    if "runoff" in inputs:
        inputs["runoff"] = np.maximum(inputs["runoff"], 0.0)
    return inputs


def _draw_cells(
    plan: Plan, rocks: RockCells, year: Sequence[Part], samples: Samples
) -> tuple[Floats, NDArray[np.bool_]]:
    """Drawdown of every draw and cell, (n_draws, n_cells), and which cells have a result."""
    n_cells = next(iter(year[0][1].values())).size
    drawn = np.zeros((samples.n_draws, n_cells))
    known = np.zeros(n_cells, dtype=np.bool_)
    for rock in np.unique(rocks.rock):
        mine = rocks.rock == rock
        cell, share = rocks.cell[mine], rocks.share[mine]
        name = ROCK_NAMES[int(rock)]
        law = plan.scheme.by_rock.get(name)
        if law is None:
            known[cell] = True
            continue
        values = {**law.values, **samples.parameters.get(name, {})}
        rate: Floats = np.zeros((1, cell.size))
        for part, inputs in year:
            read = [
                shifted(one, inputs[one][cell][None], samples.layers.get(one))
                for one in law.law.input_names
            ]
            with np.errstate(all="ignore"):  # what is not finite has no result
                rate = rate + part * law.law.function(*read, **values)
        rate = rate * (share * KEPT[int(rock)]) * samples.kept.get(name, 1.0)
        good = np.isfinite(rate).all(axis=0)
        drawn[:, cell[good]] += np.broadcast_to(rate, (samples.n_draws, cell.size))[:, good]
        known[cell[good]] = True
    return drawn, known
