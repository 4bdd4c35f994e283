"""Coverage of cells by polygons, with answers that can be done in the head."""

import numpy as np
import pytest
import shapely

from mapper.coverage import MIXED, NONE, cover_window, polygons_on
from mapper.grid import Grid, Window, parse_crs
from tests.making import EQUAL_AREA, LON_LAT


def cover(shapes, n_rows=3, n_cols=3, window=None, crs=EQUAL_AREA, left=0.0):
    """Coverage of cells of 1 x 1 from (0, n_rows) down, as dense arrays by polygon."""
    grid = Grid(parse_crs(crs).to_wkt(), left, float(n_rows), 1.0, 1.0, n_rows, n_cols)
    window = window or grid.window
    names = tuple(str(n) for n in range(len(shapes)))
    polygons = polygons_on(grid, names, np.array(shapes, dtype=object))
    found = cover_window(polygons, grid, window)
    dense = np.zeros((len(shapes), window.n_cells))
    cell, polygon, share = found.entries()
    np.add.at(dense, (polygon, cell), share)
    return found, dense.reshape(len(shapes), *window.shape)


def test_a_square_over_a_corner_covers_a_quarter_of_each_cell():
    _, dense = cover([shapely.box(0.5, 1.5, 1.5, 2.5)])
    assert dense[0].tolist() == [[0.25, 0.25, 0], [0.25, 0.25, 0], [0, 0, 0]]


def test_a_triangle_halves_the_cells_of_its_long_side():
    _, dense = cover([shapely.Polygon([(0, 0), (3, 0), (0, 3)])])
    assert dense[0].tolist() == [[0.5, 0, 0], [1, 0.5, 0], [1, 1, 0.5]]


def test_a_hole_is_left_out():
    ring = shapely.box(0, 0, 3, 3).difference(shapely.box(1, 1, 2, 2))
    _, dense = cover([ring])
    assert dense[0].tolist() == [[1, 1, 1], [1, 0, 1], [1, 1, 1]]


def test_the_direction_of_drawing_does_not_matter():
    square = shapely.box(0.25, 0.25, 2.25, 2.25)
    _, one = cover([square])
    _, other = cover([square.reverse()])
    assert np.array_equal(one, other)


def test_a_polygon_that_leaves_the_grid_on_every_side_fills_it():
    _, dense = cover([shapely.box(-10, -10, 10, 10)])
    assert (dense[0] == 1.0).all()


def test_a_polygon_beside_the_grid_touches_nothing():
    found, _ = cover([shapely.box(3, 0, 5, 3), shapely.box(-2, 0, 0, 3), shapely.box(0, 3, 3, 9)])
    assert (found.single == NONE).all()


def test_an_edge_along_a_cell_border_divides_no_cell():
    found, dense = cover([shapely.box(0, 0, 1, 3), shapely.box(1, 0, 3, 3)])
    assert found.single.reshape(3, 3).tolist() == [[0, 1, 1]] * 3
    assert found.cell.size == 0
    assert (dense.sum(axis=0) == 1.0).all()


def test_two_polygons_in_one_cell_each_have_their_part():
    found, dense = cover([shapely.box(0, 0, 0.75, 3), shapely.box(0.75, 0, 3, 3)])
    assert found.single.reshape(3, 3).tolist() == [[MIXED, 1, 1]] * 3
    assert dense[:, 0, 0].tolist() == [0.75, 0.25]


def test_pieces_come_by_cell_and_then_by_polygon():
    found, _ = cover([shapely.box(0, 0, 0.5, 3), shapely.box(0.5, 0, 3, 3)])
    assert found.cell.tolist() == [0, 0, 3, 3, 6, 6]
    assert found.polygon.tolist() == [0, 1, 0, 1, 0, 1]


@pytest.mark.parametrize("order", [(0, 1), (1, 0)])
def test_overlap_is_seen_as_cover_above_one(order):
    """A part over a whole, a whole over a part, and a whole over a whole."""
    shapes = [shapely.box(0, 0, 3, 3), shapely.box(1, 0, 2.5, 3)]
    _, dense = cover([shapes[at] for at in order])
    assert dense.sum(axis=0).tolist() == [[1.0, 2.0, 1.5]] * 3


def test_three_polygons_over_one_cell_all_count():
    _, dense = cover([shapely.box(0, 0, 1, 1)] * 3, 1, 1)
    assert dense.ravel().tolist() == [1.0, 1.0, 1.0]


def test_a_sliver_of_a_neighbour_does_not_take_a_cell_away():
    _, dense = cover([shapely.box(0, 0, 1, 3), shapely.box(1 - 1e-7, 0, 3, 3)])
    assert dense[0, 0, 0] == 1.0
    assert dense[1, 0, 0] == pytest.approx(1e-7, rel=1e-6)


def test_a_window_sees_what_the_whole_sees():
    shape = shapely.Point(300, 300).buffer(250)
    _, whole = cover([shape], 600, 600)
    _, part = cover([shape], 600, 600, Window(240, 30, 40, 300))
    assert np.array_equal(part[0], whole[0, 240:280, 30:330])


@pytest.mark.parametrize("left", [170.0, -190.0])
def test_a_polygon_counts_across_the_antimeridian(left):
    shapes = [shapely.box(178, 0, 180, 3), shapely.box(-180, 0, -179, 3)]
    _, dense = cover(shapes, 3, 20, crs=LON_LAT, left=left)
    assert np.flatnonzero(dense[0, 0]).tolist() == [8, 9]
    assert np.flatnonzero(dense[1, 0]).tolist() == [10]


def test_an_empty_polygon_covers_nothing():
    found, _ = cover([shapely.Polygon(), shapely.box(0, 0, 3, 3)])
    assert (found.single == 1).all()
