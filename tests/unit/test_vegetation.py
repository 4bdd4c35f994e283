"""Plant cover from an index; the check values are computed from the formulas as quoted."""

import numpy as np
import pytest

from mapper.vegetation import cover_from_ndvi


@pytest.mark.parametrize(
    ("ndvi", "squared", "cover"),
    [(0.3, False, 0.309), (0.3, True, 0.095), (0.7, False, 0.802), (0.7, True, 0.644)],
)
def test_cover_follows_the_index(ndvi, squared, cover):
    found = cover_from_ndvi(np.array([ndvi]), bare=0.05, dense=0.86, squared=squared)
    assert found[0] == pytest.approx(cover, abs=5e-4)


def test_cover_stays_between_0_and_1_and_no_data_stays_so():
    found = cover_from_ndvi(np.array([-0.2, 0.95, np.nan]), bare=0.05, dense=0.86, squared=False)
    assert found[:2].tolist() == [0.0, 1.0]
    assert np.isnan(found[2])
