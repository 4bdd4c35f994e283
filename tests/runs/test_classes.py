"""Totals by a further layer: by hand, by cell, whatever the blocks; and what is refused."""

import csv

import numpy as np
import pytest

import mapper
from mapper.classes import band_names
from mapper.engine import evaluate_block
from mapper.errors import MapperError
from mapper.grid import Window, blocks
from mapper.inspection import inspect
from mapper.job import load_job
from mapper.planning import make_plan
from tests.making import ROOT, small_job, write_raster

LABELS = "code,label\n1,forest\n2,field\n3,field\n"


def rows(path):
    with path.open(encoding="utf-8", newline="") as stream:
        return {row["class"]: row for row in csv.DictReader(stream)}


def land(folder, values, legend=LABELS, **about):
    """A small job with classes of land."""
    write_raster(folder / "land.tif", values, **{"dtype": "uint8", **about})
    (folder / "land.csv").write_text(legend, encoding="utf-8")
    return small_job(folder, classes={"land": {"path": "land.tif", "legend": "land.csv"}})


def run_land(folder, values, **about):
    found = mapper.run(load_job(land(folder, values, **about)))
    return rows(found.folder / "tables" / "by_land.csv"), found


def test_classes_of_whole_cells_by_hand(tmp_path):
    # rows of rock: granite, basalt, limestone, water; cells of 1 km2
    values = [[1, 1, 2, 3], [1, 1, 2, 3], [1, 1, 1, 1], [0, 0, 0, 0]]
    table, found = run_land(tmp_path, values, nodata=0)
    assert list(table) == ["forest", "field", "no class", "all"]
    assert [float(row["area_km2"]) for row in table.values()] == pytest.approx([8, 4, 4, 16])
    granite, basalt, limestone = (
        found.totals.consumption[:, at].sum() / 4
        for at in np.flatnonzero(found.totals.consumption.sum(axis=0))
    )
    forest, field = (float(table[one]["consumption_t_per_yr"]) for one in ("forest", "field"))
    assert forest == pytest.approx(2 * granite + 2 * basalt + 4 * limestone, rel=1e-9)
    assert field == pytest.approx(2 * granite + 2 * basalt, rel=1e-9)
    kept = float(table["forest"]["drawdown_t_per_yr"])
    assert kept == pytest.approx(float(table["field"]["drawdown_t_per_yr"]), rel=1e-9)
    assert float(table["field"]["consumption_t_per_km2_yr"]) == pytest.approx(field / 4, rel=1e-9)
    assert float(table["no class"]["consumption_t_per_yr"]) == 0.0


def test_a_finer_file_gives_each_class_its_share_of_a_cell(tmp_path):
    fine = np.full((8, 8), 1)
    fine[::2, ::2] = 2  # a quarter of every cell
    table, found = run_land(tmp_path, fine, cell=500.0, nodata=0)
    every = found.totals.consumption.sum()
    assert float(table["field"]["consumption_t_per_yr"]) == pytest.approx(every / 4, rel=1e-9)
    assert float(table["field"]["area_km2"]) == pytest.approx(4.0, rel=1e-9)
    assert float(table["no class"]["area_km2"]) == 0.0


def test_a_file_in_another_crs_and_beside_the_grid_leaves_ground_without_class(tmp_path):
    # 2 x 2 km of the 4 x 4 lie under the file
    table, _ = run_land(tmp_path, np.full((20, 20), 1), cell=100.0, left=0.0, top=2000.0)
    assert float(table["forest"]["area_km2"]) == pytest.approx(4.0, rel=1e-6)
    assert float(table["no class"]["area_km2"]) == pytest.approx(12.0, rel=1e-6)


def test_a_value_on_the_edge_of_a_band_belongs_above_it_and_bands_are_never_interpolated(tmp_path):
    heights = np.array([[0.0, 100.0], [99.0, 500.0]])  # cells of 2 km: four of the grid in each
    write_raster(tmp_path / "height.tif", heights, cell=2000.0, unit="m")
    job = small_job(tmp_path, classes={"height": {"path": "height.tif", "bands": [0, 100, 300]}})
    table = rows(mapper.run(load_job(job)).folder / "tables" / "by_height.csv")
    areas = {name: float(row["area_km2"]) for name, row in table.items()}
    expected = {"below 0 m": 0, "0 to 100 m": 8, "100 to 300 m": 4, "300 m and above": 4}
    assert areas == pytest.approx(expected | {"no class": 0, "all": 16})


