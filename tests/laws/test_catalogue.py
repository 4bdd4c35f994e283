"""The catalogue, the doctests of its modules, and laws that other packages add."""

from __future__ import annotations

import ast
import doctest
import importlib
import pkgutil
from dataclasses import replace
from pathlib import Path

import pytest

import mapper.laws
from mapper.laws import LAWS, NOT_RECOVERED, Law, catalogue, find_law, find_response, load_laws
from mapper.laws.catalogue import collect_laws
from mapper.rocks import ROCKS

MODULES = [f"mapper.laws.{one.name}" for one in pkgutil.iter_modules(mapper.laws.__path__)]
MODULES.append("mapper.formula")


class Point:
    """An entry point that gives what it was made with."""

    name = "one"
    value = "package:law"

    def __init__(self, given):
        self.given = given

    def load(self):
        return self.given


def point_to(monkeypatch, given):
    monkeypatch.setattr(catalogue, "entry_points", lambda *, group: [Point(given)] if group else [])


@pytest.mark.parametrize("name", MODULES)
def test_the_examples_in_the_docstrings_are_true(name):
    assert doctest.testmod(importlib.import_module(name)).failed == 0


@pytest.mark.parametrize("name", [one for one in MODULES if one.startswith("mapper.laws.")])
def test_the_laws_import_numpy_and_one_another_alone(name):
    source = Path(importlib.import_module(name).__file__).read_text(encoding="utf-8")
    imported = {
        node.module or ""
        for node in ast.walk(ast.parse(source))
        if isinstance(node, ast.ImportFrom)
    } | {
        alias.name
        for node in ast.walk(ast.parse(source))
        if isinstance(node, ast.Import)
        for alias in node.names
    }
    standard = {"__future__", "collections.abc", "dataclasses", "types", "typing", "difflib"}
    standard |= {"inspect", "math", "importlib", "importlib.metadata", "pathlib", "pkgutil"}
    beyond = {one for one in imported if not one.startswith("mapper.laws")} - standard
    assert beyond <= {"numpy", "numpy.typing"}


def test_every_rock_that_weathers_has_a_law_except_those_we_say():
    covered = {rock for law in LAWS.values() if law.output == "consumption" for rock in law.rocks}
    assert covered == {name for name, rock in ROCKS.items() if rock.weathers}
    assert "ultramafic rock" not in LAWS["product"].rocks


def test_what_was_not_recovered_is_said():
    for name in ("Bluth & Kump 1994", "Goll", "Moosdorf", "Hartmann", "White & Blum"):
        assert any(name in text for text in NOT_RECOVERED)


def test_an_unknown_law_names_the_nearest_and_all():
    with pytest.raises(KeyError, match=r"did you mean 'dessert-2003'.*There are: product"):
        find_law("desert-2003")


def test_an_unknown_response_lists_those_there_are():
    with pytest.raises(KeyError, match="linear, power, saturating"):
        find_response("runoff", "cubic")


def test_every_law_of_a_module_is_in_the_catalogue():
    stated = {
        law.name
        for name in MODULES
        for law in vars(importlib.import_module(name)).values()
        if isinstance(law, Law)
    }
    assert stated == set(LAWS)


def test_the_default_comes_first_and_the_others_by_year():
    first, *others = LAWS.values()
    assert first.name == "product"
    assert [law.year for law in others] == sorted(law.year for law in others)


def test_two_laws_of_one_name_are_refused(tmp_path, monkeypatch):
    package = tmp_path / "some_laws"
    package.mkdir()
    (package / "__init__.py").touch()
    text = """
from dataclasses import replace
from mapper.laws.dessert import DESSERT_2003
OTHER = replace(DESSERT_2003, title="another")
"""
    (package / "first.py").write_text(text, encoding="utf-8")
    monkeypatch.syspath_prepend(tmp_path)
    with pytest.raises(ValueError, match=r"two laws are called 'dessert-2003', one in some_laws"):
        collect_laws(package, "some_laws")


def test_a_package_may_add_a_law(monkeypatch):
    own = replace(LAWS["dessert-2003"], name="our-own")
    point_to(monkeypatch, own)
    assert load_laws()["our-own"] is own
    assert set(load_laws()) == {*LAWS, "our-own"}


def test_an_added_law_may_not_take_a_name_that_is_there(monkeypatch):
    point_to(monkeypatch, LAWS["dessert-2003"])
    with pytest.raises(ValueError, match="has a name that is taken"):
        load_laws()


def test_what_a_package_adds_must_be_a_law(monkeypatch):
    point_to(monkeypatch, object())
    with pytest.raises(TypeError, match="is not a Law"):
        load_laws()
