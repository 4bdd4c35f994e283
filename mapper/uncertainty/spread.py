"""From a job to the spread of its totals: what is drawn, before the blocks; and what came of it."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mapper.engine import KEPT, Plan, state_layout
from mapper.errors import JobError
from mapper.job import Job
from mapper.rocks import ROCK_NAMES
from mapper.states import StateCounts, StateLayout, States, join_bins, to_states
from mapper.sums import unit_exponent
from mapper.uncertainty.draws import draw_quantiles
from mapper.uncertainty.intervals import Intervals, find_intervals
from mapper.uncertainty.propagate import (
    Apply,
    Drawn,
    Samples,
    draw_samples,
    over_states,
    propagate,
)
from mapper.uncertainty.quantities import Doubts, find_doubts
from mapper.uncertainty.sensitivity import Shares, scores, variance_shares

Floats = NDArray[np.float64]

MOST_APART = 1e-3
"""How far a total over states may lie from the same total over cells, relative."""

MOST_STATES = 150_000
"""More states than this are joined, as long as the central run over them stays within half of
`MOST_APART`: evaluating them takes about 25 ns a state and draw."""

JOINED = ("runoff", "runoff", "vegetation", "soil_shielding", "erosion", "soil_co2", "temperature")
"""Layers whose bins are joined in turn: rates are nearest to a line in the first."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Draws:
    """What a run draws, made once before its blocks are computed."""

    doubts: Doubts
    quantiles: Mapping[str, Floats]
    samples: Samples
    layout: StateLayout


@dataclass(frozen=True, kw_only=True, eq=False)
class SpreadFound:
    """What the draws gave."""

    draws: Draws
    drawn: Drawn
    intervals: Intervals
    drawdown_shares: Shares
    consumption_shares: Shares
    n_states: int
    seconds: float


def make_draws(job: Job, plan: Plan) -> Draws | None:
    """Find what is uncertain and draw it; None where the job has no ``[uncertainty]``.

    Raises
    ------
    LawError, JobError, or ManyProblemsError with all that is wrong in the spreads.
    """
    if job.uncertainty is None:
        return None
    doubts = find_doubts(job, plan.scheme)
    quantiles = draw_quantiles(job.uncertainty, doubts.keys, where=job.path)
    layout = state_layout(plan)
    if not layout.fits(plan.n_regions):
        raise JobError(
            f"{plan.n_regions} regions and {len(layout.names)} layers are too many for draws",
            where=f"{job.path}, uncertainty",
            fix="fewer regions, or no [uncertainty] table",
        )
    return Draws(
        doubts=doubts,
        quantiles=quantiles,
        samples=draw_samples(doubts, quantiles, job.uncertainty.draws),
        layout=layout,
    )


def find_spread(
    draws: Draws, plan: Plan, counts: StateCounts, central: Floats, apply: Apply
) -> SpreadFound:
    """Evaluate every draw on the states of all blocks.

    Parameters
    ----------
    central : consumption added over cells, (n_regions, n_rocks) [t yr-1].
    """
    began = time.monotonic()
    states = to_states(counts, draws.layout, unit_exponent(plan.grid))
    states = join_states(states, lambda one: over_states(plan.scheme, one, central))
    drawn = propagate(plan.scheme, states, draws.samples, central, KEPT, apply=apply)
    given = scores(draws.doubts.quantities, draws.quantiles)
    return SpreadFound(
        draws=draws,
        drawn=drawn,
        intervals=find_intervals(drawn, len(ROCK_NAMES)),
        drawdown_shares=variance_shares(drawn.drawdown.sum(axis=1), given),
        consumption_shares=variance_shares(drawn.consumption.sum(axis=1), given),
        n_states=states.area.size,
        seconds=time.monotonic() - began,
    )


def join_states(states: States, apart: Callable[[States], float]) -> States:
    """Join bins while there are too many states and the central run stays close.

    Parameters
    ----------
    apart : largest relative distance of the central totals over some states from the exact ones.
    """
    for name in JOINED:
        if states.area.size <= MOST_STATES:
            break
        if name not in states.bins:
            continue
        wider = join_bins(states, name)
        if apart(wider) <= MOST_APART / 2:
            states = wider
    return states
