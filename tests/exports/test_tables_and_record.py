"""Workbook, Parquet, NetCDF and RO-Crate, read by what nobody here wrote."""

from __future__ import annotations

import hashlib
import json
import math
import warnings
from pathlib import Path
from typing import Any

import numpy as np
import openpyxl
import pytest
import rasterio

from mapper.exports.contents import read_table

FORMULA = ("=", "+", "-", "@")


def test_every_table_is_a_sheet_with_the_same_numbers(island_run: Path) -> None:
    book = openpyxl.load_workbook(island_run / "tables" / "tables.xlsx")
    for path in (island_run / "tables").glob("*.csv"):
        table = read_table(path)
        rows = list(book[path.stem].values)
        assert rows[0] == table.columns
        assert len(rows) == len(table.rows) + 1
        for wanted, found in zip(table.rows, rows[1:], strict=True):
            for one, other in zip(wanted, found, strict=True):
                same = other is None if one != one else one == pytest.approx(other)  # noqa: PLR0124
                assert same
    assert {"units", "sources", "cautions"} <= set(book.sheetnames)


def test_no_cell_of_the_workbook_is_a_formula(unkind_run: Path) -> None:
    book = openpyxl.load_workbook(unkind_run / "tables" / "tables.xlsx")
    cells = [cell for sheet in book for row in sheet.iter_rows() for cell in row]
    assert all(cell.data_type != "f" for cell in cells)
    texts = [cell.value for cell in cells if isinstance(cell.value, str)]
    assert not [text for text in texts if text.startswith(FORMULA)]
    assert "'=1+1" in texts


def test_two_workbooks_of_the_same_numbers_have_the_same_bytes(
    unkind_run: Path, tmp_path: Path
) -> None:
    from dataclasses import replace

    from mapper.job import load_job
    from mapper.pipeline import run

    title = json.loads((unkind_run / "run.json").read_text())["title"]
    job = replace(load_job(unkind_run.parent / "job.toml"), title=title)
    run(job, out=tmp_path / "again")
    for one in json.loads((unkind_run / "run.json").read_text())["files"]:
        assert (tmp_path / "again" / one["name"]).read_bytes() == (
            unkind_run / one["name"]
        ).read_bytes(), one["name"]


def test_parquet_holds_the_numbers_of_the_table(island_run: Path) -> None:
    from pyarrow import parquet

    table = read_table(island_run / "tables" / "regions_by_rock.csv")
    stored = parquet.read_table(island_run / "tables" / "regions_by_rock.parquet").to_pydict()
    assert tuple(stored) == table.columns
    assert stored["region"] == table.column("region")
    wanted = [None if math.isnan(one) else one for one in table.column("drawdown_t_per_km2_yr")]
    assert stored["drawdown_t_per_km2_yr"] == wanted


def test_unkind_names_come_through_parquet_unchanged(unkind_run: Path, names: tuple[str]) -> None:
    from pyarrow import parquet

    stored = parquet.read_table(unkind_run / "tables" / "regions.parquet").to_pydict()
    assert tuple(stored["region"]) == (*names, "outside", "all")


def test_netcdf_holds_the_maps_and_passes_a_cf_checker(island_run: Path, tmp_path: Path) -> None:
    import h5netcdf

    path = island_run / "maps" / "maps.nc"
    with h5netcdf.File(path) as file:
        for name in ("consumption", "drawdown", "flags"):
            with rasterio.open(island_run / "maps" / f"{name}.tif") as dataset:
                np.testing.assert_array_equal(file[name][:], dataset.read(1))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # the checker's own libraries warn
        from compliance_checker.runner import CheckSuite, ComplianceChecker

        CheckSuite.load_all_available_checkers()
        passed, errors = ComplianceChecker.run_checker(
            str(path),
            ["cf:1.8"],
            verbose=0,
            criteria="strict",
            output_filename=str(tmp_path / "cf.txt"),
            output_format="text",
        )
    assert passed, (tmp_path / "cf.txt").read_text()
    assert not errors


def test_the_record_lists_every_file_with_its_hash(island_run: Path) -> None:
    record = json.loads((island_run / "run.json").read_text(encoding="utf-8"))
    listed = {one["name"]: one for one in record["files"]}
    present = {
        path.relative_to(island_run).as_posix() for path in island_run.rglob("*") if path.is_file()
    }
    assert set(listed) == present - {"run.json"}
    for name, one in listed.items():
        content = (island_run / name).read_bytes()
        assert one["bytes"] == len(content)
        assert one["sha256"] == hashlib.sha256(content).hexdigest()


def test_the_crate_is_read_by_an_independent_reader(unkind_run: Path) -> None:
    from rocrate.rocrate import ROCrate

    crate = ROCrate(unkind_run)
    present = {
        path.relative_to(unkind_run).as_posix() for path in unkind_run.rglob("*") if path.is_file()
    }
    assert {one.id for one in crate.data_entities} == present - {"ro-crate-metadata.json"}
    assert crate.root_dataset["datePublished"]
    assert crate.license
    action = crate.get("#run")
    assert action is not None
    assert action["instrument"].id == "#saprolite"


def test_the_crate_refers_only_to_what_it_holds(island_run: Path) -> None:
    graph = json.loads((island_run / "ro-crate-metadata.json").read_text())["@graph"]
    ids = [one["@id"] for one in graph]
    assert len(ids) == len(set(ids))
    outside = {"https://w3id.org/ro/crate/1.1"}
    assert {one for entity in graph for one in _references(entity)} - set(ids) <= outside


def _references(value: Any, *, top: bool = True) -> list[str]:
    if isinstance(value, dict):
        own = [value["@id"]] if not top and set(value) == {"@id"} else []
        return own + [one for part in value.values() for one in _references(part, top=False)]
    if isinstance(value, list):
        return [one for part in value for one in _references(part, top=False)]
    return []
