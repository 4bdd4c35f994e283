"""The bench of tests/inputs, for tests of readers."""

from __future__ import annotations

import importlib.util
from pathlib import Path

import pytest

_path = Path(__file__).parents[1] / "inputs" / "conftest.py"
_spec = importlib.util.spec_from_file_location("bench_of_inputs", _path)
_module = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(_module)


@pytest.fixture
def bench(tmp_path):
    return _module.Bench(tmp_path)
