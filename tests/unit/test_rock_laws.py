"""Which law serves which rock."""

import pytest

from mapper.errors import JobError, LawError, ManyProblemsError
from mapper.job import load_job
from mapper.scheme import build_scheme
from tests.making import small_job


def scheme_of(tmp_path, law, rocks=("basalt", "granite")):
    return build_scheme(load_job(small_job(tmp_path, law=law)), rocks)


def test_each_rock_has_its_law_and_numbers(tmp_path):
    law = {"default": "amiotte-suchet-1995", "by_rock": {"basalt": "dessert-2003"}}
    scheme = scheme_of(tmp_path, law)
    assert scheme.by_rock["basalt"].law.name == "dessert-2003"
    assert scheme.by_rock["granite"].values == {"concentration": 0.095}
    assert set(scheme.input_names()) == {"runoff", "temperature"}


def test_what_does_not_weather_has_no_law(tmp_path):
    assert "ice" not in scheme_of(tmp_path, {"default": "amiotte-suchet-1995"}, ("ice",)).by_rock


def test_a_published_law_is_evaluated_as_published(tmp_path):
    scheme = scheme_of(tmp_path, {"default": "amiotte-suchet-1995"})
    assert all(one.changed == () for one in scheme.by_rock.values())


def test_a_number_that_the_job_sets_is_recorded_as_changed(tmp_path):
    law = {"default": "amiotte-suchet-1995", "parameters": {"concentration": 0.2}}
    scheme = scheme_of(tmp_path, law)
    assert scheme.by_rock["granite"].values == {"concentration": 0.2}
    assert scheme.by_rock["granite"].changed == ("concentration = 0.2 mmol L-1 (published: 0.095)",)


def test_a_number_for_one_rock_leaves_the_others(tmp_path):
    parameters = {"concentration": {"by_rock": {"basalt": 0.6}}}
    scheme = scheme_of(tmp_path, {"default": "amiotte-suchet-1995", "parameters": parameters})
    assert scheme.by_rock["basalt"].values == {"concentration": 0.6}
    assert scheme.by_rock["granite"].changed == ()


@pytest.mark.parametrize(
    ("law", "kind", "problem", "fix"),
    [
        ({"default": "desert-2003"}, LawError, "there is no law 'desert-2003'", '"dessert-2003"'),
        (
            {"default": "amiotte-suchet-1995", "by_rock": {"bassalt": "dessert-2003"}},
            JobError,
            "'bassalt' is not a rock",
            '"basalt"',
        ),
        (
            {"default": "amiotte-suchet-1995", "parameters": {"concentraton": 1}},
            LawError,
            "no law of this job has a parameter 'concentraton'",
            "concentration",
        ),
        (
            {"default": "amiotte-suchet-1995", "parameters": {"concentration": 99}},
            LawError,
            "concentration = 99 mmol L-1 lies outside 0.01 to 5",
            "a value in that range",
        ),
        (
            {"default": "product", "responses": {"runoff": "quadratic"}},
            LawError,
            "there is no response to runoff called 'quadratic'",
            "linear",
        ),
    ],
)
def test_a_wrong_law_table_is_refused(tmp_path, law, kind, problem, fix):
    with pytest.raises((kind, ManyProblemsError), match=problem) as caught:
        scheme_of(tmp_path, law)
    first = getattr(caught.value, "problems", (caught.value,))[0]
    assert fix in first.fix


def test_a_rock_that_the_law_has_no_numbers_for_is_refused(tmp_path):
    with pytest.raises(LawError, match="'dessert-2003' .*granite|no numbers for granite") as caught:
        scheme_of(tmp_path, {"default": "dessert-2003"}, ("basalt", "granite"))
    assert "[law.by_rock]" in caught.value.fix
