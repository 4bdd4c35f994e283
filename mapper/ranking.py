"""Regions in order, with how sure each place in the list is."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mapper.doubts import RankingSpec

Floats = NDArray[np.float64]

CLEARLY_AHEAD = 0.95
"""Two regions are told apart where one is ahead of the other in 95 % of the draws or more."""

NEIGHBOURS = 50
"""How many places up and down the list are looked at for regions that cannot be told apart."""

DRAWN_COLUMNS = (
    "median_rank",
    "rank_p05",
    "rank_p95",
    "probability_in_top",
    "probability_ahead_of_next",
    "tied_with",
)


@dataclass(frozen=True, kw_only=True)
class Ranked:
    """One region's place. What needs draws is None without them."""

    region: str
    rank: int
    value: float
    interval: tuple[float, float, float] | None = None
    ranks: tuple[float, float, float] | None = None
    in_top: float | None = None
    ahead_of_next: float | None = None
    tied_with: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True)
class Ranking:
    """Regions in order, and those that were left out with the reason."""

    spec: RankingSpec
    places: tuple[Ranked, ...]
    left_out: tuple[tuple[str, str], ...]


@dataclass(frozen=True, kw_only=True, eq=False)
class Candidates:
    """What is ranked: central value by region, and by draw and region where there are draws."""

    names: Sequence[str]
    value: Floats
    drawn: Floats | None
    area_km2: Floats
    valid_km2: Floats


def rank_regions(candidates: Candidates, spec: RankingSpec) -> Ranking:
    """Rank regions, most first, and say which cannot be told apart.

    Parameters
    ----------
    candidates : values in the unit of ``spec.by``; a NaN value is left out.

    Notes
    -----
    Each draw is ranked for itself. The probability that one region is ahead of another is the
    share of the draws in which its value is larger, an equal value counting half.
    """
    kept, left_out = _choose(candidates, spec)
    order = kept[np.argsort(-candidates.value[kept], kind="stable")]
    names = [candidates.names[at] for at in order]
    value = candidates.value[order]
    central = 1 + (value[None, :] > value[:, None]).sum(axis=1)
    if candidates.drawn is None or not order.size:
        places = tuple(
            Ranked(region=name, rank=int(central[at]), value=float(value[at]))
            for at, name in enumerate(names)
        )
        return Ranking(spec=spec, places=places, left_out=left_out)
    drawn = candidates.drawn[:, order]
    ranks = ranks_of(drawn)
    places = tuple(
        Ranked(
            region=name,
            rank=int(central[at]),
            value=float(value[at]),
            interval=_three(drawn[:, at]),
            ranks=_three(ranks[:, at], method="inverted_cdf"),
            in_top=float((ranks[:, at] <= spec.top).mean()),
            ahead_of_next=_ahead_of_next(drawn, at),
            tied_with=tuple(names[other] for other in tied(drawn, at)),
        )
        for at, name in enumerate(names)
    )
    return Ranking(spec=spec, places=places, left_out=left_out)


def _choose(
    candidates: Candidates, spec: RankingSpec
) -> tuple[NDArray[np.int64], tuple[tuple[str, str], ...]]:
    kept: list[int] = []
    left_out: list[tuple[str, str]] = []
    for at, name in enumerate(candidates.names):
        area, valid = float(candidates.area_km2[at]), float(candidates.valid_km2[at])
        share = valid / area if area else 0.0
        if np.isnan(candidates.value[at]) or not valid:
            left_out.append((name, "no result"))
        elif area < spec.least_area_km2:
            left_out.append((name, f"area {area:g} km2 below {spec.least_area_km2:g}"))
        elif share < spec.least_valid_share:
            left_out.append((name, f"share with data {share:.3f} below {spec.least_valid_share:g}"))
        else:
            kept.append(at)
    return np.array(kept, dtype=np.int64), tuple(left_out)


def ranks_of(drawn: Floats) -> Floats:
    """Rank of each region in each draw, 1 for the most; equal values share the better rank."""
    order = np.sort(-drawn, axis=1)
    pairs = zip(order, drawn, strict=True)
    return np.stack([1.0 + np.searchsorted(row, -values) for row, values in pairs])


