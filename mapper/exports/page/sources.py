"""The last sections: inputs, laws and parameters with their sources, cautions, citing."""

from __future__ import annotations

from typing import Any

from mapper.exports.contents import GRADE_WORDS, Contents, parameter_rows
from mapper.exports.page.answer import WIDTH, interval
from mapper.exports.page.markup import (
    Cell,
    bullets,
    paragraph,
    section,
    table,
    text_cell,
)
from mapper.exports.words import escape, isolate, number, pretty_unit, shorten

_HOW = {
    "same": "on the grid’s own cells",
    "nearest": "nearest cell",
    "bilinear": "bilinear between cell centres",
    "mean": "mean weighted by area",
    "points": "from another CRS, sampled at points of each cell",
    "polygons": "polygons, exact share of each cell",
}


def sources_section(contents: Contents) -> str:
    """Inputs, grid, laws and every parameter with its source and grade."""
    return section(
        "sources",
        "From what: inputs, law, parameters",
        paragraph(_grid_words(contents)),
        _layers(contents),
        _files(contents),
        paragraph(_law_words(contents)),
        _parameters(contents),
    )


def _grid_words(contents: Contents) -> str:
    grid = contents.plan.grid
    unit = "degrees" if grid.is_geographic else "units of the CRS"
    method = contents.record["water_method"]
    water = "" if method == "runoff given" else f" Runoff was derived by {escape(method)}."
    return (
        f"Grid: {grid.n_rows} by {grid.n_cols} cells of {grid.dx:g} by {grid.dy:g} {unit}, "
        f"{escape(contents.record['grid']['crs_name'])}; areas on the ellipsoid.{water}"
    )


def _layers(contents: Contents) -> str:
    specs = contents.record["job"]["layers"]
    lines = []
    for name, one in contents.record["layers"].items():
        spec: dict[str, Any] = specs.get(name) or {}
        unit = one.get("unit_read_as", "codes of rocks")
        said = f" (said by the {one['unit_from']})" if "unit_from" in one else ""
        notes = "; ".join(one.get("notes", []))
        lines.append(
            [
                text_cell(escape(name.replace("_", " "))),
                text_cell(isolate(shorten(spec.get("path") or "", 60))),
                text_cell(escape(f"{unit}{said}")),
                text_cell(escape(_HOW.get(one["how"], one["how"]))),
                text_cell(escape(shorten(notes, 240))),
            ]
        )
    heads = ["Layer", "File", "Unit", "Brought onto the grid", "Notes"]
    if not any(one.get("notes") for one in contents.record["layers"].values()):
        heads, lines = heads[:-1], [row[:-1] for row in lines]
    return table("Layers", [(head, False) for head in heads], lines)


def _files(contents: Contents) -> str:
    lines = [
        [
            text_cell(isolate(shorten(one["name"], 80))),
            Cell(f"{one['bytes']:,}", float(one["bytes"]), numeric=True),
            text_cell(f"<code>{escape(one['sha256'][:16])}…</code>"),
        ]
        for one in contents.record["inputs"]
    ]
    heads = [("Input", False), ("Bytes", True), ("SHA-256 (whole in run.json)", False)]
    return table("Input files", heads, lines)


def _law_words(contents: Contents) -> str:
    by_law: dict[str, list[str]] = {}
    for rock, law in contents.record["laws"].items():
        changed = ", <strong>modified by the job</strong>" if law["modified"] else ""
        text = f"<strong>{escape(law['law'])}</strong> ({escape(law['reference'])}{changed})"
        by_law.setdefault(text, []).append(rock)
    parts = [f"{law} for {escape(', '.join(rocks))}" for law, rocks in by_law.items()]
    return "Law: " + "; ".join(parts) + "." if parts else "No rock here weathers."


def _parameters(contents: Contents) -> str:
    """A row for each law's parameter and source; values with the rocks that they hold for."""
    groups: dict[tuple[str, ...], dict[float, list[str]]] = {}
    for one in parameter_rows(contents.record):
        key = (one["law"], one["parameter"], one["unit"], one["grade"], one["source"])
        groups.setdefault(key, {}).setdefault(one["value"], []).append(one["rock"])
    lines = [
        [
            text_cell(
                f"{escape(name.replace('_', ' '))}<small>{escape(pretty_unit(unit))}</small>"
                f"<small>{escape(law)}</small>"
            ),
            text_cell(_values(values)),
            text_cell(escape(GRADE_WORDS.get(grade, grade))),
            text_cell(escape(source)),
        ]
        for (law, name, unit, grade, source), values in sorted(groups.items())
    ]
    heads = ["Parameter", "Value, and rocks it holds for", "Grade", "Source"]
    return table("Parameters", [(head, False) for head in heads], lines, kind="prose")


def _values(values: dict[float, list[str]]) -> str:
    items = "".join(
        f"<li><b>{value:.5g}</b> {escape(', '.join(rocks))}</li>"
        for value, rocks in sorted(values.items())
    )
    return f'<ul class="values">{items}</ul>'


def cautions_section(contents: Contents) -> str:
    """What the numbers are not, and how to cite them."""
    cautions = [escape(one) for one in contents.record["cautions"]]
    cautions += [
        "Published rates come from rivers: they hold for basins, not for a field or a plot.",
        "Rates per km² are over the area with a result; a region with gaps has a smaller area.",
        "The order of regions is not an order of certainty"
        + (": look at the rank intervals." if contents.has_draws else ", and no draws were made."),
    ]
    return section(
        "cautions",
        "What not to use it for, and how to cite it",
        bullets(cautions),
        "<h3>To cite a number</h3>",
        f"<blockquote>{_citation(contents)}</blockquote>",
        paragraph(
            "Say whether a number is <em>drawdown</em> (long term) or <em>consumption</em> (short "
            "term), and cite the data and the law beside it. <code>run.json</code> holds all that "
            "is needed to compute it again; <code>saprolite verify</code> checks that the folder "
            "is still what the run left."
        ),
    )


def _citation(contents: Contents) -> str:
    row = contents.regions.by_region["all"]
    span = interval(row, "drawdown_t_per_yr")
    sure = f"{WIDTH} {span}" if span else "no interval computed"
    laws = ", ".join(sorted({law["law"] for law in contents.record["laws"].values()}))
    version = contents.record["versions"]["saprolite"]
    return (
        f"{isolate(shorten(contents.title, 160))}: long-term CO<sub>2</sub> drawdown by rock "
        f"weathering {number(row['drawdown_t_per_yr'])} t CO<sub>2</sub> yr⁻¹ ({sure}), over "
        f"{number(row['valid_area_km2'])} km²; law {escape(laws)}; computed with saprolite "
        f"{escape(version)}, a screening estimate."
    )
