"""How a law answers to each of its layers, drawn: within its range, and beyond it."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from mapper.accounting import drawdown_share, to_rate
from mapper.errors import FileFormatError, LawError
from mapper.evaluation import evaluate_rock
from mapper.exports.catalogue import find_named
from mapper.exports.comparison import Conditions, spell_condition
from mapper.exports.files import whole_file
from mapper.laws import LAW_INPUTS, ZERO_CELSIUS, Input, Law
from mapper.rocks import ROCKS
from mapper.scheme import RockLaw

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Floats = NDArray[np.float64]

FORMATS = (".png", ".svg", ".pdf")
MOST_CURVES = 5
WELL_KNOWN = ("basalt", "granite", "limestone", "shale", "sandstone", "mixed sediment")
N_POINTS = 401
BEYOND = 0.2
"""How far a curve goes on beyond the law's range, as a part of it."""

HARD_BOUNDS: Mapping[str, tuple[float, float]] = {
    # values that a layer cannot pass, so that nothing is drawn there
    "temperature": (203.15, 373.15),
    "vegetation": (0.0, 1.0),
    "soil_shielding": (0.0, 1.0),
}
LOGARITHMIC = ("erosion", "soil_co2")
_TEXT = "#333333"
_FAINT = "#8a8a8a"
_BEYOND_FILL = "#f1f1f1"
_BEYOND_LENGTH = 0.4  # of the panel's height, that the words beyond the range take


@dataclass(frozen=True)
class Curve:
    """Rates along one layer for rocks that share them; ``y`` is NaN without a result."""

    rocks: tuple[str, ...]
    x: Floats
    y: Floats


def plot_law(name: str, file: str, conditions: Conditions) -> Path:
    """Draw the response curves of a law to a file.

    Parameters
    ----------
    name : a law of the catalogue.
    file : a path that ends in .png, .svg or .pdf.
    conditions : what the other layers are held at, and the rock where only one is wanted.

    Raises
    ------
    LawError where the law is unknown; FileFormatError where the ending is; RunFolderError where
    the file cannot be written.
    """
    path = Path(file)
    if path.suffix.lower() not in FORMATS:
        raise FileFormatError(
            f"{path.name!r} does not end in a kind of picture that can be written",
            where="saprolite laws --plot",
            fix=f"--plot {path.with_suffix('.png')} (or .svg, .pdf)",
        )
    law = find_named(name, where="saprolite laws")
    held = held_values(law, conditions)
    if conditions.rock is not None and conditions.rock not in law.rocks:
        raise LawError(
            f"law {law.name!r} has no numbers for {conditions.rock}",
            where="saprolite laws --at",
            fix=f"rock={law.rocks[0]!r}, or one of: {', '.join(law.rocks)}",
        )
    rocks = (conditions.rock,) if conditions.rock else law.rocks
    with whole_file(path) as temporary:
        _draw(law, held, rocks, temporary)
    return path


def held_values(law: Law, conditions: Conditions) -> dict[str, float]:
    """What each layer is held at while another varies: as asked, else the usual, in range."""
    return {
        one.name: conditions.values[one.name]
        if one.name in conditions.given
        else min(max(conditions.values[one.name], one.low), one.high)
        for one in law.inputs
    }


def find_curves(
    law: Law, one: Input, held: Mapping[str, float], rocks: Sequence[str]
) -> list[Curve]:
    """Compute rates along one layer, once for all rocks that share them, highest first."""
    x = _along(one)
    layers = {name: np.full(x.size, held[name]) for name in law.input_names}
    layers[one.name] = x
    groups: dict[bytes, tuple[list[str], Floats]] = {}
    for rock in rocks:
        y = evaluate_rock(RockLaw(law, law.central_values(rock)), layers).rate
        groups.setdefault(y.tobytes(), ([], y))[0].append(rock)
    curves = [Curve(tuple(names), x, y) for names, y in groups.values()]
    return sorted(curves, key=lambda curve: -_height(curve))


def choose_groups(groups: Sequence[tuple[str, ...]]) -> list[tuple[str, ...]]:
    """Choose a few groups of rocks to draw: the well-known rocks first.

    Examples
    --------
    >>> choose_groups([("gabbro",), ("granite", "gneiss")])
    [('granite', 'gneiss'), ('gabbro',)]
    """
    known = [group for rock in WELL_KNOWN for group in groups if rock in group]
    return list(dict.fromkeys([*known, *groups]))[:MOST_CURVES]


