"""Whole runs of a job of 16 cells, through the real command."""

import csv
import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
import rasterio
import shapely
from rio_cogeo.cogeo import cog_validate

import mapper
import mapper.errors
from mapper.cli import main
from mapper.pipeline import Engine
from tests.making import (
    ROOT,
    command,
    small_job,
    write_legend,
    write_polygons,
    write_raster,
)  # fmt: skip

FILES = (
    "maps/consumption.tif", "maps/drawdown.tif", "maps/flags.tif",
    "tables/regions.csv", "tables/regions_by_rock.csv",
)  # fmt: skip
T_PER_MOL = 44.0095e-6


def table(path):
    with Path(path).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def contents(folder):
    return {name: (Path(folder) / name).read_bytes() for name in FILES}


def temporary_files(folder):
    return [one.name for one in Path(folder).rglob("*") if one.name.startswith(".")]


@pytest.fixture(scope="module")
def ran(tmp_path_factory):
    folder = tmp_path_factory.mktemp("small")
    done = command("run", small_job(folder))
    assert done.returncode == 0, done.stderr
    return folder / "out", done


def test_a_run_leaves_its_files_and_no_others(ran):
    out, _ = ran
    found = sorted(str(one.relative_to(out)) for one in out.rglob("*") if one.is_file())
    assert set(FILES) | {"run.json"} <= set(found)
    assert temporary_files(out) == []


def test_the_regions_table_holds_what_can_be_done_in_the_head(ran):
    """Each row of 4 cells: 4 km2 of granite, basalt, limestone and water at 1 m of runoff."""
    rows = table(ran[0] / "tables" / "regions.csv")
    assert [row["region"] for row in rows] == ["west", "middle", "outside", "all"]
    assert [float(row["area_km2"]) for row in rows] == pytest.approx([4, 8, 4, 16])
    moles = np.array([0.095, 0.479, 1.586]).sum() * 1e6  # a column of three rocks
    found = [float(row["consumption_t_per_yr"]) for row in rows]
    assert found == pytest.approx([moles * n * T_PER_MOL for n in (1, 2, 1, 4)], rel=1e-9)
    assert float(rows[0]["consumption_t_per_km2_yr"]) == pytest.approx(found[0] / 4, rel=1e-9)


def test_the_columns_are_those_of_the_door_in_order(ran):
    columns = [
        "area_km2", "valid_area_km2", "consumption_t_per_yr", "drawdown_t_per_yr",
        "consumption_t_per_km2_yr", "drawdown_t_per_km2_yr",
    ]  # fmt: skip
    regions = list(table(ran[0] / "tables" / "regions.csv")[0])
    by_rock = list(table(ran[0] / "tables" / "regions_by_rock.csv")[0])
    assert [one for one in regions if one in ["region", *columns]] == ["region", *columns]
    assert [one for one in by_rock if one in ["region", "rock", *columns]] == (
        ["region", "rock", *columns]
    )


def test_rock_rows_add_up_to_their_region_and_regions_to_all(ran):
    rows = table(ran[0] / "tables" / "regions_by_rock.csv")
    for column in ("area_km2", "valid_area_km2", "consumption_t_per_yr", "drawdown_t_per_yr"):
        for region in ("west", "middle", "outside", "all"):
            own = [row for row in rows if row["region"] == region]
            parts = [float(row[column]) for row in own if row["rock"] != "all"]
            assert sum(parts) == pytest.approx(float(own[-1][column]), rel=1e-9)
        ends = [float(row[column]) for row in rows if row["rock"] == "all"]
        assert sum(ends[:-1]) == pytest.approx(ends[-1], rel=1e-9)


def test_limestone_takes_up_and_keeps_nothing(ran):
    rows = table(ran[0] / "tables" / "regions_by_rock.csv")
    (row,) = [row for row in rows if (row["region"], row["rock"]) == ("west", "limestone")]
    assert float(row["consumption_t_per_yr"]) > 0
    assert float(row["drawdown_t_per_yr"]) == 0


@pytest.mark.parametrize("name", ["consumption", "drawdown", "flags"])
def test_each_map_is_a_valid_cog_that_says_what_it_holds(ran, name):
    path = ran[0] / "maps" / f"{name}.tif"
    valid, errors, warnings = cog_validate(str(path), strict=True, quiet=True)
    assert (valid, errors, warnings) == (True, [], [])
    with rasterio.open(path) as file:
        assert file.crs.to_epsg() == 6933
        assert file.transform == rasterio.Affine(1000, 0, 0, 0, -1000, 4000)
        assert file.descriptions[0]
        if name == "flags":
            assert (file.dtypes[0], file.nodata) == ("uint8", None)
        else:
            assert file.units == ("t CO2 km-2 yr-1",)
            assert file.dtypes[0] == "float32"
            assert np.isnan(file.nodata)


