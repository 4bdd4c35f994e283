"""The run folder as an RO-Crate 1.1: metadata that repositories read."""

from __future__ import annotations

import datetime as dt
import mimetypes
import os
from pathlib import Path
from typing import Any

from mapper.exports.contents import Contents
from mapper.exports.display import geographic_bounds
from mapper.exports.files import write_json
from mapper.exports.pictures import source_line
from mapper.exports.words import clean

CRATE_NAME = "ro-crate-metadata.json"
_CONTEXT = "https://w3id.org/ro/crate/1.1/context"  # names the vocabulary; nothing is fetched
_PROFILE = "https://w3id.org/ro/crate/1.1"

_KINDS = {
    ".tif": "image/tiff; application=geotiff; profile=cloud-optimized",
    ".gpkg": "application/geopackage+sqlite3",
    ".parquet": "application/vnd.apache.parquet",
    ".sld": "application/vnd.ogc.sld+xml",
    ".nc": "application/x-netcdf",
    ".xlsx": "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet",
}
_WORDS = {
    "maps/consumption.tif": "CO2 taken up by rock weathering, short term, t CO2 km-2 yr-1",
    "maps/drawdown.tif": "CO2 drawn down by rock weathering, long term, t CO2 km-2 yr-1",
    "maps/flags.tif": "what to know about each cell, as bits",
    "tables/regions.csv": "totals by region",
    "tables/regions_by_rock.csv": "totals by region and rock",
    "tables/ranking.csv": "ranks of the regions",
    "tables/tables.xlsx": "all tables in one workbook, with units and sources",
    "regions.gpkg": "regions with their totals",
    "report.html": "the report, to be opened in a browser without a network",
    "run.json": "the record of the run",
}


def output_files(folder: Path) -> list[Path]:
    """Every finished file of a run folder, hidden ones left out, in the order of their names."""
    found = (path for path in folder.rglob("*") if path.is_file())
    shown = [
        path
        for path in found
        if not any(part.startswith(".") for part in path.relative_to(folder).parts)
    ]
    return sorted(shown, key=lambda path: path.relative_to(folder).as_posix())


def write_crate(contents: Contents) -> None:
    """Write ``ro-crate-metadata.json``: the folder, its files, inputs, software and place."""
    folder = contents.folder
    names = {path.relative_to(folder).as_posix() for path in output_files(folder)}
    names = (names | {"run.json"}) - {CRATE_NAME}
    files = [_file(folder, name) for name in sorted(names)]
    inputs = [_input(at, one) for at, one in enumerate(contents.record["inputs"])]
    graph = [
        {
            "@id": CRATE_NAME,
            "@type": "CreativeWork",
            "conformsTo": {"@id": _PROFILE},
            "about": {"@id": "./"},
        },
        _root(contents, files, inputs),
        *files,
        *inputs,
        *_activity(contents, files, inputs),
        _place(contents),
    ]
    write_json(folder / CRATE_NAME, {"@context": _CONTEXT, "@graph": graph})


def _refs(entities: list[dict[str, Any]]) -> list[dict[str, str]]:
    return [{"@id": one["@id"]} for one in entities]


def _root(
    contents: Contents, files: list[dict[str, Any]], inputs: list[dict[str, Any]]
) -> dict[str, Any]:
    return {
        "@id": "./",
        "@type": "Dataset",
        "name": clean(contents.title),
        "description": source_line(contents) + " " + " ".join(contents.record["cautions"]),
        "datePublished": _today(),
        "license": "not stated by the run; the terms of the inputs decide",
        "hasPart": _refs(files),
        "isBasedOn": _refs(inputs),
        "mentions": {"@id": "#run"},
        "spatialCoverage": {"@id": "#place"},
    }


def _today() -> str:
    """The date of the run, or that of SOURCE_DATE_EPOCH where builds must repeat."""
    epoch = os.environ.get("SOURCE_DATE_EPOCH", "")
    if epoch.isdigit():
        return dt.datetime.fromtimestamp(int(epoch), dt.UTC).date().isoformat()
    return dt.datetime.now(dt.UTC).date().isoformat()


def _file(folder: Path, name: str) -> dict[str, Any]:
    path = folder / name
    kind = _KINDS.get(path.suffix) or mimetypes.guess_type(name)[0] or "application/octet-stream"
    entity: dict[str, Any] = {
        "@id": name,
        "@type": "File",
        "name": _WORDS.get(name, name),
        "encodingFormat": kind,
    }
    if name != "run.json" and path.exists():
        entity["contentSize"] = str(path.stat().st_size)
    return entity


def _input(at: int, one: dict[str, Any]) -> dict[str, Any]:
    return {
        "@id": f"#input-{at + 1}",
        "@type": "CreativeWork",
        "name": clean(one["name"]),
        "description": "an input of the run, not part of this folder",
        "identifier": f"sha256:{one['sha256']}",
        "size": f"{one['bytes']} bytes",
    }


def _activity(
    contents: Contents, files: list[dict[str, Any]], inputs: list[dict[str, Any]]
) -> list[dict[str, Any]]:
    software = {
        "@id": "#saprolite",
        "@type": "SoftwareApplication",
        "name": "saprolite",
        "version": contents.record["versions"]["saprolite"],
    }
    action = {
        "@id": "#run",
        "@type": "CreateAction",
        "name": clean(contents.title),
        "instrument": {"@id": "#saprolite"},
        "object": _refs(inputs),
        "result": _refs(files),
    }
    return [software, action]


def _place(contents: Contents) -> dict[str, Any]:
    west, south, east, north = geographic_bounds(contents.plan.grid)
    return {
        "@id": "#place",
        "@type": "Place",
        "name": "extent of the maps",
        "description": f"{west:.5g} to {east:.5g} degrees east, {south:.5g} to {north:.5g} north",
    }
