import math

import numpy as np
import pytest
from scipy.special import ndtri

from mapper.doubts import UncertaintySpec
from mapper.uncertainty.draws import draw_quantiles
from mapper.uncertainty.sensitivity import variance_shares


def normals(*names, draws=1000):
    found = draw_quantiles(UncertaintySpec(draws=draws, seed=5), names, where="")
    return {name: ndtri(u) for name, u in found.items()}


def test_shares_of_a_sum_are_the_shares_of_the_variances():
    given = normals("a", "b", "c", draws=4000)
    shares = variance_shares(10.0 + 3.0 * given["a"] - 4.0 * given["b"], given)
    assert shares.share == pytest.approx({"a": 0.36, "b": 0.64, "c": 0.0}, abs=0.01)
    assert shares.rest == pytest.approx(0.0, abs=1e-12)
    assert shares.slope["a"] > 0 > shares.slope["b"]


def test_first_order_shares_of_a_product_of_lognormals_are_the_closed_form():
    given = normals("a", "b", draws=4000)
    total = np.exp(0.5 * given["a"]) * np.exp(0.3 * given["b"])
    shares = variance_shares(total, given)
    all_of_it = math.exp(0.25 + 0.09) - 1
    expected = {"a": (math.exp(0.25) - 1) / all_of_it, "b": (math.exp(0.09) - 1) / all_of_it}
    assert shares.share == pytest.approx(expected, abs=0.03)
    assert shares.rest == pytest.approx(1 - sum(expected.values()), abs=0.03)


def test_what_only_acts_together_is_left_to_the_rest():
    given = normals("a", "b")
    shares = variance_shares(given["a"] * given["b"], given)
    assert shares.rest > 0.97


def test_shares_and_rest_add_up_to_one():
    given = normals("a", "b", "c", "d", draws=200)
    total = np.exp(given["a"] + 0.1 * given["b"] ** 2) + given["c"]
    shares = variance_shares(total, given)
    assert sum(shares.share.values()) + shares.rest == pytest.approx(1.0)


def test_with_too_few_draws_nothing_is_claimed():
    given = normals("a", "b", "c", draws=6)
    shares = variance_shares(given["a"], given)
    assert all(math.isnan(one) for one in [*shares.share.values(), shares.rest])


def test_a_total_that_does_not_vary_has_no_shares():
    given = normals("a", "b", draws=100)
    shares = variance_shares(np.full(100, 5.0), given)
    assert set(shares.share.values()) == {0.0}
    assert shares.rest == 0.0
