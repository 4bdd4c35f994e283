import numpy as np
import pytest
from scipy.special import ndtri

from mapper.doubts import Correlation, UncertaintySpec
from mapper.errors import JobError
from mapper.uncertainty.draws import draw_quantiles


def draws(*keys, where="job", **said):
    return draw_quantiles(UncertaintySpec(**said), keys, where=where)


def test_another_parameter_leaves_the_draws_of_the_first_as_they_are():
    alone = draws("a", draws=64, seed=7)["a"]
    beside = draws("c", "a", "b", draws=64, seed=7)["a"]
    assert (alone == beside).all()


def test_seed_and_name_key_the_draws():
    one = draws("a", "b", draws=64, seed=7)
    assert (one["a"] == draws("a", draws=64, seed=7)["a"]).all()
    assert not (one["a"] == draws("a", draws=64, seed=8)["a"]).any()
    assert not (one["a"] == one["b"]).any()


def test_each_of_n_strata_holds_one_draw():
    found = draws("a", draws=256)["a"]
    assert (np.sort((found * 256).astype(int)) == np.arange(256)).all()


def test_draws_of_different_names_are_hardly_correlated():
    names = [f"parameter {n}" for n in range(12)]
    found = draws(*names, draws=1024, seed=3)
    matrix = np.corrcoef([found[name] for name in names])
    assert np.abs(matrix - np.eye(12)).max() < 4.5 / np.sqrt(1024)


def test_a_correlation_is_met_and_others_are_left_alone():
    pair = (Correlation(between=("a", "b"), value=0.8),)
    joined = draws("a", "b", "c", draws=4000, correlations=pair)
    plain = draws("a", "b", "c", draws=4000)
    assert np.corrcoef(ndtri(joined["a"]), ndtri(joined["b"]))[0, 1] == pytest.approx(0.8, abs=0.02)
    assert (joined["c"] == plain["c"]).all()
    assert ndtri(joined["b"]).std() == pytest.approx(1.0, abs=0.03)


def test_correlations_that_cannot_all_hold_are_refused():
    pairs = tuple(
        Correlation(between=pair, value=value)
        for pair, value in ((("a", "b"), 0.9), (("b", "c"), 0.9), (("a", "c"), -0.9))
    )
    with pytest.raises(JobError, match="a, b, c cannot all hold at once") as refused:
        draws("a", "b", "c", draws=8, correlations=pairs)
    assert "job, uncertainty.correlations" in refused.value.where


def test_a_correlation_with_what_is_not_drawn_is_refused():
    pair = (Correlation(between=("a", "nothing"), value=0.1),)
    with pytest.raises(JobError, match="'nothing', which is not drawn"):
        draws("a", draws=8, correlations=pair)
