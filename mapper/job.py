"""The job file: one TOML that names the layers, the law, the regions and what to write."""

from __future__ import annotations

import math
import os
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from mapper.classing import ClassesSpec, classes_specs
from mapper.doubts import (
    RankingSpec,
    UncertaintySpec,
    ranking_spec,
    uncertainty_spec,
)
from mapper.errors import JobError, Problems
from mapper.lawspec import LawSpec, law_spec
from mapper.table import Table as _Table
from mapper.table import read_toml

LAYER_NAMES = (
    "lithology",
    "temperature",
    "runoff",
    "precipitation",
    "vegetation",
    "erosion",
    "soil_shielding",
    "evapotranspiration",
    "potential_evapotranspiration",
    "soil_co2",
    "reference_consumption",
    "elevation",
    "coarse_elevation",
)


VEGETATION_KINDS = ("cover", "ndvi", "ndvi-squared", "class")


RUNOFF_METHODS = (
    "turc-1954",
    "turc-pike",
    "budyko-1974",
    "fu-1981",
    "oldekop",
    "schreiber",
    "zhang-2001",
)


POTENTIAL_METHODS = ("oudin-2005", "hamon-1963", "thornthwaite-1948")


TIME_MEANS = ("climate", "rates")


REGISTRATIONS = ("cell", "node")


DOWNSCALING = ("none", "lapse-rate")


RESAMPLING = ("auto", "nearest", "bilinear", "mean")


WRITTEN = ("styles", "pictures", "regions", "parquet", "workbook", "page", "crate")


ALSO = ("netcdf", "geoparquet")


@dataclass(frozen=True, kw_only=True)
class LayerSpec:
    """One ``[layers.NAME]`` table, paths made absolute."""

    name: str
    path: str
    variable: str | None = None
    units: str | None = None
    crs: str | None = None
    legend: str | None = None
    column: str | None = None
    sheet: str | None = None
    unknown: str = "error"
    kind: str = "cover"
    bare: float = 0.05
    dense: float = 0.86
    scale: float | None = None
    offset: float | None = None
    nodata: tuple[float, ...] = ()
    resampling: str = "auto"
    registration: str | None = None
    paths: tuple[str, ...] = ()
    years: tuple[int, int] | None = None
    table: str | None = None
    downscale: str = "none"
    lapse_rate: float | None = None

    @property
    def where(self) -> str:
        """How an error names this layer."""
        return f"layers.{self.name}, {self.path}"


@dataclass(frozen=True, kw_only=True)
class GridSpec:
    """The ``[grid]`` table: a layer to take the grid from, or a CRS, resolution and bounds."""

    take_from: str | None = None
    crs: str | None = None
    resolution: tuple[float, float] | None = None
    bounds: tuple[float, float, float, float] | None = None


@dataclass(frozen=True, kw_only=True)
class RegionsSpec:
    """The ``[regions]`` table."""

    path: str
    id: str
    layer: str | None = None
    crs: str | None = None


@dataclass(frozen=True, kw_only=True)
class WaterSpec:
    """The ``[water]`` table: how runoff is derived, and potential evapotranspiration before it."""

    method: str = "turc-1954"
    potential: str | None = None


@dataclass(frozen=True, kw_only=True)
class Job:
    """A job file as read: nothing opened yet, every path absolute."""

    path: str
    title: str
    grid: GridSpec
    layers: Mapping[str, LayerSpec]
    water: WaterSpec
    law: LawSpec
    regions: RegionsSpec | None
    folder: str
    uncertainty: UncertaintySpec | None = None
    ranking: RankingSpec | None = None
    write: tuple[str, ...] = WRITTEN
    time_mean: str = "climate"
    classes: Mapping[str, ClassesSpec] = field(default_factory=dict)

    @property
    def water_method(self) -> str:
        """The name of the method that derives runoff."""
        return self.water.method


def load_job(path: str | Path) -> Job:
    """Read a job file.

    Parameters
    ----------
    path : the TOML file; relative paths in it are relative to its folder, and ``${NAME}`` in a
        path stands for an environment variable.

    Raises
    ------
    MissingFileError, JobError, or ManyProblemsError with every problem that the file itself has.
    """
    job, problems = read_job(path)
    problems.raise_if_any()
    if job is None:  # pragma: no cover - then there was a problem
        raise AssertionError
    return job


