"""Runs with a supply limit, with laws of the job's own, and with several laws at once."""

from __future__ import annotations

import csv
import json
import subprocess
import sys

import geopandas as gpd
import numpy as np
import pytest
import rasterio
import shapely

import mapper
from mapper import pipeline
from mapper.cli import main
from mapper.pipeline import run

CELL = 1000.0  # in an equal-area CRS: a cell is 1 km2
N_ROWS, N_COLS = 6, 8
TONNES = 44.0095  # t CO2 km-2 yr-1 for 1 mol m-2 yr-1
MINE = """
[law.own.mine]
formula = "a * runoff"
inputs = { runoff = { unit = "mm yr-1", low = 0, high = 1250 } }
parameters = { a = { value = 0.5, unit = "mmol L-1" } }
"""


def write(path, values, **about):
    with rasterio.open(
        path, "w", driver="GTiff", width=N_COLS, height=N_ROWS, count=1, dtype=values.dtype,
        crs="EPSG:6933", transform=rasterio.Affine(CELL, 0, 0, 0, -CELL, N_ROWS * CELL), **about,
    ) as file:  # fmt: skip
        file.write(values, 1)


@pytest.fixture
def folder(tmp_path):
    """Granite left and limestone right; runoff 100 to 800 by column and one cell without data."""
    rocks = np.ones((N_ROWS, N_COLS), np.uint8)
    rocks[:, 4:] = 2
    write(tmp_path / "rocks.tif", rocks)
    runoff = np.tile(np.linspace(300, 2400, N_COLS, dtype=np.float32), (N_ROWS, 1))
    runoff[0, 0] = -9999
    runoff[5, 0] = -30
    write(tmp_path / "runoff.tif", runoff, nodata=-9999)
    (tmp_path / "legend.csv").write_text("code,rock\n1,granite\n2,limestone\n", encoding="utf-8")
    shapes = [shapely.box(500, 500, 3500, 5500), shapely.box(3500, 1000, 7250, 5000)]
    gpd.GeoDataFrame({"id": ["west", "east"]}, geometry=shapes, crs="EPSG:6933").to_file(
        tmp_path / "regions.gpkg"
    )
    return tmp_path


def job_of(folder, law, more="", name="job"):
    path = folder / f"{name}.toml"
    path.write_text(
        f"""
        [layers.lithology]
        path = "rocks.tif"
        legend = "legend.csv"
        [layers.runoff]
        path = "runoff.tif"
        units = "mm yr-1"
        [regions]
        path = "regions.gpkg"
        id = "id"
        [law]
        {law}
        {more}
        """,
        encoding="utf-8",
    )
    return mapper.load_job(path)


