"""The record of a run: with it somebody else can get the same numbers."""

from __future__ import annotations

import hashlib
import importlib.metadata
import json
import math
import platform
from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any

from mapper.accounting import DAYS_PER_YEAR, MOLAR_MASS
from mapper.engine import Plan
from mapper.exports.alternatives import describe_alternatives
from mapper.exports.classes import describe_classes
from mapper.exports.contents import RunResult
from mapper.exports.doubts import describe_spread
from mapper.grid import Window, parse_crs
from mapper.job import Job
from mapper.layers.layer import QUANTITY, Layer
from mapper.ranking import CLEARLY_AHEAD
from mapper.scheme import RockLaw
from mapper.units import INNER_UNIT

_LIBRARIES = ("numpy", "scipy", "xarray", "rioxarray", "rasterio", "pyproj", "shapely", "dask")

CAUTIONS = (
    "Screening estimates from published rate laws and gridded inputs; not verified removal.",
    "Consumption is short term; drawdown is long term. The two must not be mixed or added.",
    "Local rules and qualified judgement decide what a number may be used for.",
)

_CHUNK = 2**22


def file_hash(path: str) -> str:
    """SHA-256 of a file's bytes, or of all files of a folder."""
    digest = hashlib.sha256()
    for file in _files_of(path):
        if file != Path(path):  # a store of many files: their names count too
            digest.update(str(file.relative_to(path)).encode())
        with file.open("rb") as stream:
            while chunk := stream.read(_CHUNK):
                digest.update(chunk)
    return digest.hexdigest()


def _files_of(path: str) -> list[Path]:
    root = Path(path)
    return sorted(one for one in root.rglob("*") if one.is_file()) if root.is_dir() else [root]


def input_files(job: Job) -> list[str]:
    """Every file that a job reads, once, in the order of the job."""
    paths = [
        path
        for spec in job.layers.values()
        for path in (*(spec.paths or (spec.path,)), spec.legend, spec.table)
        if path
    ]
    paths += [path for spec in job.classes.values() for path in (spec.path, spec.legend) if path]
    if job.regions is not None:
        paths.append(job.regions.path)
    return list(dict.fromkeys(paths))


def describe_inputs(job: Job) -> list[dict[str, Any]]:
    """Name, size and hash of every input."""
    return [
        {
            "name": Path(path).name,
            "bytes": sum(one.stat().st_size for one in _files_of(path)),
            "sha256": file_hash(path),
        }
        for path in input_files(job)
    ]


def describe_job(job: Job) -> dict[str, Any]:
    """The job as resolved, paths reduced to names so that the record travels."""
    described = asdict(job)
    described["path"] = Path(job.path).name
    described["folder"] = Path(job.folder).name
    for spec in described["layers"].values():
        for key in ("path", "legend", "table"):
            spec[key] = Path(spec[key]).name if spec[key] else None
        spec["paths"] = [Path(one).name for one in spec["paths"]]
    for spec in described["classes"].values():
        for key in ("path", "legend"):
            spec[key] = Path(spec[key]).name if spec[key] else None
    if described["regions"]:
        described["regions"]["path"] = Path(described["regions"]["path"]).name
    return described


def describe_plan(plan: Plan) -> dict[str, Any]:
    """Grid, layers and laws as they were used."""
    grid = plan.grid
    lithology = plan.lithology
    return {
        "grid": {
            "crs": parse_crs(grid.crs).to_string()[:200],
            "crs_name": parse_crs(grid.crs).name,
            "transform": list(grid.transform),
            "rows": grid.n_rows,
            "columns": grid.n_cols,
        },
        "layers": {
            "lithology": {"how": "polygons" if lithology.polygons else lithology.how},
            **{name: _describe_layer(layer) for name, layer in plan.layers.items()},
        },
        "notes": list(plan.notes),
        "water_method": plan.water_method if "runoff" not in plan.layers else "runoff given",
        "laws": {rock: _describe_law(one, rock) for rock, one in plan.scheme.by_rock.items()},
        "alternatives": [
            {
                "law": other.name,
                "weight": other.weight,
                "rocks_left_to_the_default": list(other.kept),
                "in_place_of_the_default": {
                    rock: _describe_law(one, rock) for rock, one in other.replaced.items()
                },
            }
            for other in plan.scheme.alternatives
        ],
        "classes": {one.spec.name: describe_classes(one) for one in plan.classes},
        "regions": None
        if plan.regions is None
        else {"count": len(plan.regions.names), "notes": list(plan.regions.notes)},
    }