def read_job(path: str | Path) -> tuple[Job | None, Problems]:
    """Read a job file with its problems, so that more can be gathered before they are raised.

    Returns
    -------
    The job, wrong values replaced by defaults, or None where so much is missing that nothing
    more can be looked at; and the problems.

    Raises
    ------
    MissingFileError, JobError where the file cannot be read at all.
    """
    path = Path(path).absolute()
    table = read_toml(path)
    problems = Problems()
    root = _Table(table, where=str(path), problems=problems)
    folder = path.parent
    job = Job(
        path=str(path),
        title=root.text("title", default=path.stem),
        grid=_grid_spec(root.table("grid")),
        layers=_layer_specs(root.table("layers"), folder),
        water=_water_spec(root.table("water")),
        time_mean=root.table("time").choice("mean", TIME_MEANS, default="climate"),
        law=law_spec(root.table("law")),
        classes=classes_specs(
            root.table("classes"), lambda text, table: _absolute(text, folder, table)
        ),
        regions=_regions_spec(root.table("regions"), folder) if "regions" in table else None,
        uncertainty=uncertainty_spec(root.table("uncertainty")) if "uncertainty" in table else None,
        ranking=ranking_spec(root.table("ranking")) if "ranking" in table else None,
        **_output(root.table("output"), folder, path.stem),
    )
    root.known.extend(["regions", "uncertainty", "ranking"])
    root.finish()
    paths = [one.path for one in job.layers.values()]
    paths += [one.path for one in job.classes.values()]
    paths += [job.regions.path, job.regions.id] if job.regions is not None else []
    lithology = job.layers.get("lithology")
    enough = all(paths) and lithology is not None and bool(lithology.legend)
    return (job if enough else None), problems


def _absolute(text: str, folder: Path, table: _Table) -> str:
    def expand(match: re.Match[str]) -> str:
        name = match[1]
        if name not in os.environ:
            table.problems.add(
                JobError(
                    f"path {text!r} names the variable {name}, which is not set",
                    where=f"{table.where}, path",
                    fix=f"export {name}=FOLDER before the run, or write the path out",
                )
            )
        return os.environ.get(name, "")

    return str((folder / re.sub(r"\$\{(\w+)\}", expand, text)).resolve()) if text else ""


def _grid_spec(table: _Table) -> GridSpec:
    take_from = table.optional_text("from")
    crs = table.optional_text("crs")
    resolution = table.numbers("resolution", None, "0.1")
    bounds = table.numbers("bounds", 4, "[left, bottom, right, top]")
    if resolution is not None and not _is_resolution(resolution):
        table.wrong("resolution", "one or two positive numbers", "resolution = 0.1")
        resolution = None
    if bounds is not None and not all(math.isfinite(one) for one in bounds):
        table.wrong("bounds", "four finite numbers", "bounds = [-10, 40, 5, 50]")
        bounds = None
    if bounds is not None and not (bounds[0] < bounds[2] and bounds[1] < bounds[3]):
        table.wrong("bounds", "left < right and bottom < top", "bounds = [-10, 40, 5, 50]")
        bounds = None
    return GridSpec(
        take_from=take_from,
        crs=crs,
        resolution=None if resolution is None else (resolution[0], resolution[-1]),
        bounds=None if bounds is None else (bounds[0], bounds[1], bounds[2], bounds[3]),
    )


def _is_resolution(numbers: tuple[float, ...]) -> bool:
    good = all(math.isfinite(one) and one > 0 for one in numbers)
    return good and len(numbers) in (1, 2)


def _layer_specs(table: _Table, folder: Path) -> dict[str, LayerSpec]:
    specs = {
        name: _layer_spec(name, table.table(name), folder)
        for name in LAYER_NAMES
        if name in table.values
    }
    table.known.extend(LAYER_NAMES)
    if "lithology" not in specs:
        table.wrong(
            "lithology",
            "the job has no lithology layer",
            '[layers.lithology] with path = "rocks.tif" and legend = "legend.csv"',
        )
    return specs


