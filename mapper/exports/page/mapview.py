"""The map of the page: layers as pictures, values for reading, regions drawn on it."""

from __future__ import annotations

import base64
import io
import zlib
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from mapper.evaluation import Flag
from mapper.exports.colours import (
    CLEAR_COLOUR,
    FLAG_COLOUR,
    FLAG_LABEL,
    ROCK_COLOUR,
    flag_colour,
    hex_at,
    rgb,
    scale,
)
from mapper.exports.contents import Contents
from mapper.exports.display import (
    NO_ROCK,
    Display,
    DisplayMap,
    kilometres_wide,
    outlines,
    round_length,
    tick_label,
    ticks,
)
from mapper.exports.page.markup import paragraph
from mapper.exports.page.ranking import ties
from mapper.exports.pictures import scale_index
from mapper.exports.words import escape, number, pretty_unit
from mapper.rocks import ROCK_NAMES

WIDTH = 1000.0
MOST_SPOTS = 500
_KEPT_BITS = np.uint32(0xFFFFF800)  # 12 bits of mantissa: values right to 1 in 4000
_LABELS = {
    "drawdown": "Drawdown, long term",
    "consumption": "Consumption, short term",
    "flags": "Flags",
    "rock": "Rock",
}


def label(shown: DisplayMap) -> str:
    """What a layer is called on the page."""
    return _LABELS.get(shown.name, shown.name.replace("_", " ").capitalize())


def map_figure(contents: Contents, display: Display) -> str:
    """The map with its switch, reading line and legends."""
    names = list(display.maps)
    height = WIDTH / display.width_to_height
    buttons = "".join(
        f'<button type="button" data-layer="{escape(name)}" aria-pressed="{str(not at).lower()}">'
        f"{escape(label(display.maps[name]))}</button>"
        for at, name in enumerate(names)
    )
    images = "".join(
        _image(display.maps[name], height, first=not at) for at, name in enumerate(names)
    )
    buttons += _spots_button(contents)
    legends = "".join(_legend(display.maps[name], first=not at) for at, name in enumerate(names))
    return (
        '<figure class="map" id="map">'
        f'<div class="layers" role="group" aria-label="Layer on the map">{buttons}</div>'
        '<div class="frame">'
        f'<div class="sheet" style="aspect-ratio:{WIDTH:g}/{height:.1f}">'
        f'<svg id="view" viewBox="0 0 {WIDTH:g} {height:.2f}" preserveAspectRatio="none" '
        'tabindex="0" role="application" aria-roledescription="map" '
        'aria-label="Map. Arrow keys move the reading point, plus and minus zoom, 0 shows the '
        'whole map." aria-describedby="reading">'
        f"{images}{_graticule(display, height)}{_region_paths(contents, display, height)}"
        f"{_spot_paths(contents, display, height)}"
        '<g id="cross" aria-hidden="true"><path d="M-12 0H12M0-12V12"/></g></svg>'
        f"{_scale_bar(display)}</div>{_tick_labels(display)}"
        '<div class="zoom" role="group" aria-label="Zoom">'
        '<button type="button" data-zoom="in" aria-label="Zoom in">+</button>'
        '<button type="button" data-zoom="out" aria-label="Zoom out">−</button>'
        '<button type="button" data-zoom="all" aria-label="Whole map">◻</button></div></div>'
        '<output id="reading" aria-live="polite">Point at the map, or move over it with the '
        "arrow keys, to read its values.</output>"
        f"<figcaption>{legends}{_note(display)}</figcaption></figure>"
    )


def _note(display: Display) -> str:
    if not display.reduced:
        return paragraph("Each cell of the grid is shown.", "note")
    rows, cols = display.shape
    return paragraph(
        f"Shown reduced to {rows} by {cols} of {display.grid.n_rows} by {display.grid.n_cols} "
        "cells; every number outside this map comes from the whole grid.",
        "note",
    )


def _image(shown: DisplayMap, height: float, *, first: bool) -> str:
    hidden = "" if first else ' class="off"'
    data = base64.b64encode(_png(*_indexed(shown))).decode()
    return (
        f'<image id="layer-{escape(shown.name)}"{hidden} width="{WIDTH:g}" height="{height:.2f}" '
        f'preserveAspectRatio="none" href="data:image/png;base64,{data}"/>'
    )


