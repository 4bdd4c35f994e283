"""The head of the page: how much, how sure, and what it must not be used for."""

from __future__ import annotations

from mapper.exports.contents import Contents
from mapper.exports.page.markup import paragraph, percent
from mapper.exports.words import about, escape, isolate, number, shorten

NARROW = "\u00a0"
WIDTH = f"90{NARROW}% interval"


def head(contents: Contents) -> str:
    """Title, the answer in one sentence with its interval, and four figures."""
    return (
        '<header class="lead">'
        '<p class="kicker">CO<sub>2</sub> and rock weathering</p>'
        f"<h1>{isolate(shorten(contents.title, 160))}</h1>"
        f"{paragraph(_answer(contents), 'answer')}{paragraph(_second(contents), 'second')}"
        f"{_figures(contents)}</header>"
    )


def interval(row: dict[str, float], column: str, *, link: str = " to ") -> str:
    """The 90 % interval of a column as text; empty where there were no draws."""
    low, high = row.get(f"{column}_p05"), row.get(f"{column}_p95")
    if low is None or high is None or low != low or high != high:  # noqa: PLR0124 - NaN
        return ""
    return f"{about(low)}{link}{about(high)}"


def _answer(contents: Contents) -> str:
    row = contents.regions.by_region["all"]
    span = interval(row, "drawdown_t_per_yr")
    sure = f" ({WIDTH} {span.replace(' ', NARROW)})" if span else ""
    return (
        "Rock weathering here keeps about "
        f"<strong>{about(row['drawdown_t_per_yr'])} t of CO<sub>2</sub> a year</strong>{sure} "
        "out of the air in the long term."
    )


def _second(contents: Contents) -> str:
    row = contents.regions.by_region["all"]
    span = interval(row, "consumption_t_per_yr")
    short = f"{about(row['consumption_t_per_yr'])}{NARROW}t" + (
        f" ({WIDTH} {span})" if span else ""
    )
    text = (
        f"In the short term it takes up {short}; the rest returns to the air when "
        "carbonate forms in the sea. "
    )
    if not contents.has_draws:
        text += (
            "<strong>No interval was asked for</strong>: the job made no draws, so the page "
            "cannot say how sure these numbers are."
        )
    return text


def _figures(contents: Contents) -> str:
    row = contents.regions.by_region["all"]
    rock = float(contents.found.rock_area.sum())
    valid = row["valid_area_km2"]
    items = [
        ("drawdown, long term", number(row["drawdown_t_per_yr"]), "t CO<sub>2</sub> yr⁻¹"),
        ("per area", number(row["drawdown_t_per_km2_yr"]), "t CO<sub>2</sub> km⁻² yr⁻¹"),
        ("consumption, short term", number(row["consumption_t_per_yr"]), "t CO<sub>2</sub> yr⁻¹"),
        ("area with a result", number(valid), f"km², {percent(valid, rock)} of the mapped rock"),
    ]
    cells = "".join(
        f"<div><dt>{escape(name)}</dt><dd><b>{value}</b> <span>{unit}</span></dd></div>"
        for name, value, unit in items
    )
    return f'<dl class="figures">{cells}</dl>'
