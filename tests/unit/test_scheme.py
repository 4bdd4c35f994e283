"""Which law serves which rock: rocks outside a law, the supply limit, own laws, alternatives."""

from __future__ import annotations

import pytest

from mapper import scheme as scheme_module
from mapper.errors import LawError, ManyProblemsError, MapperError
from mapper.job import load_job
from mapper.laws import LAWS, Capped
from mapper.scheme import build_scheme, find_laws

LAYERS = """
[layers.lithology]
path = "rocks.tif"
legend = "legend.csv"
"""
OWN = """
[law.own.mine]
formula = "a * runoff"
inputs = { runoff = "mm yr-1" }
parameters = { a = { value = 0.5, unit = "mmol L-1", sd = 0.1 } }
"""


def scheme_of(tmp_path, law, rocks=("basalt", "granite", "limestone"), more=""):
    path = tmp_path / "job.toml"
    path.write_text(f"[law]\n{law}\n{more}\n{LAYERS}", encoding="utf-8")
    return build_scheme(load_job(path), rocks)


def problems_of(tmp_path, law, rocks=("basalt", "granite", "limestone"), more=""):
    with pytest.raises(MapperError) as caught:
        scheme_of(tmp_path, law, rocks, more)
    return [str(one) for one in getattr(caught.value, "problems", (caught.value,))]


def test_a_rock_outside_a_law_needs_every_number_by_rock_from_the_job(tmp_path):
    one = '[law.parameters.concentration.by_rock]\n"ultramafic rock" = 0.4'
    (said,) = problems_of(tmp_path, 'default = "product"', ("ultramafic rock",), one)
    assert "no numbers for ultramafic rock" in said
    assert "activation_energy = { by_rock" in said
    both = one + '\n[law.parameters.activation_energy.by_rock]\n"ultramafic rock" = 50'
    found = scheme_of(tmp_path, 'default = "product"', ("ultramafic rock",), both)
    assert found.by_rock["ultramafic rock"].values["concentration"] == 0.4


def test_a_law_without_numbers_by_rock_serves_no_rock_outside_it(tmp_path):
    numbers = "[law.parameters]\nbicarbonate_at_zero = 300"
    (said,) = problems_of(tmp_path, 'default = "dessert-2003"', ("granite",), numbers)
    assert "'dessert-2003' has no numbers for granite" in said


def test_a_limit_for_a_rock_does_not_make_a_capped_law_serve_it(tmp_path):
    law = 'default = "dessert-2003"\ncap = "dixon-von-blanckenburg-2012"'
    limit = "[law.parameters.weathering_limit.by_rock]\ngranite = 100"
    (said,) = problems_of(tmp_path, law, ("granite",), limit)
    assert "no numbers for granite" in said


def test_the_supply_limit_holds_silicate_rock_and_lets_carbonate_be(tmp_path):
    found = scheme_of(tmp_path, 'cap = "dixon-von-blanckenburg-2012"')
    assert isinstance(found.by_rock["basalt"].law.function, Capped)
    assert found.by_rock["basalt"].values["weathering_limit"] == 150.0
    assert "supply limit" in found.by_rock["basalt"].changed[0]
    assert not isinstance(found.by_rock["limestone"].law.function, Capped)
    assert found.by_rock["limestone"].changed == ()


def test_a_limit_set_for_all_rocks_does_not_hold_carbonate(tmp_path):
    law = 'cap = "dixon-von-blanckenburg-2012"'
    found = scheme_of(tmp_path, law, more="[law.parameters]\nweathering_limit = 120")
    assert found.by_rock["granite"].values["weathering_limit"] == 120.0
    assert not isinstance(found.by_rock["limestone"].law.function, Capped)
    own = "[law.parameters.weathering_limit.by_rock]\nlimestone = 300"
    found = scheme_of(tmp_path, law, more=own)
    assert found.by_rock["limestone"].values["weathering_limit"] == 300.0


def test_a_limit_out_of_bounds_or_without_a_cap_is_refused(tmp_path):
    limit = "[law.parameters]\nweathering_limit = 2"
    said = problems_of(tmp_path, 'cap = "dixon-von-blanckenburg-2012"', ("granite",), limit)
    assert "outside 10 to 1e+09" in said[0]
    said = problems_of(tmp_path, 'default = "product"', ("granite",), limit)
    assert "no law of this job has a parameter 'weathering_limit'" in said[0]


def test_an_unknown_cap_is_refused_by_name(tmp_path):
    (said,) = problems_of(tmp_path, 'cap = "dixon-2012"')
    assert 'cap = "dixon-von-blanckenburg-2012"' in said


