"""A coarse NetCDF climate under a fine geology, against the same job with all layers on the grid.

Each job runs in a process of its own, in turns. The ratio is that of the least times, once of the
clock and once of the processors, which other work on the machine disturbs less.
"""

from __future__ import annotations

import argparse
import resource
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import rasterio
import xarray as xr
from inputs import HEIGHT, LEFT, TOP, WIDTH, write_inputs

COARSE = 0.5  # degrees
NAMES = {"temperature": "degC", "runoff": "mm yr-1"}


def write_coarse(folder: Path) -> Path:
    """Write the climate of the fine inputs on cells of half a degree, and a job that reads it."""
    n = round(WIDTH / COARSE)
    fields = {}
    for name, unit in NAMES.items():
        with rasterio.open(folder / f"{name}.tif") as dataset:
            how = rasterio.enums.Resampling.nearest
            values = dataset.read(1, out_shape=(n, n), resampling=how, masked=True)
        filled = np.where(np.ma.getmaskarray(values), 500.0, values)
        fields[name] = (("lat", "lon"), filled.astype(np.float32), {"units": unit})
    lat = TOP - HEIGHT * (np.arange(n) + 0.5) / n
    lon = LEFT + WIDTH * (np.arange(n) + 0.5) / n
    coords = {
        "lat": ("lat", lat, {"units": "degrees_north"}),
        "lon": ("lon", lon, {"units": "degrees_east"}),
    }
    xr.Dataset(fields, coords=coords).to_netcdf(folder / "climate.nc", engine="h5netcdf")
    text = (folder / "job.toml").read_text(encoding="utf-8")
    for name in NAMES:
        text = text.replace(f'"{name}.tif"', f'"climate.nc"\nvariable = "{name}"')
    job = folder / "coarse.toml"
    job.write_text(text, encoding="utf-8")
    return job


def seconds(job: Path, out: Path, threads: int) -> tuple[float, float]:
    """Seconds by the clock and of all processors that one run of the command takes."""
    began, before = time.monotonic(), _processors()
    command = [sys.executable, "-m", "mapper.cli", "run", str(job), "--out", str(out), "--fresh"]
    subprocess.run([*command, "--threads", str(threads)], check=True, stdout=subprocess.DEVNULL)
    return time.monotonic() - began, _processors() - before


def _processors() -> float:
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


def main() -> None:
    """Make the inputs, run both jobs in turns, print times and the ratio."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("folder", type=Path)
    parser.add_argument("--side", type=int, default=4096, help="rows and columns of the grid")
    parser.add_argument("--turns", type=int, default=2)
    parser.add_argument("--threads", type=int, default=2)
    asked = parser.parse_args()
    fine = write_inputs(asked.folder, asked.side, asked.side)
    jobs = {"fine": fine, "coarse": write_coarse(asked.folder)}
    times: dict[str, list[tuple[float, float]]] = {name: [] for name in jobs}
    for _ in range(asked.turns):
        for name, job in jobs.items():
            times[name].append(seconds(job, asked.folder / f"out_{name}", asked.threads))
            clock, processors = times[name][-1]
            print(f"{name:7} {clock:7.1f} s, {processors:7.1f} s of processors", flush=True)
    for at, what in enumerate(("clock", "processors")):
        least = {name: min(one[at] for one in found) for name, found in times.items()}
        print(f"ratio   {least['coarse'] / least['fine']:.2f} by the {what}")


if __name__ == "__main__":
    main()
