"""Compound units: what they are of, and how large."""

from __future__ import annotations

import pytest

from mapper.dimensions import UNITS, UPTAKE, Dimension, read_unit
from mapper.errors import UnitError
from mapper.laws import LAW_INPUTS, LAWS


@pytest.mark.parametrize(
    ("text", "scale", "shown"),
    [
        ("1", 1.0, "1 (no unit)"),
        ("%", 0.01, "1 (no unit)"),
        ("mmol L-1", 1.0, "mol m-3"),
        ("mm/yr", 1e-3, "m yr-1"),
        ("mm day-1", 0.36525, "m yr-1"),
        ("t km-2 yr-1", 1e-3, "kg m-2 yr-1"),
        ("t CO2 km-2 yr-1", 1.0 / 44.0095, "mol m-2 yr-1"),
        ("t C km-2 yr-1", 1.0 / 12.011, "mol m-2 yr-1"),
        ("m3 m-2 s-1", 365.25 * 86400.0, "m yr-1"),
        ("kJ J-1", 1000.0, "1 (no unit)"),
        ("atm Pa-1", 101325.0, "1 (no unit)"),
        ("ha m-2", 1e4, "1 (no unit)"),
        ("month yr-1", 1 / 12, "1 (no unit)"),
    ],
)
def test_a_unit_has_its_size_and_dimension(text, scale, shown):
    unit = read_unit(text, where="here")
    assert unit.scale == pytest.approx(scale, rel=1e-12)
    assert str(unit.dimension) == shown


def test_the_inner_unit_of_uptake_is_of_size_one():
    unit = read_unit("mol m-2 yr-1", where="here")
    assert (unit.scale, unit.dimension) == (1.0, UPTAKE)


def test_the_units_in_which_layers_arrive_can_all_be_read():
    for text in LAW_INPUTS.values():
        assert read_unit(text, where="here").scale > 0


def test_the_units_of_all_laws_parameters_can_be_read_but_one():
    unread = {"yr^-s"}  # the unit of West's rate holds another parameter
    for law in LAWS.values():
        for one in law.parameters:
            if one.unit not in unread:
                read_unit(one.unit, where=law.name)


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("", "empty or too long"),
        ("m " * 100, "empty or too long"),
        ("parsec", "'parsec' is not known"),
        ("m10", "power in 'm10' is too large"),
        ("m200", "not known"),
        ("CO2", "CO2 must follow"),
        ("L C", "C must follow"),
        ("degC", "not known"),
    ],
)
def test_what_is_no_unit_is_refused_with_those_that_are(text, says):
    with pytest.raises(UnitError, match=says) as caught:
        read_unit(text, where="here")
    assert "mmol" in caught.value.fix


def test_a_temperature_in_degrees_is_told_to_be_in_kelvin():
    with pytest.raises(UnitError) as caught:
        read_unit("degC", where="here")
    assert caught.value.fix.startswith("give temperatures in K")


def test_dimensions_cancel():
    one = read_unit("mmol L-1", where="here").dimension
    assert one / one == Dimension()
    assert len(UNITS) > 20
