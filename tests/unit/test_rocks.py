"""Rock classes."""

import pytest

from mapper.rocks import OXIDE_CHARGE_PER_GRAM, ROCK_NAMES, ROCKS


@pytest.mark.parametrize("name", ROCK_NAMES)
def test_shares_lie_between_0_and_1(name):
    rock = ROCKS[name]
    assert 0.0 <= rock.silicate_share <= 1.0
    assert 0.0 <= rock.calcium_magnesium_share <= 1.0


def test_kinds_and_silicate_shares_agree():
    for rock in ROCKS.values():
        expected = {"silicate": 1.0, "carbonate": 0.0, "evaporite": 0.0, "barren": 0.0}
        assert rock.kind == "mixed" or rock.silicate_share == expected[rock.kind]
        assert rock.kind != "mixed" or 0.0 < rock.silicate_share < 1.0


def test_linked_terms_are_not_shared():
    terms = [rock.cgi_term for rock in ROCKS.values() if rock.cgi_term]
    assert len(terms) == len(set(terms))


def test_only_ice_and_water_do_not_weather():
    assert [name for name, rock in ROCKS.items() if not rock.weathers] == ["ice", "water"]


def test_a_charge_of_two_belongs_to_each_oxide():
    masses = {"CaO": 56.077, "MgO": 40.304, "Na2O": 61.979, "K2O": 94.196}
    assert {name: 2 / mass for name, mass in masses.items()} == dict(OXIDE_CHARGE_PER_GRAM)
