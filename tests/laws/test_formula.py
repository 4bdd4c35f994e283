"""A law of one's own: what a formula may hold, its units, and what it gives."""

from __future__ import annotations

import builtins
import pickle
import time

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mapper.errors import LawError, ManyProblemsError, MapperError, UnitError
from mapper.expression import WRITABLE
from mapper.formula import formula_law
from mapper.laws import LAWS

RUNOFF = {"runoff": "mm yr-1"}
CONCENTRATION = {"a": {"value": 0.5, "unit": "mmol L-1"}}
BASALT = {
    "a": {"value": 323.44, "unit": "umol L-1"},
    "b": {"value": 0.0642, "unit": "K-1", "sd": 0.01},
    "freezing": {"value": 273.15, "unit": "K"},
}


def make(formula, inputs=RUNOFF, parameters=CONCENTRATION, **more):
    return formula_law("own", formula, inputs, parameters, **more)


def rate_of(law, *layers, rock="basalt"):
    return law.function(*(np.asarray(one, float) for one in layers), **law.central_values(rock))


def test_a_published_law_written_as_a_formula_gives_the_same():
    both = {"runoff": "mm yr-1", "temperature": "K"}
    own = make("a * exp(b * (temperature - freezing)) * runoff", both, BASALT)
    runoff, temperature = np.array([300.0, 1000.0]), np.array([280.0, 298.15])
    published = LAWS["dessert-2003"]
    expected = published.function(runoff, temperature, **published.central_values("basalt"))
    np.testing.assert_allclose(rate_of(own, runoff, temperature), expected, rtol=1e-12)


@pytest.mark.parametrize(
    ("unit", "value", "expected"),
    [
        ("mmol L-1", 0.5, 0.5),  # x 1 m yr-1 = 0.5 mol m-2 yr-1
        ("mol m-3", 0.5, 0.5),
        ("umol/L", 500.0, 0.5),
        ("mmol CO2 L-1", 0.5, 0.5),
        ("g CO2 m-3", 44.0095, 1.0),
        ("mg CO2 L-1", 44.0095, 1.0),
        ("g C m-3", 12.011, 1.0),
        ("mol ha-1 mm-1", 10.0, 1.0),  # 1000 mm x 10 mol over 10 000 m2
    ],
)
def test_the_result_is_turned_to_moles_for_each_square_metre_and_year(unit, value, expected):
    law = make("a * runoff", parameters={"a": {"value": value, "unit": unit}})
    assert rate_of(law, [1000.0]) == pytest.approx(expected, rel=1e-12)


def test_a_law_by_erosion_needs_the_step_from_mass_to_co2():
    tonnes = {"c": {"value": 4.0, "unit": "mol t-1"}}
    law = make("c * erosion", {"erosion": "t km-2 yr-1"}, tonnes)
    assert rate_of(law, [1e6]) == pytest.approx(4.0)
    with pytest.raises(LawError, match="gives kg m-2 yr-1") as caught:
        make("erosion * c", {"erosion": "t km-2 yr-1"}, {"c": {"value": 1.0, "unit": "1"}})
    assert "mol t-1" in caught.value.fix


