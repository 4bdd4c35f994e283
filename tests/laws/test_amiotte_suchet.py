"""The runoff-linear law. Source of the table: Drever & Clow 1995, table 4, as read."""

from __future__ import annotations

import pytest

from mapper.laws import LAWS
from mapper.rocks import ROCKS

LAW = LAWS["amiotte-suchet-1995"]
CONCENTRATION = LAW.parameter("concentration").by_rock


@pytest.mark.parametrize(
    ("rock", "concentration"),
    [
        ("granite", 0.095),
        ("gneiss", 0.095),
        ("sandstone", 0.152),
        ("rhyolite", 0.222),
        ("andesite", 0.222),
        ("evaporite", 0.293),
        ("basalt", 0.479),
        ("shale", 0.627),
        ("limestone", 1.586),
    ],
)
def test_each_rock_of_the_table_has_the_concentration_of_the_table(rock, concentration):
    assert CONCENTRATION[rock] == concentration


def test_a_litre_of_one_millimole_over_a_millimetre_is_a_thousand_moles_for_each_km2():
    assert LAW.function(1.0, concentration=1.0) * 1e6 == pytest.approx(1000.0)


def test_the_mixes_are_the_stated_shares_of_the_table():
    mixed = 0.2 * 1.586 + 0.4 * 0.152 + 0.4 * 0.627
    assert CONCENTRATION["mixed sediment"] == pytest.approx(mixed, abs=5e-4)
    assert CONCENTRATION["loess"] == pytest.approx((1.586 + 10 * 0.152) / 11, abs=5e-4)
    assert CONCENTRATION["alluvium"] == CONCENTRATION["sandstone"]


@pytest.mark.parametrize(
    ("rock", "carbonate_share"), [("mixed sediment", 1 / 5), ("loess", 1 / 11)]
)
def test_the_mixes_have_the_silicate_share_that_the_carbon_bookkeeping_takes(rock, carbonate_share):
    by_silicate = 1.0 - carbonate_share * 1.586 / CONCENTRATION[rock]
    assert by_silicate == pytest.approx(ROCKS[rock].silicate_share, abs=0.02)


def test_ultramafic_rock_is_left_out_and_the_law_says_so():
    assert "ultramafic rock" not in LAW.rocks
    assert any("ultramafic" in caution for caution in LAW.cautions)
