"""Tables of regional totals: each row's numbers from exact sums, nothing added twice."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mapper.accounting import SQUARE_METRES_PER_KM2, to_rate, tonnes_per_mole
from mapper.engine import KEPT, OUTSIDE_RANGE, BlockSums, Flag
from mapper.rocks import ROCK_NAMES
from mapper.sums import totals

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
)
ROCK_COLUMNS = ("region", "rock", *REGION_COLUMNS[1:])
UNMAPPED = "unmapped"


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
    flagged: dict[str, float]
    cells: Floats


def to_totals(sums: BlockSums, names: tuple[str, ...], exponent: int) -> Totals:
    """Turn exact sums into km2 and t CO2 yr-1."""
    tonnes = tonnes_per_mole("t CO2")
    km2 = 1.0 / SQUARE_METRES_PER_KM2
    consumption = totals(sums.consumption, exponent) * tonnes
    flags = list(Flag)
    outside = sum(sums.flagged[flags.index(flag)] for flag in Flag if flag & OUTSIDE_RANGE)
    cells = totals(sums.total, exponent)
    return Totals(
        names=(*names, "outside"),
        area=totals(sums.area, exponent) * km2,
        rock_area=totals(sums.rock_area, exponent) * km2,
        valid_area=totals(sums.valid_area, exponent) * km2,
        consumption=consumption,
        drawdown=consumption * KEPT,
        outside_range=totals(np.asarray(outside), exponent) * km2,
        flagged={
            flag.name.lower(): float(totals(sums.flagged[at].sum(axis=(0, 1)), exponent)) * km2
            for at, flag in enumerate(flags)
            if flag.name
        },
        cells=cells * np.array([km2, tonnes, tonnes]),
    )


def region_rows(found: Totals) -> list[list[Any]]:
    """Rows of ``regions.csv``: each region, then 'outside', then 'all'."""
    rows = [_row([name], found.area[at], found, np.s_[at]) for at, name in enumerate(found.names)]
    return [*rows, _row(["all"], found.area.sum(), found, np.s_[:])]


def _row(labels: list[str], area: float, found: Totals, part: Any) -> list[Any]:
    valid = float(found.valid_area[part].sum())
    consumption = float(found.consumption[part].sum())
    drawdown = float(found.drawdown[part].sum())
    return [
        *labels,
        float(area),
        valid,
        consumption,
        drawdown,
        consumption / valid if valid else float("nan"),
        drawdown / valid if valid else float("nan"),
        float(found.outside_range[part].sum()),
    ]


def rock_rows(found: Totals) -> list[list[Any]]:
    """Rows of ``regions_by_rock.csv``: each region's rocks, what is unmapped, and their sum."""
    rows: list[list[Any]] = []
    for at, name in enumerate(found.names):
        rows.extend(_rocks_of(name, float(found.area[at]), found, np.s_[at : at + 1]))
    rows.extend(_rocks_of("all", float(found.area.sum()), found, np.s_[:]))
    return rows


def _rocks_of(name: str, area: float, found: Totals, part: Any) -> list[list[Any]]:
    rows = [
        _row([name, rock], found.rock_area[part, at].sum(), found, (part, at))
        for at, rock in enumerate(ROCK_NAMES)
        if found.rock_area[part, at].sum() > 0
    ]
    unmapped = area - float(found.rock_area[part].sum())
    if unmapped > 1e-9 * max(area, 1e-300):
        rows.append([name, UNMAPPED, unmapped, 0.0, 0.0, 0.0, float("nan"), float("nan"), 0.0])
    rows.append(_row([name, "all"], area, found, part))
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
