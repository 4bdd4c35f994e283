"""A picture of what drives the spread: shares of the variance of both totals as bars."""

from __future__ import annotations

import math
import textwrap
import warnings
from typing import Any

from mapper.exports.contents import Contents
from mapper.exports.files import whole_file
from mapper.exports.words import clean, pretty_unit, shorten

MOST_BARS = 12
LEAST_SHARE = 0.005
"""Quantities below this share of both variances are left to the table: it may be chance."""

INK, PALE = "#26231f", "#6d675f"
LONG_TERM, SHORT_TERM = "#1f6f6b", "#c9a45c"
_LONG, _SHORT = "share_of_drawdown_variance", "share_of_consumption_variance"
_DPI = 150
_WIDTH = 7.6  # inches
_WRAP = 150

Row = dict[str, Any]


def write_drivers(contents: Contents) -> None:
    """Write ``tables/sensitivity.png`` where the run measured what drives the spread."""
    given = contents.tables.get("sensitivity")
    if given is None or _LONG not in given.columns:
        return
    rows = list(given.records())
    shown = drawn_rows(rows)
    if not shown:
        return
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message=".*[Gg]lyph.*")  # titles in any script
        figure = _picture(contents, shown, rows)
        with whole_file(contents.folder / "tables" / "sensitivity.png") as temporary:
            figure.savefig(temporary, format="png", metadata={"Software": None})


def drawn_rows(rows: list[Row]) -> list[Row]:
    """The rows that get a bar: the largest by drawdown, then the rest; none without shares."""
    known = [row for row in rows if math.isfinite(row[_LONG]) and math.isfinite(row[_SHORT])]
    clear = [row for row in known if max(row[_LONG], row[_SHORT]) >= LEAST_SHARE]
    named = [row for row in clear if row["kind"] != "rest"]
    named.sort(key=lambda row: -max(row[_LONG], row[_SHORT]))
    kept = sorted(named[:MOST_BARS], key=lambda row: -row[_LONG])
    return [*kept, *(row for row in clear if row["kind"] == "rest")]


def _picture(contents: Contents, shown: list[Row], rows: list[Row]) -> Any:
    from matplotlib.backends.backend_agg import FigureCanvasAgg  # noqa: PLC0415 - slow to import
    from matplotlib.figure import Figure  # noqa: PLC0415

    lines = _caption(shown, rows)
    bars, above, below = 0.36 * len(shown) + 0.1, 0.95, 0.55 + 0.135 * len(lines)
    height = above + bars + below
    figure = Figure(figsize=(_WIDTH, height), dpi=_DPI, facecolor="white")
    FigureCanvasAgg(figure)
    axes = figure.add_axes((0.36, below / height, 0.55, bars / height))
    _draw_bars(axes, shown)
    left: dict[str, Any] = {"x": 0.03, "parse_math": False}
    title = shorten(contents.title, 80)
    figure.text(y=1 - 0.32 / height, s=title, size=12.5, weight="bold", color=INK, **left)
    what = "What drives the spread of the totals: share of the variance, %"
    figure.text(y=1 - 0.57 / height, s=what, size=9, color=INK, **left)
    figure.legend(
        loc="upper left", bbox_to_anchor=(0.35, 1 - 0.63 / height), ncols=2, fontsize=7.5,
        frameon=False, labelcolor=INK, handlelength=1.2, handleheight=0.8,
    )  # fmt: skip
    figure.text(
        y=(below - 0.36) / height, s="\n".join(lines), size=6.4, color=PALE, va="top",
        linespacing=1.45, **left,
    )  # fmt: skip
    return figure


def _draw_bars(axes: Any, shown: list[Row]) -> None:
    kinds = [
        (_LONG, -0.19, LONG_TERM, "drawdown (long term)"),
        (_SHORT, 0.19, SHORT_TERM, "consumption (short term)"),
    ]
    for key, shift, colour, label in kinds:
        widths = [100.0 * row[key] for row in shown]
        places = [at + shift for at in range(len(shown))]
        axes.barh(places, widths, height=0.36, color=colour, label=label)
        for place, width in zip(places, widths, strict=True):
            text = f"{width:.0f}" if abs(width) >= 9.95 else f"{width:.1f}"
            axes.annotate(
                text, (max(width, 0.0), place), xytext=(3, 0), textcoords="offset points",
                va="center", size=6.4, color=PALE,
            )  # fmt: skip
    axes.set_yticks(range(len(shown)), [_name(row) for row in shown], parse_math=False)
    axes.set_ylim(len(shown) - 0.45, -0.55)
    axes.margins(x=0.08)
    axes.axvline(0.0, color=PALE, linewidth=0.6)
    axes.tick_params(labelsize=7.5, colors=INK, length=0)
    axes.tick_params(axis="x", labelsize=7, colors=PALE)
    axes.grid(axis="x", color=INK, alpha=0.12, linewidth=0.4)
    axes.set_axisbelow(True)
    axes.spines[:].set_visible(False)


def _name(row: Row) -> str:
    if row["kind"] == "rest":
        return "interactions and chance"
    name = str(row["quantity"]).replace("_", " ")
    if row["kind"] == "layer":
        name += " map"
    rock = "" if row["rock"] == "all" else f", {row['rock']}"
    more = {"raises": " (+)", "lowers": " (−)"}.get(str(row["more_of_it"]), "")
    return f"{shorten(name + rock, 42)}{more}"


def _caption(shown: list[Row], rows: list[Row]) -> list[str]:
    """What the signs mean, where the spreads come from, and what is not drawn."""
    n_other = sum(1 for row in rows if row["kind"] != "rest") - sum(
        1 for row in shown if row["kind"] != "rest"
    )
    more = f"{n_other} smaller ones stand in tables/sensitivity.csv. " if n_other else ""
    text = [
        f"(+) more of it raises the total, (−) lowers it. {more}"
        "The choice of law and faults of the maps that differ from place to place are not in it."
    ]
    text += [
        f"{_name(row).split(' (')[0]}: {pretty_unit(str(row['spread']))}; "
        f"{shorten(clean(row['source']), 130)}"
        for row in shown[:5]
        if row["kind"] != "rest"
    ]
    return [line for one in text for line in textwrap.wrap(clean(one), _WRAP)]
