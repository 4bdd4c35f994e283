"""Measure runs against the floor and a plain script, and how they grow; print a dated table."""

from __future__ import annotations

import argparse
import json
import os
import platform
import sys
import time
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, NamedTuple

from tests.benchmarks.inputs import write_inputs

ROOT = Path(__file__).resolve().parents[2]
FULL = """[uncertainty]
draws = DRAWS
[ranking]
by = "drawdown_t_per_km2_yr"
"""


class Measured(NamedTuple):
    """One process from start to end."""

    seconds: float
    peak_mb: float
    output: str


def measure(module: str, *arguments: object) -> Measured:
    """Run a module in a process of its own and measure it from outside.

    Raises
    ------
    RuntimeError where it fails.
    """
    words = [sys.executable, "-m", module, *map(str, arguments)]
    read, write = os.pipe()
    began = time.monotonic()
    pid = os.posix_spawn(
        sys.executable, words, {**os.environ, "PYTHONPATH": str(ROOT)},
        file_actions=[(os.POSIX_SPAWN_DUP2, write, 1), (os.POSIX_SPAWN_CLOSE, read)],
    )  # fmt: skip
    os.close(write)
    with open(read, encoding="utf-8") as stream:  # noqa: PTH123 - a descriptor
        output = stream.read()
    _, status, usage = os.wait4(pid, 0)
    if code := os.waitstatus_to_exitcode(status):
        raise RuntimeError(f"{module} ended with {code}: {output}")
    return Measured(time.monotonic() - began, usage.ru_maxrss * 1024 / 1e6, output)


def make_jobs(folder: Path, n_rows: int, n_cols: int, draws: int) -> tuple[Path, Path]:
    """Inputs, the job of maps and tables alone, and the full job."""
    job = folder / "job.toml"
    if not job.exists():
        write_inputs(folder, n_rows, n_cols)
    bare = job.read_text(encoding="utf-8").replace("[output]", "[output]\nwrite = []", 1)
    map_job, full_job = folder / "map.toml", folder / "full.toml"
    map_job.write_text(bare, encoding="utf-8")
    full_job.write_text(bare + FULL.replace("DRAWS", str(draws)), encoding="utf-8")
    return map_job, full_job


def run_job(job: Path, out: Path, *more: object) -> Measured:
    """The command on two threads, from the start."""
    return measure("mapper.cli", "run", job, "--out", out, "--threads", 2, "--fresh", *more)


def measure_all(
    folder: Path, n_rows: int, n_cols: int, *, draws: int = 1000, draws_tried: int = 2
) -> dict[str, Any]:
    """Every figure of one size of grid."""
    map_job, full_job = make_jobs(folder, n_rows, n_cols, draws)
    floor = measure("tests.benchmarks.floor", folder, folder / "floor")
    full = run_job(full_job, folder / "full")
    maps = run_job(map_job, folder / "map")
    local = run_job(map_job, folder / "local", "--scheduler", "local")
    plain = measure("tests.benchmarks.plain", folder, folder / "plain", "--draws", draws_tried)
    found = json.loads(plain.output)
    whole_plain = found["maps"] + found["totals"] + draws * found["per_draw"]
    return {
        "cells": n_rows * n_cols,
        "draws": draws,
        "seconds": {
            "floor": floor.seconds,
            "full job": full.seconds,
            "maps and tables": maps.seconds,
            "maps and tables, two local processes": local.seconds,
            "plain script, maps": found["maps"],
            "plain script, totals by class": found["totals"],
            "plain script, one draw": found["per_draw"],
            "plain script, all (draws extrapolated)": whole_plain,
        },
        "peak_mb": {"full job": full.peak_mb, "plain script": plain.peak_mb},
        "ratios": {
            "full job / floor": full.seconds / floor.seconds,
            "plain script, all / full job": whole_plain / full.seconds,
            "plain script, maps and totals / maps and tables": (found["maps"] + found["totals"])
            / maps.seconds,
            "plain script, maps / maps and tables": found["maps"] / maps.seconds,
            "two threads / two local processes": maps.seconds / local.seconds,
            "seconds per million cells, full job": full.seconds / (n_rows * n_cols / 1e6),
        },
        "totals": found["consumption"],
    }


def machine() -> str:
    """What the figures were measured on."""
    model = platform.processor() or platform.machine()
    info = Path("/proc/cpuinfo")
    if info.exists():
        lines = info.read_text(encoding="utf-8").splitlines()
        model = next((one.split(":")[1].strip() for one in lines if "model name" in one), model)
    return f"{os.cpu_count()} x {model}, Python {platform.python_version()}, {platform.system()}"


def lines(found: dict[str, Any]) -> list[str]:
    """The figures as a table in Markdown."""
    told = [
        f"{found['cells'] / 1e6:,.1f} million cells, {found['draws']} draws; {machine()}; "
        f"{datetime.now(UTC):%Y-%m-%d}; load {os.getloadavg()[0]:.1f}",
        "",
        "| | |",
        "|---|---|",
    ]
    told += [f"| {name} | {value:,.2f} s |" for name, value in found["seconds"].items()]
    told += [f"| peak memory, {name} | {value:,.0f} MB |" for name, value in
             found["peak_mb"].items()]  # fmt: skip
    told += [f"| {name} | {value:,.2f} |" for name, value in found["ratios"].items()]
    return told


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("folder", type=Path)
    parser.add_argument("--rows", type=int, default=12000)
    parser.add_argument("--cols", type=int, default=12000)
    parser.add_argument("--draws", type=int, default=1000)
    parser.add_argument("--tried", type=int, default=2, help="draws of the plain script")
    chosen = parser.parse_args()
    print(
        "\n".join(
            lines(
                measure_all(
                    chosen.folder, chosen.rows, chosen.cols, draws=chosen.draws,
                    draws_tried=chosen.tried,
                )
            )
        )
    )  # fmt: skip
