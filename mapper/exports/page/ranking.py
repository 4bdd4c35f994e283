"""The table of regions beside the map: sorted by what the job ranks, linked with the map."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from mapper.exports.contents import OTHER_ROWS, Contents
from mapper.exports.page.answer import interval
from mapper.exports.page.markup import Cell, cells_of, figure_cell, headings, rows_of
from mapper.exports.words import escape, isolate, number, shorten

MOST_ROWS = 2000
RATE, TOTAL, SHORT = "drawdown_t_per_km2_yr", "drawdown_t_per_yr", "consumption_t_per_yr"
_RANK_SPANS = (("rank_p05", "rank_p95"), ("rank_low", "rank_high"), ("best_rank", "worst_rank"))


def ranking(contents: Contents) -> str:
    """The sortable table of regions; empty where the job has none."""
    regions = contents.plan.regions
    if regions is None:
        return ""
    table = contents.regions.by_region
    order = _order(contents)
    tops = {key: _largest(table, key) for key in (RATE, TOTAL)}
    span = _rank_span(contents)
    rows = [
        _row(place, name, contents, tops, span) for place, name in enumerate(order[:MOST_ROWS], 1)
    ]
    named = 2 if span else 1
    numbered = {name: at for at, name in enumerate(regions.names)}
    body = "\n".join(
        f'<tr data-r="{numbered[name]}">{cells_of(row, named=named)}</tr>'
        for name, row in zip(order, rows, strict=False)
    )
    foot = rows_of([_foot(name, table[name], span) for name in OTHER_ROWS], named=named)
    left_out = (
        f'<p class="note">The first {MOST_ROWS} of {len(order)} regions; all are in '
        "<code>tables/regions.csv</code>.</p>"
        if len(order) > MOST_ROWS
        else ""
    )
    return (
        '<div class="rank"><h3 id="rank-title">Regions</h3>'
        f'<p class="note">{_note(span)}</p>'
        '<div class="scroll tall" tabindex="0" role="region" aria-labelledby="rank-title">'
        f'<table id="regions" class="bars">{headings(_heads(span), sortable=True)}'
        f"<tbody>{body}</tbody><tfoot>{foot}</tfoot></table></div>{left_out}</div>"
    )


def _note(span: tuple[str, str] | None) -> str:
    text = "A heading sorts; a region’s name finds it on the map."
    if span:
        text += (
            " The rank interval holds the places that a region took in 90\u00a0% of the "
            "draws: regions whose intervals overlap may change places by noise alone."
        )
    return text


def ties(contents: Contents) -> list[str]:
    """The regions that each cannot be told apart from, in the order of the shapes."""
    regions, given = contents.plan.regions, contents.tables.get("ranking")
    if regions is None or given is None or "tied_with" not in given.columns:
        return []
    return [_tie(given.by_region.get(name, {}).get("tied_with")) for name in regions.names]


def _tie(value: object) -> str:
    return shorten(value, 160) if isinstance(value, str) else ""


def _heads(span: tuple[str, str] | None) -> list[tuple[str, bool]]:
    unit = "<small>t CO<sub>2</sub> km⁻² yr⁻¹</small>"
    yearly = "<small>t CO<sub>2</sub> yr⁻¹</small>"
    heads = [("Rank", True), ("Region", False), (f"Drawdown {unit}", True)]
    heads += [(f"Drawdown {yearly}", True), (f"Consumption {yearly}", True)]
    heads += [("Area <small>km²</small>", True)]
    return [heads[0], ("Rank, 90\u00a0%", True), *heads[1:]] if span else heads


def _order(contents: Contents) -> list[str]:
    table = contents.regions.by_region
    names = [name for name in contents.found.names if name not in OTHER_ROWS]
    given = contents.tables.get("ranking")
    if given is not None and "rank" in given.columns:
        place = {name: row["rank"] for name, row in given.by_region.items()}
        return sorted(names, key=lambda name: place.get(name, math.inf))
    return sorted(names, key=lambda name: -_or_least(table[name][RATE]))


def _or_least(value: float) -> float:
    return value if math.isfinite(value) else -math.inf


def _largest(table: Mapping[str, dict[str, Any]], key: str) -> float:
    values = [row[key] for name, row in table.items() if name not in OTHER_ROWS]
    return max((one for one in values if math.isfinite(one)), default=0.0)


def _rank_span(contents: Contents) -> tuple[str, str] | None:
    given = contents.tables.get("ranking")
    if given is None:
        return None
    return next((pair for pair in _RANK_SPANS if set(pair) <= set(given.columns)), None)


def _row(
    place: int,
    name: str,
    contents: Contents,
    tops: Mapping[str, float],
    span: tuple[str, str] | None,
) -> list[Cell]:
    row = contents.regions.by_region[name]
    button = (
        f'<button type="button" class="name" aria-pressed="false">'
        f"{isolate(shorten(name, 60))}</button>"
    )
    cells = [Cell(str(place), float(place), numeric=True), Cell(button, name)]
    cells += [_value(row, RATE, tops[RATE]), _value(row, TOTAL, tops[TOTAL])]
    cells += [_value(row, SHORT, 0.0), figure_cell(row["valid_area_km2"])]
    if span:
        given = contents.tables["ranking"].by_region.get(name, {})
        low, high = (float(given.get(key, math.nan)) for key in span)
        words = f"{low:.0f}" if low == high else f"{low:.0f}–{high:.0f}"
        cells.insert(1, Cell(words if math.isfinite(high) else "–", low, numeric=True))
    return cells


def _value(row: Mapping[str, Any], key: str, top: float) -> Cell:
    span = interval(dict(row), key, link="–")
    html = number(row[key]) + (f"<small>{span}</small>" if span else "")
    return Cell(html, row[key], numeric=True, share=row[key] / top if top > 0 else None)


def _foot(name: str, row: Mapping[str, Any], span: tuple[str, str] | None) -> list[Cell]:
    words = {"outside": "in no region", "all": "the whole grid"}[name]
    cells = [Cell(""), Cell(escape(words))]
    cells += [_value(row, key, 0.0) for key in (RATE, TOTAL, SHORT)]
    cells += [figure_cell(row["valid_area_km2"])]
    return [Cell(""), *cells] if span else cells
