"""Lithology on the grid: rocks and their shares."""

import numpy as np
import pytest
import shapely

from mapper.errors import LegendError, RegionError, ValuesError
from mapper.grid import Window
from mapper.job import load_job
from mapper.planning import make_plan
from mapper.rocks import ROCK_NAMES
from tests.making import EQUAL_AREA, small_job, write_legend, write_polygons, write_raster


def lithology_of(tmp_path, codes, legend, grid=None, **about):
    """A job of one raster of codes, on its own cells or on a grid of ``grid`` metres."""
    path = small_job(tmp_path, regions=None, **(grid or {}))
    write_raster(tmp_path / "rock.tif", codes, **about)
    write_legend(tmp_path / "legend.csv", legend)
    return make_plan(load_job(path)).lithology


def shares(lithology, window=None):
    """Share of each rock that occurs, as dense arrays."""
    window = window or lithology.grid.window
    found = lithology.rock_cells(window)
    dense = {}
    for cell, rock, share in zip(found.cell, found.rock, found.share, strict=True):
        dense.setdefault(ROCK_NAMES[rock], np.zeros(window.n_cells))[cell] += share
    return {name: one.reshape(window.shape).tolist() for name, one in dense.items()}


CODES = np.array([[1, 2], [2, 2]], dtype="uint8")
TWO_ROCKS = "code,rock\n1,granite\n2,basalt\n"
COARSE = {"grid": {"crs": EQUAL_AREA, "resolution": 2000, "bounds": [0, 0, 2000, 2000]}}


def test_codes_become_rocks(tmp_path):
    found = shares(lithology_of(tmp_path, CODES, TWO_ROCKS))
    assert found == {"granite": [[1, 0], [0, 0]], "basalt": [[0, 1], [1, 1]]}


def test_a_coarse_cell_holds_shares_and_no_majority(tmp_path):
    found = shares(lithology_of(tmp_path, CODES, TWO_ROCKS, COARSE))
    assert found == {"granite": [[0.25]], "basalt": [[0.75]]}


def test_two_codes_of_one_rock_are_one_rock(tmp_path):
    found = shares(lithology_of(tmp_path, CODES, "code,rock\n1,basalt\n2,basalt\n", COARSE))
    assert found == {"basalt": [[1.0]]}


def test_a_mixed_code_is_split(tmp_path):
    legend = "code,rock,share\n1,granite,1\n2,shale,0.25\n2,granite,0.75\n"
    found = shares(lithology_of(tmp_path, CODES, legend))
    assert found == {"granite": [[1, 0.75], [0.75, 0.75]], "shale": [[0, 0.25], [0.25, 0.25]]}


def test_nodata_holds_no_rock(tmp_path):
    found = shares(lithology_of(tmp_path, CODES, TWO_ROCKS, nodata=1))
    assert found == {"basalt": [[0, 1], [1, 1]]}


@pytest.mark.parametrize("grid", [None, COARSE])
def test_codes_as_floats_with_nan_are_codes(tmp_path, grid):
    codes = np.array([[1.0, np.nan], [2.0, 2.0]], dtype="float32")
    found = shares(lithology_of(tmp_path, codes, TWO_ROCKS, grid))
    assert sum(np.sum(one) for one in found.values()) == (3 if grid is None else 0.75)


@pytest.mark.parametrize("grid", [None, COARSE])
def test_a_code_that_is_no_whole_number_is_refused(tmp_path, grid):
    codes = np.array([[1.0, 1.5], [2.0, 2.0]], dtype="float32")
    with pytest.raises(ValuesError, match=r"1 codes are not whole numbers, for example 1\.5"):
        lithology_of(tmp_path, codes, TWO_ROCKS, grid)


def test_a_code_without_a_line_in_the_legend_is_refused_with_its_count(tmp_path):
    with pytest.raises(LegendError, match=r"no line for code 2 \(3 cells, ") as caught:
        lithology_of(tmp_path, CODES, "code,rock\n1,granite\n")
    assert 'unknown = "nodata"' in caught.value.fix