def _indexed(shown: DisplayMap) -> tuple[NDArray[np.uint8], NDArray[np.uint8]]:
    """A map as positions in a palette, and the palette; position 0 is clear."""
    if shown.stretch is not None:
        palette = scale(shown.name).copy()
        return scale_index(shown.values, shown.stretch), palette
    palette = np.zeros((256, 3), dtype=np.uint8)
    seen = [int(one) for one in np.unique(shown.values) if shown.name != "rock" or one != NO_ROCK]
    look = np.zeros(256, dtype=np.uint8)
    for at, one in enumerate(seen[:255], start=1):
        look[one] = at
        palette[at] = rgb(class_colour(shown.name, one))
    index = look[shown.values]
    if shown.blank is not None:
        index[shown.blank] = 0
    return index, palette


def class_colour(name: str, value: int) -> str:
    """The colour of a class of a map."""
    return ROCK_COLOUR[ROCK_NAMES[value]] if name == "rock" else flag_colour(value)


def _png(index: NDArray[np.uint8], palette: NDArray[np.uint8]) -> bytes:
    from PIL import Image  # noqa: PLC0415 - only where a page is written

    picture = Image.fromarray(index)
    picture.putpalette(palette.tobytes())
    stream = io.BytesIO()
    picture.save(stream, "PNG", transparency=0, optimize=False, compress_level=7)
    return stream.getvalue()


def packed_values(shown: DisplayMap) -> str:
    """Values for reading, as base64 of deflated bytes: floats byte by byte, classes as they are."""
    if shown.stretch is None:
        raw = np.ascontiguousarray(shown.values, dtype=np.uint8).tobytes()
    else:
        bits = shown.values.astype("<f4").view("<u4")
        kept = np.where(np.isnan(shown.values), np.uint32(0x7FC00000), (bits + 0x400) & _KEPT_BITS)
        raw = kept.astype("<u4").view(np.uint8).reshape(-1, 4).T.tobytes()
    return base64.b64encode(zlib.compress(raw, 7)).decode()


def map_data(contents: Contents, display: Display) -> dict[str, Any]:
    """What the page's script needs to read the map."""
    left, bottom, right, top = display.grid.bounds
    regions = contents.plan.regions
    return {
        "bounds": [left, bottom, right, top],
        "geographic": display.grid.is_geographic,
        "rows": display.shape[0],
        "cols": display.shape[1],
        "kilometres": kilometres_wide(display.grid),
        "regions": list(regions.names) if regions is not None else [],
        "layers": [
            {
                "name": name,
                "label": label(shown),
                "unit": pretty_unit(shown.unit),
                "kind": "rate" if shown.stretch is not None else name,
                "data": packed_values(shown),
            }
            for name, shown in display.maps.items()
        ],
        "ties": ties(contents),
        "rocks": list(ROCK_NAMES),
        "flags": [[int(flag), FLAG_LABEL[flag]] for flag in Flag],
    }


def _legend(shown: DisplayMap, *, first: bool) -> str:
    hidden = "" if first else " hidden"
    body = _ramp(shown) if shown.stretch is not None else _key(shown)
    return f'<div class="legend" id="legend-{escape(shown.name)}"{hidden}>{body}</div>'


def _ramp(shown: DisplayMap) -> str:
    span = shown.stretch
    if span is None:  # pragma: no cover - only rates have a ramp
        return ""
    colours = scale(shown.name)
    stops = ",".join(hex_at(colours, at / 16) for at in range(17))
    places = ticks(span.low, span.high, 5)
    marks = "".join(
        f'<span style="left:{100 * (one - span.low) / (span.high - span.low):.2f}%">{one:g}</span>'
        for one in places
    )
    above = f"; the largest cell has {number(span.largest, 3)}" if span.largest > span.high else ""
    return (
        f"<p>{escape(shown.long_name)} [{escape(pretty_unit(shown.unit))}]{above}</p>"
        f'<div class="ramp" style="background:linear-gradient(90deg,{stops})"></div>'
        f'<div class="marks">{marks}</div>'
    )