def test_the_map_holds_the_rate_of_each_cell(ran):
    with rasterio.open(ran[0] / "maps" / "consumption.tif") as file:
        found = file.read(1)
    expected = np.repeat([[0.095], [0.479], [1.586], [0.0]], 4, axis=1) * 44.0095
    assert found == pytest.approx(expected.astype("float32"), rel=1e-7)


def test_the_record_names_sources_checks_and_the_year(ran):
    record = json.loads((ran[0] / "run.json").read_text(encoding="utf-8"))
    assert record["constants"]["days_per_year"] == 365.25
    assert max(record["checks"].values()) <= 1e-12
    assert record["laws"]["basalt"]["law"] == "amiotte-suchet-1995"
    assert record["laws"]["basalt"]["modified"] is False
    assert str(ran[0].parent) not in json.dumps(record)


def test_piped_output_is_plain_lines(ran):
    _, done = ran
    for text in (done.stdout, done.stderr):
        assert "\r" not in text
        assert "\x1b" not in text
    assert "drawdown, long term" in done.stdout
    assert "west" in done.stdout


def test_inspect_says_what_each_layer_is_and_writes_nothing(tmp_path):
    done = command("inspect", small_job(tmp_path))
    assert done.returncode == 0, done.stderr
    assert "runoff      runoff.tif: 4 x 4 cells of 1000" in done.stdout
    assert "on the grid's own cells" in done.stdout
    assert not (tmp_path / "out").exists()


def test_the_same_job_twice_and_on_one_or_two_threads_gives_the_same_bytes(ran, tmp_path):
    out, _ = ran
    first = contents(out)
    job = mapper.load_job(out.parent / "job.toml")
    for threads in (1, 2):
        mapper.run(job, out=tmp_path / str(threads), engine=Engine(threads=threads))
        assert contents(tmp_path / str(threads)) == first


def test_every_problem_of_a_job_is_listed_at_once(tmp_path):
    layers = {
        "lithology": {"path": "rock.tif", "legend": "legend.csv"},
        "runoff": {"path": "runoff.tif", "units": "furlong"},
        "temperature": {"path": "nowhere.tif"},
        "vegetation": {"path": "cover.tif"},
    }
    job = small_job(tmp_path, titel="x", layers=layers, law={"default": "product"})
    write_legend(tmp_path / "legend.csv", "code,rock\n1,granite\n2,basalt\n4,water\n")
    write_raster(tmp_path / "cover.tif", np.full((4, 4), 0.5), crs=None, unit="1")
    write_polygons(tmp_path / "regions.gpkg", {"far": shapely.box(1e6, 1e6, 2e6, 2e6)})
    for verb in ("run", "inspect"):
        done = command(verb, job)
        assert done.returncode == 2
        for problem in (
            "unknown key 'titel'",
            "unit 'furlong' is not one that water may have",
            "there is no file 'nowhere.tif'",
            "the file does not say its CRS",
            "the legend has no line for code 3 (4 cells, ",
            "no region touches the grid",
        ):
            assert problem in done.stderr, problem
        assert done.stderr.count("where: ") == done.stderr.count("fix:   ") == 6
        assert "6. " in done.stderr
        assert "Traceback" not in done.stderr
    assert not (tmp_path / "out").exists()


def test_a_missing_job_is_the_users_input(tmp_path):
    done = command("run", tmp_path / "no.toml")
    assert done.returncode == 2
    assert "there is no job file 'no.toml'" in done.stderr


@pytest.mark.parametrize("arguments", [["fly"], ["run"], ["run", "x.toml", "--threads", "0"]])
def test_wrong_arguments_are_the_users_input(arguments):
    with pytest.raises(SystemExit) as caught:
        main(arguments)
    assert caught.value.code == 2


def test_a_folder_that_cannot_be_written_is_the_users_input(tmp_path):
    job = small_job(tmp_path)
    (tmp_path / "taken").write_text("a file, not a folder")
    done = command("run", job, "--out", tmp_path / "taken")
    assert done.returncode == 2
    assert "the run folder cannot be written" in done.stderr
    assert "--out DIR" in done.stderr
    assert (tmp_path / "taken").read_text() == "a file, not a folder"


def test_a_folder_without_the_right_to_write_is_the_users_input(tmp_path, monkeypatch):
    """The refusal of the system is played, since the superuser is never refused."""
    job = mapper.load_job(small_job(tmp_path))

    def refuse(*_args, **_kwargs):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "write_text", refuse)
    with pytest.raises(mapper.errors.RunFolderError, match="cannot be written: Permission denied"):
        mapper.run(job)


def test_a_run_that_fails_leaves_nothing_under_a_final_name(tmp_path, monkeypatch):
    job = mapper.load_job(small_job(tmp_path))

    def break_off(*_args, **_kwargs):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("mapper.exports.maps.copy_raster", break_off)
    with pytest.raises(mapper.errors.RunFolderError, match="No space left on device"):
        mapper.run(job)
    assert list((tmp_path / "out").rglob("*.tif")) == []
    assert not (tmp_path / "out" / "run.json").exists()


