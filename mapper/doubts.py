"""What a job says about doubt: spreads, draws, correlations, and how to rank."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

from mapper.errors import JobError
from mapper.laws import Spread

if TYPE_CHECKING:
    from mapper.table import Table as _Table

METHODS = ("latin-hypercube",)
SPREAD_KINDS = ("normal", "lognormal", "uniform", "triangular")

LAYER_SPREADS: Mapping[str, str] = {
    # how a spread acts on a layer: "bias" is added to the whole map, "factor" multiplies it
    "temperature": "bias",
    "vegetation": "bias",
    "runoff": "factor",
    "erosion": "factor",
    "soil_shielding": "factor",
    "evapotranspiration": "factor",
    "soil_co2": "factor",
    "reference_consumption": "factor",
}

RANKED_BY = (
    "drawdown_t_per_km2_yr",
    "drawdown_t_per_yr",
    "consumption_t_per_km2_yr",
    "consumption_t_per_yr",
)

KEPT_SHARE = "kept_share"


@dataclass(frozen=True, kw_only=True)
class Correlation:
    """Two quantities that are drawn together, with the correlation of their normal scores."""

    between: tuple[str, str]
    value: float


@dataclass(frozen=True, kw_only=True)
class UncertaintySpec:
    """The ``[uncertainty]`` table."""

    draws: int = 1000
    seed: int = 0
    method: str = "latin-hypercube"
    layers: Mapping[str, Spread] = field(default_factory=dict)
    kept_share: Spread | None = None
    correlations: tuple[Correlation, ...] = ()
    maps: bool = False


@dataclass(frozen=True, kw_only=True)
class HotspotsSpec:
    """The ``[ranking.hotspots]`` table: cells above a rate, or the richest share of the area."""

    above: float | None = None
    richest_area_share: float | None = None
    least_area_km2: float = 0.0


@dataclass(frozen=True, kw_only=True)
class RankingSpec:
    """The ``[ranking]`` table."""

    by: str = RANKED_BY[0]
    top: int = 3
    least_area_km2: float = 0.0
    least_valid_share: float = 0.0
    hotspots: HotspotsSpec | None = None


def spread_of(table: _Table, *, default: str) -> Spread | None:
    """Read kind, sd, low and high; None where the table gives no spread."""
    given = [key for key in ("kind", "sd", "low", "high") if key in table.values]
    kind = table.choice("kind", SPREAD_KINDS, default=default)
    sd, low, high = table.number("sd"), table.number("low"), table.number("high")
    if not given:
        return None
    if sd is not None and sd < 0:
        table.wrong("sd", "a spread of zero or more", "sd = 8.0")
        return None
    bounded = kind in ("uniform", "triangular")
    if bounded and (low is None or high is None or low > high or sd is not None):
        table.wrong("kind", "low and high, low below high, and no sd", "low = 1.0, high = 3.0")
        return None
    if not bounded and (sd is None or low is not None or high is not None):
        table.wrong("kind", "sd, and neither low nor high", "sd = 8.0")
        return None
    return Spread(kind=kind, sd=sd or 0.0, low=low or 0.0, high=high or 0.0)  # type: ignore[arg-type]


def uncertainty_spec(table: _Table) -> UncertaintySpec:
    """Read ``[uncertainty]``; problems are noted in the table."""
    layers = table.table("layers")
    kept = table.table(KEPT_SHARE)
    spread = spread_of(kept, default="lognormal")
    per_rock = kept.flag("per_rock")
    return UncertaintySpec(
        draws=table.whole("draws", default=1000, least=1),
        seed=table.whole("seed", default=0, least=0),
        method=table.choice("method", METHODS, default=METHODS[0]),
        layers=_layer_spreads(layers),
        kept_share=None if spread is None else replace(spread, per_rock=per_rock is not False),
        correlations=_correlations(table),
        maps=table.flag("maps") or False,
    )


def _layer_spreads(table: _Table) -> dict[str, Spread]:
    found: dict[str, Spread] = {}
    for name, acts in LAYER_SPREADS.items():
        if name not in table.values:
            continue
        child = table.table(name)
        spread = spread_of(child, default="normal" if acts == "bias" else "lognormal")
        if spread is None:
            continue
        if acts == "bias" and spread.kind == "lognormal":
            child.wrong("kind", "a spread of what is added to the map", 'kind = "normal"')
        centre = 0.0 if acts == "bias" else 1.0
        bounded = spread.kind in ("uniform", "triangular")
        if bounded and not spread.low <= centre <= spread.high:
            what = "added to the map" if acts == "bias" else "that multiplies the map"
            child.wrong("low", f"low and high of what is {what}, around {centre:g}", "low, high")
        found[name] = spread
    table.known.extend(LAYER_SPREADS)
    return found


def _correlations(table: _Table) -> tuple[Correlation, ...]:
    key = "correlations"
    table.known.append(key)
    listed = table.values.get(key, [])
    good = isinstance(listed, list) and all(_is_pair(one) for one in listed)
    if not good:
        table.wrong(
            key,
            "a list of pairs with a value from -1 to 1",
            f'{key} = [{{ between = ["a", "b"], value = 0.5 }}]',
        )
        return ()
    return tuple(
        Correlation(between=(one["between"][0], one["between"][1]), value=float(one["value"]))
        for one in listed
    )


def _is_pair(one: Any) -> bool:
    if not isinstance(one, dict) or set(one) != {"between", "value"}:
        return False
    names, value = one["between"], one["value"]
    named = isinstance(names, list) and len(names) == 2 and all(isinstance(n, str) for n in names)
    number = isinstance(value, int | float) and not isinstance(value, bool)
    return named and number and -1 <= value <= 1 and names[0] != names[1]


def ranking_spec(table: _Table) -> RankingSpec:
    """Read ``[ranking]``; problems are noted in the table."""
    hotspots = _hotspots_spec(table.table("hotspots")) if "hotspots" in table.values else None
    table.known.append("hotspots")
    return RankingSpec(
        by=table.choice("by", RANKED_BY, default=RANKED_BY[0]),
        top=table.whole("top", default=3, least=1),
        least_area_km2=_at_least_zero(table, "least_area_km2"),
        least_valid_share=_share(table, "least_valid_share") or 0.0,
        hotspots=hotspots,
    )


def _hotspots_spec(table: _Table) -> HotspotsSpec:
    above, richest = table.number("above"), _share(table, "richest_area_share")
    if (above is None) == (richest is None):
        table.problems.add(
            JobError(
                "hot spots need either above or richest_area_share",
                where=table.where,
                fix="richest_area_share = 0.05",
            )
        )
    return HotspotsSpec(
        above=above,
        richest_area_share=richest,
        least_area_km2=_at_least_zero(table, "least_area_km2"),
    )


def _at_least_zero(table: _Table, key: str) -> float:
    value = table.number(key)
    if value is not None and value < 0:
        table.wrong(key, "zero or more", f"{key} = 0.0")
        return 0.0
    return value or 0.0


def _share(table: _Table, key: str) -> float | None:
    value = table.number(key)
    if value is not None and not 0 <= value <= 1:
        table.wrong(key, "a share from 0 to 1", f"{key} = 0.05")
        return None
    return value
