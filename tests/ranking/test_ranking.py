import math

import numpy as np
import pytest
from scipy.special import ndtr

from mapper.doubts import RankingSpec
from mapper.ranking import (
    Candidates,
    rank_regions,
    ranking_columns,
    ranking_lines,
    ranking_rows,
    ranks_of,
)

N = 20_000


def candidates(value, drawn=None, **said):
    value = np.asarray(value, dtype=float)
    names = [chr(ord("A") + at) for at in range(value.size)]
    area = np.asarray(said.get("area", np.full(value.size, 10.0)), dtype=float)
    valid = np.asarray(said.get("valid", area), dtype=float)
    return Candidates(names=names, value=value, drawn=drawn, area_km2=area, valid_km2=valid)


def normal_draws(means, sds, seed=1):
    random = np.random.default_rng(seed)
    return random.normal(means, sds, size=(N, len(means)))


def test_the_probability_of_being_ahead_is_the_analytic_one():
    drawn = normal_draws([10.0, 9.0], [1.0, 0.5])
    first = rank_regions(candidates([10.0, 9.0], drawn), RankingSpec()).places[0]
    expected = float(ndtr(1.0 / math.hypot(1.0, 0.5)))
    assert first.ahead_of_next == pytest.approx(expected, abs=0.01)
    assert first.tied_with == ("B",)


def test_a_shared_error_does_not_blur_the_order():
    shared = normal_draws([0.0], [5.0])
    drawn = np.hstack([10.0 + shared, 9.0 + shared])
    first = rank_regions(candidates([10.0, 9.0], drawn), RankingSpec()).places[0]
    assert first.ahead_of_next == 1.0
    assert first.tied_with == ()


def test_the_probability_of_the_top_and_the_rank_interval():
    drawn = normal_draws([10.0, 5.0, 5.0, 1.0], [0.1, 0.1, 0.1, 0.1])
    places = rank_regions(candidates([10.0, 5.0, 5.0, 1.0], drawn), RankingSpec(top=2)).places
    assert [one.in_top for one in places] == pytest.approx([1.0, 0.5, 0.5, 0.0], abs=0.02)
    assert (
        [one.ranks for one in places] == [(1, 1, 1), (2, 2, 3), (2, 2, 3), (4, 4, 4)]
        or [one.ranks for one in places] == [(1, 1, 1), (2, 3, 3), (2, 2, 3), (4, 4, 4)]
        or [one.ranks for one in places] == [(1, 1, 1), (2, 2, 3), (2, 3, 3), (4, 4, 4)]
    )
    assert places[1].tied_with == ("C",)


def test_equal_values_share_the_better_rank_and_are_ahead_by_half():
    drawn = np.array([[2.0, 2.0, 1.0], [3.0, 3.0, 1.0]])
    places = rank_regions(candidates([2.5, 2.5, 1.0], drawn), RankingSpec()).places
    assert [one.rank for one in places] == [1, 1, 3]
    assert places[0].ahead_of_next == 0.5
    assert ranks_of(drawn).tolist() == [[1, 1, 3], [1, 1, 3]]


def test_the_lines_say_who_is_ahead_and_who_cannot_be_told_apart():
    means = [20.0, 10.0, 5.0, 4.9, 4.8]
    ranking = rank_regions(
        candidates(means, normal_draws(means, [0.1, 0.1, 1, 1, 1])), RankingSpec()
    )
    assert ranking_lines(ranking) == [
        "A is ahead of B with over 99.9 %",
        "B is ahead of C with over 99.9 %",
        "C, D and E cannot be told apart",
    ]


def test_a_tie_beyond_the_next_in_the_list_is_said():
    means, sds = [5.0, 4.0, 3.0], [3.0, 0.1, 0.1]
    ranking = rank_regions(candidates(means, normal_draws(means, sds)), RankingSpec())
    assert ranking_lines(ranking) == [
        "A and B cannot be told apart",
        "A cannot be told apart from C",
        "B is ahead of C with over 99.9 %",
    ]


def test_small_regions_and_those_short_of_data_are_left_out_with_the_reason():
    spec = RankingSpec(least_area_km2=5.0, least_valid_share=0.5)
    ranking = rank_regions(
        candidates([4.0, 3.0, 2.0, np.nan], area=[1.0, 10.0, 10.0, 10.0], valid=[1, 2, 9, 0]), spec
    )
    assert [one.region for one in ranking.places] == ["C"]
    assert dict(ranking.left_out) == {
        "A": "area 1 km2 below 5",
        "B": "share with data 0.200 below 0.5",
        "D": "no result",
    }


def test_one_region_is_first_and_nothing_more_is_said():
    ranking = rank_regions(candidates([4.0], normal_draws([4.0], [1.0])), RankingSpec())
    assert ranking.places[0].ahead_of_next is None
    assert ranking_lines(ranking) == []
    assert len(ranking_rows(ranking)[0]) == len(ranking_columns(ranking.spec, drawn=True))


def test_where_no_region_passes_the_lines_say_so():
    spec = RankingSpec(least_area_km2=1e9)
    ranking = rank_regions(candidates([4.0, 2.0], normal_draws([4.0, 2.0], [1.0, 1.0])), spec)
    assert ranking_rows(ranking) == []
    assert ranking_lines(ranking) == ["no region passes the ranking's conditions"]


def test_without_draws_the_table_holds_the_central_order_alone():
    ranking = rank_regions(candidates([1.0, 2.0]), RankingSpec(by="drawdown_t_per_yr"))
    assert ranking_columns(ranking.spec, drawn=False) == ("region", "rank", "drawdown_t_per_yr")
    assert ranking_rows(ranking) == [["B", 1, 2.0], ["A", 2, 1.0]]
