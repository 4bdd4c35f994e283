"""Resampling where both axes run alike, with answers that can be done in the head."""

import numpy as np
import pytest

from mapper.layers.axis import plan_axis, regular_axis
from mapper.layers.resample import class_shares, resample

VALUES = np.array([[1.0, 2.0], [3.0, 4.0]])
ALL = np.ones((2, 2), dtype=bool)


def plans(method, edges=(0.0, 2.0), n=2):
    edges = np.array(edges)
    axis = regular_axis(0.0, 1.0, n)
    one = plan_axis(axis, edges, 0.5 * (edges[1:] + edges[:-1]), method, sphere=False)
    return one, one


def test_a_mean_of_four_cells():
    assert resample(*plans("mean"), VALUES, ALL, "mean").tolist() == [[2.5]]


def test_a_mean_leaves_out_what_is_not_valid():
    valid = np.array([[True, False], [True, True]])
    assert resample(*plans("mean"), VALUES, valid, "mean").tolist() == [[8 / 3]]


def test_a_mean_of_less_than_half_a_cell_is_no_data():
    valid = np.array([[True, False], [False, False]])
    assert np.isnan(resample(*plans("mean"), VALUES, valid, "mean")).all()
    assert resample(*plans("mean"), VALUES, ALL & [[True], [False]], "mean").tolist() == [[1.5]]


def test_a_mean_of_a_cell_that_reaches_beyond_the_source():
    assert resample(*plans("mean", (0.0, 2.4)), VALUES, ALL, "mean")[0, 0] == pytest.approx(2.5)
    assert np.isnan(resample(*plans("mean", (0.0, 4.0)), VALUES, ALL, "mean")).all()


def test_bilinear_at_the_middle_and_at_centres():
    found = resample(*plans("bilinear", (0.5, 1.5)), VALUES, ALL, "bilinear")
    assert found.tolist() == [[2.5]]
    found = resample(*plans("bilinear", (0.0, 1.0, 2.0)), VALUES, ALL, "bilinear")
    assert found.tolist() == VALUES.tolist()


def test_bilinear_is_no_data_where_the_cell_that_holds_the_centre_is():
    valid = np.array([[True, True], [True, False]])
    found = resample(*plans("bilinear", (0.0, 1.0, 2.0)), VALUES, valid, "bilinear")
    assert np.isnan(found).tolist() == [[False, False], [False, True]]


def test_bilinear_leaves_out_neighbours_without_data():
    valid = np.array([[True, False], [True, False]])
    found = resample(*plans("bilinear", (0.0, 0.9, 1.8)), VALUES, valid, "bilinear")
    assert found[0, 0] == pytest.approx(1.0)


def test_what_is_not_valid_may_hold_anything():
    values = np.array([[1.0, np.nan], [3.0, 4.0]])
    valid = np.isfinite(values)
    assert resample(*plans("mean"), values, valid, "mean").tolist() == [[8 / 3]]


def test_nearest_picks_and_does_not_mix():
    found = resample(*plans("nearest", (0.0, 1.0, 2.0)), VALUES, ALL, "nearest")
    assert found.tolist() == VALUES.tolist()


def test_shares_of_codes_add_up_to_what_is_valid():
    codes = np.array([[1, 2], [2, 9]])
    valid = np.array([[True, True], [True, False]])
    cells, names, shares = class_shares(*plans("mean"), codes, valid)
    assert cells.tolist() == [0, 0]
    assert names.tolist() == [1, 2]
    assert shares.tolist() == [0.25, 0.5]


def test_no_valid_code_gives_no_share():
    assert class_shares(*plans("mean"), np.zeros((2, 2), int), ~ALL)[0].size == 0