@pytest.mark.parametrize(
    ("formula", "says"),
    [
        ("a * rain", "'rain' is not declared"),
        ("a * runof", "did you mean 'runoff'"),
        ("a.__class__ * runoff", "attribute is not arithmetic"),
        ("__import__", "'__import__' is not declared"),
        ("__import__(a) * runoff", "not a function a formula may call"),
        ("eval(a)", "not a function a formula may call"),
        ("(exp)(a)(runoff)", "not a function a formula may call"),
        ("a.real(runoff)", "not a function a formula may call"),
        ("exp(a, runoff)", "wrong arguments"),
        ("exp(*a)", "not arithmetic"),
        ("a if runoff else a", "ifexp is not arithmetic"),
        ("a, runoff", "tuple is not arithmetic"),
        ("a * runoff and a", "boolop is not arithmetic"),
        ("a // runoff", "not plain arithmetic"),
        ("not a", "unaryop is not arithmetic"),
        ("2**2**2**2 * a * runoff", "an exponent must be a number or one name"),
        ("a * runoff ** (1 + 1)", "an exponent must be a number or one name"),
        ("a * runoff * 2 ** 99", "exponent 99 is too large"),
        ("a * runoff * 2 ** -99", "exponent -99 is too large"),
        ("a * runoff * 1e999", "too large"),
        ("a * runoff * " + "9" * 500, "too large"),
        ("a * runoff * True", "True is not a number"),
        ("a * runoff * 2j", "2j is not a number"),
        ("a * * runoff", "not plain arithmetic: "),
        ("a * (runoff", "not plain arithmetic: "),
        ("a runoff", "not plain arithmetic: "),
        ("1if a else runoff", "not plain arithmetic: "),
        ("", "the formula is empty"),
        ("   ", "the formula is empty"),
        ("a * runoff\u200b", "the formula holds"),
        ("a * runoff; a", "the formula holds ';'"),
        ("a * runoff if 'x' else a", "the formula holds"),
        ("a[0] * runoff", r"the formula holds '\['"),
        ("lambda: a", "the formula holds ':'"),
        ("a * runoff " + "+ a * runoff " * 100, "200|201|operators"),
        ("a * runoff" + " " * 3000 + "* a", "characters"),
        ("-" * 1000 + "a", "operators"),
        ("(" * 10_000 + "a" + ")" * 10_000, "characters"),
        ("(" * 900 + "a" + ")" * 900, "nests brackets 900 deep"),
        ("exp(" * 300 + "a" + ")" * 300, "nests brackets 300 deep"),
    ],
)
def test_a_bad_formula_is_refused_at_once_and_nothing_runs(formula, says, monkeypatch):
    def forbid(*_args, **_kwargs):
        raise AssertionError("the text was run")

    for name in ("eval", "exec", "__import__"):
        monkeypatch.setattr(builtins, name, forbid)
    start = time.perf_counter()
    with pytest.raises(LawError, match=says) as caught:
        make(formula)
    taken = time.perf_counter() - start
    monkeypatch.undo()
    assert taken < 1.0
    assert caught.value.fix
    assert "law 'own'" in caught.value.where


@pytest.mark.parametrize(
    ("formula", "says"),
    [
        ("a", "gives mol m-3, and a law must give mol m-2 yr-1"),
        ("runoff", "gives m yr-1, and"),
        ("a * runoff * runoff", "gives mol m-1 yr-2, and"),
        ("a + runoff", "adds mol m-3 and m yr-1"),
        ("a * (runoff - 1)", r"subtracts m yr-1 and 1 \(no unit\)"),
        ("a * exp(runoff)", "what exp is taken of is in m yr-1"),
        ("log(a) * runoff", "what log is taken of is in mol m-3"),
        ("a * maximum(runoff, a)", "compares, by maximum, m yr-1 and mol m-3"),
        ("a * runoff ** 0.5", r"gives mol m\^\(-5/2\) yr\^\(-1/2\), and"),
        ("a * sqrt(runoff)", r"gives mol m\^\(-5/2\) yr\^\(-1/2\), and"),
        ("2 ** runoff * a", "an exponent is in m yr-1"),
    ],
)
def test_units_that_do_not_fit_are_shown_as_they_are(formula, says):
    with pytest.raises(LawError, match=says):
        make(formula)


def test_the_column_of_the_fault_is_given():
    with pytest.raises(LawError) as caught:
        make("a * runoff * nothing")
    assert caught.value.where.endswith("column 14")


def test_a_power_by_a_parameter_needs_a_base_without_unit():
    numbers = {
        **CONCENTRATION,
        "reference": {"value": 400.0, "unit": "mm yr-1"},
        "power": {"value": 0.5, "unit": "1"},
    }
    law = make("a * reference * (runoff / reference) ** power", parameters=numbers)
    assert rate_of(law, [1600.0]) == pytest.approx(0.5 * 0.4 * 2.0)
    with pytest.raises(LawError, match="a quantity in m yr-1 is raised to a parameter"):
        make("a * runoff ** power", parameters={**CONCENTRATION, "power": numbers["power"]})


