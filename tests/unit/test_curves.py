"""Response curves: what is computed and drawn, and that every law has its picture."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from mapper.errors import FileFormatError, LawError
from mapper.exports.comparison import read_conditions
from mapper.exports.curves import (
    MOST_CURVES,
    choose_groups,
    find_curves,
    free_place,
    held_values,
    plot_law,
    spread_apart,
)
from mapper.laws import LAWS

PNG = b"\x89PNG\r\n\x1a\n"


@pytest.mark.parametrize("name", LAWS)
def test_every_law_has_its_picture(name, tmp_path):
    path = plot_law(name, str(tmp_path / f"{name}.png"), read_conditions([]))
    assert path.read_bytes().startswith(PNG)
    assert [one.name for one in tmp_path.iterdir()] == [path.name]


def test_a_curve_goes_through_the_laws_own_values_and_beyond_the_range():
    law = LAWS["dessert-2003"]
    held = held_values(law, read_conditions(["temperature=25C"]))
    (curve,) = find_curves(law, law.inputs[0], held, ["basalt"])
    assert curve.x[0] == 0.0
    assert curve.x[-1] == pytest.approx(4500 + 0.2 * 4300)
    assert {200.0, 4500.0} <= set(curve.x.tolist())
    expected = law.function(curve.x, 298.15, **law.central_values("basalt"))
    np.testing.assert_array_equal(curve.y, expected)


def test_rocks_with_the_same_numbers_share_a_curve():
    law = LAWS["amiotte-suchet-1995"]
    held = held_values(law, read_conditions([]))
    curves = find_curves(law, law.inputs[0], held, ["granite", "gneiss", "basalt"])
    assert [curve.rocks for curve in curves] == [("basalt",), ("granite", "gneiss")]


def test_other_layers_are_held_at_what_was_asked_or_within_the_range():
    law = LAWS["oliva-2003"]  # runoff 1000 to 4200 mm yr-1, and 800 is usual
    assert held_values(law, read_conditions([]))["runoff"] == 1000.0
    assert held_values(law, read_conditions(["runoff=800"]))["runoff"] == 800.0


def test_few_groups_are_drawn_and_the_well_known_rocks_first():
    groups = [(f"rock {n}",) for n in range(9)] + [("granite",), ("basalt",)]
    chosen = choose_groups(groups)
    assert len(chosen) == MOST_CURVES
    assert chosen[:2] == [("basalt",), ("granite",)]


def test_labels_keep_apart_and_in_order_and_inside_the_panel():
    heights = [0.1, 0.05, 0.1, 0.05]
    places = spread_apart([0.98, 0.99, 0.01, 0.02], heights)
    order = np.argsort(places)
    assert order.tolist() == [2, 3, 0, 1]
    for low, high in pairwise(order):
        assert places[high] - places[low] >= (heights[high] + heights[low]) / 2 - 1e-6
    assert min(place - height / 2 for place, height in zip(places, heights, strict=True)) >= -1e-9
    assert max(place + height / 2 for place, height in zip(places, heights, strict=True)) <= 1.03


def test_words_find_no_place_where_curves_pass_everywhere():
    assert free_place(np.linspace(0, 1, 50), 0.4) is None


def test_another_kind_of_file_is_refused_with_one_that_can_be_written(tmp_path):
    with pytest.raises(FileFormatError, match=r"'x\.bmp'") as caught:
        plot_law("dessert-2003", str(tmp_path / "x.bmp"), read_conditions([]))
    assert "x.png" in caught.value.fix


def test_a_rock_that_the_law_does_not_serve_is_refused(tmp_path):
    with pytest.raises(LawError, match="no numbers for granite"):
        plot_law("dessert-2003", str(tmp_path / "x.png"), read_conditions(["rock=granite"]))


def test_a_picture_of_lines_is_the_same_each_time(tmp_path):
    for name in ("one.pdf", "two.pdf"):
        plot_law("dessert-2003", str(tmp_path / name), read_conditions([]))
    assert (tmp_path / "one.pdf").read_bytes() == (tmp_path / "two.pdf").read_bytes()
