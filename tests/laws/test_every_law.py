"""What holds for every law; runs over the catalogue, unedited when a law is added."""

from __future__ import annotations

import inspect
import pickle

import dask
import dask.array as da
import numpy as np
import pytest

from mapper.laws import LAW_INPUTS, LAWS, Law, Parameter, cap_law, compose
from mapper.rocks import ROCKS

COMPOSED = {
    "runoff alone": compose(temperature="none"),
    "power, exponential": compose(runoff="power", temperature="exponential"),
    "saturating, cover": compose(runoff="saturating", vegetation="cover"),
    "capped product": cap_law(LAWS["product"]),
}
EVERY = {**LAWS, **COMPOSED}
every_law = pytest.mark.parametrize("law", EVERY.values(), ids=EVERY)
GRADES = {"read", "quoted", "memory", "computed", "project"}
DRAWS = 5


def spread_inputs(law: Law, shape: tuple[int, ...] = (24,)) -> list[np.ndarray]:
    """Each layer of the law over its whole range, in an order of its own."""
    rng = np.random.default_rng(11)
    count = int(np.prod(shape))
    return [
        rng.permutation(np.linspace(one.low, one.high, count)).reshape(shape) for one in law.inputs
    ]


def middle_inputs(law: Law) -> list[np.ndarray]:
    return [np.full(9, (one.low + one.high) / 2) for one in law.inputs]


def values_of(one: Parameter) -> list[float]:
    return [*one.by_rock.values(), *([] if one.default is None else [one.default])]


@every_law
def test_the_function_takes_what_the_description_says(law):
    taken = inspect.signature(law.function).parameters.values()
    positional = [one.name for one in taken if one.kind is not inspect.Parameter.KEYWORD_ONLY]
    keywords = [one.name for one in taken if one.kind is inspect.Parameter.KEYWORD_ONLY]
    assert positional == list(law.input_names)
    assert keywords == [one.name for one in law.parameters]


@every_law
def test_layers_and_rocks_are_known_and_ranges_have_a_source(law):
    assert set(law.input_names) <= set(LAW_INPUTS)
    assert set(law.rocks) <= set(ROCKS)
    assert set(law.rises_with) <= set(law.input_names)
    assert len(law.rocks) == len(set(law.rocks)) > 0
    for one in law.inputs:
        assert one.low < one.high
        assert one.range_source
        assert one.range_grade in GRADES


@every_law
def test_no_rock_without_a_value_for_each_parameter(law):
    for rock in law.rocks:
        values = law.central_values(rock)
        assert list(values) == [one.name for one in law.parameters]
        assert ROCKS[rock].weathers


@every_law
def test_each_parameter_has_source_grade_and_a_range_around_its_values(law):
    for one in law.parameters:
        assert one.source, one.name
        assert one.meaning, one.name
        assert one.unit, one.name
        assert one.grade in GRADES, one.name
        assert values_of(one), one.name
        assert all(one.low <= value <= one.high for value in values_of(one)), one.name


@every_law
def test_each_spread_is_within_the_bounds_and_around_the_default(law):
    for one in law.parameters:
        spread = one.spread
        if spread is None:
            continue
        if spread.kind in {"normal", "lognormal"}:
            assert spread.sd > 0, one.name
        else:
            assert one.low <= spread.low < spread.high <= one.high, one.name
            assert one.default is None or spread.low <= one.default <= spread.high, one.name


@every_law
def test_the_texts_a_user_reads_are_there(law):
    for text in (law.name, law.title, law.summary, law.formula, law.reference):
        assert text.strip()
    assert law.cautions
    function = getattr(law.function, "function", law.function)
    assert inspect.getdoc(function)


def test_each_law_is_listed_under_its_own_name():
    assert all(name == law.name for name, law in LAWS.items())


CHECKS = [(law, n) for law in LAWS.values() for n, _ in enumerate(law.checks)]


@pytest.mark.parametrize(("law", "n"), CHECKS, ids=[f"{law.name}-{n}" for law, n in CHECKS])
def test_the_law_gives_the_value_that_its_check_point_states(law, n):
    check = law.checks[n]
    assert check.source
    assert check.grade != "memory", "a number from memory is no check"
    assert set(check.inputs) == set(law.input_names)
    values = {**law.central_values(check.rock), **check.parameters}
    found = law.function(*(np.array([check.inputs[one]]) for one in law.input_names), **values)
    np.testing.assert_allclose(found, check.expected, rtol=check.relative_tolerance)


