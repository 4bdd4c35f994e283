"""Runoff from climate: limits that need no source. Check values are in tests/published."""

import numpy as np
import pytest

from mapper.hydrology import METHODS, derive_runoff, turc_power

RAIN, WARMTH = np.meshgrid(np.linspace(0.0, 4000.0, 41), np.linspace(240.0, 305.0, 27))


@pytest.mark.parametrize("method", METHODS)
def test_runoff_lies_between_nothing_and_all_the_rain(method):
    runoff = derive_runoff(method, RAIN, WARMTH)
    assert (runoff >= 0.0).all()
    assert (runoff <= RAIN).all()


@pytest.mark.parametrize("method", METHODS)
def test_more_rain_gives_no_less_runoff_but_for_the_jump_of_turc(method):
    rise = np.diff(derive_runoff(method, RAIN, WARMTH), axis=1)
    # Turc's formula jumps at P/L = 0.316 by less than a hundredth of the rain
    assert rise.min() >= (-0.01 * 4000.0 if method == "turc-1954" else 0.0)


@pytest.mark.parametrize("method", METHODS)
def test_warmth_never_adds_runoff(method):
    assert np.diff(derive_runoff(method, RAIN, WARMTH), axis=0).max() <= 1e-9


@pytest.mark.parametrize("method", METHODS)
def test_no_data_stays_no_data(method):
    runoff = derive_runoff(method, np.array([np.nan, 500.0]), np.array([280.0, np.nan]))
    assert np.isnan(runoff).all()


def test_frost_counts_as_zero_degrees():
    assert turc_power(np.array([243.15, 273.15])).tolist() == [300.0, 300.0]
