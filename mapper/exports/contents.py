"""What is handed over: a run's maps, tables and record, read back once for every writer."""

from __future__ import annotations

import csv
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import geopandas as gpd

from mapper.engine import Plan
from mapper.exports.alternatives import LawTotals
from mapper.exports.files import safe_cell
from mapper.exports.tables import Totals
from mapper.ranking import Ranking
from mapper.uncertainty.spread import SpreadFound

OTHER_ROWS = ("outside", "all")
"""Rows of the regions table that are no region."""

SET_BY_JOB = "job"
"""The grade of a number that the job sets; the others are those of `mapper.laws.law.Grade`."""

GRADE_WORDS: Mapping[str, str] = {
    "read": "read in the source",
    "quoted": "quoted from the source elsewhere",
    "memory": "from memory, not seen",
    "computed": "computed from the formula",
    "project": "this project’s own choice",
    SET_BY_JOB: "set by the job",
}

_SORTED_FIRST = ("drawdown", "consumption")


@dataclass(frozen=True, eq=False)
class Table:
    """A table as it was written: text as the user spelled it, numbers as floats."""

    name: str
    columns: tuple[str, ...]
    rows: tuple[tuple[Any, ...], ...]

    def column(self, name: str) -> list[Any]:
        """The values of a column; a KeyError names the columns there are."""
        if name not in self.columns:
            raise KeyError(f"table {self.name!r} has no column {name!r}: {self.columns}")
        at = self.columns.index(name)
        return [row[at] for row in self.rows]

    def records(self) -> Iterator[dict[str, Any]]:
        """Each row as a mapping."""
        for row in self.rows:
            yield dict(zip(self.columns, row, strict=True))

    @cached_property
    def by_region(self) -> Mapping[str, dict[str, Any]]:
        """Rows by region, for tables with one row a region."""
        return {record["region"]: record for record in self.records()}


@dataclass(frozen=True)
class RunResult:
    """What a run left: its folder, its totals, and what it found out about itself."""

    folder: Path
    totals: Totals
    checks: Mapping[str, float]
    seconds: float
    resumed_blocks: int
    spread: SpreadFound | None = None
    ranking: Ranking | None = None
    laws: tuple[LawTotals, ...] = ()


@dataclass(frozen=True, eq=False)
class Contents:
    """All that the writers of a run folder need; ``record`` is what becomes ``run.json``."""

    folder: Path
    plan: Plan
    found: Totals
    record: Mapping[str, Any]
    hotspots: gpd.GeoDataFrame | None = None

    @property
    def title(self) -> str:
        """The job's title."""
        return str(self.record["title"])

    @cached_property
    def tables(self) -> Mapping[str, Table]:
        """Every table of the folder by name."""
        named = {safe_cell(name): name for name in self.found.names}
        paths = sorted((self.folder / "tables").glob("*.csv"))
        return {path.stem: read_table(path, named) for path in paths}

    @property
    def regions(self) -> Table:
        """The table of regions."""
        return self.tables["regions"]

    @property
    def has_draws(self) -> bool:
        """Whether the totals carry intervals."""
        return "drawdown_t_per_yr_p05" in self.regions.columns

    @cached_property
    def map_paths(self) -> Mapping[str, Path]:
        """Every map of the folder by name, the long-term one first and the flags last."""
        paths = {path.stem: path for path in sorted((self.folder / "maps").glob("*.tif"))}
        first = [name for name in _SORTED_FIRST if name in paths]
        rest = [name for name in paths if name not in (*first, "flags")]
        last = ["flags"] if "flags" in paths else []
        return {name: paths[name] for name in (*first, *rest, *last)}


def parameter_rows(record: Mapping[str, Any]) -> Iterator[dict[str, Any]]:
    """Every parameter of every rock's law, with its source; the job is the source of what it sets.

    Keys: rock, law, parameter, value, unit, grade, source.
    """
    for rock, law in record["laws"].items():
        for name, one in law["parameters"].items():
            changed = [text for text in law["changed"] if text.startswith(f"{name} = ")]
            yield {
                "rock": rock,
                "law": law["law"],
                "parameter": name,
                "value": one["value"],
                "unit": one["unit"],
                "grade": SET_BY_JOB if changed else one["grade"],
                "source": f"the job: {changed[0]}" if changed else one["source"],
            }


def read_table(path: Path, spelled: Mapping[str, str] | None = None) -> Table:
    """Read a table that this tool wrote.

    Parameters
    ----------
    spelled : how the user spelled a text cell that was made safe for spreadsheets.
    """
    with path.open(encoding="utf-8", newline="") as stream:
        lines = list(csv.reader(stream))
    columns, rows = lines[0], lines[1:]
    text = {at for at, name in enumerate(columns) if _is_text(name, at, rows)}
    values = tuple(
        tuple(
            (spelled or {}).get(cell, cell) if at in text else _number(cell)
            for at, cell in enumerate(row)
        )
        for row in rows
    )
    return Table(path.stem, tuple(columns), values)


def _is_text(name: str, at: int, rows: list[list[str]]) -> bool:
    if name in ("region", "rock", "class"):
        return True
    return any(row[at] and math.isnan(_number(row[at])) for row in rows)


def _number(cell: str) -> float:
    try:
        return float(cell)
    except ValueError:
        return float("nan")
