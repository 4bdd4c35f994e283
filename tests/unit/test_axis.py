"""One axis of a source grid and how target cells draw on it."""

import numpy as np
import pytest

from mapper.errors import GridError
from mapper.layers.axis import (
    around_the_earth,
    axis_from_centres,
    nearest_turn,
    plan_axis,
    regular_axis,
)


def from_centres(centres, bounds=None, longitude=False):
    bounds = None if bounds is None else np.array(bounds, dtype=float)
    return axis_from_centres(np.array(centres, float), bounds, longitude=longitude, where="lon")


def dense(plan, n):
    full = np.zeros((plan.weights.shape[0], n))
    full[:, plan.start : plan.stop] = plan.weights.toarray()
    return full.tolist()


def plan(axis, edges, method, sphere=False):
    edges = np.array(edges, dtype=float)
    return plan_axis(axis, edges, 0.5 * (edges[1:] + edges[:-1]), method, sphere=sphere)


def test_a_descending_axis_is_turned_round():
    axis = regular_axis(30.0, -10.0, 3)
    assert axis.centres.tolist() == [5, 15, 25]
    assert axis.edges.tolist() == [0, 10, 20, 30]
    assert axis.order.tolist() == [2, 1, 0]


def test_edges_lie_midway_between_centres():
    assert from_centres([1, 2, 4]).edges.tolist() == [0.5, 1.5, 3, 5]


def test_bounds_are_believed_over_midpoints():
    assert from_centres([1, 2], [[0, 1.8], [1.8, 2.5]]).edges.tolist() == [0, 1.8, 2.5]


def test_longitudes_that_jump_a_turn_run_on():
    axis = from_centres([90, -180, -90], longitude=True)
    assert axis.centres.tolist() == [90, 180, 270]
    assert axis.order.tolist() == [0, 1, 2]


@pytest.mark.parametrize(
    ("centres", "message"),
    [
        ([0, 1, 1], "neither rise nor fall throughout: 1 then 1"),
        ([0, 2, 1, 3], "neither rise nor fall throughout: 2 then 1"),
        ([0, np.nan], "coordinates are not all finite"),
        ([5], "one coordinate alone does not say how wide its cell is"),
    ],
)
def test_coordinates_that_make_no_axis_are_refused(centres, message):
    with pytest.raises(GridError, match=message) as caught:
        from_centres(centres)
    assert caught.value.where == "lon"


def test_a_full_turn_of_longitude_is_periodic_and_less_is_not():
    assert around_the_earth(regular_axis(-180.0, 90.0, 4)).period == 360.0
    assert around_the_earth(regular_axis(-180.0, 89.0, 4)).period == 0.0


@pytest.mark.parametrize(("low", "high", "left"), [(-20, -10, -30), (330, 360, 330), (-30, 5, -30)])
def test_longitudes_are_turned_to_where_the_grid_lies(low, high, left):
    axis = regular_axis(330.0, 10.0, 3)
    assert nearest_turn(axis, low, high).edges[0] == left


def test_means_weigh_by_overlap():
    found = plan(regular_axis(0.0, 1.0, 4), [0.5, 2.5, 4.5], "mean")
    assert dense(found, 4) == [[0.25, 0.5, 0.25, 0], [0, 0, 0.25, 0.5]]


def test_means_over_latitude_weigh_by_the_area_between_parallels():
    # sin 30 is one half, so both bands are alike (southing runs from north to south)
    found = plan(from_centres([-60, -15], [[-90, -30], [-30, 0]]), [-90, 0], "mean", sphere=True)
    assert dense(found, 2)[0] == pytest.approx([0.5, 0.5], abs=1e-15)


def test_bilinear_weighs_by_nearness_and_holds_at_the_rim():
    found = plan(regular_axis(0.0, 1.0, 3), [0.0, 0.5, 1.0, 1.5, 2.0], "bilinear")
    assert dense(found, 3) == [[1, 0, 0], [0.75, 0.25, 0], [0.25, 0.75, 0], [0, 0.75, 0.25]]


def test_nearest_takes_the_cell_that_holds_the_centre():
    found = plan(regular_axis(0.0, 1.0, 3), [-1, 0, 1, 2, 3, 4], "nearest")
    assert (found.nearest + found.start).tolist() == [-1 + found.start, 0, 1, 2, -1 + found.start]


@pytest.mark.parametrize("method", ["nearest", "bilinear", "mean"])
@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_a_periodic_axis_has_no_end(method, n):
    axis = around_the_earth(regular_axis(0.0, 360.0 / n, n))
    found = plan(axis, np.arange(-180.0, 541.0, 30.0), method)
    turn = np.arange(12)
    weights = np.zeros((24, n))
    np.add.at(weights.T, found.file_index, found.weights.toarray().T)
    assert weights[turn] == pytest.approx(weights[turn + 12], abs=1e-12)
    assert weights.sum(axis=1) == pytest.approx(1.0, abs=1e-12)
