"""Cover from land-cover classes, the legend to fill in, and pictures before a run."""

from __future__ import annotations

import csv

import numpy as np
import pytest
from PIL import Image

from mapper.cli import main
from mapper.errors import MissingFileError, ValuesError
from mapper.grid import Window
from mapper.legend import read_legend

WHOLE = Window(0, 0, 4, 6)


def classes(bench, table, values=None):
    path = bench.tif(
        "c.tif", np.array([[1, 2, 3] * 2] * 4, np.uint8) if values is None else values, nodata=0
    )
    bench.text("cover.csv", table)
    return {"path": str(path), "kind": "class", "table": str(bench.path("cover.csv"))}


TABLE = "class,cover\n1,0.9\n2,0.25\n3,0\n"


def vegetation(bench, spec, **keys):
    return bench.layer("vegetation", spec.pop("path"), **spec, **keys)


def test_classes_become_cover_by_the_table(bench):
    found = vegetation(bench, classes(bench, TABLE)).values(WHOLE)
    np.testing.assert_array_equal(found, [[0.9, 0.25, 0.0] * 2] * 4)


def test_classes_under_coarse_cells_are_averaged_as_cover_and_never_as_classes(bench):
    grid = {"crs": "EPSG:4326", "resolution": 2, "bounds": [0, 0, 6, 4]}
    spec = classes(bench, TABLE)
    plan = bench.plan({"vegetation": spec}, grid=grid)
    found = plan.layers["vegetation"].values(Window(0, 0, 2, 3))
    np.testing.assert_allclose(found[0], [0.575, 0.45, 0.125])


def test_a_class_that_the_table_lacks_is_refused_with_its_count(bench):
    spec = classes(bench, "class,cover\n1,0.9\n2,0.25\n")
    with pytest.raises(ValuesError, match=r"no cover for class 3 \(8 cells\)"):
        vegetation(bench, spec).values(WHOLE)


def test_a_class_of_no_data_needs_no_line(bench):
    values = np.zeros((4, 6), np.uint8)
    values[0] = 1
    found = vegetation(bench, classes(bench, TABLE, values)).values(WHOLE)
    assert np.isnan(found[1:]).all()
    assert (found[0] == 0.9).all()


@pytest.mark.parametrize(
    ("table", "message"),
    [
        ("class,cover\n1,90\n", "cover '90'.*from 0 to 1"),
        ("class,cover\none,0.5\n", "class 'one'"),
        ("code,cover\n1,0.5\n", "'class' is missing"),
    ],
)
def test_a_table_that_is_wrong_is_refused_by_its_line(bench, table, message):
    with pytest.raises(ValuesError, match=message):
        vegetation(bench, classes(bench, table))


def test_a_table_that_is_not_there_is_named(bench):
    spec = classes(bench, TABLE)
    bench.path("cover.csv").unlink()
    with pytest.raises(MissingFileError, match=r"cover\.csv"):
        vegetation(bench, spec)


def test_the_starter_legend_lists_every_code_with_cells_area_and_no_rock(bench, capsys):
    codes = np.array([[7, 7, 7, 7, 9, 255]] * 4, np.uint8)
    path = bench.tif("codes.tif", codes)
    legend = bench.path("mine.csv")
    job = bench.job({"lithology": {"path": str(path), "legend": str(legend)}})
    assert main(["inspect", str(job), "--write-legend", str(legend)]) == 0
    assert "3 codes" in capsys.readouterr().out
    with legend.open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert {row["code"]: float(row["cells"]) for row in rows} == {"7": 16, "9": 4, "255": 4}
    assert all(row["rock"] == "" for row in rows)
    assert sum(float(row["area_km2"]) for row in rows) == pytest.approx(295_184, rel=1e-4)


def test_a_filled_in_starter_legend_is_read(bench):
    codes = np.array([[7, 7, 7, 9, 9, 9]] * 4, np.uint8)
    path = bench.tif("codes.tif", codes)
    legend = bench.path("mine.csv")
    layers = {"lithology": {"path": str(path), "legend": str(legend)}}
    main(["inspect", str(bench.job(layers)), "--write-legend", str(legend)])
    lines = legend.read_text(encoding="utf-8").splitlines()
    filled = [
        lines[0],
        *(line.replace(",", ",basalt,", 1).replace(",,,", ",,", 1) for line in lines[1:]),
    ]
    legend.write_text("\n".join(filled) + "\n", encoding="utf-8")
    assert read_legend(str(legend), where="test").rocks() == ("basalt",)
    assert bench.run(layers).totals.consumption.sum() > 0


def test_pictures_show_each_layer(bench, capsys):
    assert main(["inspect", str(bench.job()), "--pictures", str(bench.path("pictures"))]) == 0
    assert "lithology.png" in capsys.readouterr().out
    for name in ("runoff", "lithology"):
        with Image.open(bench.path("pictures") / f"{name}.png") as picture:
            assert picture.size == (6, 4)
