"""Laws side by side at conditions that a user writes."""

from __future__ import annotations

import doctest
import importlib

import pytest

from mapper.accounting import to_rate
from mapper.errors import LawError, ManyProblemsError, MapperError
from mapper.exports.comparison import USUAL, comparison_lines, read_conditions
from mapper.laws import LAW_INPUTS, LAWS


@pytest.mark.parametrize("name", ["comparison", "curves"])
def test_the_examples_in_the_docstrings_are_true(name):
    module = importlib.import_module(f"mapper.exports.{name}")
    found = doctest.testmod(module)
    assert (found.failed, found.attempted > 0) == (0, True)


@pytest.mark.parametrize(
    ("pair", "value"),
    [
        ("temperature=12C", 285.15),
        ("temperature=12 degC", 285.15),
        ("temperature=285.15K", 285.15),
        ("temperature=-3C", 270.15),
        ("temperature=53.6F", 285.15),
        ("runoff=800", 800.0),
        ("runoff=0.8m yr-1", 800.0),
        ("vegetation=60%", 0.6),
        ("soil_co2=1e-2", 0.01),
    ],
)
def test_a_condition_is_read_with_its_unit(pair, value):
    name = pair.partition("=")[0]
    conditions = read_conditions([pair])
    assert conditions.values[name] == pytest.approx(value, rel=1e-12)
    assert conditions.given == (name,)


@pytest.mark.parametrize(
    ("pair", "says", "fix"),
    [
        ("temperature=12", "whether it is in degC or in K", "temperature=12C or temperature=12K"),
        ("runof=3", "'runof' is not a layer", "runoff="),
        ("runoff", "is no number", "runoff=800"),
        ("runoff=wet", "is no number", "runoff=800"),
        ("runoff=3ft", "unit 'ft'", "runoff=800, in mm yr-1"),
        ("runoff=3mm", "period is not said", "runoff=800, in mm yr-1"),
        ("rock=basal", "'basal' is not a rock", 'rock="basalt"'),
        ("rock=water", "'water' is not a rock that weathers", "rock="),
    ],
)
def test_a_bad_condition_is_refused_with_what_to_write(pair, says, fix):
    with pytest.raises(LawError) as caught:
        read_conditions([pair])
    assert says in caught.value.problem
    assert fix in caught.value.fix


def test_unknown_laws_and_bad_conditions_are_told_together():
    with pytest.raises(ManyProblemsError) as caught:
        comparison_lines(["desert-2003", "west"], ["temperature=12", "runof=1"])
    assert len(caught.value.problems) == 4


def test_every_layer_of_a_law_has_a_usual_value_within_reach():
    assert set(USUAL) == set(LAW_INPUTS)


def row_of(lines, name):
    (line,) = [one for one in lines if one.split(" ")[0] == name]
    return line.split()


def test_each_law_gets_its_rate_at_the_place_and_its_ratio_to_the_first():
    at = ["runoff=1000", "temperature=25C", "rock=basalt"]
    lines = comparison_lines(["amiotte-suchet-1995", "dessert-2003"], at)
    # 0.479 mmol L-1 x 1000 mm yr-1; and the published point of the basalt law at 25 degC
    assert row_of(lines, "amiotte-suchet-1995")[1:3] == ["0.479", f"{to_rate(0.479):.4g}"]
    _, rate, tonnes, _, ratio = row_of(lines, "dessert-2003")
    assert float(rate) == pytest.approx(1.610, rel=1e-3)
    assert float(tonnes) == pytest.approx(70.84, rel=1e-3)
    assert float(ratio) == pytest.approx(1.610 / 0.479, abs=0.01)


def test_what_is_beyond_a_range_or_not_served_or_no_flux_is_said():
    names = ["oliva-2003", "dessert-2003", "palandri-kharaka-2004"]
    text = "\n".join(comparison_lines(names, ["runoff=800", "rock=granite"]))
    assert "outside its range: runoff 1000 mm yr-1 to 4200 mm yr-1" in text
    assert "has no numbers for granite; serves basalt" in text
    assert "only ranks, no flux" in text
    assert "temperature 12 degC (usual)" in text
    assert "runoff 800 mm yr-1," in text


def test_without_a_rock_the_one_that_most_laws_serve_is_taken():
    lines = comparison_lines(["white-1984", "romero-mujalli-2019", "dessert-2003"], [])
    assert lines[0].startswith("limestone at ")


def test_all_laws_together_can_be_compared():
    lines = comparison_lines(list(LAWS), ["rock=granite"])
    assert all(row_of(lines, name) for name in LAWS)


def test_a_condition_that_no_law_reads_is_said():
    text = "\n".join(comparison_lines(["amiotte-suchet-1995"], ["erosion=5"]))
    assert "no law here reads erosion" in text


def test_the_errors_of_conditions_are_ours():
    with pytest.raises(MapperError):
        read_conditions(["=3"])
