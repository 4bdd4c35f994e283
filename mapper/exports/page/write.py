"""Puts the page together and keeps it small."""

from __future__ import annotations

from importlib import resources

from mapper.exports.contents import Contents
from mapper.exports.display import DISPLAY_CELLS, Display, read_display
from mapper.exports.files import whole_file
from mapper.exports.page.answer import head
from mapper.exports.page.doubt import doubt_section
from mapper.exports.page.mapview import map_data, map_figure
from mapper.exports.page.ranking import ranking
from mapper.exports.page.sections import limits_section, origin_section
from mapper.exports.page.sources import cautions_section, sources_section
from mapper.exports.words import escape, script_json, shorten

LARGEST_PAGE = 9_500_000  # bytes
_SMALLEST_DISPLAY = 20_000  # cells

_POLICY = (
    "default-src 'none'; img-src data:; style-src 'unsafe-inline'; script-src 'unsafe-inline'; "
    "base-uri 'none'; form-action 'none'"
)
_CONTENTS = (
    ("where", "Where"),
    ("origin", "Why there"),
    ("doubt", "How sure"),
    ("limits", "Limits"),
    ("sources", "From what"),
    ("cautions", "Cautions and citing"),
)


def write_page(contents: Contents, display: Display) -> None:
    """Write ``report.html``, with a coarser map where it would be too large."""
    text = page_html(contents, display)
    cells = DISPLAY_CELLS
    while len(text.encode()) > LARGEST_PAGE and cells > _SMALLEST_DISPLAY:
        cells //= 2
        text = page_html(contents, read_display(contents, cells))
    with whole_file(contents.folder / "report.html") as temporary:
        temporary.write_text(text, encoding="utf-8")


def page_html(contents: Contents, display: Display) -> str:
    """The whole page."""
    title = escape(shorten(contents.title, 160))
    links = "".join(f'<a href="#{name}">{text}</a>' for name, text in _CONTENTS)
    beside = ranking(contents)
    wide = "" if beside else " alone"
    body = "\n".join(
        [
            f'<nav aria-label="Sections">{links}</nav>',
            head(contents),
            "<main>",
            f'<section id="where"><h2>Where</h2><div class="pair{wide}">'
            f"{map_figure(contents, display)}{beside}</div></section>",
            origin_section(contents),
            doubt_section(contents),
            limits_section(contents),
            sources_section(contents),
            cautions_section(contents),
            "</main>",
            _footer(contents),
        ]
    )
    data = script_json(map_data(contents, display))
    return (
        '<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">'
        f'<meta http-equiv="Content-Security-Policy" content="{_POLICY}">'
        '<meta name="viewport" content="width=device-width, initial-scale=1">'
        f"<title>{title}</title><style>{_resource('page.css')}</style></head>\n<body>\n{body}\n"
        f'<script type="application/json" id="map-data">{data}</script>\n'
        f"<script>{_resource('page.js')}</script>\n</body></html>\n"
    )


def _footer(contents: Contents) -> str:
    version = escape(contents.record["versions"]["saprolite"])
    return (
        f"<footer><p>Made with saprolite {version}. Maps: <code>maps/</code>, with a style beside "
        "each for a GIS. Tables: <code>tables/</code>. Regions: <code>regions.gpkg</code>. "
        "Record: <code>run.json</code>.</p></footer>"
    )


def _resource(name: str) -> str:
    return resources.files("mapper.exports.page").joinpath(name).read_text(encoding="utf-8")
