"""Which quantity drives the spread: shares of the variance of a total."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from mapper.uncertainty.quantities import Quantity, quantile

Floats = NDArray[np.float64]

DRAWS_PER_COLUMN = 8
DEGREE = 3


@dataclass(frozen=True, kw_only=True)
class Shares:
    """Share of a total's variance by quantity, which way it pulls, and what is left.

    ``rest`` is what the sum of single effects leaves: interactions, and curves beyond a cubic.
    All are NaN where there are too few draws to tell.
    """

    share: Mapping[str, float]
    slope: Mapping[str, float]
    rest: float


def scores(quantities: tuple[Quantity, ...], quantiles: Mapping[str, Floats]) -> dict[str, Floats]:
    """Each quantity's draws on the scale on which its effect is smoothest."""
    found = {}
    for one in quantities:
        u = quantiles[one.key]
        if one.spread.kind in ("normal", "lognormal"):
            found[one.key] = np.asarray(ndtri(u))
        else:
            middle = 0.5 * (one.spread.low + one.spread.high)
            found[one.key] = quantile(one.spread, middle, u)
    return found


def variance_shares(total: Floats, given: Mapping[str, Floats]) -> Shares:
    """Share out the variance of a total among the quantities that it was drawn from.

    Parameters
    ----------
    total : one number a draw. given : from `scores`.

    Notes
    -----
    The total is fitted by a sum of one cubic a quantity (a line where draws are few), and a
    quantity's share is the covariance of its curve with the total over the total's variance:
    its first-order index where quantities are independent. Shares and ``rest`` add up to 1.
    """
    n, k = total.size, len(given)
    degree = DEGREE if n >= DRAWS_PER_COLUMN * DEGREE * k else 1
    centred = total - total.mean()
    variance = float(centred @ centred)
    nothing = dict.fromkeys(given, float("nan"))
    if not k or n < 2 * k + 2:
        return Shares(share=nothing, slope=nothing, rest=float("nan"))
    if variance <= (1e-14 * abs(total.mean())) ** 2 * n:
        zero = dict.fromkeys(given, 0.0)
        return Shares(share=zero, slope=zero, rest=0.0)
    columns = np.concatenate([_powers(one, degree) for one in given.values()], axis=1)
    weights, *_ = np.linalg.lstsq(columns, centred, rcond=None)
    share: dict[str, float] = {}
    slope: dict[str, float] = {}
    for at, key in enumerate(given):
        mine = slice(at * degree, (at + 1) * degree)
        curve = columns[:, mine] @ weights[mine]
        share[key] = float(curve @ centred) / variance
        slope[key] = float(curve @ columns[:, mine.start])
    return Shares(share=share, slope=slope, rest=1.0 - sum(share.values()))


def _powers(values: Floats, degree: int) -> Floats:
    """A quantity and its powers, each without its mean and what the ones before explain."""
    spread = values.std()
    unit = (values - values.mean()) / spread if spread > 0 else np.zeros_like(values)
    columns: list[Floats] = []
    for power in range(1, degree + 1):
        column = unit**power
        column -= column.mean()
        for before in columns:
            if (size := float(before @ before)) > 0:
                column = column - before * (float(column @ before) / size)
        columns.append(column)
    return np.stack(columns, axis=1)


SENSITIVITY_COLUMNS = (
    "quantity",
    "rock",
    "what",
    "kind",
    "share_of_drawdown_variance",
    "share_of_consumption_variance",
    "more_of_it",
    "spread",
    "draws_held_at_limit",
    "source",
    "grade",
)

CLEAR_SHARE = 0.005
"""Below this share of the variance nothing is said of the direction: it may be chance."""


def sensitivity_rows(
    quantities: tuple[Quantity, ...],
    drawdown: Shares,
    consumption: Shares,
    held: Mapping[str, int],
) -> list[list[object]]:
    """Rows of ``sensitivity.csv``, what drives drawdown most first, what is left over last."""
    order = sorted(quantities, key=lambda one: -_known(drawdown.share[one.key]))
    rows: list[list[object]] = [
        [
            one.name,
            one.rock or "all",
            one.meaning,
            one.kind,
            drawdown.share[one.key],
            consumption.share[one.key],
            direction(one.key, drawdown, consumption),
            one.spread_text(),
            held_draws(one, held),
            one.source,
            one.grade,
        ]
        for one in order
    ]
    text = "what no single quantity explains: interactions, and chance"
    rest = [drawdown.rest, consumption.rest]
    return [*rows, ["rest", "all", text, "rest", *rest, "", "", 0, "", "computed"]]


def _known(value: float) -> float:
    return -1.0 if np.isnan(value) else value


def direction(key: str, drawdown: Shares, consumption: Shares) -> str:
    """Whether more of a quantity raises or lowers the totals; empty where it is not clear."""
    for shares in (drawdown, consumption):
        if shares.share[key] >= CLEAR_SHARE:
            return "raises" if shares.slope[key] > 0 else "lowers"
    return ""


def held_draws(one: Quantity, held: Mapping[str, int]) -> int:
    """Draws of a quantity that were held at a limit, the most of any rock."""
    mine = [n for name, n in held.items() if name == one.key or name.startswith(f"{one.key}.")]
    return max(mine, default=0)