def test_a_code_without_a_line_is_no_data_where_the_job_says_so(tmp_path):
    layers = {
        "lithology": {"path": "rock.tif", "legend": "legend.csv", "unknown": "nodata"},
        "runoff": {"path": "runoff.tif"},
    }
    path = small_job(tmp_path, regions=None, layers=layers)
    write_raster(tmp_path / "rock.tif", CODES)
    write_legend(tmp_path / "legend.csv", "code,rock\n1,granite\n")
    assert shares(make_plan(load_job(path)).lithology) == {"granite": [[1, 0], [0, 0]]}


def polygon_job(tmp_path, shapes, legend=TWO_ROCKS, **changes):
    write_polygons(tmp_path / "rock.gpkg", shapes, column="code")
    layers = {
        "lithology": {"path": "rock.gpkg", "legend": "legend.csv", "column": "code"},
        "runoff": {"path": "runoff.tif"},
    }
    path = small_job(tmp_path, regions=None, layers=layers, **changes)
    write_legend(tmp_path / "legend.csv", legend)
    return make_plan(load_job(path)).lithology


def test_polygons_give_exact_shares(tmp_path):
    shapes = {1: shapely.box(0, 0, 1500, 4000), 2: shapely.box(1500, 0, 4000, 4000)}
    found = shares(polygon_job(tmp_path, shapes))
    assert found["granite"][0] == [1, 0.5, 0, 0]
    assert found["basalt"][0] == [0, 0.5, 1, 1]


def test_polygons_that_overlap_are_refused(tmp_path):
    shapes = {1: shapely.box(0, 0, 4000, 4000), 2: shapely.box(0, 0, 1500, 1500)}
    with pytest.raises(
        RegionError, match=r"geology polygons overlap: they cover 2\.000 of the cell"
    ):
        shares(polygon_job(tmp_path, shapes))


def test_slivers_between_polygons_are_no_overlap_and_no_gap(tmp_path):
    shapes = {1: shapely.box(0, 0, 1500.0001, 4000), 2: shapely.box(1500, 0, 4000, 4000)}
    found = shares(polygon_job(tmp_path, shapes))
    total = np.add(found["granite"], found["basalt"])
    assert total == pytest.approx(1.0, abs=1e-15)


@pytest.mark.parametrize("shift", [5e-5, 2e-4])
def test_a_small_share_does_not_depend_on_the_window(tmp_path, shift):
    """Shares of 5e-8 and 2e-7 of a cell, alone in their row and together with others."""
    shapes = {
        1: shapely.box(0, 3000, 1000 + shift, 4000),
        2: shapely.box(0, 0, 500, 3000),
        "1.0": shapely.box(500, 0, 1000, 3000),
    }
    lithology = polygon_job(tmp_path, shapes)
    whole = shares(lithology)
    part = shares(lithology, Window(0, 0, 1, 4))
    assert part["granite"][0] == whole["granite"][0]


def test_a_polygon_without_a_code_is_said_by_name(tmp_path):
    shapes = {1.0: shapely.box(0, 0, 1500, 4000), float("nan"): shapely.box(1500, 0, 4000, 4000)}
    with pytest.raises(LegendError, match="no line for code nan"):
        polygon_job(tmp_path, shapes)


def test_polygons_need_a_column(tmp_path):
    path = small_job(tmp_path, regions=None)
    write_polygons(tmp_path / "rock.gpkg", {1: shapely.box(0, 0, 1, 1)}, column="code")
    path.write_text(path.read_text().replace("rock.tif", "rock.gpkg"))
    with pytest.raises(ValueError, match="which column holds the rock is not said") as caught:
        make_plan(load_job(path))
    assert 'column = "' in caught.value.fix


def test_a_legend_may_name_what_polygons_carry(tmp_path):
    shapes = {"Old lava": shapely.box(0, 0, 4000, 4000)}
    found = shares(polygon_job(tmp_path, shapes, "code,rock\nOld lava,basalt\n"))
    assert found == {"basalt": [[1.0] * 4] * 4}
