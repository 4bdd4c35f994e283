"""A folder that is not what its record claims is found out."""

from __future__ import annotations

import hashlib
import json
import sqlite3
from contextlib import closing
from pathlib import Path

import pytest

from mapper.cli import main
from mapper.errors import RunFolderError
from mapper.exports.verify import verify


def _claim_anew(folder: Path, name: str) -> None:
    """Make the record agree with a file that was changed, so that only its numbers tell."""
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    content = (folder / name).read_bytes()
    for one in record["files"]:
        if one["name"] == name:
            one.update(bytes=len(content), sha256=hashlib.sha256(content).hexdigest())
    (folder / "run.json").write_text(json.dumps(record), encoding="utf-8")


def test_a_run_is_what_it_claims(island_run: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["verify", str(island_run)]) == 0
    told = capsys.readouterr().out
    assert "SHA-256 of" in told
    assert "maps/drawdown.tif x cell area = table 'all', within 1.2e-07" in told
    assert "regions + outside = all" in told


@pytest.mark.parametrize("name", ["maps/drawdown.tif", "tables/tables.xlsx", "report.html"])
def test_a_changed_byte_is_found(
    copied_run: Path, name: str, capsys: pytest.CaptureFixture[str]
) -> None:
    content = bytearray((copied_run / name).read_bytes())
    content[len(content) // 2] ^= 1
    (copied_run / name).write_bytes(bytes(content))
    assert main(["verify", str(copied_run)]) == 2
    assert f"{name}: its SHA-256 is another one" in capsys.readouterr().err


def test_a_missing_and_an_added_file_are_found(copied_run: Path) -> None:
    (copied_run / "regions.gpkg").unlink()
    (copied_run / "maps" / "other.tif").write_bytes(b"x")
    assert verify(copied_run).differs == [
        "regions.gpkg is missing",
        "maps/other.tif is not in the record",
    ]


def test_a_changed_total_is_found_though_the_record_agrees(copied_run: Path) -> None:
    path = copied_run / "tables" / "regions.csv"
    lines = path.read_text(encoding="utf-8").splitlines()
    cells = lines[-1].split(",")
    cells[4] = f"{float(cells[4]) * 1.001:.10g}"
    path.write_text("\n".join([*lines[:-1], ",".join(cells)]) + "\n", encoding="utf-8")
    _claim_anew(copied_run, "tables/regions.csv")
    found = verify(copied_run).differs
    assert any("regions and 'outside', drawdown_t_per_yr" in one for one in found)
    assert any("total of maps/drawdown.tif" in one for one in found)
    assert any("run.json, drawdown_t_per_yr" in one for one in found)


def test_a_changed_region_in_the_geopackage_is_found(copied_run: Path) -> None:
    with closing(sqlite3.connect(copied_run / "regions.gpkg")) as database:
        database.execute("DROP TRIGGER IF EXISTS rtree_regions_geom_update6")
        triggers = database.execute("SELECT name FROM sqlite_master WHERE type='trigger'")
        for (name,) in triggers.fetchall():
            database.execute(f'DROP TRIGGER "{name}"')
        database.execute("UPDATE regions SET area_km2 = area_km2 * 2 WHERE fid = 1")
        database.commit()
    _claim_anew(copied_run, "regions.gpkg")
    assert any("regions.gpkg" in one and "area_km2" in one for one in verify(copied_run).differs)


@pytest.mark.parametrize("content", ["", "{}", "[1]", '{"files": [], "result": null}'])
def test_a_folder_without_a_whole_record_is_refused(tmp_path: Path, content: str) -> None:
    (tmp_path / "run.json").write_text(content)
    with pytest.raises(RunFolderError, match="no whole record"):
        verify(tmp_path)
