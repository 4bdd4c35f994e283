"""Pictures of the maps for a report, and their legends."""

from __future__ import annotations

import textwrap
import warnings
from pathlib import Path
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from mapper.exports.colours import (
    Stretch,
    flag_colour,
    flag_label,
    rgb,
    scale,
)
from mapper.exports.contents import Contents
from mapper.exports.display import (
    Display,
    DisplayMap,
    kilometres_wide,
    outlines,
    round_length,
    tick_label,
    ticks,
)
from mapper.exports.drivers import write_drivers
from mapper.exports.files import whole_file
from mapper.exports.words import clean, pretty_unit, shorten

INK, PALE, SEA = "#26231f", "#6d675f", "#f1efea"
_HEADINGS = {
    "consumption": "CO₂ taken up by rock weathering (short term)",
    "drawdown": "CO₂ drawn down by rock weathering (long term)",
    "flags": "What to know about a cell",
}
_DPI = 150


def heading(shown: DisplayMap) -> str:
    """The title of a map."""
    return _HEADINGS.get(shown.name, shown.long_name)


def write_pictures(contents: Contents, display: Display) -> None:
    """Write ``maps/NAME.png``, ``maps/NAME_legend.png``, and ``tables/sensitivity.png``."""
    write_drivers(contents)
    shapes = outlines(contents)
    folder = contents.folder / "maps"
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message=".*[Gg]lyph.*")  # names in any script
        for name in contents.map_paths:
            shown = display.maps[name]
            _save(_picture(contents, display, shown, shapes), folder / f"{name}.png")
            _save(_legend(shown), folder / f"{name}_legend.png")


def _save(figure: Any, path: Path) -> None:
    with whole_file(path) as temporary:
        figure.savefig(temporary, format="png", metadata={"Software": None})


def _figure(width: float, height: float) -> Any:
    from matplotlib.backends.backend_agg import FigureCanvasAgg  # noqa: PLC0415 - slow to import
    from matplotlib.figure import Figure  # noqa: PLC0415

    figure = Figure(figsize=(width, height), dpi=_DPI, facecolor="white")
    FigureCanvasAgg(figure)
    return figure


def coloured(shown: DisplayMap) -> NDArray[np.uint8]:
    """A map as red, green, blue and opacity."""
    values = shown.values
    out = np.zeros((*values.shape, 4), dtype=np.uint8)
    if shown.stretch is None:
        for bits in np.unique(values):
            out[values == bits] = (*rgb(flag_colour(int(bits))), 255)
        if shown.blank is not None:
            out[shown.blank] = 0
        return out
    index = scale_index(values, shown.stretch)
    good = index > 0
    out[good, :3] = scale(shown.name)[index[good]]
    out[good, 3] = 255
    return out


def scale_index(values: NDArray[Any], span: Stretch) -> NDArray[np.uint8]:
    """Position in a scale, 1 to 255; 0 without a result."""
    with np.errstate(invalid="ignore"):
        share = (values - span.low) / (span.high - span.low)
        index = np.clip(1.0 + np.floor(share * 255.0), 1, 255)
    return np.where(np.isnan(index), 0, index).astype(np.uint8)


def _picture(contents: Contents, display: Display, shown: DisplayMap, shapes: list[Any]) -> Any:
    ratio = min(max(display.width_to_height, 0.45), 3.2)
    width = 7.6 if ratio > 0.8 else 5.6
    map_height = 0.78 * width / ratio
    height = map_height + 1.95
    figure = _figure(width, height)
    left, bottom = 0.09, 1.05 / height
    axes = figure.add_axes((left, bottom, 0.70, map_height / height))
    _draw_map(axes, display, shown, shapes)
    _write_texts(figure, contents, shown, (left, height))
    if shown.stretch is None:
        _class_key(figure, shown, (0.81, bottom, 0.18, map_height / height))
    else:
        bar = figure.add_axes((0.82, bottom + 0.08, 0.022, map_height / height * 0.72))
        _colour_bar(bar, shown)
    return figure


def _draw_map(axes: Any, display: Display, shown: DisplayMap, shapes: list[Any]) -> None:
    from matplotlib.collections import LineCollection  # noqa: PLC0415 - slow to import

    left, bottom, right, top = display.grid.bounds
    axes.set_facecolor(SEA)
    axes.imshow(
        coloured(shown), extent=(left, right, bottom, top), aspect="auto", interpolation="nearest"
    )
    rings = [ring for shape in shapes for ring in _rings(shape)]
    axes.add_collection(LineCollection(rings, colors=INK, linewidths=0.5, alpha=0.75))
    for axis, (low, high) in (("x", (left, right)), ("y", (bottom, top))):
        places = ticks(low, high, 4)
        labels = [tick_label(one, axis, display.grid) for one in places]
        getattr(axes, f"set_{axis}ticks")(places, labels)
    axes.tick_params(labelsize=7, colors=PALE, length=3, width=0.5)
    axes.grid(color=INK, alpha=0.10, linewidth=0.4)
    axes.set_xlim(left, right)
    axes.set_ylim(bottom, top)
    for spine in axes.spines.values():
        spine.set(linewidth=0.5, color=PALE)
    _scale_bar(axes, display)


