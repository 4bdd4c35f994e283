"""Tables of regional totals: each row's numbers from exact sums, nothing added twice."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mapper.accounting import SQUARE_METRES_PER_KM2, to_rate, tonnes_per_mole
from mapper.engine import KEPT, BlockSums
from mapper.evaluation import COUNTED_FLAGS, FLAG_MEANING, OUTSIDE_RANGE, Flag
from mapper.rocks import ROCK_NAMES
from mapper.sums import Counts, totals
from mapper.uncertainty.intervals import LEVEL_NAMES, LEVELS, Intervals

Floats = NDArray[np.float64]

REGION_COLUMNS = (
    "region",
    "area_km2",
    "valid_area_km2",
    "consumption_t_per_yr",
    "drawdown_t_per_yr",
    "consumption_t_per_km2_yr",
    "drawdown_t_per_km2_yr",
    "outside_law_range_km2",
    "capped_km2",
)
ROCK_COLUMNS = ("region", "rock", *REGION_COLUMNS[1:])
DRAWN_COLUMNS = REGION_COLUMNS[3:7]
"""Columns that a run with draws gives with their intervals."""
FLAG_COLUMNS = ("cause", "meaning", "area_km2", "share_of_mapped_rock")
UNMAPPED = "unmapped"

OUTSIDE = "outside_law_range"
CAUSES: dict[str, str] = {
    **{
        OUTSIDE if flag == OUTSIDE_RANGE else (flag.name or "").lower(): FLAG_MEANING.get(
            flag, "any layer outside the law's range: the three above, ground counted once"
        )
        for flag in COUNTED_FLAGS
    },
    "no_data": "no result: a layer that the law reads has no data",
}
"""Why ground is counted in ``flags.csv``, and what it means."""


@dataclass(frozen=True)
class Totals:
    """A run's totals as numbers: areas in km2, amounts in t CO2 yr-1.

    Arrays by region (n_regions,) or by region and rock (n_regions, n_rocks); the last region is
    'outside'. ``cells`` holds area, consumption and drawdown added over all cells without regions
    or rocks.
    """

    names: tuple[str, ...]
    area: Floats
    rock_area: Floats
    valid_area: Floats
    consumption: Floats
    drawdown: Floats
    outside_range: Floats
    capped: Floats
    flagged: dict[str, float]
    cells: Floats


def to_totals(sums: BlockSums, names: tuple[str, ...], exponent: int) -> Totals:
    """Turn exact sums into km2 and t CO2 yr-1."""
    tonnes = tonnes_per_mole("t CO2")
    km2 = 1.0 / SQUARE_METRES_PER_KM2
    consumption = totals(sums.consumption, exponent) * tonnes
    outside = sums.flagged[COUNTED_FLAGS.index(OUTSIDE_RANGE)]
    capped = sums.flagged[COUNTED_FLAGS.index(Flag.CAPPED)]
    cells = totals(sums.total, exponent)
    return Totals(
        names=(*names, "outside"),
        area=totals(sums.area, exponent) * km2,
        rock_area=totals(sums.rock_area, exponent) * km2,
        valid_area=totals(sums.valid_area, exponent) * km2,
        consumption=consumption,
        drawdown=consumption * KEPT,
        outside_range=totals(outside, exponent) * km2,
        capped=totals(capped, exponent) * km2,
        flagged={
            cause: float(totals(counts.sum(axis=(0, 1)), exponent)) * km2
            for cause, counts in _by_cause(sums).items()
        },
        cells=cells * np.array([km2, tonnes, tonnes]),
    )


def with_intervals(columns: tuple[str, ...]) -> tuple[str, ...]:
    """The columns of a run with draws: each quantity followed by its interval.

    Examples
    --------
    >>> with_intervals(("region", "drawdown_t_per_yr"))[2:]
    ('drawdown_t_per_yr_p05', 'drawdown_t_per_yr_p50', 'drawdown_t_per_yr_p95')
    """
    wide: list[str] = []
    for one in columns:
        wide.append(one)
        if one in DRAWN_COLUMNS:
            wide.extend(f"{one}_{level}" for level in LEVEL_NAMES)
    return tuple(wide)


def _by_cause(sums: BlockSums) -> dict[str, Counts]:
    """Counts of area by cause; what has neither a result nor another cause has no data."""
    named = {
        OUTSIDE if flag == OUTSIDE_RANGE else (flag.name or "").lower(): sums.flagged[at]
        for at, flag in enumerate(COUNTED_FLAGS)
    }
    missing = sums.rock_area - sums.valid_area - named["not_finite"]
    named["no_data"] = missing
    return {cause: named[cause] for cause in CAUSES}


def flag_rows(found: Totals) -> list[list[Any]]:
    """Rows of ``flags.csv``: the area under each cause, and its share of the mapped rock."""
    mapped = float(found.rock_area.sum())
    return [
        [cause, CAUSES[cause], area, area / mapped if mapped else float("nan")]
        for cause, area in found.flagged.items()
    ]


def region_rows(found: Totals, intervals: Intervals | None = None) -> list[list[Any]]:
    """Rows of ``regions.csv``: each region, then 'outside', then 'all'."""
    rows = []
    for at, name in enumerate(found.names):
        spread = None if intervals is None else intervals.regions[:, at]
        rows.append(_row([name], found.area[at], found, np.s_[at], spread))
    spread = None if intervals is None else intervals.everything
    return [*rows, _row(["all"], found.area.sum(), found, np.s_[:], spread)]


def _row(
    labels: list[str], area: float, found: Totals, part: Any, spread: Floats | None
) -> list[Any]:
    """One row; ``spread`` (2, 3) holds the intervals of consumption and drawdown."""
    valid = float(found.valid_area[part].sum())
    amounts = [float(found.consumption[part].sum()), float(found.drawdown[part].sum())]
    cells: list[Any] = [*labels, float(area), valid]
    for divisor in (1.0, valid):
        for at, amount in enumerate(amounts):
            several = [] if spread is None else [float(one) for one in spread[at]]
            cells += [_over(one, divisor) for one in (amount, *several)]
    return [*cells, float(found.outside_range[part].sum()), float(found.capped[part].sum())]


def _over(amount: float, divisor: float) -> float:
    return amount / divisor if divisor else float("nan")


def rock_rows(found: Totals, intervals: Intervals | None = None) -> list[list[Any]]:
    """Rows of ``regions_by_rock.csv``: each region's rocks, what is unmapped, and their sum."""
    rows: list[list[Any]] = []
    for at, name in enumerate(found.names):
        spreads = None if intervals is None else (intervals.pairs[:, at], intervals.regions[:, at])
        rows.extend(_rocks_of(name, float(found.area[at]), found, np.s_[at : at + 1], spreads))
    spreads = None if intervals is None else (intervals.rocks, intervals.everything)
    rows.extend(_rocks_of("all", float(found.area.sum()), found, np.s_[:], spreads))
    return rows


