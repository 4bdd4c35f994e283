"""The two granite laws: a published response on a stated base rate."""

from __future__ import annotations

import pytest

from mapper.laws import LAWS

WHITE = LAWS["white-blum-1995"]
OLIVA = LAWS["oliva-2003"]
both = pytest.mark.parametrize("law", [WHITE, OLIVA], ids=lambda law: law.name)


@both
def test_at_the_reference_temperature_it_is_the_base_rate(law):
    base = LAWS["amiotte-suchet-1995"]
    expected = base.function(800.0, **base.central_values("granite"))
    assert law.function(800.0, 284.15, **law.central_values("granite")) == pytest.approx(expected)


@both
def test_the_source_says_that_the_base_rate_is_the_projects_choice(law):
    assert "project" in law.parameter("concentration").source
    assert law.rocks == ("granite",)


def test_the_response_of_oliva_is_the_flatter_one():
    ratios = [
        law.function(1500.0, 298.15, **law.central_values("granite"))
        / law.function(1500.0, 278.15, **law.central_values("granite"))
        for law in (OLIVA, WHITE)
    ]
    assert ratios[0] < ratios[1]
    assert OLIVA.parameter("activation_energy").default == 48.7  # read
