"""The sections below the map: where the total comes from, and what was left out."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from mapper.evaluation import FLAG_MEANING, Flag
from mapper.exports.colours import ROCK_COLOUR, flag_key
from mapper.exports.contents import OTHER_ROWS, Contents
from mapper.exports.page.markup import (
    Cell,
    figure_cell,
    paragraph,
    percent,
    section,
    share_words,
    table,
    text_cell,
)
from mapper.exports.words import escape, isolate, number, shorten

MOST_REGIONS = 30
TOTAL, SHORT, AREA = "drawdown_t_per_yr", "consumption_t_per_yr", "area_km2"
Row = dict[str, Any]


def origin_section(contents: Contents) -> str:
    """Where the total comes from: rock by rock, then region by rock."""
    rows = list(contents.tables["regions_by_rock"].records())
    whole = [row for row in rows if row["region"] == "all" and row["rock"] in ROCK_COLOUR]
    whole.sort(key=lambda row: -row[TOTAL])
    every = contents.regions.by_region["all"]
    return section(
        "origin",
        "Where the total comes from",
        paragraph(_leading(whole, every)),
        _by_rock(whole, every),
        _matrix(contents, rows, whole),
    )


def _leading(whole: list[Row], every: Row) -> str:
    if not whole or every[TOTAL] <= 0:
        return "No rock here draws down CO<sub>2</sub> in the long term."
    first = whole[0]
    rock_area = sum(row[AREA] for row in whole)
    text = (
        f"<strong>{escape(first['rock'].capitalize())}</strong> lies under "
        f"{share_words(first[AREA], rock_area)} of the mapped rock and gives "
        f"{share_words(first[TOTAL], every[TOTAL])} of the long-term drawdown."
    )
    back = [row for row in whole if row[TOTAL] <= 0 < row[SHORT]]
    if back:
        names = " and ".join(row["rock"] for row in back[:3])
        part = sum(row[SHORT] for row in back)
        text += (
            f" {escape(names.capitalize())}: {percent(part, every[SHORT])} of the short-term "
            "consumption, nothing in the long term."
        )
    return text


def _by_rock(whole: list[Row], every: Row) -> str:
    unit = "<small>t CO<sub>2</sub> yr⁻¹</small>"
    heads = [("Rock", False), ("Area <small>km²</small>", True), (f"Consumption {unit}", True)]
    heads += [(f"Drawdown {unit}", True), ("Share of drawdown", True)]
    lines = [
        [
            text_cell(
                f'<i class="chip" style="background:{ROCK_COLOUR[row["rock"]]}"></i>'
                f"{escape(row['rock'])}"
            ),
            figure_cell(row[AREA]),
            figure_cell(row[SHORT], share=_part(row[SHORT], every[SHORT])),
            figure_cell(row[TOTAL], share=_part(row[TOTAL], every[TOTAL])),
            Cell(percent(row[TOTAL], every[TOTAL]), numeric=True),
        ]
        for row in whole
    ]
    return table("By rock, over the whole grid", heads, lines, kind="bars")


def _part(value: float, whole: float) -> float | None:
    return value / whole if whole > 0 else None


def _matrix(contents: Contents, rows: list[Row], whole: list[Row]) -> str:
    """Drawdown by region and rock, each cell tinted by its size."""
    if contents.plan.regions is None:
        return ""
    by = {(row["region"], row["rock"]): row[TOTAL] for row in rows}
    rocks = [row["rock"] for row in whole if row[TOTAL] > 0]
    totals = contents.regions.by_region
    names = sorted(
        (name for name in totals if name != "all"), key=lambda name: -totals[name][TOTAL]
    )
    most = max((by.get((name, rock), 0.0) for name in names for rock in rocks), default=0.0)
    if most <= 0:
        return ""
    heads = [("Region", False), *((escape(rock), True) for rock in rocks), ("all rocks", True)]
    lines = [
        [
            text_cell(isolate(shorten(name, 60)) if name != "outside" else "in no region"),
            *(_tinted(by.get((name, rock), math.nan), most) for rock in rocks),
            figure_cell(totals[name][TOTAL], 3),
        ]
        for name in names[:MOST_REGIONS]
    ]
    cut = len(names) > MOST_REGIONS
    caption = "Drawdown by region and rock, t CO₂ yr⁻¹" + (
        f": the {MOST_REGIONS} largest of {len(names)}; all in tables/regions_by_rock.csv"
        if cut
        else ""
    )
    return table(caption, heads, lines, kind="matrix")


def _tinted(value: float, most: float) -> Cell:
    if not math.isfinite(value) or value <= 0:
        return Cell('<span class="none">·</span>', numeric=True)
    strength = 6.0 + 46.0 * math.sqrt(value / most)  # percent; dark text stays readable on all
    html = f'<b style="--tint:{strength:.0f}%">{number(value, 3)}</b>'
    return Cell(html, value, numeric=True)


def limits_section(contents: Contents) -> str:
    """What was outside the law's range, and where data was missing."""
    every = contents.regions.by_region["all"]
    rock = float(contents.found.rock_area.sum())
    outside, valid = every["outside_law_range_km2"], every["valid_area_km2"]
    gap = rock - valid
    text = (
        f"<strong>{number(outside, 3)} km²</strong> ({share_words(outside, valid)} of the area "
        "with a result) lie outside the range that their law was fitted in: they are computed and "
        f"counted, and marked on the map. <strong>{number(gap, 3)} km²</strong> of mapped rock "
        f"({share_words(gap, rock)}) have no result, because a layer that the law reads has no "
        "data there; they count as nothing in every total."
    )
    return section(
        "limits",
        "Outside the law’s range, and missing data",
        paragraph(text),
        _flag_table(contents.found.flagged, valid),
        _gap_table(contents),
    )


def _flag_table(flagged: Mapping[str, float], valid: float) -> str:
    present = [flag for flag in Flag if flagged.get(flag_key(flag), 0.0) > 0]
    if not present:
        return ""
    lines = [
        [
            text_cell(escape(FLAG_MEANING[flag])),
            Cell(f"<code>{int(flag)}</code>", numeric=True),
            figure_cell(flagged[flag_key(flag)]),
            Cell(percent(flagged[flag_key(flag)], valid), numeric=True),
        ]
        for flag in present
    ]
    heads = [("What", False), ("Bit in flags.tif", True), ("km²", True), ("Of the result", True)]
    return table("Flags that occur", heads, lines)


def _gap_table(contents: Contents) -> str:
    found = contents.found
    if contents.plan.regions is None:
        return ""
    lines = []
    for at, name in enumerate(found.names):
        rock, valid = float(found.rock_area[at].sum()), float(found.valid_area[at].sum())
        outside = float(found.outside_range[at].sum())
        if rock > 0 and (rock - valid > 1e-3 * rock or outside > 1e-3 * rock):
            shown = "in no region" if name in OTHER_ROWS else isolate(shorten(name, 60))
            lines.append(
                (
                    outside / rock + (rock - valid) / rock,
                    [
                        text_cell(shown),
                        figure_cell(rock),
                        Cell(percent(rock - valid, rock), numeric=True, share=1 - valid / rock),
                        Cell(percent(outside, rock), numeric=True, share=outside / rock),
                    ],
                )
            )
    if not lines:
        return ""
    lines.sort(key=lambda pair: -pair[0])
    heads = [("Region", False), ("Mapped rock <small>km²</small>", True), ("No result", True)]
    heads += [("Outside the range", True)]
    cells = [cells for _, cells in lines[:MOST_REGIONS]]
    return table("Regions that this touches most", heads, cells, kind="bars")