def _key(shown: DisplayMap) -> str:
    drawn = shown.values if shown.blank is None else shown.values[~shown.blank]
    seen = [int(one) for one in np.unique(drawn)]
    if shown.name == "rock":
        pairs = [(ROCK_COLOUR[ROCK_NAMES[one]], ROCK_NAMES[one]) for one in seen if one != NO_ROCK]
    else:
        used = [flag for flag in FLAG_COLOUR if any(one & flag for one in seen)]
        pairs = [(FLAG_COLOUR[flag], FLAG_LABEL[flag]) for flag in used]
        pairs.append((CLEAR_COLOUR, "nothing to report"))
    items = "".join(
        f'<li><i style="background:{colour}"></i>{escape(text)}</li>' for colour, text in pairs
    )
    return f'<p>{escape(shown.long_name)}</p><ul class="key">{items}</ul>'


def _graticule(display: Display, height: float) -> str:
    left, bottom, right, top = display.grid.bounds
    x = [WIDTH * (one - left) / (right - left) for one in ticks(left, right, 5)]
    y = [height * (top - one) / (top - bottom) for one in ticks(bottom, top, 4)]
    lines = [f"M{one:.1f} 0V{height:.1f}" for one in x] + [f"M0 {one:.1f}H{WIDTH:g}" for one in y]
    return f'<path class="graticule" aria-hidden="true" d="{"".join(lines)}"/>'


def _tick_labels(display: Display) -> str:
    left, bottom, right, top = display.grid.bounds
    along = "".join(
        f'<span data-at="{(one - left) / (right - left):.5f}" '
        f'style="left:{100 * (one - left) / (right - left):.2f}%">'
        f"{escape(tick_label(one, 'x', display.grid))}</span>"
        for one in ticks(left, right, 5)
    )
    down = "".join(
        f'<span data-at="{(top - one) / (top - bottom):.5f}" '
        f'style="top:{100 * (top - one) / (top - bottom):.2f}%">'
        f"{escape(tick_label(one, 'y', display.grid))}</span>"
        for one in ticks(bottom, top, 4)
    )
    return (
        f'<div class="ticks x" aria-hidden="true">{along}</div>'
        f'<div class="ticks y" aria-hidden="true">{down}</div>'
    )


def _scale_bar(display: Display) -> str:
    wide = kilometres_wide(display.grid)
    if wide is None:
        return ""
    length = round_length(wide / 4)
    return (
        f'<div class="bar" id="bar" aria-hidden="true" style="width:{100 * length / wide:.2f}%">'
        f"<span>{length:g} km</span></div>"
    )


def _region_paths(contents: Contents, display: Display, height: float) -> str:
    drawn = (_path(shape, display, height) for shape in outlines(contents))
    paths = "".join(f'<path data-r="{at}" d="{one}"/>' for at, one in enumerate(drawn) if one)
    return f'<g id="shapes" aria-hidden="true">{paths}</g>'


def _spot_paths(contents: Contents, display: Display, height: float) -> str:
    """Hot spots, drawn over the regions and switched on by a button."""
    if contents.hotspots is None or not len(contents.hotspots):
        return ""
    shapes = np.asarray(contents.hotspots.geometry, dtype=object)[:MOST_SPOTS]
    step = display.grid.dx * display.grid.n_cols / display.shape[1]
    simple = shapely.simplify(shapes, 0.5 * step, preserve_topology=False)
    drawn = "".join(_path(shape, display, height) for shape in simple)
    return f'<path id="spots" class="off" aria-hidden="true" d="{drawn}"/>'


def _spots_button(contents: Contents) -> str:
    if contents.hotspots is None or not len(contents.hotspots):
        return ""
    return (
        '<button type="button" id="spots-button" class="also" aria-pressed="false">'
        f"Hot spots ({len(contents.hotspots)})</button>"
    )


def _path(shape: Any, display: Display, height: float) -> str:
    left, bottom, right, top = display.grid.bounds
    scale_by = np.array([WIDTH / (right - left), -height / (top - bottom)])
    parts = shapely.get_parts(shape)
    rings = shapely.get_rings(parts[shapely.get_type_id(parts) == 3])
    pieces = []
    for ring in rings:
        points = (shapely.get_coordinates(ring)[:-1] - np.array([left, top])) * scale_by
        pieces.append("M" + "L".join(f"{x:g} {y:g}" for x, y in np.round(points, 1)) + "Z")
    return "".join(pieces)
