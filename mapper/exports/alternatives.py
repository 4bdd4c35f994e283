"""Several laws on one job: each law's totals, and how far they lie apart."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from mapper.accounting import SQUARE_METRES_PER_KM2, tonnes_per_mole
from mapper.engine import KEPT, BlockSums
from mapper.exports.tables import Totals
from mapper.scheme import Scheme
from mapper.sums import totals

Floats = NDArray[np.float64]

LAW_COLUMNS = (
    "law",
    "role",
    "weight",
    "region",
    "valid_area_km2",
    "consumption_t_per_yr",
    "drawdown_t_per_yr",
    "outside_law_range_km2",
)
_AMOUNTS = ("consumption", "drawdown")
SPREAD_COLUMNS = (
    "region",
    "n_laws",
    *(
        f"{amount}_{column}"
        for amount in _AMOUNTS
        for column in (
            "min_t_per_yr",
            "max_t_per_yr",
            "weighted_mean_t_per_yr",
            "relative_range",
        )
    ),
)


@dataclass(frozen=True, kw_only=True)
class LawTotals:
    """What one law gives in place of the job's default: km2 and t CO2 yr-1 by region.

    The last region is 'outside'; ``kept`` are the rocks that the law does not serve, which stay
    with the job's default.
    """

    law: str
    role: Literal["default", "alternative"]
    weight: float
    kept: tuple[str, ...]
    valid_area: Floats
    consumption: Floats
    drawdown: Floats
    outside_range: Floats


@dataclass(frozen=True)
class Spread:
    """How far the laws lie apart: least, most, mean by weight [t CO2 yr-1], and range over mean."""

    low: float
    high: float
    mean: float

    @property
    def relative_range(self) -> float:
        """The range over the weighted mean [1]; NaN where the mean is zero."""
        return (self.high - self.low) / abs(self.mean) if self.mean else float("nan")


def to_law_totals(
    sums: BlockSums, found: Totals, scheme: Scheme, exponent: int
) -> tuple[LawTotals, ...]:
    """Turn the exact sums of the alternatives into numbers, the job's own law first.

    Empty where the job names no alternative.
    """
    if not scheme.alternatives:
        return ()
    own = LawTotals(
        law=scheme.name,
        role="default",
        weight=scheme.weight,
        kept=(),
        valid_area=found.valid_area.sum(axis=1),
        consumption=found.consumption.sum(axis=1),
        drawdown=found.drawdown.sum(axis=1),
        outside_range=found.outside_range.sum(axis=1),
    )
    km2 = 1.0 / SQUARE_METRES_PER_KM2
    others = []
    for one, counts in zip(scheme.alternatives, sums.laws, strict=True):
        moles, valid, outside = (totals(each, exponent) for each in counts)
        taken = moles * tonnes_per_mole("t CO2")
        others.append(
            LawTotals(
                law=one.name,
                role="alternative",
                weight=one.weight,
                kept=one.kept,
                valid_area=(valid * km2).sum(axis=1),
                consumption=taken.sum(axis=1),
                drawdown=(taken * KEPT).sum(axis=1),
                outside_range=(outside * km2).sum(axis=1),
            )
        )
    return (own, *others)


def law_rows(laws: tuple[LawTotals, ...], names: tuple[str, ...]) -> list[list[Any]]:
    """Rows of ``laws.csv``: for each law each region, then 'outside', then 'all'."""
    rows: list[list[Any]] = []
    for one in laws:
        head = [one.law, one.role, one.weight]
        numbers = np.stack([one.valid_area, one.consumption, one.drawdown, one.outside_range])
        rows += [
            [*head, name, *(float(value) for value in numbers[:, at])]
            for at, name in enumerate(names)
        ]
        rows.append([*head, "all", *(float(value) for value in numbers.sum(axis=1))])
    return rows


def find_spread(laws: tuple[LawTotals, ...], values: list[float]) -> Spread:
    """Find how far one quantity's values, one a law, lie apart."""
    weights = [one.weight for one in laws]
    mean = float(np.average(values, weights=weights))
    return Spread(min(values), max(values), mean)


def spread_rows(laws: tuple[LawTotals, ...], names: tuple[str, ...]) -> list[list[Any]]:
    """Rows of ``law_spread.csv``: each region, then 'outside', then 'all'."""
    rows: list[list[Any]] = []
    parts: list[Any] = [*range(len(names)), np.s_[:]]
    for name, part in zip((*names, "all"), parts, strict=True):
        row: list[Any] = [name, len(laws)]
        for amount in _AMOUNTS:
            values = [float(np.sum(getattr(one, amount)[part])) for one in laws]
            spread = find_spread(laws, values)
            row += [spread.low, spread.high, spread.mean, spread.relative_range]
        rows.append(row)
    return rows


def describe_alternatives(laws: tuple[LawTotals, ...]) -> dict[str, Any] | None:
    """Each law's totals and the spread between the laws, for the record."""
    if not laws:
        return None
    described: dict[str, Any] = {
        "laws": [
            {
                "law": one.law,
                "role": one.role,
                "weight": one.weight,
                "consumption_t_per_yr": float(one.consumption.sum()),
                "drawdown_t_per_yr": float(one.drawdown.sum()),
                "valid_area_km2": float(one.valid_area.sum()),
                "outside_law_range_km2": float(one.outside_range.sum()),
                "rocks_left_to_the_default": list(one.kept),
            }
            for one in laws
        ]
    }
    for amount in _AMOUNTS:
        spread = find_spread(laws, [float(getattr(one, amount).sum()) for one in laws])
        described[f"{amount}_t_per_yr"] = {
            "min": spread.low,
            "max": spread.high,
            "weighted_mean": spread.mean,
            "relative_range": spread.relative_range,
        }
    return described


def spread_lines(laws: tuple[LawTotals, ...]) -> list[str]:
    """The spread between the laws, for the terminal."""
    if not laws:
        return []
    lines = [f"  by {len(laws)} laws, t CO2 per year:       consumption       drawdown"]
    width = max(len(one.law) for one in laws)
    for one in laws:
        note = "the job's default" if one.role == "default" else ""
        if one.weight != 1.0 or any(each.weight != 1.0 for each in laws):
            note = f"{note}, weight {one.weight:g}".removeprefix(", ")
        if one.kept:
            note += f"; {laws[0].law} stays on {', '.join(one.kept)}"
        lines.append(
            f"    {one.law:{max(width, 28)}} {one.consumption.sum():15,.0f} "
            f"{one.drawdown.sum():14,.0f}  {note.removeprefix('; ')}".rstrip()
        )
    for amount in _AMOUNTS:
        spread = find_spread(laws, [float(getattr(one, amount).sum()) for one in laws])
        lines.append(
            f"    {amount}: {spread.low:,.0f} to {spread.high:,.0f}, weighted mean "
            f"{spread.mean:,.0f}; the laws span {100 * spread.relative_range:.0f} % of it"
        )
    return lines
