"""What a user may get wrong, and the answer."""

import pytest
from worlds import ISLAND

from mapper.errors import MapperError
from mapper.job import load_job
from mapper.planning import make_plan
from mapper.uncertainty.spread import make_draws

HEAD = """
[grid]
from = "lithology"
[layers.lithology]
path = "{grids}/lithology.tif"
legend = "{grids}/legend.csv"
[layers.temperature]
path = "{grids}/climate.nc"
variable = "tas"
[layers.runoff]
path = "{grids}/runoff.tif"
[law]
by_rock = {{ basalt = "dessert-2003", "ultramafic rock" = "product" }}
[law.parameters.concentration]
by_rock = {{ "ultramafic rock" = 0.479 }}
{concentration}
[law.parameters.activation_energy]
by_rock = {{ "ultramafic rock" = 50.0 }}
"""


def job_file(tmp_path, text, concentration=""):
    grids = ISLAND.parents[1] / "demo_grids"
    path = tmp_path / "job.toml"
    head = HEAD.format(grids=grids, concentration=concentration)
    path.write_text(head + text, encoding="utf-8")
    return path


def refusal(tmp_path, text, concentration=""):
    path = job_file(tmp_path, text, concentration)
    with pytest.raises(MapperError) as refused:
        prepared(path)
    return str(refused.value)


def prepared(path):
    job = load_job(path)
    return make_draws(job, make_plan(job))


@pytest.mark.parametrize(
    ("text", "problem", "fix"),
    [
        ("[uncertainty]\ndraws = 0", "draws = 0, and a whole number of 1 or more", "draws = 1000"),
        ("[uncertainty]\ndraws = 10.5", "draws = 10.5, and a whole number", "draws = 1000"),
        ("[uncertainty]\nseed = -1", "seed = -1, and a whole number of 0 or more", "seed = 0"),
        ("[uncertainty]\nmethod = 'sobol'", "one of latin-hypercube", "latin-hypercube"),
        ("[uncertainty]\ndrawz = 5", "unknown key 'drawz'", "draws"),
        (
            "[uncertainty.layers]\nrunoff = { sd = -0.1 }",
            "sd = -0.1, and a spread of zero or more",
            "sd = 8.0",
        ),
        ("[uncertainty.layers]\nrunof = { sd = 0.1 }", "unknown key 'runof'", "runoff"),
        (
            "[uncertainty.layers]\nvegetation = { sd = 0.1 }",
            "vegetation, which no law of this job reads",
            "read are: runoff, temperature",
        ),
        (
            "[uncertainty.layers]\ntemperature = { kind = 'lognormal', sd = 0.1 }",
            "a spread of what is added to the map",
            'kind = "normal"',
        ),
        (
            "[uncertainty.layers]\nrunoff = { kind = 'uniform', low = 1.1, high = 1.3 }",
            "that multiplies the map, around 1",
            "low, high",
        ),
        (
            "[uncertainty]\ncorrelations = [{ between = ['warming_rate'], value = 0.5 }]",
            "a list of pairs",
            "between",
        ),
        (
            "[uncertainty]\ncorrelations = [{ between = ['warming_rate', 'layers.runoff'], "
            "value = 1.5 }]",
            "a value from -1 to 1",
            "between",
        ),
        (
            "[uncertainty]\ncorrelations = [{ between = ['warming_rat', 'activation_energy'], "
            "value = 0.5 }]",
            "'warming_rat', which is not drawn",
            "warming_rate",
        ),
        ("[ranking]\nby = 'drawdown'", "by = 'drawdown', and one of", "drawdown_t_per"),
        ("[ranking]\ntop = 0", "top = 0, and a whole number of 1 or more", "top = 3"),
        ("[ranking]\nleast_valid_share = 2", "a share from 0 to 1", "least_valid_share"),
        ("[ranking.hotspots]", "either above or richest_area_share", "richest_area_share"),
        (
            "[ranking.hotspots]\nabove = 1.0\nrichest_area_share = 0.1",
            "either above or richest_area_share",
            "richest_area_share",
        ),
    ],
)
def test_a_wrong_table_is_refused_with_what_to_write(tmp_path, text, problem, fix):
    said = refusal(tmp_path, text)
    assert problem in said
    assert fix in said.split("fix:")[-1]


@pytest.mark.parametrize(
    ("spread", "problem"),
    [
        ("sd = -1.0", "a spread of zero or more"),
        ("sd = 1.0\nlow = 0.5", "sd, and neither low nor high"),
        ("kind = 'uniform'\nlow = 2.0\nhigh = 1.0", "low below high"),
        ("kind = 'uniform'\nsd = 1.0", "low and high"),
        ("kind = 'gaussian'\nsd = 1.0", "one of normal, lognormal, uniform, triangular"),
        ("sd = 1.0\nper_rock = 1", "true or false"),
        ("kind = 'uniform'\nlow = 1.0\nhigh = 2.0", "concentration of andesite is 0.222"),
    ],
)
def test_a_wrong_spread_of_a_parameter_is_refused(tmp_path, spread, problem):
    assert problem in refusal(tmp_path, "[uncertainty]", spread)


def test_all_that_is_wrong_is_said_at_once(tmp_path):
    said = refusal(tmp_path, "[uncertainty]\ndraws = 0\nmethod = 'x'\n[ranking]\ntop = -1")
    assert said.startswith("1. ")
    assert "3. " in said


def test_a_spread_in_the_job_takes_the_place_of_the_laws_own(tmp_path):
    asked = "kind = 'lognormal'\nsd = 0.4\nper_rock = false"
    draws = prepared(job_file(tmp_path, "[uncertainty]\ndraws = 16", asked))
    one = next(one for one in draws.doubts.quantities if one.name == "concentration")
    assert (one.key, one.spread.sd, one.grade) == ("concentration", 0.4, "job")
    assert "layers.runoff" in draws.doubts.certain


def test_a_job_without_the_table_draws_nothing(tmp_path):
    assert prepared(job_file(tmp_path, "")) is None
