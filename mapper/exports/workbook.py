"""Tables for other programs: Parquet, and one workbook with a sheet of units and sources."""

from __future__ import annotations

import datetime as dt
import math
import re
from collections.abc import Iterator, Mapping
from importlib import import_module
from typing import Any

from mapper.exports.contents import Contents, Table, parameter_rows
from mapper.exports.files import safe_cell, whole_file
from mapper.exports.words import clean

_CELL_LIMIT = 32_000  # characters a spreadsheet cell can hold
_ROW_LIMIT = 1_000_000
_FIXED_DATE = dt.datetime(2000, 1, 1, tzinfo=dt.UTC).replace(tzinfo=None)

COLUMN_MEANING: Mapping[str, tuple[str, str]] = {
    "region": ("", "id of the region; 'outside' lies in none, 'all' is the whole grid"),
    "rock": ("", "rock class; 'unmapped' has no rock, 'all' is the sum"),
    "class": ("", "class of a further layer; 'no class' has none, 'all' is the whole grid"),
    "area_km2": ("km2", "area on the ellipsoid"),
    "valid_area_km2": ("km2", "area with a result; rates are per km2 of this area"),
    "consumption_t_per_yr": ("t CO2 yr-1", "CO2 taken up by weathering, short term"),
    "drawdown_t_per_yr": ("t CO2 yr-1", "CO2 that stays out of the air, long term"),
    "consumption_t_per_km2_yr": ("t CO2 km-2 yr-1", "short-term uptake per km2 with a result"),
    "drawdown_t_per_km2_yr": ("t CO2 km-2 yr-1", "long-term drawdown per km2 with a result"),
    "outside_law_range_km2": ("km2", "area outside the range that its law was fitted in"),
}
_QUANTILE = re.compile(r"_p(\d\d)$")


def column_meaning(column: str) -> tuple[str, str]:
    """Unit and meaning of a table's column."""
    if column in COLUMN_MEANING:
        return COLUMN_MEANING[column]
    found = _QUANTILE.search(column)
    if found:
        unit, meaning = column_meaning(column[: found.start()])
        return unit, f"{meaning}; {int(found[1])} % of the draws lie below"
    return "", column.replace("_", " ")


def write_parquet(contents: Contents) -> None:
    """Write ``tables/NAME.parquet`` for every table."""
    arrow, parquet = import_module("pyarrow"), import_module("pyarrow.parquet")
    for table in contents.tables.values():
        columns = {name: arrow.array(_column(table, name)) for name in table.columns}
        with whole_file(contents.folder / "tables" / f"{table.name}.parquet") as temporary:
            parquet.write_table(arrow.table(columns), temporary, compression="zstd")


def _column(table: Table, name: str) -> list[Any]:
    return [
        None if isinstance(one, float) and math.isnan(one) else one for one in table.column(name)
    ]


def write_workbook(contents: Contents) -> None:
    """Write ``tables/tables.xlsx``: a sheet for each table, then units, then sources."""
    xlsxwriter: Any = import_module("xlsxwriter")
    options = {
        "constant_memory": True,
        "strings_to_formulas": False,
        "strings_to_urls": False,
        "strings_to_numbers": False,
    }
    with whole_file(contents.folder / "tables" / "tables.xlsx") as temporary:
        book = xlsxwriter.Workbook(str(temporary), options)
        book.set_properties({"title": clean(contents.title)[:200], "created": _FIXED_DATE})
        styles = {
            "head": book.add_format({"bold": True, "bottom": 1}),
            "number": book.add_format({"num_format": "#,##0.00##"}),
        }
        for table in contents.tables.values():
            _sheet(book, table.name, table.columns, table.rows, styles)
        _sheet(book, "units", ("table", "column", "unit", "meaning"), _units(contents), styles)
        heads = ("rock", "law", "parameter", "value", "unit", "grade", "source")
        _sheet(book, "sources", heads, _sources(contents), styles)
        _sheet(
            book, "cautions", ("caution",), [(one,) for one in contents.record["cautions"]], styles
        )
        book.close()


def _sheet(book: Any, name: str, heads: Any, rows: Any, styles: Mapping[str, Any]) -> None:
    sheet = book.add_worksheet(name[:31])
    sheet.freeze_panes(1, 1)
    sheet.set_column(0, 0, 18)
    sheet.set_column(1, max(len(heads) - 1, 1), 22)
    for at, head in enumerate(heads):
        sheet.write_string(0, at, head, styles["head"])
    for row, cells in enumerate(rows, start=1):
        if row > _ROW_LIMIT:
            break
        for at, cell in enumerate(cells):
            _cell(sheet, row, at, cell, styles)


def _cell(sheet: Any, row: int, at: int, cell: Any, styles: Mapping[str, Any]) -> None:
    if isinstance(cell, int | float):
        if math.isfinite(cell):
            sheet.write_number(row, at, cell, styles["number"])
    elif cell is not None:
        sheet.write_string(row, at, str(safe_cell(clean(cell)))[:_CELL_LIMIT])


def _units(contents: Contents) -> Iterator[tuple[str, ...]]:
    for table in contents.tables.values():
        for column in table.columns:
            yield (table.name, column, *column_meaning(column))


def _sources(contents: Contents) -> Iterator[tuple[Any, ...]]:
    for one in parameter_rows(contents.record):
        yield tuple(one.values())
