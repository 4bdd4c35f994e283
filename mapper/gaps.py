"""Which cells a run will leave without a result, and which layer lacks data there."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mapper.engine import Plan, read_inputs
from mapper.grid import Window
from mapper.layers.water import is_annual
from mapper.planning import sample_windows
from mapper.rocks import ROCK_NAMES

Bools = NDArray[np.bool_]


@dataclass(frozen=True)
class Gaps:
    """Cells looked at before a run, and what they lack.

    ``mapped``: cells with any rock; ``without``: those of them that will have no result;
    ``lacking``: for each layer, mapped cells on which it has no data and a law reads it. A cell
    may lack several layers.
    """

    looked_at: int
    mapped: int
    without: int
    lacking: Mapping[str, int]
    whole: bool

    def lines(self) -> list[str]:
        """The gaps as text."""
        what = "cells" if self.whole else "cells looked at"
        lines = []
        bare = self.looked_at - self.mapped
        if bare:
            share = 100 * bare / self.looked_at
            lines.append(f"unmapped    {bare} of {self.looked_at} {what} ({share:.1f} %): no rock")
        if not self.without:
            lines.append("no result   on none of the mapped cells")
            return lines
        share = 100 * self.without / self.mapped
        why = ", ".join(f"{name} on {count}" for name, count in self.lacking.items() if count)
        lines.append(
            f"no result   on {self.without} of {self.mapped} mapped {what} ({share:.1f} %): "
            f"no data in {why}"
        )
        return lines


def find_gaps(plan: Plan) -> Gaps:
    """Look for cells without a result on the windows that are sampled before a run."""
    windows = sample_windows(plan.grid)
    counts = np.zeros(2, dtype=np.int64)
    lacking: dict[str, int] = {}
    for window in windows:
        mapped, without, by_layer = _look(plan, window)
        counts += mapped, without
        for name, cells in by_layer.items():
            lacking[name] = lacking.get(name, 0) + cells
    looked_at = sum(window.n_cells for window in windows)
    ordered = dict(sorted(lacking.items(), key=lambda one: -one[1]))
    return Gaps(
        looked_at, int(counts[0]), int(counts[1]), ordered, whole=looked_at == plan.grid.n_cells
    )


def _look(plan: Plan, window: Window) -> tuple[int, int, dict[str, int]]:
    rocks = plan.lithology.rock_cells(window)
    laws = [plan.scheme.by_rock.get(name) for name in ROCK_NAMES]
    good = np.ones(rocks.cell.size, dtype=np.bool_)
    found: dict[str, int] = {}
    for name, values in read_inputs(plan, window).items():
        reads = np.array([one is not None and name in one.law.input_names for one in laws])
        lacks = reads[rocks.rock] & np.isnan(values)[rocks.cell]
        good &= ~lacks
        if not lacks.any():
            continue
        cells = np.unique(rocks.cell[lacks])
        for layer in _read_for(plan, name):
            empty = np.isnan(plan.layers[layer].values(window).ravel()[cells])
            found[layer] = max(found.get(layer, 0), int(empty.sum()))
    mapped = np.zeros(window.n_cells, dtype=np.bool_)
    served = mapped.copy()
    mapped[rocks.cell] = True
    served[rocks.cell[good]] = True
    return int(mapped.sum()), int((mapped & ~served).sum()), found


def _read_for(plan: Plan, name: str) -> list[str]:
    """The layers that an input of the laws is made of."""
    if name in plan.layers:
        return [name]
    made_of = ["precipitation"]
    if "potential_evapotranspiration" in plan.layers:
        made_of.append("potential_evapotranspiration")
    elif is_annual(plan.water, plan.layers) or plan.water.potential is not None:
        made_of.append("temperature")
    if plan.water.method == "zhang-2001":
        made_of.append("vegetation")
    return made_of