def test_a_law_without_check_points_is_one_we_know_of():
    without = {name for name, law in LAWS.items() if not law.checks}
    assert without == {"product", "white-1984-brook"}


@every_law
def test_it_is_finite_float64_and_not_negative_over_its_ranges(law):
    for rock in law.rocks:
        found = law.function(*spread_inputs(law), **law.central_values(rock))
        assert found.dtype == np.float64
        assert np.isfinite(found).all()
        assert (found >= 0).all()


@every_law
def test_it_is_finite_at_both_ends_of_every_parameter(law):
    for one in law.parameters:
        for end in (one.low, one.high):
            values = {**law.central_values(law.rocks[0]), one.name: end}
            found = law.function(*spread_inputs(law), **values)
            assert np.isfinite(found).all(), (one.name, end)


@every_law
def test_no_data_in_any_layer_gives_no_data_there_alone(law):
    values = law.central_values(law.rocks[0])
    for n, _ in enumerate(law.inputs):
        layers = middle_inputs(law)
        layers[n][4] = np.nan
        missing = np.isnan(law.function(*layers, **values))
        assert missing.tolist() == [place == 4 for place in range(9)]


@every_law
def test_the_layers_are_left_as_they_were(law):
    layers = spread_inputs(law)
    before = [one.copy() for one in layers]
    for one in layers:
        one.setflags(write=False)
    law.function(*layers, **law.central_values(law.rocks[0]))
    for one, copy in zip(layers, before, strict=True):
        np.testing.assert_array_equal(one, copy)


RISING = [(law, name) for law in EVERY.values() for name in law.rises_with]


@pytest.mark.parametrize(("law", "name"), RISING, ids=[f"{law.name}-{n}" for law, n in RISING])
def test_it_never_falls_with_what_it_is_said_to_rise_with(law, name):
    place = law.input_names.index(name)
    one = law.inputs[place]
    layers = [np.full(200, (other.low + other.high) / 2) for other in law.inputs]
    layers[place] = np.linspace(one.low, one.high, 200)
    for rock in law.rocks:
        rate = law.function(*layers, **law.central_values(rock))
        assert (np.diff(rate) >= -1e-12 * np.abs(rate[1:])).all(), rock
        assert rate[-1] > rate[0], rock


WET = {name: law for name, law in EVERY.items() if "runoff" in law.input_names}


@pytest.mark.parametrize("law", WET.values(), ids=WET)
def test_no_runoff_no_uptake(law):
    layers = middle_inputs(law)
    layers[law.input_names.index("runoff")][:] = 0.0
    assert (law.function(*layers, **law.central_values(law.rocks[0])) == 0).all()


@every_law
def test_draws_in_one_call_equal_one_call_a_draw(law):
    rng = np.random.default_rng(5)
    central = law.central_values(law.rocks[0])
    draws = {
        one.name: np.clip(central[one.name] * rng.uniform(0.9, 1.1, (DRAWS, 1)), one.low, one.high)
        for one in law.parameters
    }
    layers = spread_inputs(law)
    together = law.function(*layers, **draws)
    assert together.shape == (DRAWS, layers[0].size)
    for n in range(DRAWS):
        alone = law.function(*layers, **{name: float(one[n, 0]) for name, one in draws.items()})
        np.testing.assert_allclose(together[n], alone, rtol=1e-13)


@every_law
def test_it_survives_a_pickle(law):
    again = pickle.loads(pickle.dumps(law))  # noqa: S301 - our own bytes
    assert again == law
    layers = spread_inputs(law)
    values = law.central_values(law.rocks[0])
    np.testing.assert_array_equal(
        again.function(*layers, **values), law.function(*layers, **values)
    )


def _refuse(*_args, **_kwargs):
    raise AssertionError("computed while the graph was being built")


@every_law
@pytest.mark.parametrize("chunks", [(7, 5), (20, 16), (1, 16), (20, 1)], ids=str)
def test_dask_gives_the_same_bits_under_any_chunking(law, chunks):
    layers = spread_inputs(law, (20, 16))
    values = law.central_values(law.rocks[0])
    expected = law.function(*layers, **values)
    with dask.config.set(scheduler=_refuse):
        lazy = da.map_blocks(
            law.function,
            *(da.from_array(one, chunks=chunks) for one in layers),
            dtype=np.float64,
            meta=np.empty((0, 0)),
            **values,
        )
    found = lazy.compute(scheduler="synchronous")
    assert found.tobytes() == expected.tobytes()
