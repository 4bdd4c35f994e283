"""Styles for GIS: an OGC Styled Layer Descriptor 1.0 beside each map."""

from __future__ import annotations

import xml.etree.ElementTree as ET

from mapper.exports.colours import (
    Stretch,
    flag_colour,
    flag_label,
    flag_values,
    hex_at,
    scale,
)
from mapper.exports.contents import Contents
from mapper.exports.display import Display, DisplayMap
from mapper.exports.files import whole_file
from mapper.exports.words import clean, number

_SLD = "http://www.opengis.net/sld"  # names of the vocabularies, nothing is fetched
_PLACES = {
    "xmlns": _SLD,
    "xmlns:ogc": "http://www.opengis.net/ogc",
    "xmlns:xlink": "http://www.w3.org/1999/xlink",
}

Entry = tuple[float, str, str]
"""A value, its colour and its label."""


def rate_entries(name: str, span: Stretch) -> list[Entry]:
    """Nine equal steps; above the last the colour stays, up to the map's largest value."""
    colours = scale(name)
    stops = span.stops()
    entries = [
        (stop, hex_at(colours, at / (len(stops) - 1)), number(stop, 3))
        for at, stop in enumerate(stops)
    ]
    if span.largest > span.high:
        entries.append((span.largest, hex_at(colours, 1.0), f"up to {number(span.largest, 3)}"))
    return entries


def flag_entries(contents: Contents) -> list[Entry]:
    """Each value that the map of flags can hold."""
    flagged = contents.found.flagged
    return [(one, flag_colour(one), flag_label(one)) for one in flag_values(flagged)]


def write_styles(contents: Contents, display: Display) -> None:
    """Write ``maps/NAME.sld`` for every map."""
    for name in contents.map_paths:
        shown = display.maps[name]
        entries = (
            flag_entries(contents) if shown.stretch is None else rate_entries(name, shown.stretch)
        )
        with whole_file(contents.folder / "maps" / f"{name}.sld") as temporary:
            temporary.write_bytes(style_xml(shown, entries, contents.title))


def style_xml(shown: DisplayMap, entries: list[Entry], title: str) -> bytes:
    """The style of one map as XML."""
    root = ET.Element("StyledLayerDescriptor", {"version": "1.0.0", **_PLACES})
    layer = ET.SubElement(root, "NamedLayer")
    _text(layer, "Name", shown.name)
    style = ET.SubElement(layer, "UserStyle")
    _text(style, "Name", f"saprolite_{shown.name}")
    _text(style, "Title", f"{shown.name}{f' [{shown.unit}]' if shown.unit else ''}")
    _text(style, "Abstract", f"{shown.long_name}. {title}")
    _text(style, "IsDefault", "1")
    rule = ET.SubElement(ET.SubElement(style, "FeatureTypeStyle"), "Rule")
    symbol = ET.SubElement(rule, "RasterSymbolizer")
    _text(symbol, "Opacity", "1.0")
    ramp = ET.SubElement(symbol, "ColorMap")
    for value, colour, label in entries:
        ET.SubElement(
            ramp,
            "ColorMapEntry",
            {"color": colour, "quantity": f"{value:.10g}", "label": clean(label), "opacity": "1.0"},
        )
    ET.indent(root)
    text: bytes = ET.tostring(root, encoding="utf-8", xml_declaration=True)
    return text + b"\n"


def _text(parent: ET.Element, name: str, text: str) -> None:
    ET.SubElement(parent, name).text = clean(text)
