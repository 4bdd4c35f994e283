"""Exact sums as whole counts."""

import math
from fractions import Fraction

import numpy as np
import pytest

from mapper.errors import ValuesError
from mapper.grid import Grid, parse_crs
from mapper.sums import LARGEST_RATE, LIMB_BITS, LIMBS, UNIT_BITS, add_up, totals, unit_exponent
from tests.making import EQUAL_AREA, LON_LAT

KM = Grid(parse_crs(EQUAL_AREA).to_wkt(), 0.0, 1000.0, 1000.0, 1000.0, 1, 1)


def test_whole_numbers_are_added_by_key_without_error():
    counts = add_up(np.array([0, 1, 0]), np.array([1.0, 2.0, 4.0]), 2, -20)
    assert totals(counts, -20).tolist() == [5.0, 2.0]


def test_a_key_without_values_adds_to_zero():
    assert totals(add_up(np.array([2]), np.array([3.0]), 4, -20), -20).tolist() == [0, 0, 3, 0]


def test_large_and_small_are_kept_where_floats_lose_the_small():
    values = np.array([2.0**20, 2.0**-38, -(2.0**20)])
    assert values.sum() == 0.0
    assert totals(add_up(np.zeros(3, int), values, 1, -38), -38)[0] == 2.0**-38


def test_each_value_is_rounded_once():
    exponent = unit_exponent(KM)
    values = np.random.default_rng(1).uniform(0, 1e8, 1000)
    found = add_up(np.zeros(1000, int), values, 1, exponent)
    unit = Fraction(2) ** exponent
    exact = sum(round(Fraction(float(one)) / unit) for one in values)
    assert sum(int(part) << (LIMB_BITS * at) for at, part in enumerate(found[0])) == exact


def test_a_rate_of_a_hundredth_of_a_mole_is_kept_to_15_digits():
    exponent = unit_exponent(KM)
    assert totals(add_up(np.zeros(1, int), np.array([1e4]), 1, exponent), exponent)[0] == (
        pytest.approx(1e4, rel=2e-15)
    )


def test_the_largest_rate_fits_and_more_is_refused():
    exponent = unit_exponent(KM)
    add_up(np.zeros(1, int), np.array([LARGEST_RATE * 1e6]), 1, exponent)
    with pytest.raises(ValuesError, match=r"takes up .* mol per year, over 128 mol m-2 yr-1"):
        add_up(np.zeros(1, int), np.array([5e4 * 1e6]), 1, exponent)


def test_no_values_add_to_zero():
    assert add_up(np.empty(0, int), np.empty(0), 1, 0).tolist() == [[0] * LIMBS]


def test_the_unit_is_a_power_of_two_that_a_cell_holds_2_to_the_56_times():
    for grid in (KM, Grid(parse_crs(LON_LAT).to_wkt(), 0.0, 1.0, 0.25, 0.25, 4, 4)):
        area = grid.dx * grid.dy * (112_000.0**2 if grid.is_geographic else 2.0)
        assert 1.0 < math.ldexp(1.0, unit_exponent(grid) + UNIT_BITS) / area <= 2.0
