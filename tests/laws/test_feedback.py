"""The whole-earth forms: at the reference they leave the reference as it is."""

from __future__ import annotations

import numpy as np
import pytest

from mapper.laws import LAWS

NAMES = ("walker-1981", "berner-1994", "berner-kothavala-2001")
every_form = pytest.mark.parametrize("name", NAMES)


def scale(name, warming, rock="granite", **changed):
    law = LAWS[name]
    values = {**law.central_values(rock), **changed}
    return law.function(2.0, 288.0 + warming, **values) / 2.0


@every_form
def test_without_change_the_reference_stays(name):
    for rock in LAWS[name].rocks:
        assert scale(name, 0.0, rock) == 1.0


@every_form
def test_more_co2_means_more_uptake(name):
    assert scale(name, 0.0, co2_ratio=2.0) > 1.0


def test_walker_doubles_over_nine_and_a_half_kelvin():
    # computed: 13.7 ln 2 = 9.496 K
    assert scale("walker-1981", 13.7 * np.log(2.0)) == pytest.approx(2.0)


def test_land_without_plants_takes_up_the_stated_share():
    assert scale("berner-1994", 0.0, land_plant_factor=0.15) == pytest.approx(0.15)


def test_carbonate_rock_answers_less_to_warming_than_silicate_rock():
    silicate, carbonate = scale("berner-1994", 5.0), scale("berner-1994", 5.0, "limestone")
    assert carbonate == pytest.approx(1.435)  # 1 + 0.087 x 5
    assert silicate > carbonate
    assert scale("berner-1994", 5.0, "loess") == pytest.approx((silicate + carbonate) / 2)


def test_deep_cold_gives_no_uptake_rather_than_no_number():
    assert scale("berner-1994", -40.0, "limestone") == 0.0
    assert scale("berner-1994", -40.0) == 0.0


def test_the_edition_of_2001_has_the_runoff_of_a_cold_age():
    # computed: exp(0.18) x 1.05^0.65
    expected = np.exp(0.18) * 1.05**0.65
    assert scale("berner-kothavala-2001", 2.0) == pytest.approx(expected)


@every_form
def test_the_caution_says_that_the_form_is_for_the_whole_earth(name):
    assert any("whole earth" in caution for caution in LAWS[name].cautions)
