"""The catalogue as text: one line a law, and a law in full."""

from __future__ import annotations

import pytest

from mapper import scheme
from mapper.errors import LawError
from mapper.exports.catalogue import find_named, law_lines, laws_lines
from mapper.laws import LAWS


def test_each_law_takes_one_line_with_needs_rocks_ranges_and_year():
    lines = laws_lines()
    for name, law in LAWS.items():
        (line,) = [one for one in lines if one.split(" ")[0] == name]
        assert str(law.year) in line
        for layer in ("runoff", "erosion"):
            assert (layer in line.split()) == (layer in law.input_names)
    (dessert,) = [one for one in lines if one.startswith("dessert-2003")]
    assert dessert.split() == ["dessert-2003", "2003", "runoff", "T", "uptake", "basalt", "-10..27",
                               "200..4500"]  # fmt: skip
    assert max(len(one) for one in lines) <= 110


def test_a_law_that_only_ranks_says_so_in_its_line():
    (line,) = [one for one in laws_lines() if one.startswith("palandri")]
    assert "rank" in line.split()
    assert "uptake" not in line.split()


def test_a_law_in_full_shows_every_number_with_source_and_every_range_with_grade():
    for law in LAWS.values():
        text = "\n".join(law_lines(law.name))
        for one in law.parameters:
            assert f"{one.source} (grade: {one.grade})" in text
        for one in law.inputs:
            assert f"{one.range_source}; grade: {one.range_grade}" in text
        assert "fitted in" not in text.replace("Fitted in a temperate climate", "").replace(
            "fitted in a temperate climate", ""
        )


def test_the_supply_limit_is_shown_by_its_name():
    text = "\n".join(law_lines("dixon-von-blanckenburg-2012"))
    assert "weathering_limit (W_max) = 150 t km-2 yr-1" in text
    assert "limestone, dolomite, evaporite" in text


def test_an_unknown_law_is_refused_with_the_nearest():
    with pytest.raises(LawError, match="no law 'desert-2003'") as caught:
        law_lines("desert-2003")
    assert caught.value.fix.startswith("dessert-2003")


def test_a_law_of_another_package_is_listed_and_shown(monkeypatch):
    added = {**LAWS, "added": LAWS["west-2012"]}
    monkeypatch.setattr(scheme, "load_laws", lambda: added)
    assert any(one.startswith("added ") for one in laws_lines())
    assert find_named("added", where="here") is LAWS["west-2012"]
