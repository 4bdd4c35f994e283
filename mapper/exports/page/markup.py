"""Small pieces of HTML that the sections share."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from mapper.exports.words import escape, number


@dataclass(frozen=True)
class Cell:
    """One cell of a table: HTML, and the value that it sorts by."""

    html: str
    sort: float | str | None = None
    numeric: bool = False
    share: float | None = None

    def render(self, *, head: bool = False) -> str:
        """The cell as HTML; ``head`` for the cell that names its row."""
        tag = 'th scope="row"' if head else "td"
        name = ' class="n"' if self.numeric else ""
        sort = "" if self.sort is None else f' data-v="{escape(_sortable(self.sort))}"'
        bar = ""
        if self.share is not None and math.isfinite(self.share):
            bar = f' style="--share:{min(max(self.share, 0.0), 1.0):.4f}"'
        return f"<{tag}{name}{sort}{bar}>{self.html}</{tag[:2]}>"


def _sortable(value: float | str) -> str:
    if isinstance(value, str):
        return value
    return f"{value:.10g}" if math.isfinite(value) else ""


def figure_cell(value: float, digits: int = 4, *, share: float | None = None) -> Cell:
    """A number to read and to sort by."""
    return Cell(number(value, digits), value, numeric=True, share=share)


def text_cell(html: str, sort: str | None = None) -> Cell:
    """A cell of ready HTML."""
    return Cell(html, sort)


def headings(names: Sequence[tuple[str, bool]], *, sortable: bool = False) -> str:
    """The row of column heads: HTML and whether its column holds numbers."""
    cells = []
    for html, numeric in names:
        name = ' class="n"' if numeric else ""
        inner = f'<button type="button" class="sort">{html}</button>' if sortable else html
        state = ' aria-sort="none"' if sortable else ""
        cells.append(f'<th scope="col"{name}{state}>{inner}</th>')
    return f"<thead><tr>{''.join(cells)}</tr></thead>"


def rows_of(rows: Iterable[Sequence[Cell]], *, named: int = 0) -> str:
    """Rows of a table body; the cell at ``named`` is the row's head."""
    return "\n".join(f"<tr>{cells_of(row, named=named)}</tr>" for row in rows)


def cells_of(row: Sequence[Cell], *, named: int = 0) -> str:
    """The cells of one row; the one at ``named`` is the row's head."""
    return "".join(cell.render(head=at == named) for at, cell in enumerate(row))


def table(
    caption: str,
    names: Sequence[tuple[str, bool]],
    rows: Iterable[Sequence[Cell]],
    *,
    kind: str = "",
) -> str:
    """A table inside a box that scrolls sideways on a narrow screen."""
    return (
        f'<div class="scroll" tabindex="0" role="region" aria-label="{escape(caption)}">'
        f'<table class="{kind}"><caption>{escape(caption)}</caption>{headings(names)}'
        f"<tbody>{rows_of(rows)}</tbody></table></div>"
    )


def section(name: str, title: str, *parts: str) -> str:
    """A section of the page."""
    body = "\n".join(part for part in parts if part)
    return f'<section id="{name}"><h2>{escape(title)}</h2>\n{body}\n</section>'


def paragraph(text: str, kind: str = "") -> str:
    """A paragraph of ready HTML."""
    name = f' class="{kind}"' if kind else ""
    return f"<p{name}>{text}</p>"


def bullets(items: Iterable[str]) -> str:
    """A list of ready HTML."""
    return "<ul>" + "".join(f"<li>{item}</li>" for item in items) + "</ul>"


def share_words(part: float, whole: float) -> str:
    """A share in a sentence."""
    return percent(part, whole).replace("<\u00a0", "less than ")


def percent(part: float, whole: float) -> str:
    """A share as text for a table."""
    if not whole or not math.isfinite(part / whole):
        return "0 %"
    share = 100.0 * part / whole
    if share == 0:
        return "0\u00a0%"
    if 0 < share < 0.1:
        return "<\u00a00.1\u00a0%"
    words = f"{share:.1f}" if share < 10 or 90 < share < 100 else f"{share:.0f}"
    return f"{words}\u00a0%"