def test_names_of_bands_say_where_they_begin_and_end():
    assert band_names((10.0,)) == ("below 10", "10 and above")


@pytest.fixture(scope="module")
def island():
    return make_plan(load_job(ROOT / "configs" / "island.toml"))


@pytest.mark.parametrize("shape", [(1024, 1024), (97, 211), (700, 130)])
def test_sums_by_class_have_the_same_bits_whatever_the_blocks(island, shape):
    whole = evaluate_block(island, Window(0, 0, island.grid.n_rows, island.grid.n_cols))[1]
    parts = [evaluate_block(island, one)[1] for one in blocks(island.grid, shape)]
    summed = sum(one.classes.astype(object) for one in parts)
    assert whole.classes.any()
    assert (summed == whole.classes.astype(object)).all()


def test_totals_by_class_close_with_all_cells(tmp_path):
    values = np.random.default_rng(3).integers(0, 4, (12, 12))
    _, found = run_land(tmp_path, values, cell=1000.0 / 3, nodata=0)
    checks = {key: one for key, one in found.checks.items() if key.startswith("by_land")}
    assert len(checks) == 4
    assert max(checks.values()) <= 1e-12


def refused(job):
    with pytest.raises(MapperError) as caught:
        make_plan(load_job(job))
    return str(caught.value)


def test_a_code_without_a_line_in_the_legend_is_named_before_the_run(tmp_path):
    text = refused(land(tmp_path, np.full((4, 4), 7)))
    assert "no line for code 7" in text
    assert 'unknown = "nodata"' in text


def test_a_code_without_a_line_may_count_as_no_class(tmp_path):
    path = land(tmp_path, [[1, 1, 7, 7]] * 4)
    path.write_text(path.read_text().replace('"legend" = "land.csv"', '"legend" = "land.csv", "unknown" = "nodata"'))  # fmt: skip
    table = rows(mapper.run(load_job(path)).folder / "tables" / "by_land.csv")
    assert float(table["no class"]["area_km2"]) == pytest.approx(8.0)


@pytest.mark.parametrize(
    ("legend", "said"),
    [
        ("code,name\n1,a\n", "'label' is missing"),
        ("code,label\n", "no line below"),
        ("code,label\n1,a\n1,b\n", "two lines"),
        ("code,label\n1.5,a\n", "not a whole number"),
        ("code,label\n1,all\n", "cannot name a class"),
    ],
)
def test_a_wrong_legend_is_refused(tmp_path, legend, said):
    assert said in refused(land(tmp_path, np.ones((4, 4)), legend))


@pytest.mark.parametrize(
    ("classes", "said"),
    [
        ({"land": {"path": "rock.tif"}}, "a legend or bands"),
        ({"land": {"path": "rock.tif", "bands": [5, 5]}}, "edges that ascend"),
        ({"land": {"path": "rock.tif", "bands": []}}, "edges that ascend"),
        ({"land": {"path": "rock.tif", "bands": [1], "legend": "legend.csv"}}, "either a legend"),
        ({"../land": {"path": "rock.tif", "bands": [1]}}, "cannot be the name"),
        ({"land": {"path": "no.tif", "bands": [1]}}, "no.tif"),
    ],
)
def test_wrong_classes_are_refused(tmp_path, classes, said):
    assert said in refused(small_job(tmp_path, classes=classes))


def test_the_quick_way_for_coarse_files_gives_the_shares_of_the_exact_one(island):
    window = Window(100, 37, 301, 203)
    for layer in island.classes:
        quick = layer.codes.nested(window, layer._encode)
        exact = layer.codes.shares(window, layer._encode)
        order = np.lexsort((exact.cell,))
        assert (exact.cell[order] == quick.cell).all()
        assert (exact.code[order] == quick.code).all()
        assert exact.share[order] == pytest.approx(quick.share, abs=1e-6)


def test_the_quick_way_is_not_taken_where_a_cell_holds_several_of_the_file(tmp_path):
    plan = make_plan(load_job(land(tmp_path, np.ones((8, 8)), cell=500.0)))
    layer = plan.classes[0]
    assert layer.codes.nested(Window(0, 0, 4, 4), layer._encode) is None


def test_inspecting_a_job_names_its_classes(tmp_path):
    lines = inspect(load_job(land(tmp_path, np.ones((4, 4))))).lines()
    assert "classes     land: 2 classes of land.tif" in lines
