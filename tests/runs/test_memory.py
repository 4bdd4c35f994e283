"""The memory that a run may use, measured from outside its process."""

import os
import re
import subprocess
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


LAUNCHER = """
import resource, subprocess, sys
code = subprocess.run(sys.argv[1:], check=False).returncode
print(code, resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss * 1024)
"""
"""A process takes over the peak of the one that starts it: a small one goes between."""


def peak_memory(*arguments):
    """Run the command in a process of its own; its exit code and its peak memory in bytes."""
    command = [sys.executable, "-m", "mapper.cli", *map(str, arguments)]
    done = subprocess.run(
        [sys.executable, "-c", LAUNCHER, *command],
        env={**os.environ, "PYTHONPATH": str(ROOT)}, capture_output=True, text=True, check=True,
    )  # fmt: skip
    code, peak = done.stdout.split()[-2:]
    return int(code), int(peak)


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
