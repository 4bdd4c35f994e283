"""Says whether a run folder is what its record claims."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterable, Iterator, Mapping
from contextlib import closing
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from rasterio.windows import Window as RasterWindow

from mapper.errors import RunFolderError
from mapper.exports.contents import Table, read_table
from mapper.exports.crate import output_files
from mapper.exports.record import file_hash
from mapper.grid import Grid, blocks, cell_areas

MAP_TOLERANCE = 1.2e-7
"""Relative: a map's cell is rounded to float32, which moves it by at most 6e-8; as much again is
left for the ten digits of the tables."""
TABLE_TOLERANCE = 1e-9
"""Relative: the tables carry ten digits."""

_ADDED = (
    "area_km2",
    "valid_area_km2",
    "consumption_t_per_yr",
    "drawdown_t_per_yr",
    "outside_law_range_km2",
)
_BLOCK = (1024, 2048)


@dataclass
class Verification:
    """What was checked, and what differs."""

    folder: Path
    checked: list[str] = field(default_factory=list)
    differs: list[str] = field(default_factory=list)

    def compare(self, what: str, one: float, other: float, tolerance: float) -> None:
        """Note a difference above ``tolerance``, relative to the larger number."""
        largest = max(abs(one), abs(other))
        apart = abs(one - other) / largest if largest else 0.0
        if not apart <= tolerance:
            self.differs.append(f"{what}: {one:.10g} against {other:.10g}, apart by {apart:.2g}")

    def raise_if_different(self) -> None:
        """Refuse a folder that is not what it claims."""
        if self.differs:
            listed = "\n    ".join(self.differs)
            raise RunFolderError(
                f"{len(self.differs)} things differ from the record:\n    {listed}",
                where=str(self.folder),
                fix="the folder as the run left it, or saprolite run JOB --fresh to make it again",
            )


def verify(folder: str | Path) -> Verification:
    """Check the files, the sums of the tables, and the totals that the maps give.

    Raises
    ------
    RunFolderError where the folder is no finished run.
    """
    found = Verification(Path(folder))
    record = _read_record(found.folder)
    _check_files(found, record)
    tables = {
        path.stem: read_table(path) for path in sorted((found.folder / "tables").glob("*.csv"))
    }
    if {"regions", "regions_by_rock"} <= set(tables):
        _check_sums(found, tables)
        _check_maps(found, tables["regions"])
        _check_record(found, record, tables["regions"])
        _check_geopackage(found, tables["regions"])
    return found


def _read_record(folder: Path) -> Mapping[str, Any]:
    path = folder / "run.json"
    try:
        record = json.loads(path.read_text(encoding="utf-8"))
        record["files"], record["result"]["drawdown_t_per_yr"]
    except (OSError, ValueError, KeyError, TypeError) as cause:
        raise RunFolderError(
            f"there is no whole record of a run: {type(cause).__name__}: {cause}",
            where=str(path),
            fix="the folder of a finished run, as saprolite run JOB leaves it",
        ) from cause
    return dict(record)


def _check_files(found: Verification, record: Mapping[str, Any]) -> None:
    claimed = {one["name"]: one for one in record["files"]}
    present = {
        path.relative_to(found.folder).as_posix(): path for path in output_files(found.folder)
    }
    present.pop("run.json", None)
    for name, one in claimed.items():
        if name not in present:
            found.differs.append(f"{name} is missing")
        elif present[name].stat().st_size != one["bytes"]:
            size = present[name].stat().st_size
            found.differs.append(f"{name}: {size} bytes against {one['bytes']}")
        elif file_hash(str(present[name])) != one["sha256"]:
            found.differs.append(f"{name}: its SHA-256 is another one")
    added = sorted(set(present) - set(claimed))
    found.differs.extend(f"{name} is not in the record" for name in added)
    found.checked.append(f"size and SHA-256 of {len(claimed)} files")


def _check_sums(found: Verification, tables: Mapping[str, Table]) -> None:
    rows = list(tables["regions"].records())
    _check_split(found, "regions and 'outside'", rows, "region")
    by_region: dict[str, list[dict[str, Any]]] = {}
    for row in tables["regions_by_rock"].records():
        by_region.setdefault(row["region"], []).append(row)
    for name, rocks in by_region.items():
        _check_split(found, f"rocks of {name!r}", rocks, "rock")
    found.checked.append(
        f"regions + outside = all, and rocks = total in {len(by_region)} regions, "
        f"within {TABLE_TOLERANCE:g}"
    )


def _check_split(found: Verification, what: str, rows: list[dict[str, Any]], key: str) -> None:
    parts = [row for row in rows if row[key] != "all"]
    whole = [row for row in rows if row[key] == "all"]
    if len(whole) != 1:
        found.differs.append(f"{what}: {len(whole)} rows 'all'")
        return
    for column in _ADDED:
        total = _sum(row[column] for row in parts)
        found.compare(f"{what}, {column}", total, whole[0][column], TABLE_TOLERANCE)


def _sum(values: Iterable[float]) -> float:
    return float(np.nansum(np.fromiter(values, dtype=np.float64)))


def _check_maps(found: Verification, regions: Table) -> None:
    every = regions.by_region["all"]
    for name in ("consumption", "drawdown"):
        path = found.folder / "maps" / f"{name}.tif"
        if not path.exists():
            continue
        try:
            total, area = map_total(path)
        except rasterio.RasterioIOError as cause:
            found.differs.append(f"maps/{name}.tif cannot be read: {cause}")
            continue
        found.compare(
            f"total of maps/{name}.tif, t CO2 per year",
            total,
            every[f"{name}_t_per_yr"],
            MAP_TOLERANCE,
        )
        found.compare(f"area of maps/{name}.tif, km2", area, every["area_km2"], MAP_TOLERANCE)
        found.checked.append(
            f"maps/{name}.tif x cell area = table 'all', within {MAP_TOLERANCE:g} (float32 cells)"
        )


def map_total(path: Path) -> tuple[float, float]:
    """Sum of a map times the area of its cells [t CO2 yr-1], and the area of the grid [km2]."""
    total = area = 0.0
    with rasterio.open(path) as dataset:
        grid = _grid_of(dataset)
        for window in blocks(grid, _BLOCK):
            at = RasterWindow(window.col, window.row, window.n_cols, window.n_rows)
            values = dataset.read(1, window=at).astype(np.float64)
            km2 = np.broadcast_to(cell_areas(grid, window), window.shape) / 1e6
            total += float(np.nansum(values * km2))
            area += float(km2.sum())
    return total, area


def _grid_of(dataset: Any) -> Grid:
    transform = dataset.transform
    return Grid(
        crs=dataset.crs.to_wkt(),
        left=transform.c,
        top=transform.f,
        dx=transform.a,
        dy=-transform.e,
        n_rows=dataset.height,
        n_cols=dataset.width,
    )


def _check_record(found: Verification, record: Mapping[str, Any], regions: Table) -> None:
    every = regions.by_region["all"]
    for name in ("consumption_t_per_yr", "drawdown_t_per_yr", "valid_area_km2"):
        found.compare(f"run.json, {name}", record["result"][name], every[name], TABLE_TOLERANCE)
    found.checked.append("totals of run.json = table 'all'")


def _check_geopackage(found: Verification, regions: Table) -> None:
    path = found.folder / "regions.gpkg"
    if not path.exists():
        return
    columns = [name for name in regions.columns if name in _ADDED]
    rows = [row for row in regions.records() if row["region"] not in ("outside", "all")]
    try:
        stored = list(_stored(path, columns))
    except sqlite3.Error as cause:
        found.differs.append(f"regions.gpkg cannot be read: {cause}")
        return
    if len(stored) != len(rows):
        found.differs.append(f"regions.gpkg: {len(stored)} regions against {len(rows)}")
        return
    for row, values in zip(rows, stored, strict=True):
        for column, value in zip(columns, values, strict=True):
            what = f"regions.gpkg, {row['region']!r}, {column}"
            found.compare(what, float(value), row[column], TABLE_TOLERANCE)
    found.checked.append(f"regions.gpkg = table, {len(rows)} regions")


def _stored(path: Path, columns: list[str]) -> Iterator[tuple[Any, ...]]:
    names = ", ".join(f'"{name}"' for name in columns)  # names of our own columns, none a user's
    with closing(sqlite3.connect(f"file:{path}?mode=ro&immutable=1", uri=True)) as database:
        yield from database.execute(f"SELECT {names} FROM regions ORDER BY fid")  # noqa: S608
