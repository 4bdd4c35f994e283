import json
from dataclasses import replace

import pandas as pd
import pytest
from worlds import ISLAND

from mapper.job import load_job
from mapper.pipeline import run
from mapper.planning import make_plan


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    job = load_job(ISLAND)
    folder = tmp_path_factory.mktemp("island")
    run(replace(job, uncertainty=replace(job.uncertainty, draws=300)), out=folder)
    return folder


def test_the_record_lists_every_quantity_with_source_and_grade(folder):
    said = json.loads((folder / "run.json").read_text())["uncertainty"]
    assert (said["draws"], said["seed"]) == (300, 7)
    names = [one["name"] for one in said["quantities"]]
    for name in ("bicarbonate_at_zero", "layers.runoff", "concentration.granite"):
        assert name in names
    assert "kept_share.basalt" in names
    assert all(one["source"] and one["grade"] for one in said["quantities"])
    held = {one["name"]: one["draws_held_at_a_physical_limit"] for one in said["quantities"]}
    assert held["activation_energy"] == pytest.approx(300 * 0.04006, abs=2)  # 14 below 0 at sd 8
    assert said["within_bound"] is True
    assert any("choice of law" in one for one in said["not_drawn"])


def test_the_sensitivity_table_adds_up_to_all_of_the_variance(folder):
    table = pd.read_csv(folder / "tables/sensitivity.csv")
    assert table.share_of_drawdown_variance.sum() == pytest.approx(1.0)
    assert table.share_of_consumption_variance.sum() == pytest.approx(1.0)
    assert table.quantity.iloc[0] == "bicarbonate_at_zero"
    limestone = table[(table.quantity == "concentration") & (table.rock == "limestone")]
    assert abs(limestone.share_of_drawdown_variance.item()) < 0.01  # carbonate keeps nothing


def test_the_ranking_table_holds_every_district_in_order(folder):
    table = pd.read_csv(folder / "tables/ranking.csv")
    assert len(table) == 12
    assert table["rank"].tolist() == list(range(1, 13))
    assert table.drawdown_t_per_km2_yr.is_monotonic_decreasing
    assert table.probability_in_top_3.sum() == pytest.approx(3.0)
    for row in table.itertuples():
        assert row.rank_p05 <= row.median_rank <= row.rank_p95


def test_hot_spots_are_written_largest_first(folder):
    table = pd.read_csv(folder / "tables/hotspots.csv")
    assert table.area_km2.min() >= 5.0
    assert table.total_t_per_yr.is_monotonic_decreasing
    assert len(table) >= 2


def test_a_job_without_regions_has_intervals_and_an_empty_ranking(tmp_path):
    job = load_job(ISLAND)
    run(
        replace(job, regions=None, uncertainty=replace(job.uncertainty, draws=50)),
        out=tmp_path,
    )
    table = pd.read_csv(tmp_path / "tables/regions.csv")
    assert table.region.tolist() == ["outside", "all"]
    assert (table.drawdown_t_per_yr_p05 < table.drawdown_t_per_yr_p95).all()
    assert pd.read_csv(tmp_path / "tables/ranking.csv").empty


def test_a_grid_without_a_result_has_totals_of_zero_without_spread(tmp_path):
    job = load_job(ISLAND)
    grid = make_plan(job).grid
    left, top = grid.left + 273 * grid.dx, grid.top - 265 * grid.dy  # in the gap of the runoff
    gap = replace(job.grid, bounds=(left, top - 6 * grid.dy, left + 6 * grid.dx, top))
    draws = replace(job.uncertainty, draws=50)
    run(
        replace(job, grid=gap, regions=None, ranking=None, uncertainty=draws, write=()),
        out=tmp_path,
    )
    table = pd.read_csv(tmp_path / "tables/regions.csv")
    assert table.drawdown_t_per_yr_p95.tolist() == [0.0, 0.0]


def test_the_picture_of_what_drives_the_spread_is_listed(folder):
    listed = {one["name"] for one in json.loads((folder / "run.json").read_text())["files"]}
    assert "tables/sensitivity.png" in listed