def _layer_spec(name: str, table: _Table, folder: Path) -> LayerSpec:
    lithology = name == "lithology"
    paths = _paths(table, folder)
    common: dict[str, Any] = {
        "name": name,
        "path": paths[0],
        "paths": paths,
        "variable": table.optional_text("variable"),
        "sheet": table.optional_text("layer"),
        "crs": table.optional_text("crs"),
        "nodata": table.numbers("nodata", None, "-9999") or (),
        "registration": _registration(table),
    }
    if lithology:
        legend = table.needed_text("legend", '"legend.csv"')
        return LayerSpec(
            **common,
            legend=_absolute(legend, folder, table),
            column=table.optional_text("column"),
            unknown=table.choice("unknown", ("error", "nodata"), default="error"),
        )
    own: dict[str, Any] = {}
    if name == "vegetation":
        own["kind"] = table.choice("kind", VEGETATION_KINDS, default="cover")
        if own["kind"] == "class":
            text = table.needed_text("table", '"landcover.csv", with columns class,cover')
            own["table"] = _absolute(text, folder, table)
        for key, default in (("bare", 0.05), ("dense", 0.86)):
            value = table.number(key)
            own[key] = default if value is None else value
        if own["bare"] >= own["dense"]:
            table.wrong("bare", "bare below dense", "bare = 0.05 and dense = 0.86")
    if name == "temperature":
        own["downscale"] = table.choice("downscale", DOWNSCALING, default="none")
        own["lapse_rate"] = table.number("lapse_rate")
    return LayerSpec(
        **common,
        **own,
        units=table.optional_text("units"),
        years=_years(table),
        scale=table.number("scale"),
        offset=table.number("offset"),
        resampling=table.choice("resampling", RESAMPLING, default="auto"),
    )


def _paths(table: _Table, folder: Path) -> tuple[str, ...]:
    """One path, several in a list, or a pattern with ``*`` for files side by side."""
    value = table.values.get("path")
    if not isinstance(value, list):
        text = table.needed_text("path", '"file.tif"')
        path = _absolute(text, folder, table)
        if "*" not in text:
            return (path,)
        found = sorted(str(one) for one in Path(path).parent.glob(Path(path).name))
        if not found:
            table.wrong("path", "a pattern that some file matches", 'path = "tiles/*.tif"')
        return tuple(found) or ("",)
    table.known.append("path")
    if not value or not all(isinstance(one, str) and one.strip() for one in value):
        table.wrong("path", "a list of file names", 'path = ["west.tif", "east.tif"]')
        return ("",)
    return tuple(_absolute(one, folder, table) for one in value)


def _years(table: _Table) -> tuple[int, int] | None:
    pair = table.numbers("years", 2, "[1991, 2020]")
    if pair is None:
        return None
    if any(one != int(one) for one in pair) or pair[0] > pair[1]:
        table.wrong("years", "a first and a last year", "years = [1991, 2020]")
        return None
    return int(pair[0]), int(pair[1])


def _registration(table: _Table) -> str | None:
    if "registration" not in table.values:
        table.known.append("registration")
        return None
    return table.choice("registration", REGISTRATIONS, default="cell")


def _water_spec(table: _Table) -> WaterSpec:
    method = table.choice("method", RUNOFF_METHODS, default="turc-1954")
    if "potential" not in table.values:
        table.known.append("potential")
        return WaterSpec(method=method)
    potential = table.choice("potential", POTENTIAL_METHODS, default="oudin-2005")
    return WaterSpec(method=method, potential=potential)


def _regions_spec(table: _Table, folder: Path) -> RegionsSpec:
    path = table.needed_text("path", '"regions.gpkg"')
    return RegionsSpec(
        path=_absolute(path, folder, table),
        id=table.needed_text("id", '"name of the id column"'),
        layer=table.optional_text("layer"),
        crs=table.optional_text("crs"),
    )


def _output(table: _Table, folder: Path, stem: str) -> dict[str, Any]:
    text = table.text("folder", default=f"out/{stem}")
    write = table.choices("write", WRITTEN, default=WRITTEN)
    also = table.choices("also", ALSO, default=())
    return {"folder": _absolute(text, folder, table), "write": (*write, *also)}