def _describe_layer(layer: Layer) -> dict[str, Any]:
    return {
        "how": layer.how,
        "unit_read_as": layer.conversion.unit,
        "unit_from": "job" if layer.spec.units else "file",
        "inner_unit": INNER_UNIT[QUANTITY[layer.name]],
        "scale": layer.source.scale,
        "offset": layer.source.offset,
        "nodata": [repr(one) for one in layer.source.nodata],
        "notes": list(layer.source.notes),
    }


def _describe_law(one: RockLaw, rock: str) -> dict[str, Any]:
    """A rock's law; "modified" says that it is not as published, "changed" what is not."""
    return {
        "law": one.law.name,
        "formula": one.law.formula,
        "reference": one.law.reference,
        "modified": bool(one.changed),
        "changed": list(one.changed),
        "parameters": {
            parameter.name: {
                "value": one.values[parameter.name],
                "published": parameter.value(rock),
                "unit": parameter.unit,
                "source": parameter.source,
                "grade": parameter.grade,
            }
            for parameter in one.law.parameters
        },
    }


def versions() -> dict[str, str]:
    """Versions of this tool, of Python and of the libraries that numbers pass through."""
    found = {
        "saprolite": importlib.metadata.version("saprolite"),
        "python": platform.python_version(),
    }
    return found | {name: importlib.metadata.version(name) for name in _LIBRARIES}


def constants() -> Mapping[str, Any]:
    """Constants that every number rests on."""
    return {"days_per_year": DAYS_PER_YEAR, "molar_mass_g_per_mol": dict(MOLAR_MASS)}


def fingerprint(job: Job, windows: list[Window]) -> dict[str, Any]:
    """What must be the same for finished blocks to be used again, key by key of the job."""
    described = {key: one for key, one in describe_job(job).items() if key not in _NO_NUMBERS}
    files = {
        f"the file {Path(path).name} ({at})": [
            Path(path).stat().st_size, Path(path).stat().st_mtime_ns
        ]
        for at, path in enumerate(input_files(job), start=1)
    }  # fmt: skip
    return {
        **_flat(described),
        **{f"version of {name}": one for name, one in versions().items()},
        "blocks": [len(windows), *windows[0].shape],
        **files,
    }


_NO_NUMBERS = ("title", "path", "folder")
"""Keys of a job that change no number."""


def _flat(described: Mapping[str, Any], before: str = "") -> dict[str, str]:
    """Nested keys as one dotted key each."""
    found: dict[str, str] = {}
    for key, value in described.items():
        name = f"{before}{key}"
        if isinstance(value, Mapping) and value:
            found |= _flat(value, f"{name}.")
        else:
            found[name] = json.dumps(value, default=str)
    return found


def describe_run(job: Job, plan: Plan, result: RunResult) -> dict[str, Any]:
    """The record of a run but for what is known only at its end."""
    found = result.totals
    return {
        "title": job.title,
        "cautions": list(CAUTIONS),
        "result": {
            "consumption_t_per_yr": float(found.consumption.sum()),
            "drawdown_t_per_yr": float(found.drawdown.sum()),
            "valid_area_km2": float(found.valid_area.sum()),
            "area_under_flag_km2": found.flagged,
            "water_balance": dict(found.water),
            "between_laws": describe_alternatives(result.laws),
        },
        "checks": dict(result.checks),
        **_describe_doubts(job, result),
        "job": describe_job(job),
        **describe_plan(plan),
        "inputs": describe_inputs(job),
        "versions": versions(),
        "constants": constants(),
    }


def _describe_doubts(job: Job, result: RunResult) -> dict[str, Any]:
    """What the record says of draws and ranking, where the job asks for them."""
    described: dict[str, Any] = {}
    if job.uncertainty is not None and result.spread is not None:
        described["uncertainty"] = describe_spread(job.uncertainty, result.spread)
    if result.ranking is not None:
        described["ranking"] = {
            "left_out": dict(result.ranking.left_out),
            "told_apart_from": CLEARLY_AHEAD,
        }
    return described


def plain(value: Any) -> Any:
    """Turn what JSON does not know into what it does."""
    if isinstance(value, Mapping):
        return {str(key): plain(one) for key, one in value.items()}
    if isinstance(value, list | tuple):
        return [plain(one) for one in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
