import math

import numpy as np
import pytest
from scipy.special import ndtri
from worlds import NO_KEPT_SPREAD, central_totals, draw, job, linear_scheme, wet

from mapper.doubts import UncertaintySpec
from mapper.engine import KEPT
from mapper.laws import Spread
from mapper.lawspec import ParameterSpec
from mapper.rocks import ROCK_NAMES
from mapper.uncertainty.intervals import find_intervals

SCHEME = linear_scheme(basalt=0.479, granite=0.095)
STATES = wet(SCHEME, {"basalt": [3e6, 1e6], "granite": [2e6, 5e6]})


def spread(kind="normal", **numbers):
    return ParameterSpec(spread=Spread(kind=kind, **numbers))


def test_without_spread_every_draw_is_the_central_run_to_the_last_bit():
    spec = UncertaintySpec(draws=20, kept_share=NO_KEPT_SPREAD)
    drawn, doubts = draw(SCHEME, STATES, job(spec, concentration=spread(sd=0.0)))
    central = central_totals(SCHEME, STATES)[drawn.region, drawn.rock]
    assert doubts.quantities == ()
    assert (drawn.consumption == central).all()
    assert (drawn.drawdown == central * KEPT[drawn.rock]).all()


def test_a_rock_without_spread_stays_exact_beside_one_with_spread():
    spec = UncertaintySpec(draws=50, layers={"runoff": Spread(kind="lognormal", sd=1e-300)})
    drawn, _ = draw(SCHEME, STATES, job(spec, concentration=spread(sd=0.0)))
    central = central_totals(SCHEME, STATES)[drawn.region, drawn.rock]
    assert (drawn.consumption == central).all()
    assert drawn.drawdown.std(axis=0).min() > 0


def test_a_linear_law_spreads_as_its_closed_form():
    spec = UncertaintySpec(draws=4000, kept_share=NO_KEPT_SPREAD)
    scheme = linear_scheme(basalt=0.479)
    states = wet(scheme, {"basalt": [3e6, 1e6]})
    drawn, _ = draw(scheme, states, job(spec, concentration=spread(sd=0.05)))
    total = drawn.consumption.sum(axis=1)
    central = central_totals(scheme, states).sum()
    assert total.mean() == pytest.approx(central, rel=1e-4)
    assert total.std() == pytest.approx(central * 0.05 / 0.479, rel=2e-3)
    low, middle, high = find_intervals(drawn, len(ROCK_NAMES)).everything[0]
    half = ndtri(0.95) * central * 0.05 / 0.479
    assert (low, middle, high) == pytest.approx((central - half, central, central + half), rel=1e-3)


def test_rocks_drawn_for_themselves_spread_less_than_rocks_drawn_together():
    spec = UncertaintySpec(draws=4000, kept_share=NO_KEPT_SPREAD)
    central = central_totals(SCHEME, STATES).sum(axis=0)
    central = central[central > 0]
    found = {}
    for per_rock in (True, False):
        asked = ParameterSpec(spread=Spread(kind="lognormal", sd=0.1), per_rock=per_rock)
        drawn, _ = draw(SCHEME, STATES, job(spec, concentration=asked))
        found[per_rock] = drawn.consumption.sum(axis=1).std()
    relative = math.sqrt(math.exp(0.01) * (math.exp(0.01) - 1))
    assert found[True] == pytest.approx(relative * math.sqrt((central**2).sum()), rel=0.02)
    assert found[False] == pytest.approx(relative * central.sum(), rel=0.005)


def test_a_product_of_lognormals_is_lognormal_with_the_sum_of_the_variances():
    layers = {"runoff": Spread(kind="lognormal", sd=0.3)}
    kept = Spread(kind="lognormal", sd=0.2)
    scheme = linear_scheme(andesite=0.222)
    states = wet(scheme, {"andesite": [1e6]})
    spec = UncertaintySpec(draws=8000, layers=layers, kept_share=kept)
    drawn, _ = draw(scheme, states, job(spec, concentration=spread("lognormal", sd=0.25)))
    logs = np.log(drawn.consumption.sum(axis=1) / central_totals(scheme, states).sum())
    assert logs.std() == pytest.approx(math.hypot(0.3, 0.25), rel=0.02)
    assert np.quantile(logs, 0.95) == pytest.approx(ndtri(0.95) * math.hypot(0.3, 0.25), rel=0.03)


def test_the_share_that_lasts_moves_drawdown_and_not_consumption():
    spec = UncertaintySpec(draws=2000, kept_share=Spread(kind="lognormal", sd=0.2, per_rock=True))
    scheme = linear_scheme(granite=0.095, limestone=1.586)
    states = wet(scheme, {"granite": [1e6], "limestone": [1e6]})
    drawn, doubts = draw(scheme, states, job(spec, concentration=spread(sd=0.0)))
    assert doubts.keys == ("kept_share.granite",)
    assert np.ptp(drawn.consumption, axis=0).max() == 0.0
    granite = drawn.drawdown[:, drawn.rock == ROCK_NAMES.index("granite")]
    assert np.log(granite).std() == pytest.approx(0.2, rel=5e-3)


def test_intervals_cover_the_truth_in_nine_of_ten_worlds():
    """A world's numbers are measured with error; the spread is that error."""
    worlds, draws = 500, 300
    areas = {"basalt": [3e6], "granite": [9e6]}
    from mapper.uncertainty.draws import draw_quantiles

    errors = draw_quantiles(UncertaintySpec(draws=worlds, seed=11), ("b", "g", "q"), where="")
    covered = 0
    for at in range(worlds):
        b, g, q = (
            math.exp(sd * ndtri(errors[key][at]))
            for key, sd in (("b", 0.25), ("g", 0.25), ("q", 0.1))
        )
        measured = linear_scheme(basalt=0.479 * b, granite=0.095 * g)
        states = wet(measured, areas, runoff=500.0 * q)
        true = linear_scheme(basalt=0.479, granite=0.095)
        truth = central_totals(true, wet(true, areas, runoff=500.0)).sum()
        spec = UncertaintySpec(
            draws=draws,
            seed=at,
            layers={"runoff": Spread(kind="lognormal", sd=0.1)},
            kept_share=NO_KEPT_SPREAD,
        )
        drawn, _ = draw(measured, states, job(spec))
        low, _, high = np.quantile(drawn.consumption.sum(axis=1), (0.05, 0.5, 0.95))
        covered += low <= truth <= high
    assert covered / worlds == pytest.approx(0.90, abs=0.02)


def test_a_spread_across_a_physical_limit_is_held_there_and_counted():
    from mapper.uncertainty.draws import draw_quantiles
    from mapper.uncertainty.propagate import draw_samples
    from mapper.uncertainty.quantities import find_doubts

    spec = UncertaintySpec(draws=1000, kept_share=NO_KEPT_SPREAD)
    the_job = job(spec, concentration=spread(sd=0.479))
    doubts = find_doubts(the_job, linear_scheme(basalt=0.479))
    samples = draw_samples(doubts, draw_quantiles(spec, doubts.keys, where=""), 1000)
    values = samples.parameters["basalt"]["concentration"]
    assert values.min() == 0.01
    below = 1000 * 0.16377  # normal below (0.01 - 0.479) / 0.479 = -0.979 sd
    assert samples.held == {"concentration.basalt": pytest.approx(below, abs=2)}