def test_a_law_of_the_job_serves_as_default_and_by_rock(tmp_path):
    found = scheme_of(tmp_path, 'default = "mine"\nby_rock = { basalt = "dessert-2003" }', more=OWN)
    assert found.by_rock["granite"].law.name == "mine"
    assert found.by_rock["granite"].values == {"a": 0.5}
    found = scheme_of(tmp_path, 'by_rock = { basalt = "mine" }', more=OWN)
    assert found.by_rock["basalt"].law.name == "mine"
    assert found.by_rock["granite"].law.name == "product"


def test_all_that_is_wrong_with_laws_of_the_job_is_told_at_once(tmp_path):
    own = """
    [law.own.one]
    formula = "a * runof + c"
    inputs = { runoff = "mm yr-1" }
    parameters = { a = { value = 0.5, unit = "furlong" } }
    rocks = ["basal"]
    [law.own.two]
    formula = "a * runoff"
    inputs = { runoff = "mm yr-1" }
    parameters = { a = { value = 0.5, unit = "mm" } }
    [law.own.dessert-2003]
    formula = "runoff"
    """
    said = problems_of(tmp_path, 'default = "three"', more=own)
    assert len(said) == 7
    for part in (
        "furlong",
        "'runof' is not declared",
        "'c' is not declared",
        "'basal' is not a rock",
        "the formula gives m2 yr-1",
        "'dessert-2003' is a law of the catalogue",
        "there is no law 'three'",
    ):
        assert sum(part in one for one in said) == 1, part
    assert all("job.toml" in one for one in said)


def test_a_law_of_the_job_may_not_take_a_number_of_the_supply_limit(tmp_path):
    own = OWN.replace("a * runoff", "weathering_limit * runoff").replace(
        "{ a =", "{ weathering_limit ="
    )
    (said,) = problems_of(tmp_path, 'default = "mine"', more=own)
    assert "belongs to the supply limit" in said


def test_an_unknown_key_of_a_law_of_the_job_is_refused_with_the_nearest(tmp_path):
    (said,) = problems_of(tmp_path, 'default = "mine"', more=OWN + "rock = []")
    assert "unknown key 'rock'" in said
    assert "rocks" in said


def test_an_alternative_replaces_the_default_alone_and_leaves_what_it_does_not_serve(tmp_path):
    law = (
        'alternatives = [{ name = "maher-chamberlain-2014", weight = 2 }]\n'
        'by_rock = { basalt = "dessert-2003" }'
    )
    found = scheme_of(tmp_path, law)
    (other,) = found.alternatives
    assert (other.name, other.weight) == ("maher-chamberlain-2014", 2.0)
    assert list(other.replaced) == ["granite"]
    assert other.kept == ("limestone",)
    assert found.input_names() == ("runoff", "temperature")


def test_the_layers_of_alternatives_are_read_too(tmp_path):
    found = scheme_of(tmp_path, 'alternatives = ["west-2012"]')
    assert "erosion" not in found.input_names()
    assert "erosion" in found.read_names()
    assert [law.name for law in found.every_law()] == ["product", "west-2012"]


@pytest.mark.parametrize(
    ("law", "says"),
    [
        ('alternatives = ["product"]', "'product' is named 2 times"),
        ('alternatives = ["west-2012", "west-2012"]', "'west-2012' is named 2 times"),
        ('alternatives = ["west-2021"]', '"west-2012"'),
        ('alternatives = ["palandri-kharaka-2004"]', "only ranks"),
        ('alternatives = [{ name = "west-2012", weight = 0 }]', "a weight above zero"),
        ("alternatives = [{ weight = 1.0 }]", "name is missing"),
        ('alternatives = [{ name = "west-2012", wieght = 1 }]', "unknown key 'wieght'"),
        ("alternatives = [3]", "names of laws"),
        ('alternatives = "west-2012"', "a list is needed"),
        (
            'alternatives = ["dessert-2003"]\nby_rock = { basalt = "west-2012" }',
            "serves none of the rocks of the default law",
        ),
    ],
)
def test_a_bad_alternative_is_refused_with_what_to_write(tmp_path, law, says):
    assert any(says in one for one in problems_of(tmp_path, law))


def test_a_law_that_another_package_adds_is_usable_and_a_broken_one_is_an_error(
    tmp_path, monkeypatch
):
    added = {**LAWS, "added": LAWS["amiotte-suchet-1995"]}
    monkeypatch.setattr(scheme_module, "load_laws", lambda: added)
    assert "granite" in scheme_of(tmp_path, 'default = "added"').by_rock

    def broken():
        raise ValueError("law 'x' of 'package:law' has a name that is taken")

    monkeypatch.setattr(scheme_module, "load_laws", broken)
    with pytest.raises(LawError, match="has a name that is taken"):
        find_laws()
    with pytest.raises(MapperError, match="another package adds"):
        scheme_of(tmp_path, 'default = "product"')


def test_many_problems_are_one_error(tmp_path):
    with pytest.raises(ManyProblemsError):
        scheme_of(tmp_path, 'default = "nothing"\nby_rock = { basal = "product" }')