def _height(curve: Curve) -> float:
    return float(np.nanmean(curve.y)) if np.isfinite(curve.y).any() else -np.inf


def _along(one: Input) -> Floats:
    """Values of a layer over the law's range and somewhat beyond, both ends among them."""
    least, most = HARD_BOUNDS.get(one.name, (0.0, np.inf))
    if one.name in LOGARITHMIC:
        factor = (one.high / one.low) ** BEYOND
        low, high = max(one.low / factor, least), min(one.high * factor, most)
        x = np.geomspace(low, high, N_POINTS)
    else:
        step = BEYOND * (one.high - one.low)
        low, high = max(one.low - step, least), min(one.high + step, most)
        x = np.linspace(low, high, N_POINTS)
    return np.unique(np.concatenate([x, [one.low, one.high]]))


def _draw(law: Law, held: Mapping[str, float], rocks: Sequence[str], path: Path) -> None:
    from matplotlib.figure import Figure  # noqa: PLC0415 - slow to load, and wanted here alone

    shown = _groups_shown(law, held, rocks)
    n = len(law.inputs)
    n_cols = 1 if n == 1 else 2
    n_rows = -(-n // n_cols)
    room = n % n_cols  # a free place beside the last panel takes the caption
    caption = _caption(law, shown, rocks, 116 if n_cols == 1 else 96 if room else 205)
    formula = textwrap.wrap(law.formula, 105 if n_cols == 1 else 190)
    head = 0.88 + 0.17 * len(formula)
    foot = 0.2 if room else 0.165 * len(caption) + 0.25
    width, height = (7.2 if n_cols == 1 else 12.4), head + 3.4 * n_rows + foot
    figure = Figure(figsize=(width, height), dpi=144, facecolor="white")
    left = 0.75 / width
    above: dict[str, Any] = {"ha": "left", "va": "top", "color": _TEXT}
    figure.text(left, 1 - 0.12 / height, law.name, fontsize=14, fontweight="bold", **above)
    figure.text(left, 1 - 0.37 / height, law.title, fontsize=10.5, **above)
    figure.text(left, 1 - 0.6 / height, "\n".join(formula), fontsize=8.5, **above)
    panels = figure.subplots(n_rows, n_cols, squeeze=False).ravel()
    figure.subplots_adjust(
        left=left,
        right=1 - 1.6 / width,
        top=1 - head / height,
        bottom=(foot + 0.5) / height,
        wspace=0.6,
        hspace=0.42,
    )
    for panel, one in zip(panels, law.inputs, strict=False):
        _draw_panel(panel, law, one, held, shown)
    below: dict[str, Any] = {"fontsize": 7.5, "color": _TEXT, "linespacing": 1.3, "ha": "left"}
    if room:
        place = panels[-1].get_position()
        panels[-1].set_visible(False)
        figure.text(place.x0, place.y1, "\n".join(caption), va="top", **below)
    else:
        figure.text(left, 0.1 / height, "\n".join(caption), va="bottom", **below)
    kind = path.suffix.lower().removeprefix(".")
    figure.savefig(path, format=kind, metadata=_METADATA.get(kind))


_METADATA: dict[str, dict[str, Any]] = {"svg": {"Date": None}, "pdf": {"CreationDate": None}}


def _groups_shown(
    law: Law, held: Mapping[str, float], rocks: Sequence[str]
) -> list[tuple[str, ...]]:
    """Groups of rocks with the same numbers that are drawn, one curve each, highest first."""
    same: dict[str, list[str]] = {}
    for rock in rocks:
        same.setdefault(repr(law.central_values(rock)), []).append(rock)
    chosen = choose_groups([tuple(group) for group in same.values()])
    curves = find_curves(law, law.inputs[0], held, [group[0] for group in chosen])
    place = {rock: at for at, curve in enumerate(curves) for rock in curve.rocks}
    return sorted(chosen, key=lambda group: place[group[0]])


def _draw_panel(
    panel: Axes, law: Law, one: Input, held: Mapping[str, float], shown: list[tuple[str, ...]]
) -> None:
    from cmcrameri import cm  # noqa: PLC0415 - slow to load, and wanted here alone

    zero = ZERO_CELSIUS if one.name == "temperature" else 0.0
    ends: list[tuple[float, str, Any]] = []
    curves: list[Curve] = []
    for at, group in enumerate(shown):
        colour = cm.batlow(0.0 if len(shown) == 1 else 0.68 * at / (len(shown) - 1))
        (curve,) = find_curves(law, one, held, group[:1])
        inside = (curve.x >= one.low) & (curve.x <= one.high)
        curves.append(curve)
        x = curve.x - zero
        panel.plot(x[inside], curve.y[inside], color=colour, linewidth=2.0, zorder=3)
        for part in (curve.x <= one.low, curve.x >= one.high):
            panel.plot(
                x[part],
                curve.y[part],
                color=colour,
                linewidth=1.3,
                linestyle=(0, (2, 2)),
                alpha=0.85,
                zorder=3,
            )
        known = curve.y[np.isfinite(curve.y)]
        ends.append((float(known[-1]) if known.size else 0.0, _group_label(group), colour))
    if one.name in LOGARITHMIC:
        panel.set_xscale("log")
    _set_heights(panel, law, shown)
    span = _along(one)[[0, -1]] - zero
    panel.set_xlim(float(span[0]), float(span[1]))
    _shade_beyond(panel, one, zero, curves)
    _label_ends(panel, ends)
    _label_axes(panel, law, one, held)


def _set_heights(panel: Axes, law: Law, shown: list[tuple[str, ...]]) -> None:
    """Relative rates over many powers of ten on a scale of powers; uptake from zero."""
    if law.output == "relative" and len(shown) > 1:
        panel.set_yscale("log")
        return
    panel.set_ylim(bottom=0.0)


def _shade_beyond(panel: Axes, one: Input, zero: float, curves: Sequence[Curve]) -> None:
    """Shade what lies beyond the range, and say so where no curve passes."""
    x = curves[0].x
    to_axes = panel.transData + panel.transAxes.inverted()
    for part in (x <= one.low, x >= one.high):
        if part.sum() < 2:
            continue
        start, stop = float(x[part][0] - zero), float(x[part][-1] - zero)
        panel.axvspan(start, stop, color=_BEYOND_FILL, zorder=0, linewidth=0)
        taken = np.concatenate(
            [to_axes.transform(np.column_stack([x - zero, c.y])[part])[:, 1] for c in curves]
        )
        place = free_place(taken, _BEYOND_LENGTH)
        if place is not None:
            middle = (start * stop) ** 0.5 if one.name in LOGARITHMIC else (start + stop) / 2
            panel.annotate(
                "beyond the range",
                (middle, place),
                xycoords=("data", "axes fraction"),
                rotation=90,
                ha="center",
                va="center",
                fontsize=7,
                color=_FAINT,
            )


def free_place(taken: Floats, length: float) -> float | None:
    """Find the highest middle of a stretch of this length in 0..1 that holds none of ``taken``.

    Examples
    --------
    >>> free_place(np.array([0.9]), 0.4)
    0.7
    """
    for middle in np.arange(1.0 - length / 2, length / 2, -0.02):
        if not (np.abs(taken - middle) < length / 2).any():
            return round(float(middle), 6)
    return None


def _label_ends(panel: Axes, ends: list[tuple[float, str, Any]]) -> None:
    """Name each curve at its right end, pushed apart where the ends lie close."""
    to_axes = panel.transData + panel.transAxes.inverted()
    x = panel.get_xlim()[1]
    places = [float(to_axes.transform((x, y))[1]) for y, _, _ in ends]
    lines = [text.count("\n") + 1 for _, text, _ in ends]
    apart = spread_apart(places, [0.052 * count + 0.012 for count in lines])
    for (_, text, colour), place, own in zip(ends, apart, places, strict=True):
        panel.annotate(
            text,
            (1.0, own),
            xytext=(1.03, place),
            xycoords="axes fraction",
            textcoords="axes fraction",
            fontsize=8,
            color=colour,
            va="center",
            ha="left",
            linespacing=1.05,
            annotation_clip=False,
            arrowprops={
                "arrowstyle": "-",
                "color": colour,
                "linewidth": 0.6,
                "shrinkA": 1,
                "shrinkB": 0,
                "relpos": (0.0, 0.5),
            },
        )


TOP_LABEL = 1.03


def spread_apart(places: Sequence[float], heights: Sequence[float]) -> list[float]:
    """Move places as little as needed so that labels of these heights do not overlap.

    Examples
    --------
    >>> [round(one, 2) for one in spread_apart([0.5, 0.5], [0.1, 0.1])]
    [0.55, 0.45]
    """
    order = sorted(range(len(places)), key=lambda at: (places[at], -at))
    moved = np.array([places[at] for at in order], dtype=np.float64)
    size = np.array([heights[at] for at in order], dtype=np.float64)
    gaps = (size[1:] + size[:-1]) / 2
    for _ in range(200):
        short = gaps - np.diff(moved)
        push = np.where(short > 1e-9, short / 2, 0.0)
        if not push.any():
            break
        moved[:-1] -= push
        moved[1:] += push
    for at in reversed(range(len(moved))):  # none above the panel, then none below it
        ceiling = TOP_LABEL - size[at] / 2 if at == len(moved) - 1 else moved[at + 1] - gaps[at]
        moved[at] = min(moved[at], ceiling)
    for at in range(len(moved)):
        moved[at] = max(moved[at], size[at] / 2 if at == 0 else moved[at - 1] + gaps[at - 1])
    out = [0.0] * len(places)
    for at, value in zip(order, moved, strict=True):
        out[at] = float(value)
    return out


def _group_label(group: tuple[str, ...]) -> str:
    """Names of the rocks of one curve, at most three of them."""
    names = sorted(group, key=lambda rock: rock not in WELL_KNOWN)
    if len(names) > 3:
        names[2:] = [f"{len(names) - 2}\u00a0more"]
    return "\n".join(textwrap.wrap(", ".join(names), 18))


def _label_axes(panel: Axes, law: Law, one: Input, held: Mapping[str, float]) -> None:
    unit = "degC" if one.name == "temperature" else LAW_INPUTS[one.name]
    unit = "share" if unit == "1" else unit
    panel.set_xlabel(f"{one.name.replace('_', ' ')} [{_powers(unit)}]", fontsize=9, color=_TEXT)
    if law.output == "relative":
        label = "relative rate, for ranking only [1]"
    else:
        label = f"consumption, short term [{_powers('mol CO2 m-2 yr-1')}]"
    panel.set_ylabel(label, fontsize=9, color=_TEXT)
    others = [spell_condition(name, value) for name, value in held.items() if name != one.name]
    if others:
        at = _powers("at " + ", ".join(others).replace("_", " "))
        panel.set_title(at, fontsize=8, loc="left", color=_TEXT)
    panel.tick_params(labelsize=8, colors=_TEXT)
    panel.grid(axis="y", color="#dddddd", linewidth=0.6, zorder=0)
    panel.set_axisbelow(True)
    for side in ("top", "right"):
        panel.spines[side].set_visible(False)


def _powers(unit: str) -> str:
    """Write negative powers raised, as in m⁻²."""
    for plain, raised in (("-2", "⁻²"), ("-1", "⁻¹")):
        for base in ("m", "yr"):
            unit = unit.replace(f"{base}{plain}", f"{base}{raised}")
    return unit.replace("degC", "°C").replace("CO2", "CO₂")


def _caption(law: Law, shown: list[tuple[str, ...]], rocks: Sequence[str], width: int) -> list[str]:
    """Sources and grades of what is drawn, wrapped to the figure."""
    doi = f", doi {law.doi}" if law.doi else ""
    grades: dict[str, list[str]] = {}
    for parameter in law.parameters:
        grades.setdefault(parameter.grade, []).append(parameter.name.replace("_", " "))
    parts = [
        f"Source: {law.reference}{doi}.",
        "Numbers by grade: "
        + "; ".join(f"{grade}: {', '.join(names)}" for grade, names in grades.items())
        + ".",
        "Range (solid line; dashed beyond it): "
        + "; ".join(
            f"{one.name.replace('_', ' ')}: {one.range_source} ({one.range_grade})"
            for one in law.inputs
        )
        + ".",
    ]
    n_drawn = sum(len(group) for group in shown)
    if n_drawn < len(rocks):
        parts.append(f"{n_drawn} of {len(rocks)} rocks drawn.")
    if law.output == "consumption":
        parts.append(
            f"1 mol m⁻² yr⁻¹ is {to_rate(1.0):.1f} t CO₂ km⁻² yr⁻¹. Consumption is short term: "
            f"of it {_kept_words(law)} stays out of the air in the long term."
        )
    parts += [f"{text[0].upper()}{text[1:]}." for text in law.cautions[:2]]
    return [line for part in parts for line in textwrap.wrap(_powers(part), width)]


def _kept_words(law: Law) -> str:
    shares = [100 * drawdown_share(ROCKS[rock]) for rock in law.rocks]
    low, high = min(shares), max(shares)
    return f"{low:.0f} %" if round(low) == round(high) else f"{low:.0f} to {high:.0f} %, by rock,"
