"""Carbon bookkeeping, done in the head from CaSiO3 + 2 CO2 -> CaCO3 + CO2."""

import pytest

from mapper.accounting import drawdown_share, to_rate, tonnes_per_mole
from mapper.rocks import ROCKS, Rock


def made_of(oxides, silicate_share=1.0):
    return Rock(
        name="x", kind="silicate", silicate_share=silicate_share, oxides=oxides, cgi_term=""
    )


def test_half_of_what_calcium_takes_up_lasts():
    assert drawdown_share(made_of((10.0, 0.0, 0.0, 0.0))) == 0.5


def test_nothing_of_what_sodium_and_potassium_take_up_lasts():
    assert drawdown_share(made_of((0.0, 0.0, 3.0, 4.0))) == 0.0


def test_equal_charges_of_calcium_and_sodium_keep_a_quarter():
    assert drawdown_share(made_of((56.077, 0.0, 61.979, 0.0))) == pytest.approx(0.25, rel=1e-15)


def test_only_the_silicate_part_of_mixed_rock_counts():
    assert drawdown_share(made_of((10.0, 0.0, 0.0, 0.0), silicate_share=0.5)) == 0.25


@pytest.mark.parametrize("name", ["limestone", "dolomite", "evaporite", "ice", "water"])
def test_rock_without_silicate_keeps_none(name):
    assert drawdown_share(ROCKS[name]) == 0.0


def test_no_rock_keeps_more_than_half():
    assert max(drawdown_share(rock) for rock in ROCKS.values()) <= 0.5


def test_a_mole_per_square_metre_is_44_tonnes_per_square_kilometre():
    assert to_rate(1.0) == pytest.approx(44.0095, rel=1e-15)
    assert to_rate(1.0, "t C") == pytest.approx(12.011, rel=1e-15)
    assert tonnes_per_mole("mol") == 1.0
