"""The memory that a run may use, measured from outside its process."""

import os
import re
import sys

import pytest

from tests.benchmarks.inputs import write_inputs
from tests.making import ROOT

SIDE = 4000
DOUBTS = """[uncertainty]
draws = 100
[ranking]
by = "drawdown_t_per_km2_yr"
"""


def peak_memory(*arguments):
    """Run the command in a process of its own; its exit code and its peak memory in bytes."""
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    pid = os.posix_spawn(
        sys.executable, [sys.executable, "-m", "mapper.cli", *map(str, arguments)], environment
    )
    _, status, usage = os.wait4(pid, 0)
    return os.waitstatus_to_exitcode(status), usage.ru_maxrss * 1024


@pytest.fixture(scope="module")
def job(tmp_path_factory):
    path = write_inputs(tmp_path_factory.mktemp("memory"), SIDE, SIDE)
    path.write_text(path.read_text(encoding="utf-8") + DOUBTS, encoding="utf-8")
    return path


@pytest.mark.parametrize("limit", ["800MB", "1GB"])
def test_a_run_on_16_million_cells_stays_under_its_memory(job, tmp_path, limit):
    code, peak = peak_memory("run", job, "--out", tmp_path, "--threads", 2, "--memory", limit)
    assert code == 0
    number, unit = re.fullmatch(r"(\d+)(MB|GB)", limit).groups()
    assert peak < int(number) * {"MB": 1e6, "GB": 1e9}[unit]
    print(f"--memory {limit}: {peak / 1e6:.0f} MB")  # noqa: T201