def table(folder, name):
    with (folder / "tables" / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def flags_of(folder):
    return {row["cause"]: float(row["area_km2"]) for row in table(folder, "flags.csv")}


def test_a_law_of_the_job_gives_what_its_formula_says(folder):
    run(job_of(folder, 'default = "mine"', MINE), out=folder / "out")
    with rasterio.open(folder / "out" / "maps" / "consumption.tif") as file:
        rates = file.read(1)
    np.testing.assert_allclose(rates[2], np.linspace(300, 2400, 8) * 0.5e-3 * TONNES, rtol=1e-6)
    record = json.loads((folder / "out" / "run.json").read_text(encoding="utf-8"))
    assert record["laws"]["granite"]["law"] == "mine"
    assert record["laws"]["granite"]["formula"] == "a * runoff"


def test_area_is_counted_once_under_each_cause(folder):
    run(job_of(folder, 'default = "mine"', MINE), out=folder / "out")
    found = flags_of(folder / "out")
    # columns at 1500, 1800, 2100 and 2400 mm lie beyond 1250; one cell is below zero, one empty
    assert found["runoff_outside"] == pytest.approx(24.0, rel=1e-3)
    assert found["outside_law_range"] == found["runoff_outside"]
    assert found["negative_runoff"] == pytest.approx(1.0, rel=1e-3)
    assert found["no_data"] == pytest.approx(1.0, rel=1e-3)
    assert found["not_finite"] == 0.0
    everything = table(folder / "out", "regions.csv")[-1]
    assert float(everything["outside_law_range_km2"]) == pytest.approx(found["runoff_outside"])
    missing = float(everything["area_km2"]) - float(everything["valid_area_km2"])
    assert found["no_data"] == pytest.approx(missing, rel=1e-9)


def test_ground_beyond_two_ranges_counts_once_in_their_sum(folder):
    write(folder / "warm.tif", np.full((N_ROWS, N_COLS), 320.0, np.float32))
    own = MINE.replace("a * runoff", "a * runoff * temperature / t0").replace(
        "inputs = {", 'inputs = { temperature = "K",'
    ).replace("parameters = {", 'parameters = { t0 = { value = 300, unit = "K" },')  # fmt: skip
    layers = '[layers.temperature]\npath = "warm.tif"\nunits = "K"'
    run(job_of(folder, 'default = "mine"', own + layers), out=folder / "out")
    found = flags_of(folder / "out")
    assert found["runoff_outside"] == pytest.approx(24.0, rel=1e-3)
    assert found["temperature_outside"] == pytest.approx(47.0, rel=1e-3)
    assert found["outside_law_range"] == pytest.approx(47.0, rel=1e-3)


def test_a_formula_without_a_finite_answer_is_counted_apart_from_no_data(folder):
    own = MINE.replace("a * runoff", "a * runoff * b / (b - b)").replace(
        "parameters = {", 'parameters = { b = { value = 1, unit = "1" },'
    )
    run(job_of(folder, 'default = "mine"', own), out=folder / "out")
    found = flags_of(folder / "out")
    assert found["not_finite"] == pytest.approx(47.0, rel=1e-3)
    assert found["no_data"] == pytest.approx(1.0, rel=1e-3)


def test_cells_at_the_supply_limit_are_flagged_counted_and_held(folder):
    law = 'default = "mine"\ncap = "dixon-von-blanckenburg-2012"'
    limits = "[law.parameters]\nweathering_limit = 50\nlimit_consumption_per_tonne = 5000\n"
    run(job_of(folder, law, MINE + limits), out=folder / "out")
    with rasterio.open(folder / "out" / "maps" / "consumption.tif") as file:
        rates = file.read(1)[2]
    with rasterio.open(folder / "out" / "maps" / "flags.tif") as file:
        capped = (file.read(1)[2] & 32) != 0
    # granite at 300, 600, 900, 1200 mm: 0.15, 0.3, 0.45, 0.6 mol, held at 50 x 5000 / 1e6 = 0.25
    np.testing.assert_allclose(rates[:4] / TONNES, [0.15, 0.25, 0.25, 0.25], rtol=1e-6)
    np.testing.assert_allclose(rates[4:] / TONNES, [0.75, 0.9, 1.05, 1.2], rtol=1e-6)
    assert capped.tolist() == [False, True, True, True, False, False, False, False]
    assert flags_of(folder / "out")["capped"] == pytest.approx(18.0, rel=1e-3)
    everything = table(folder / "out", "regions.csv")[-1]
    assert float(everything["capped_km2"]) == pytest.approx(18.0, rel=1e-3)
    record = json.loads((folder / "out" / "run.json").read_text(encoding="utf-8"))
    assert record["laws"]["granite"]["modified"] is True
    assert "supply limit" in record["laws"]["granite"]["changed"][0]
    limit = record["laws"]["granite"]["parameters"]["weathering_limit"]
    assert (limit["value"], limit["published"]) == (50.0, 150.0)
    assert record["laws"]["limestone"]["modified"] is False


SEVERAL = 'alternatives = ["maher-chamberlain-2014", { name = "mine", weight = 2.0 }]'


def test_an_alternative_gives_the_totals_of_a_run_with_it_as_default(folder):
    run(job_of(folder, f'default = "amiotte-suchet-1995"\n{SEVERAL}', MINE), out=folder / "out")
    rows = table(folder / "out", "laws.csv")
    alone = {
        "mine": 'default = "mine"',
        "amiotte-suchet-1995": 'default = "amiotte-suchet-1995"',
        "maher-chamberlain-2014": 'default = "maher-chamberlain-2014"\n'
        'by_rock = { limestone = "amiotte-suchet-1995" }',
    }
    for name, law in alone.items():
        run(job_of(folder, law, MINE, name), out=folder / name)
        for own in table(folder / name, "regions.csv"):
            (row,) = [one for one in rows if (one["law"], one["region"]) == (name, own["region"])]
            for column in ("consumption_t_per_yr", "drawdown_t_per_yr", "valid_area_km2",
                           "outside_law_range_km2"):  # fmt: skip
                assert float(row[column]) == pytest.approx(float(own[column]), rel=1e-9), column


def test_the_spread_is_that_of_the_tables_own_rows(folder):
    run(job_of(folder, f'default = "amiotte-suchet-1995"\n{SEVERAL}', MINE), out=folder / "out")
    rows = table(folder / "out", "laws.csv")
    for spread in table(folder / "out", "law_spread.csv"):
        of = [one for one in rows if one["region"] == spread["region"]]
        values = [float(one["drawdown_t_per_yr"]) for one in of]
        assert [float(one["weight"]) for one in of] == [1.0, 1.0, 2.0]
        mean = (values[0] + values[1] + 2 * values[2]) / 4
        assert float(spread["drawdown_min_t_per_yr"]) == pytest.approx(min(values))
        assert float(spread["drawdown_max_t_per_yr"]) == pytest.approx(max(values))
        assert float(spread["drawdown_weighted_mean_t_per_yr"]) == pytest.approx(mean)
        relative = (max(values) - min(values)) / mean
        assert float(spread["drawdown_relative_range"]) == pytest.approx(relative)
        assert spread["n_laws"] == "3"


def test_the_record_and_the_summary_name_what_each_law_replaced(folder, capsys):
    job_of(folder, f'default = "amiotte-suchet-1995"\n{SEVERAL}', MINE)
    assert main(["run", str(folder / "job.toml"), "--out", str(folder / "out")]) == 0
    shown = capsys.readouterr().out
    assert "by 3 laws" in shown
    assert "amiotte-suchet-1995 stays on limestone" in shown
    record = json.loads((folder / "out" / "run.json").read_text(encoding="utf-8"))
    first = record["alternatives"][0]
    assert first["rocks_left_to_the_default"] == ["limestone"]
    assert list(first["in_place_of_the_default"]) == ["granite"]
    between = record["result"]["between_laws"]
    assert [one["law"] for one in between["laws"]] == [
        "amiotte-suchet-1995", "maher-chamberlain-2014", "mine",
    ]  # fmt: skip
    drawn = [one["drawdown_t_per_yr"] for one in between["laws"]]
    assert between["drawdown_t_per_yr"]["min"] == min(drawn)
    assert drawn[0] == record["result"]["drawdown_t_per_yr"]


@pytest.mark.parametrize("shape", [(1, 8), (6, 1), (4, 5)])
def test_totals_of_laws_do_not_depend_on_the_blocks(folder, monkeypatch, shape):
    job = job_of(folder, f'default = "amiotte-suchet-1995"\n{SEVERAL}', MINE)
    run(job, out=folder / "whole")
    monkeypatch.setattr(pipeline, "block_shape", lambda _: shape)
    run(job, out=folder / "parts")
    for name in ("laws.csv", "law_spread.csv", "flags.csv", "regions.csv"):
        whole, parts = (folder / one / "tables" / name for one in ("whole", "parts"))
        assert whole.read_bytes() == parts.read_bytes(), name


def test_inputs_are_read_once_however_many_laws(folder, monkeypatch):
    reads = []
    monkeypatch.setattr(
        "mapper.engine.read_inputs",
        lambda plan, window, read=mapper.engine.read_inputs: reads.append(1) or read(plan, window),
    )
    run(job_of(folder, f'default = "amiotte-suchet-1995"\n{SEVERAL}', MINE), out=folder / "out")
    assert len(reads) == 1


def test_tables_of_several_laws_go_when_the_job_names_one_again(folder):
    run(job_of(folder, f'default = "amiotte-suchet-1995"\n{SEVERAL}', MINE), out=folder / "out")
    assert (folder / "out" / "tables" / "laws.csv").exists()
    run(job_of(folder, 'default = "amiotte-suchet-1995"'), out=folder / "out")
    left = {one.name for one in (folder / "out" / "tables").iterdir()}
    assert not {one for one in left if one.startswith("law")}


def test_the_summary_has_a_line_for_each_cause_with_area_and_share(folder, capsys):
    job_of(folder, 'default = "mine"', MINE)
    assert main(["run", str(folder / "job.toml"), "--out", str(folder / "out")]) == 0
    lines = [" ".join(one.split()) for one in capsys.readouterr().out.splitlines()]
    assert "runoff outside the law's range 24.0 km2 50.0 %" in lines
    assert "runoff below zero, taken as zero 1.0 km2 2.1 %" in lines
    assert "no result 1.0 km2 2.1 %" in lines
    assert not any("any layer outside" in one for one in lines)


def test_all_errors_of_the_laws_are_shown_before_a_pixel_is_read(folder, monkeypatch, capsys):
    def refuse(*_):
        raise AssertionError("a block was evaluated")

    monkeypatch.setattr(pipeline, "evaluate_block", refuse)
    own = MINE.replace("a * runoff", "a * runof + b").replace('"mmol L-1"', '"furlong"')
    job_of(folder, 'default = "mine"\nalternatives = ["west-2021"]', own)
    assert main(["run", str(folder / "job.toml"), "--out", str(folder / "out")]) == 2
    said = capsys.readouterr().err
    for part in ("furlong", "'runof' is not declared", "'b' is not declared", "'west-2021'"):
        assert part in said
    assert not (folder / "out").exists()


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (["laws", "--plot", "x.png"], "which law to draw"),
        (["laws", "west-2012", "--plot", "x.png", "--compare", "product"], "one law"),
        (["laws", "west-2012", "--at", "runoff=3"], "nothing here is evaluated"),
        (["laws", "west"], "there is no law 'west'"),
    ],
)
def test_arguments_that_do_not_fit_together_are_refused(arguments, says, capsys):
    assert main(arguments) == 2
    assert says in capsys.readouterr().err


def test_laws_are_compared_and_drawn_by_the_command(tmp_path, capsys):
    compare = ["--compare", "dessert-2003", "--at", "temperature=25C", "runoff=1000"]
    assert main(["laws", "amiotte-suchet-1995", *compare]) == 0
    assert "1.61" in capsys.readouterr().out
    picture = tmp_path / "law.svg"
    assert main(["laws", "dessert-2003", "--plot", str(picture), "--at", "runoff=900"]) == 0
    assert picture.read_text(encoding="utf-8").lstrip().startswith("<?xml")


def test_a_reader_who_goes_away_ends_the_command_quietly():
    command = [sys.executable, "-m", "mapper.cli", "laws", "product"]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE) as process:
        process.stdout.close()
        said = process.stderr.read()
        assert process.wait(60) == 0
    assert said == b""
