"""The section on what drives the uncertainty, where the run measured it."""

from __future__ import annotations

import math
from typing import Any

from mapper.exports.contents import GRADE_WORDS, Contents
from mapper.exports.page.markup import (
    Cell,
    paragraph,
    percent,
    section,
    share_words,
    table,
    text_cell,
)
from mapper.exports.words import escape, pretty_unit, shorten

MOST_ROWS = 10
_LONG, _SHORT = "share_of_drawdown_variance", "share_of_consumption_variance"
_TITLE = "What drives the uncertainty"
Row = dict[str, Any]


def doubt_section(contents: Contents) -> str:
    """Which uncertain quantity moves the total most; how to ask for it where nothing was drawn."""
    given = contents.tables.get("sensitivity")
    if given is None or _LONG not in given.columns:
        return section("doubt", _TITLE, paragraph(_nothing(contents), "quiet"))
    rows = [row for row in given.records() if _part(row[_LONG]) or _part(row[_SHORT])]
    known = [row for row in rows if row["kind"] != "rest"]
    return section("doubt", _TITLE, paragraph(_leading(known)), _table(rows))


def _nothing(contents: Contents) -> str:
    if contents.has_draws:
        return "The run did not measure what drives the uncertainty."
    return (
        "This job made no draws, so nothing can be said about what drives the uncertainty. To ask "
        "for it, add <code>[uncertainty]</code> with <code>draws = 1000</code> to the job and run "
        "it again."
    )


def _leading(rows: list[Row]) -> str:
    if not rows:
        return "No quantity moves the total."
    first = rows[0]
    text = (
        f"<strong>{escape(first['what'][:1].upper() + first['what'][1:])}</strong> causes "
        f"{share_words(first[_LONG], 1.0)} of the variance of the long-term drawdown"
    )
    if len(rows) > 1:
        text += f", {escape(rows[1]['what'])} {share_words(rows[1][_LONG], 1.0)}"
    return (
        f"{text}. To narrow the interval, begin there. Only what was drawn is counted: the choice "
        "of the law and faults of the maps are not."
    )


def _part(value: float) -> bool:
    return math.isfinite(value) and abs(value) >= 0.0005


def _table(rows: list[Row]) -> str:
    heads = [("Quantity", False), ("Share of the variance of drawdown", True)]
    heads += [("of consumption", True), ("More of it", False), ("Spread", False)]
    heads += [("Grade", False)]
    lines = [
        [
            text_cell(f"{escape(shorten(row['what'], 120))}{_name(row)}"),
            _share(row[_LONG]),
            _share(row[_SHORT]),
            text_cell(escape(row["more_of_it"])),
            text_cell(escape(pretty_unit(row["spread"]))),
            text_cell(escape(GRADE_WORDS.get(row["grade"], row["grade"]))),
        ]
        for row in rows[:MOST_ROWS]
    ]
    caption = "What the spread of the whole total comes from"
    if len(rows) > MOST_ROWS:
        caption += f": the {MOST_ROWS} largest of {len(rows)}; all in tables/sensitivity.csv"
    return table(caption, heads, lines, kind="bars")


def _name(row: Row) -> str:
    if row["kind"] == "rest":
        return ""
    rock = "" if row["rock"] == "all" else f", {row['rock']}"
    return f"<small>{escape(row['quantity'].replace('_', ' ') + rock)}</small>"


def _share(value: float) -> Cell:
    return Cell(percent(value, 1.0), value, numeric=True, share=value)
