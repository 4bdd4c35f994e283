"""Runoff, rock, Arrhenius and soil shielding."""

from __future__ import annotations

import pytest

from mapper.laws import LAWS, compose

LAW = LAWS["hartmann-2014-form"]


def test_it_is_the_product_of_the_same_responses():
    same = compose(soil="shielding")
    for rock in LAW.rocks:
        values = LAW.central_values(rock)
        expected = same.function(700.0, 291.0, 0.1, **values)
        assert LAW.function(700.0, 291.0, 0.1, **values) == pytest.approx(expected, rel=1e-14)


def test_a_shielded_soil_lets_its_share_pass():
    values = LAW.central_values("granite")
    bare = LAW.function(700.0, 291.0, 1.0, **values)
    assert LAW.function(700.0, 291.0, 0.1, **values) == pytest.approx(0.1 * bare)


def test_its_text_says_that_the_combination_is_the_projects_own():
    assert "this project's stand-in" in LAW.reference
    assert any("this project's combination" in caution for caution in LAW.cautions)
