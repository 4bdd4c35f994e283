"""The composed law."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from mapper.laws import LAWS, RESPONSES, compose

NAMES = {
    driver: [name for other, name in RESPONSES if other == driver]
    for driver in ("runoff", "temperature", "vegetation", "soil")
}
ALL = [dict(zip(NAMES, names, strict=True)) for names in itertools.product(*NAMES.values())]


@pytest.mark.parametrize("chosen", ALL, ids=lambda chosen: "-".join(chosen.values()))
def test_every_combination_can_be_composed_and_evaluated(chosen):
    law = compose(**chosen)
    middle = [np.array([(one.low + one.high) / 2]) for one in law.inputs]
    for rock in law.rocks:
        assert np.isfinite(law.function(*middle, **law.central_values(rock))).all()


def test_with_runoff_alone_it_is_the_law_of_its_base_to_the_bit():
    law, base = compose(temperature="none"), LAWS["amiotte-suchet-1995"]
    runoff = np.linspace(0.0, 3000.0, 500)
    for rock in base.rocks:
        values = base.central_values(rock)
        assert law.function(runoff, **values).tobytes() == base.function(runoff, **values).tobytes()


def test_at_all_references_it_is_the_base_rate():
    law = LAWS["product"]
    for rock in law.rocks:
        values = law.central_values(rock)
        rate = law.function(1000.0, 284.15, values["reference_cover"], 1.0, **values)
        assert rate == pytest.approx(values["concentration"])


def test_it_reads_only_the_layers_that_its_responses_need():
    assert compose(temperature="none").input_names == ("runoff",)
    assert LAWS["product"].input_names == ("runoff", "temperature", "vegetation", "soil_shielding")


def test_each_factor_multiplies():
    law = LAWS["product"]
    values = law.central_values("basalt")
    both = law.function(500.0, 290.0, 0.2, 0.1, **values)
    plain = compose().function(500.0, 290.0, **compose().central_values("basalt"))
    cover = (1 + 0.2) / (1 + 0.8)  # enhancement 2, cover 0.2 against 0.8
    assert both == pytest.approx(plain * cover * 0.1)


def test_a_parameter_it_does_not_have_is_refused():
    law = compose()
    with pytest.raises(TypeError, match="no parameter warmth"):
        law.function(1.0, 280.0, warmth=1.0, **law.central_values("basalt"))


@pytest.mark.parametrize("driver", NAMES)
def test_an_unknown_response_is_refused_by_name(driver):
    with pytest.raises(KeyError, match=f"no response to {driver} is called 'odd'"):
        compose(**{driver: "odd"})


def test_an_unknown_base_is_refused_by_name():
    with pytest.raises(KeyError, match="no base rates are called 'odd'; there are: amiotte"):
        compose(base="odd")


def test_it_warns_that_carbonate_rock_does_not_rise_with_temperature():
    assert any("carbonate rock" in caution for caution in compose().cautions)
    assert not any("carbonate rock" in one for one in compose(temperature="none").cautions)
