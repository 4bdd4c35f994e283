"""Several jobs by one command."""

import csv
import shutil

import pytest

from tests.making import small_job
from tests.runs.worlds import quiet_main


def rows_of(path):
    with path.open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


@pytest.fixture
def jobs(tmp_path):
    """Two jobs on the same layers, one of which draws."""
    one = small_job(tmp_path, title="One", output={"write": [], "folder": "out/one"})
    first = one.rename(tmp_path / "first.toml")
    two = small_job(
        tmp_path, title="=Two", output={"write": [], "folder": "out/two"},
        uncertainty={"draws": 20},
    )  # fmt: skip
    return first, two.rename(tmp_path / "second.toml")


def test_two_jobs_leave_a_folder_each_and_one_table(jobs, tmp_path):
    code, said, errors = quiet_main("run", *jobs, "--out", tmp_path / "both")
    assert code == 0, errors
    assert f"{tmp_path / 'both' / 'combined.csv'}: the regions of 2 jobs" in said
    found = rows_of(tmp_path / "both" / "combined.csv")
    own = [
        (name, title, row)
        for name, title in (("first", "One"), ("second", "'=Two"))
        for row in rows_of(tmp_path / "both" / name / "tables" / "regions.csv")
    ]
    assert len(found) == len(own) == 8
    for row, (name, title, alone) in zip(found, own, strict=True):
        assert (row["job"], row["title"]) == (name, title)
        assert {key: row[key] for key in alone} == alone
    assert found[0]["drawdown_t_per_yr_p50"] == ""
    assert float(found[-1]["drawdown_t_per_yr_p50"]) > 0


def test_jobs_write_to_their_own_folders_and_the_table_where_it_is_asked_for(jobs, tmp_path):
    code, _, errors = quiet_main("run", *jobs, "--table", tmp_path / "t" / "all.csv")
    assert code == 0, errors
    assert len(rows_of(tmp_path / "t" / "all.csv")) == 8
    assert (tmp_path / "out" / "one" / "run.json").exists()
    assert (tmp_path / "out" / "two" / "run.json").exists()


def test_problems_of_all_jobs_are_told_before_the_first_runs(jobs, tmp_path):
    for path in jobs[1:]:
        path.write_text(path.read_text().replace("draws", "drows"))
    code, _, errors = quiet_main("run", *jobs, tmp_path / "no.toml", "--out", tmp_path / "both")
    assert code == 2
    assert "drows" in errors
    assert "there is no job file 'no.toml'" in errors
    assert not (tmp_path / "both").exists()


def test_two_jobs_for_one_folder_are_refused(jobs):
    code, _, errors = quiet_main("run", jobs[0], jobs[0])
    assert code == 2
    assert "write to the same folder" in errors


def test_jobs_of_one_name_in_two_folders_are_told_apart_by_their_folders(jobs, tmp_path):
    paths = []
    for name in ("dry", "wet"):
        (tmp_path / name).mkdir()
        path = tmp_path / name / "job.toml"
        text = jobs[0].read_text()
        for file in ("rock.tif", "runoff.tif", "legend.csv", "regions.gpkg"):
            shutil.copy(tmp_path / file, tmp_path / name / file)
        path.write_text(text)
        paths.append(path)
    code, _, errors = quiet_main("run", *paths, "--out", tmp_path / "both")
    assert code == 0, errors
    names = {row["job"] for row in rows_of(tmp_path / "both" / "combined.csv")}
    assert names == {"dry-job", "wet-job"}


def test_a_job_that_fails_on_the_way_does_not_keep_the_others_from_running(jobs, tmp_path):
    (tmp_path / "both").mkdir()
    (tmp_path / "both" / "first").write_text("a file in the way")
    code, _, errors = quiet_main("run", *jobs, "--out", tmp_path / "both")
    assert code == 2
    assert "the run folder cannot be written" in errors
    assert (tmp_path / "both" / "second" / "run.json").exists()
    assert not (tmp_path / "both" / "combined.csv").exists()