def _rings(shape: Any) -> list[NDArray[np.float64]]:
    parts = shapely.get_parts(shape)
    polygons = parts[shapely.get_type_id(parts) == 3]
    return [shapely.get_coordinates(ring) for ring in shapely.get_rings(polygons)]


def _scale_bar(axes: Any, display: Display) -> None:
    wide = kilometres_wide(display.grid)
    if wide is None:
        return
    length = round_length(wide / 4)
    share = length / wide
    where = {"transform": axes.transAxes, "color": INK, "zorder": 5}
    plate = {"facecolor": "white", "alpha": 0.75, "edgecolor": "none", "pad": 1.5}
    axes.plot([0.03, 0.03 + share], [0.045, 0.045], linewidth=2.2, solid_capstyle="butt", **where)
    axes.text(
        0.03 + share / 2,
        0.062,
        f"{length:g} km",
        ha="center",
        va="bottom",
        size=7,
        bbox=plate,
        **where,
    )


def _write_texts(
    figure: Any, contents: Contents, shown: DisplayMap, place: tuple[float, float]
) -> None:
    left, height = place
    plain = {"parse_math": False, "x": left}
    unit = f" [{pretty_unit(shown.unit)}]" if shown.unit else ""
    title = shorten(contents.title, 80)
    figure.text(y=1 - 0.30 / height, s=title, size=12.5, weight="bold", color=INK, **plain)
    figure.text(y=1 - 0.55 / height, s=heading(shown) + unit, size=9, color=INK, **plain)
    lines = textwrap.wrap(source_line(contents), 118)[:3] + textwrap.wrap(_caution(contents), 118)
    text = "\n".join(lines[:5])
    figure.text(y=0.62 / height, s=text, size=6.4, color=PALE, va="top", linespacing=1.45, **plain)


def _caution(contents: Contents) -> str:
    return str(contents.record["cautions"][0])


def source_line(contents: Contents) -> str:
    """Where a picture's numbers come from, in one sentence."""
    inputs = ", ".join(shorten(one["name"], 40) for one in contents.record["inputs"])
    laws = ", ".join(sorted({law["law"] for law in contents.record["laws"].values()}))
    version = contents.record["versions"]["saprolite"]
    return clean(f"Inputs: {inputs}. Law: {laws}. Made with saprolite {version}.")


def _colour_bar(axes: Any, shown: DisplayMap) -> None:
    span = shown.stretch
    if span is None:  # pragma: no cover - only rates have a bar
        return
    ramp = scale(shown.name)[:, None, :]
    axes.imshow(ramp, extent=(0, 1, span.low, span.high), origin="lower", aspect="auto")
    axes.set_xticks([])
    axes.yaxis.tick_right()
    axes.set_yticks(ticks(span.low, span.high, 5))
    axes.tick_params(labelsize=7.5, colors=INK, length=2, width=0.5)
    axes.spines[:].set(linewidth=0.4, color=PALE)
    above = span.largest > span.high
    head = f"up to\n{span.largest:.4g}" if above else ""
    axes.text(0, 1.02, head, transform=axes.transAxes, size=7, color=PALE, va="bottom")


def _classes(shown: DisplayMap) -> list[tuple[str, str]]:
    drawn = shown.values if shown.blank is None else shown.values[~shown.blank]
    seen = [int(one) for one in np.unique(drawn)]
    return [(flag_colour(bits), flag_label(bits)) for bits in seen][:14]


def _class_key(figure: Any, shown: DisplayMap, place: tuple[float, float, float, float]) -> None:
    axes = figure.add_axes(place)
    axes.set_axis_off()
    _draw_key(axes, _classes(shown), wrap=22, step=0.13)


def _draw_key(axes: Any, classes: list[tuple[str, str]], *, wrap: int, step: float) -> None:
    axes.set_xlim(0, 1)
    axes.set_ylim(0, 1)
    for at, (colour, label) in enumerate(classes):
        y = 1.0 - step * (at + 0.5)
        axes.plot([0.06], [y], "s", color=colour, markersize=8, markeredgecolor=PALE, mew=0.4)
        text = textwrap.fill(label, wrap)
        axes.text(0.15, y, text, va="center", size=6.6, color=INK, parse_math=False)


def _legend(shown: DisplayMap) -> Any:
    if shown.stretch is None:
        classes = _classes(shown)
        figure = _figure(3.2, 0.5 + 0.3 * len(classes))
        axes = figure.add_axes((0.02, 0.03, 0.96, 0.94))
        axes.set_axis_off()
        _draw_key(axes, classes, wrap=52, step=1.0 / max(len(classes), 1))
        return figure
    figure = _figure(1.7, 3.0)
    figure.text(0.12, 0.965, shown.name, size=8.5, weight="bold", color=INK, va="top")
    figure.text(0.12, 0.91, pretty_unit(shown.unit), size=7, color=PALE, va="top", parse_math=False)
    _colour_bar(figure.add_axes((0.14, 0.05, 0.16, 0.70)), shown)
    return figure