@pytest.mark.parametrize(
    "formula",
    [
        "a * runoff / (vegetation - vegetation)",
        "a * runoff / (1 / (vegetation * 0))",
        "a * runoff * log(vegetation - 1)",
        "a * runoff * log(vegetation - 2)",
        "a * runoff * sqrt(vegetation - 2)",
        "a * runoff * (vegetation - 1) ** -2",
        "a * runoff * (vegetation - 2) ** 0.5",
        "a * runoff * exp(exp(vegetation * 1000))",
    ],
)
def test_where_there_is_no_answer_there_is_no_data_and_no_warning(formula):
    law = make(formula, {"runoff": "mm yr-1", "vegetation": "1"})
    assert np.isnan(rate_of(law, [1000.0], [1.0])).all()


def test_only_the_cell_that_divides_by_zero_is_lost():
    law = make("a * runoff / vegetation", {"runoff": "mm yr-1", "vegetation": "1"})
    rate = rate_of(law, [1000.0, 1000.0], [0.0, 0.5])
    assert np.isnan(rate[0])
    assert rate[1] == 1.0


def test_no_data_stays_no_data_even_under_a_power_of_zero():
    law = make("a * runoff * vegetation ** 0", {"runoff": "mm yr-1", "vegetation": "1"})
    assert np.isnan(rate_of(law, [1000.0], [np.nan])).all()


def test_draws_broadcast_and_the_law_survives_a_pickle():
    law = pickle.loads(pickle.dumps(make("a * runoff")))  # noqa: S301 - our own bytes
    rate = law.function(np.array([100.0, 200.0]), a=np.array([[0.1], [0.2], [0.3]]))
    np.testing.assert_allclose(rate, [[0.01, 0.02], [0.02, 0.04], [0.03, 0.06]])


def test_the_longest_formula_that_is_allowed_works_and_pickles():
    law = make("a * runoff" + " + a * runoff" * 74)
    again = pickle.loads(pickle.dumps(law))  # noqa: S301 - our own bytes
    assert rate_of(again, [1000.0]) == pytest.approx(37.5)


def test_a_formula_may_run_over_several_lines():
    assert rate_of(make("a *\r\n runoff\n"), [1000.0]) == 0.5


def test_a_value_for_each_rock_decides_which_rocks_the_law_is_for():
    law = make(
        "a * runoff",
        parameters={"a": {"by_rock": {"basalt": 0.5, "granite": 0.1}, "unit": "mmol L-1"}},
    )
    assert law.rocks == ("basalt", "granite")
    assert rate_of(law, [1000.0], rock="granite") == pytest.approx(0.1)


def test_the_spread_and_bounds_of_the_job_are_kept():
    law = make(
        "a * runoff",
        parameters={
            "a": {
                "value": 0.5,
                "unit": "mmol L-1",
                "sd": 0.2,
                "low": 0.1,
                "high": 0.9,
                "meaning": "mine",
                "source": "my thesis",
            }
        },
    )
    one = law.parameter("a")
    assert (one.low, one.high, one.spread.sd) == (0.1, 0.9, 0.2)
    assert (one.meaning, one.source, one.grade) == ("mine", "my thesis", "project")


def test_a_range_is_kept_in_the_unit_in_which_the_layer_arrives():
    law = make("a * runoff", {"runoff": {"unit": "m yr-1", "low": 0.1, "high": 2}})
    assert (law.inputs[0].low, law.inputs[0].high) == (100.0, 2000.0)
    assert rate_of(law, [1000.0]) == 0.5


