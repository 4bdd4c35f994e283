"""How sure the results are, for the record, the tables and the terminal."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from mapper.doubts import RankingSpec, UncertaintySpec
from mapper.exports.files import write_csv
from mapper.exports.tables import Totals
from mapper.ranking import Candidates, Ranking, rank_regions, ranking_columns, ranking_rows
from mapper.uncertainty.sensitivity import SENSITIVITY_COLUMNS, held_draws, sensitivity_rows
from mapper.uncertainty.spread import MOST_APART, SpreadFound

NOT_DRAWN = (
    "the choice of law: published laws may lie outside the intervals of one law",
    "errors of a layer that differ from place to place: a layer's spread moves the whole map",
    "runoff derived from precipitation does not follow a temperature bias",
    "lithology, legend and region borders",
)
"""What the intervals leave out; the record says so."""


def write_sensitivity(path: Path, spread: SpreadFound) -> None:
    """Write ``sensitivity.csv``."""
    rows = sensitivity_rows(
        spread.draws.doubts.quantities,
        spread.drawdown_shares,
        spread.consumption_shares,
        spread.draws.samples.held,
    )
    write_csv(path, SENSITIVITY_COLUMNS, rows)


def write_ranking(path: Path, ranking: Ranking, *, drawn: bool) -> None:
    """Write ``ranking.csv``."""
    write_csv(path, ranking_columns(ranking.spec, drawn=drawn), ranking_rows(ranking))


def rank_totals(spec: RankingSpec, found: Totals, spread: SpreadFound | None) -> Ranking:
    """Rank the regions of a run; what lies outside all regions has no place."""
    n = len(found.names) - 1
    term = spec.by.split("_")[0]
    central = (found.drawdown if term == "drawdown" else found.consumption).sum(axis=1)[:n]
    drawn = None
    if spread is not None:
        one = spread.drawn
        drawn = one.by_region(one.drawdown if term == "drawdown" else one.consumption)[:, :n]
    valid = found.valid_area.sum(axis=1)[:n]
    if spec.by.endswith("_per_km2_yr"):
        divisor = np.where(valid > 0.0, valid, np.nan)
        central = central / divisor
        drawn = None if drawn is None else drawn / divisor
    return rank_regions(
        Candidates(
            names=found.names[:n],
            value=central,
            drawn=drawn,
            area_km2=found.area[:n],
            valid_km2=valid,
        ),
        spec,
    )


def describe_spread(spec: UncertaintySpec, spread: SpreadFound) -> dict[str, Any]:
    """The draws, for the record: what was drawn, from what, and how exact the totals are."""
    doubts = spread.draws.doubts
    held = spread.draws.samples.held
    return {
        "draws": spec.draws,
        "seed": spec.seed,
        "method": spec.method,
        "levels": "p05, p50 and p95 are quantiles over the draws",
        "quantities": [
            {
                "name": one.key,
                "kind": one.kind,
                "what": one.meaning,
                "spread": one.spread_text(),
                "shared_by_all_rocks": not one.rock,
                "draws_held_at_a_physical_limit": held_draws(one, held),
                "source": one.source,
                "grade": one.grade,
            }
            for one in doubts.quantities
        ],
        "taken_as_certain": list(doubts.certain),
        "not_drawn": list(NOT_DRAWN),
        "correlations": [
            {"between": list(one.between), "value": one.value} for one in spec.correlations
        ],
        "states": spread.n_states,
        "central_run_over_states_from_over_cells": dict(spread.drawn.apart),
        "bound": MOST_APART,
        "within_bound": max(spread.drawn.apart.values()) <= MOST_APART,
        "seconds": round(spread.seconds, 3),
    }
