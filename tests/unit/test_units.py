"""The closed table of units. The factors are definitions; 365.25 days to a year are this
project's own choice, stated in the record."""

import pytest

from mapper.errors import UnitError
from mapper.units import conversion, spell


@pytest.mark.parametrize(
    ("text", "quantity", "raw", "inner"),
    [
        ("K", "temperature", 280.0, 280.0),
        ("degC", "temperature", 10.0, 283.15),
        ("degrees_celsius", "temperature", 10.0, 283.15),
        ("degF", "temperature", 50.0, 283.15),
        ("degK", "temperature", 280.0, 280.0),
        ("mm yr-1", "water", 500.0, 500.0),
        ("mm/year", "water", 500.0, 500.0),
        ("mm a-1", "water", 500.0, 500.0),
        ("mm/month", "water", 10.0, 120.0),
        ("mm d-1", "water", 2.0, 730.5),
        ("cm yr-1", "water", 3.0, 30.0),
        ("m yr-1", "water", 0.5, 500.0),
        ("kg m-2 s-1", "water", 1.0, 31_557_600.0),
        ("kg m**-2 s**-1", "water", 1.0, 31_557_600.0),
        ("kg/m2/s", "water", 1.0, 31_557_600.0),
        ("%", "fraction", 40.0, 0.4),
        ("percent", "fraction", 40.0, 0.4),
        ("1", "fraction", 0.4, 0.4),
        ("t ha-1 yr-1", "erosion", 2.0, 200.0),
        ("kg m-2 yr-1", "erosion", 2.0, 2000.0),
        ("km", "elevation", 1.5, 1500.0),
        ("ppm", "pressure", 400.0, 4e-4),
        ("mol km-2 yr-1", "rate", 1e6, 1.0),
        ("t CO2 km-2 yr-1", "rate", 44.0095, 1.0),
    ],
)
def test_a_unit_is_brought_to_the_inner_one(text, quantity, raw, inner):
    found = conversion(text, quantity, where="here")
    assert raw * found.factor + found.offset == pytest.approx(inner, rel=1e-12)


def test_an_amount_without_a_period_is_refused_with_both_readings():
    with pytest.raises(UnitError, match="the unit is 'mm', and a rate is needed") as caught:
        conversion("mm", "water", where="layers.runoff")
    assert caught.value.where == "layers.runoff"
    assert '"mm yr-1"' in caught.value.fix
    assert '"mm month-1"' in caught.value.fix


@pytest.mark.parametrize("text", [None, "", "  "])
def test_a_missing_unit_is_refused_with_the_list(text):
    with pytest.raises(UnitError, match="no unit, and temperature must have one") as caught:
        conversion(text, "temperature", where="layers.temperature")
    assert "K, degC, degF" in caught.value.fix


@pytest.mark.parametrize("text", ["C", "m s-2", "W m-2", "mm yr-2", "furlong"])
def test_a_stranger_is_refused_and_named(text):
    with pytest.raises(UnitError, match=f"unit '{text}' is not one that temperature may have"):
        conversion(text, "temperature", where="here")


def test_a_unit_of_another_quantity_is_refused():
    with pytest.raises(UnitError, match="'K' is not one that water may have"):
        conversion("K", "water", where="here")


@pytest.mark.parametrize(
    "text", ["mm yr-1", "mm  yr^-1", "mm/yr", "mm yr\u207b\u00b9", "mm\u00b7yr-1"]
)
def test_spellings_of_one_unit_are_one(text):
    assert spell(text) == "mm yr-1"