def probability_ahead(drawn: Floats, at: int) -> Floats:
    """Share of the draws in which one region is ahead of each other; equal counts half.

    Examples
    --------
    >>> import numpy as np
    >>> probability_ahead(np.array([[2.0, 1.0], [2.0, 2.0]]), 0)
    array([0.5 , 0.75])
    """
    mine = drawn[:, at : at + 1]
    return np.asarray((mine > drawn).mean(axis=0) + 0.5 * (mine == drawn).mean(axis=0))


def _ahead_of_next(drawn: Floats, at: int) -> float | None:
    pair = drawn[:, at : at + 2]
    return float(probability_ahead(pair, 0)[1]) if pair.shape[1] == 2 else None


def tied(drawn: Floats, at: int) -> list[int]:
    """Positions, among the nearest in the list, that cannot be told apart from ``at``."""
    first = max(0, at - NEIGHBOURS)
    ahead = probability_ahead(drawn[:, first : at + NEIGHBOURS + 1], at - first)
    unclear = (ahead < CLEARLY_AHEAD) & (ahead > 1.0 - CLEARLY_AHEAD)
    return [first + int(other) for other in np.flatnonzero(unclear) if first + other != at]


def _three(values: Floats, method: str = "linear") -> tuple[float, float, float]:
    low, middle, high = np.quantile(values, (0.05, 0.5, 0.95), method=method)  # type: ignore[call-overload]
    return float(low), float(middle), float(high)


def ranking_columns(spec: RankingSpec, *, drawn: bool) -> tuple[str, ...]:
    """Columns of ``ranking.csv``."""
    if not drawn:
        return ("region", "rank", spec.by)
    levels = tuple(f"{spec.by}_{level}" for level in ("p05", "p50", "p95"))
    named = [name.replace("in_top", f"in_top_{spec.top}") for name in DRAWN_COLUMNS]
    return ("region", "rank", spec.by, *levels, *named)


def ranking_rows(ranking: Ranking) -> list[list[object]]:
    """Rows of ``ranking.csv``."""
    rows: list[list[object]] = []
    for one in ranking.places:
        row: list[object] = [one.region, one.rank, one.value]
        if one.interval is not None and one.ranks is not None:
            low, middle, high = one.ranks
            ahead = float("nan") if one.ahead_of_next is None else one.ahead_of_next
            row += [*one.interval, middle, low, high, one.in_top, ahead, "; ".join(one.tied_with)]
        rows.append(row)
    return rows


def ranking_lines(ranking: Ranking, *, most: int = 8) -> list[str]:
    """What the ranking says, in sentences."""
    if not ranking.places:
        return ["no region passes the ranking's conditions"]
    places = ranking.places[:most]
    if len(ranking.places) == 1 or places[0].ahead_of_next is None:
        return []
    lines: list[str] = []
    for group in groups(places):
        lines += _group_lines(group, [one.region for one in ranking.places])
        last = group[-1]
        at = places.index(last)
        if at + 1 < len(places) and last.ahead_of_next is not None:
            share = _percent(last.ahead_of_next)
            unclear = "" if last.ahead_of_next >= CLEARLY_AHEAD else ", which is not clear"
            lines.append(f"{last.region} is ahead of {places[at + 1].region} with {share}{unclear}")
    return lines


def _group_lines(group: list[Ranked], order: list[str]) -> list[str]:
    """Who cannot be told apart within a group, and from whom further down."""
    below = order[order.index(group[-1].region) + 1 :]
    lines = [f"{_listed([one.region for one in group])} cannot be told apart"]
    if len(group) == 1:
        lines = []
    for one in group:
        others = [name for name in one.tied_with if name in below]
        if others:
            lines.append(f"{one.region} cannot be told apart from {_listed(others)}")
    return lines


def _listed(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"


def groups(places: Sequence[Ranked]) -> list[list[Ranked]]:
    """Stretches of the list in which each region is tied with every other of the stretch."""
    found: list[list[Ranked]] = []
    for one in places:
        if found and all(other.region in one.tied_with for other in found[-1]):
            found[-1].append(one)
        else:
            found.append([one])
    return found


def _percent(share: float) -> str:
    return "over 99.9 %" if share > 0.999 else f"{100 * share:.1f} %"
