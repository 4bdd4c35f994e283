"""A job of 42 small blocks for runs that are killed, shared out or short of room."""

from __future__ import annotations

import contextlib
import csv
import io
import json
from pathlib import Path

import numpy as np
import rasterio

from mapper.cli import main
from tests.benchmarks.inputs import write_inputs

N_ROWS, N_COLS = 768, 896
N_BLOCKS = 6 * 7
SMALL_BLOCKS = "500MB"
"""A memory that leaves room for the smallest blocks only: 128 x 128 cells."""

FILES = (
    "maps/consumption.tif", "maps/drawdown.tif", "maps/flags.tif", "tables/regions.csv",
    "tables/regions_by_rock.csv", "tables/flags.csv", "tables/sensitivity.csv",
    "tables/ranking.csv",
)  # fmt: skip

DOUBTS = """write = ["regions", "crate"]
[uncertainty]
draws = 10
seed = 3
[ranking]
by = "drawdown_t_per_km2_yr"
"""


def make_world(folder: Path, side: int = 128) -> Path:
    """Write the inputs, 6 x 7 blocks of ``side`` squared, and the job; returns the job's path."""
    job = write_inputs(folder, 6 * side, 7 * side, tile=side)
    job.write_text(job.read_text(encoding="utf-8") + DOUBTS, encoding="utf-8")
    return job


def contents(folder: Path) -> dict[str, bytes]:
    """Maps and tables, byte for byte."""
    return {name: (folder / name).read_bytes() for name in FILES}


def quiet_main(*arguments: object) -> tuple[int, str, str]:
    """Run the command in this process: exit code, output, errors."""
    out, errors = io.StringIO(), io.StringIO()
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(errors):
        code = main([str(one) for one in arguments])
    return code, out.getvalue(), errors.getvalue()


def final_files(folder: Path) -> list[Path]:
    """Every file under a final name: those whose name or folder begins with a dot are not."""
    return [
        path
        for path in folder.rglob("*")
        if path.is_file()
        and not any(part.startswith(".") and part != ".work" for part in
                    path.relative_to(folder).parts)
    ]  # fmt: skip


def open_whole(path: Path) -> None:
    """Read all of a file; raises where a part of it lacks."""
    if path.suffix == ".tif":
        with rasterio.open(path) as file:
            file.read()
    elif path.suffix == ".npz":
        with np.load(path, allow_pickle=False) as arrays:
            for name in arrays.files:
                arrays[name]
    elif path.suffix == ".json":
        json.loads(path.read_text(encoding="utf-8"))
    elif path.suffix == ".csv":
        text = path.read_text(encoding="utf-8")
        assert text.endswith("\n")
        assert len({len(row) for row in csv.reader(io.StringIO(text))}) == 1
    else:
        assert path.stat().st_size > 0
