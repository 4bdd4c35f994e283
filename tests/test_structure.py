"""The shape of the code, read from its syntax trees."""

import ast
import sys
from pathlib import Path

import pytest

from tests.making import ROOT

MODULES = sorted((ROOT / "mapper").rglob("*.py"))
NAMES = [str(path.relative_to(ROOT)) for path in MODULES]

COMPUTING = {"compute", "load", "persist", "to_numpy"}
LAZY = [
    name
    for name in NAMES
    if name.split("/")[1] in ("dataset.py", "engine.py", "evaluation.py", "layers")
]
"""Modules through which lazy arrays pass; `pipeline` alone may compute. `exports` sees none: it
reads finished files and numbers."""

OWN_VALUES = {"layer", "layers", "frame", "self", "table", "rocks", "one", "law", "responses",
              "parameters", "by_rock", "parent", "features", "raw"}  # fmt: skip
"""Names whose ``values`` are fields of our own dataclasses or a mapping's, never an array's."""


def tree(name):
    return ast.parse((ROOT / name).read_text(encoding="utf-8"))


def functions(name):
    return [
        node
        for node in ast.walk(tree(name))
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef)
    ]


def computing_calls(source):
    """Line and name of each call that would compute a lazy array, and each bare ``.values``."""
    found = []
    parsed = ast.parse(source)
    called = {id(node.func) for node in ast.walk(parsed) if isinstance(node, ast.Call)}
    for node in ast.walk(parsed):
        if not isinstance(node, ast.Attribute):
            continue
        if node.attr in COMPUTING and id(node) in called and not _is_module(node.value):
            found.append((node.lineno, node.attr))
        # a method named values, as of mappings and layers, is called; an array's is not
        if node.attr == "values" and id(node) not in called and not _is_own(node.value):
            found.append((node.lineno, "values"))
    return found


def _is_module(node):
    return isinstance(node, ast.Name) and node.id in ("np", "json", "tomllib", "journal")


def _is_own(node):
    last = node.attr if isinstance(node, ast.Attribute) else getattr(node, "id", "")
    return last in OWN_VALUES


@pytest.mark.parametrize("name", LAZY)
def test_nothing_but_the_pipeline_computes(name):
    assert computing_calls((ROOT / name).read_text(encoding="utf-8")) == []


@pytest.mark.parametrize(
    "line", ["array.compute()", "x.load()", "d.persist()", "d.to_numpy()", "dataset.values"]
)
def test_the_check_for_computing_sees_it(line):
    assert computing_calls(line)


@pytest.mark.parametrize("name", NAMES)
def test_functions_have_at_most_40_statements_and_6_arguments(name):
    for node in functions(name):
        statements = sum(isinstance(one, ast.stmt) for one in ast.walk(node)) - 1
        arguments = node.args.posonlyargs + node.args.args
        if not name.startswith("mapper/laws/"):  # a law has as many parameters as its formula
            arguments = arguments + node.args.kwonlyargs
        named = [one.arg for one in arguments if one.arg not in ("self", "cls")]
        assert statements <= 40, f"{node.name} has {statements} statements"
        assert len(named) <= 6, f"{node.name} has {len(named)} arguments"


@pytest.mark.parametrize("path", MODULES, ids=NAMES)
def test_modules_are_short_and_named_by_what_they_hold(path):
    assert len(path.read_text(encoding="utf-8").splitlines()) < 450
    vague = {"utils", "helpers", "common", "misc", "core", "base", "manager"}
    assert path.stem not in vague


def imported(name):
    """Every module that is imported, at the top or within a function."""
    found = set()
    for node in ast.walk(tree(name)):
        if isinstance(node, ast.Import):
            found |= {one.name for one in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            found.add(node.module)
    return found


@pytest.mark.parametrize("name", [name for name in NAMES if name.startswith("mapper/laws/")])
def test_laws_import_numpy_and_the_standard_library_only(name):
    allowed = set(sys.stdlib_module_names) | {"numpy"}
    foreign = {one for one in imported(name) if one.split(".")[0] not in allowed}
    assert {one for one in foreign if not one.startswith("mapper.laws")} == set()


@pytest.mark.parametrize("name", NAMES)
def test_netcdf4_is_never_imported(name):
    assert not {one for one in imported(name) if one.split(".")[0] == "netCDF4"}
    assert "netcdf4" not in Path(ROOT / name).read_text(encoding="utf-8")