def test_help_loads_none_of_the_libraries():
    code = (
        "import sys, contextlib, io\n"
        "from mapper.cli import main\n"
        "with contextlib.redirect_stdout(io.StringIO()), contextlib.suppress(SystemExit):\n"
        "    main(['--help'])\n"
        "heavy = {'numpy', 'xarray', 'dask', 'rasterio', 'pandas', 'scipy', 'shapely', 'pyproj'}\n"
        "print(sorted(heavy & set(sys.modules)))\n"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True,
                          check=True)  # fmt: skip
    assert done.stdout == "[]\n"


def test_tiny_rates_close_too(tmp_path):
    job = small_job(tmp_path)
    write_raster(tmp_path / "runoff.tif", np.full((4, 4), 1e-7), unit="mm yr-1")
    write_polygons(tmp_path / "regions.gpkg", {
        str(n): shapely.box(n * 333, 0, n * 333 + 333, 4000) for n in range(12)
    })  # fmt: skip
    assert main(["run", str(job)]) == 0


def test_a_job_without_regions_is_one_outside(tmp_path):
    assert main(["run", str(small_job(tmp_path, regions=None))]) == 0
    rows = table(tmp_path / "out" / "tables" / "regions.csv")
    assert [row["region"] for row in rows] == ["outside", "all"]


SLOW = """
import sys, time
from mapper import cli, pipeline
from mapper.journal import Journal
pipeline.block_shape = lambda *_: (1, 1)
whole = Journal.save
def slowly(journal, index, arrays):
    time.sleep(PAUSE)
    whole(journal, index, arrays)
Journal.save = slowly
sys.exit(cli.main(sys.argv[1:]))
"""


def slow_run(job, pause):
    """The command with blocks of one cell, each of which takes its time."""
    code = SLOW.replace("PAUSE", str(pause))
    return subprocess.Popen(
        [sys.executable, "-c", code, "run", str(job), "--threads", "1"],
        cwd=ROOT, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip


@pytest.fixture
def killed(tmp_path):
    """A job whose run was killed when a few of its 16 blocks were done."""
    job = small_job(tmp_path)
    process = slow_run(job, 0.3)
    blocks = tmp_path / "out" / ".work" / "blocks"
    end = time.monotonic() + 60
    while time.monotonic() < end and len(list(blocks.glob("[0-9]*.npz"))) < 3:
        time.sleep(0.02)
    os.kill(process.pid, signal.SIGKILL)
    process.communicate()
    assert 3 <= len(list(blocks.glob("[0-9]*.npz"))) < 16
    return job


def test_a_killed_run_goes_on_and_ends_with_the_same_bytes(killed, ran):
    out = killed.parent / "out"
    assert not any((out / name).exists() for name in FILES)
    kept = {one: one.stat().st_mtime_ns for one in (out / ".work" / "blocks").glob("[0-9]*.npz")}
    process = slow_run(killed, 0.0)
    assert process.wait(60) == 0, process.stderr.read()
    process.communicate()
    assert contents(out) == contents(ran[0])
    assert temporary_files(out) == []
    assert kept


def test_a_changed_job_is_refused_by_what_changed_and_fresh_starts_over(killed):
    killed.write_text(killed.read_text().replace('title = "Small"', 'title = "Other"').replace(
        '"legend.csv"', '"other.csv"'))  # fmt: skip
    write_legend(killed.parent / "other.csv")
    process = slow_run(killed, 0.0)
    _, errors = process.communicate()
    assert process.returncode == 2
    assert "an unfinished run of another job" in errors
    assert "layers.lithology.legend" in errors
    assert "title" not in errors
    assert "--fresh" in errors
    assert main(["run", str(killed), "--fresh"]) == 0


def test_an_input_that_changed_is_refused_by_name(killed):
    write_raster(killed.parent / "runoff.tif", np.full((4, 4), 500.0), unit="mm yr-1")
    os.utime(killed.parent / "runoff.tif", ns=(1, 1))
    process = slow_run(killed, 0.0)
    _, errors = process.communicate()
    assert process.returncode == 2
    assert "the file runoff.tif" in errors


def test_one_run_at_a_time_in_a_folder(tmp_path):
    job = small_job(tmp_path)
    process = slow_run(job, 0.2)
    lock = tmp_path / "out" / ".lock"
    end = time.monotonic() + 60
    while not (lock.exists() and lock.read_text()) and time.monotonic() < end:
        time.sleep(0.02)
    with pytest.raises(mapper.errors.RunFolderError, match=f"another run .process {process.pid}"):
        mapper.run(mapper.load_job(job))
    process.communicate()
    assert process.returncode == 0


def test_a_lock_of_a_process_that_died_does_not_count(tmp_path):
    job = small_job(tmp_path)
    (tmp_path / "out").mkdir()
    gone = subprocess.Popen([sys.executable, "-c", ""])
    gone.wait()
    (tmp_path / "out" / ".lock").write_text(str(gone.pid))
    assert main(["run", str(job)]) == 0