def _rocks_of(
    name: str, area: float, found: Totals, part: Any, spreads: tuple[Floats, Floats] | None
) -> list[list[Any]]:
    """Rows of one region; ``spreads`` holds the intervals by rock, and of their sum."""
    rows = []
    for at, rock in enumerate(ROCK_NAMES):
        if found.rock_area[part, at].sum() > 0:
            spread = None if spreads is None else spreads[0][:, at]
            rows.append(
                _row([name, rock], found.rock_area[part, at].sum(), found, (part, at), spread)
            )
    unmapped = area - float(found.rock_area[part].sum())
    if unmapped > 1e-9 * max(area, 1e-300):
        each = 1 if spreads is None else 1 + len(LEVELS)
        amounts = [0.0] * (2 * each) + [float("nan")] * (2 * each)
        rows.append([name, UNMAPPED, unmapped, 0.0, *amounts, 0.0, 0.0])
    rows.append(_row([name, "all"], area, found, part, None if spreads is None else spreads[1]))
    return rows


LEAST_RATE = 1e-4
"""Rate [mol m-2 yr-1] below which sums are compared with it instead of with themselves: they are
counted in whole units of 2^-56 mol m-2 yr-1 a cell, which is not 1e-12 of a smaller rate."""


def closure(found: Totals) -> dict[str, float]:
    """How far the split sums lie from the cells' own, relative; the run refuses above 1e-12."""
    area, consumption, drawdown = found.cells
    least = area * to_rate(LEAST_RATE)
    return {
        "regions_and_outside_to_all_cells_area": _apart(found.area.sum(), area),
        "regions_and_rocks_to_all_cells_consumption": _apart(
            found.consumption.sum(), consumption, least
        ),
        "regions_and_rocks_to_all_cells_drawdown": _apart(found.drawdown.sum(), drawdown, least),
    }


def _apart(one: float, other: float, least: float = 0.0) -> float:
    largest = max(abs(one), abs(other), least)
    return float(abs(one - other) / largest) if largest else 0.0
