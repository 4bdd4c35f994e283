"""Mineral kinetics. Source of the table: Palandri & Kharaka 2004, quoted."""

from __future__ import annotations

import math

import numpy as np
import pytest

from mapper.laws import LAWS
from mapper.laws.minerals import MINERAL_BY_ROCK, MINERALS, parameters_of, rank_minerals

LAW = LAWS["palandri-kharaka-2004"]


def test_it_only_ranks_and_says_so():
    assert LAW.output == "relative"
    assert any("ranking only" in caution for caution in LAW.cautions)


def test_each_rock_has_the_numbers_of_its_mineral():
    for rock, mineral in MINERAL_BY_ROCK.items():
        values = LAW.central_values(rock)
        assert {name: values[name] for name in parameters_of(mineral)} == parameters_of(mineral)


def test_in_acid_water_the_acid_term_alone_is_left():
    acid = MINERALS["albite"]
    found = rank_minerals(298.15, **parameters_of("albite"), ph=0.0)
    assert math.log10(found) - 12.0 == pytest.approx(acid.log_acid, abs=2e-3)


def test_warmth_acts_by_the_energy_of_the_term_that_rules():
    warm, cold = (rank_minerals(t, **parameters_of("calcite"), ph=3.0) for t in (298.15, 288.15))
    expected = math.exp(14400.0 / 8.314462618 * (1 / 288.15 - 1 / 298.15))
    assert warm / cold == pytest.approx(expected, rel=5e-3)


def test_olivine_outranks_feldspar_and_feldspar_outranks_mica():
    by_rock = {rock: LAW.function(288.15, **LAW.central_values(rock)) for rock in LAW.rocks}
    assert by_rock["ultramafic rock"] > by_rock["basalt"] > by_rock["granite"] > by_rock["shale"]


def test_acid_water_dissolves_every_mineral_faster():
    ph = np.array([[3.0], [5.0], [7.0]])
    for mineral in MINERALS:
        rate = rank_minerals(np.array([288.15]), **parameters_of(mineral), ph=ph)
        assert (np.diff(rate, axis=0) < 0).all(), mineral


def test_an_unknown_mineral_lists_those_there_are():
    with pytest.raises(KeyError, match="no mineral 'quartz'; there are: albite"):
        parameters_of("quartz")