@pytest.mark.parametrize(
    ("inputs", "parameters", "kind", "says"),
    [
        ({"rain": "mm yr-1"}, CONCENTRATION, LawError, "'rain' is not a layer"),
        ({"runoff": "mm"}, CONCENTRATION, LawError, "declared in 'mm', which is m"),
        ({"runoff": "furlong"}, CONCENTRATION, UnitError, "'furlong' is not known"),
        ({"runoff": ""}, CONCENTRATION, LawError, "no unit is given"),
        ({"runoff": {"unit": "mm yr-1", "lo": 1}}, CONCENTRATION, LawError, "unknown key 'lo'"),
        (
            {"runoff": {"unit": "mm yr-1", "low": 9, "high": 1}},
            CONCENTRATION,
            LawError,
            "range 9 to 1 is empty",
        ),
        ({"temperature": "degC"}, CONCENTRATION, UnitError, "'degC' is not known"),
        (RUNOFF, {"a": {"value": 0.5}}, LawError, "no unit is given"),
        (RUNOFF, {"a": {"unit": "mmol L-1"}}, LawError, "no value"),
        (RUNOFF, {"a": {"value": "x", "unit": "1"}}, LawError, "no finite number"),
        (RUNOFF, {"a": {"value": float("nan"), "unit": "1"}}, LawError, "no finite number"),
        (RUNOFF, {"a": {"value": float("inf"), "unit": "1"}}, LawError, "no finite number"),
        (RUNOFF, {"a": {"value": True, "unit": "1"}}, LawError, "no finite number"),
        (RUNOFF, {"a": {"value": 1, "unit": "1", "std": 2}}, LawError, "unknown key 'std'"),
        (RUNOFF, {"a": {"value": 1, "unit": "1", "low": 2}}, LawError, "do not fit"),
        (RUNOFF, {"a": {"value": 1, "unit": "1", "sd": -2}}, LawError, "do not fit"),
        (RUNOFF, {"a": {"value": 1, "unit": "m99"}}, UnitError, "power in 'm99' is too large"),
        (RUNOFF, {"a": {"value": 1, "unit": "L CO2"}}, UnitError, "CO2 must follow a mass"),
        (RUNOFF, {"_a": {"value": 1, "unit": "1"}}, LawError, "cannot be a parameter's name"),
        (RUNOFF, {"if": {"value": 1, "unit": "1"}}, LawError, "cannot be a parameter's name"),
        (RUNOFF, {"exp": {"value": 1, "unit": "1"}}, LawError, "already a layer or a function"),
        (RUNOFF, {"runoff": {"value": 1, "unit": "1"}}, LawError, "already a layer"),
        (RUNOFF, {"a": {"by_rock": {"basal": 1}, "unit": "mmol L-1"}}, LawError, "no rock has|not"),
        (RUNOFF, {**CONCENTRATION, "b": {"value": 1, "unit": "1"}}, LawError, "not used: b"),
    ],
)
def test_a_bad_declaration_is_refused_with_what_to_write(inputs, parameters, kind, says):
    with pytest.raises(MapperError, match=says) as caught:
        make("a * runoff", inputs, parameters)
    first = getattr(caught.value, "problems", (caught.value,))[0]
    assert isinstance(first, kind)
    assert first.fix


def test_all_bad_declarations_are_told_at_once():
    with pytest.raises(ManyProblemsError, match=r"(?s)'rain'.*no unit is given") as caught:
        make("a * rain", {"rain": "mm"}, {"a": {"value": 1}})
    assert len(caught.value.problems) == 2


def test_names_that_nobody_declared_are_told_beside_bad_units():
    with pytest.raises(ManyProblemsError) as caught:
        make("a * rainfall + b", RUNOFF, {"a": {"value": 1, "unit": "furlong"}})
    said = [one.problem for one in caught.value.problems]
    assert len(said) == 3
    assert "furlong" in said[0]
    assert said[1:] == ["'rainfall' is not declared", "'b' is not declared"]


def test_every_name_that_nobody_declared_is_told():
    with pytest.raises(ManyProblemsError) as caught:
        make("c * runof + d", RUNOFF, CONCENTRATION)
    assert [one.where[-8:] for one in caught.value.problems] == ["column 1", "column 5", "olumn 13"]


def test_a_rock_without_a_value_is_refused():
    numbers = {"a": {"by_rock": {"basalt": 0.5}, "unit": "mmol L-1"}}
    with pytest.raises(MapperError, match="has no value for granite"):
        make("a * runoff", parameters=numbers, rocks=("basalt", "granite"))
    with pytest.raises(MapperError, match="'basal' is not a rock"):
        make("a * runoff", rocks=("basal",))


def test_a_formula_without_a_layer_is_refused():
    flux = {"a": {"value": 1.0, "unit": "mol m-2 yr-1"}}
    with pytest.raises(LawError, match="reads no layer"):
        make("a", {}, flux)


WORDS = ["a", "runoff", "exp", "log", "minimum", "(", ")", "+", "-", "*", "/", "**", ",", "2", "."]


@settings(max_examples=150, deadline=None, derandomize=True)
@given(st.text(sorted(WRITABLE), max_size=60) | st.lists(st.sampled_from(WORDS)).map(" ".join))
def test_any_text_is_a_law_or_a_refusal(text):
    try:
        law = make(text)
    except (LawError, ManyProblemsError):
        return
    assert rate_of(law, [0.0, 1000.0]).shape == (2,)
