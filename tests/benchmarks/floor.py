"""The floor under a run: decode the inputs once, write as many maps of real content, make COGs.

No law, no regions, no sums: what rasterio and the codec alone cost with two threads.
"""

from __future__ import annotations

import argparse
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import rasterio
from rasterio.shutil import copy
from rasterio.windows import Window


def run_floor(folder: Path, out: Path) -> float:
    """Seconds to decode four rasters and write three maps as COG."""
    began = time.monotonic()
    out.mkdir(parents=True, exist_ok=True)
    names = ("lithology", "temperature", "runoff", "vegetation")
    with rasterio.open(folder / "temperature.tif") as first:
        profile, shape = first.profile, first.shape
    windows = [
        Window(col, row, min(1024, shape[1] - col), min(1024, shape[0] - row))
        for row in range(0, shape[0], 1024)
        for col in range(0, shape[1], 1024)
    ]
    profile |= {"nodata": None, "predictor": 3}
    outs = {
        "one": rasterio.open(out / "one.part.tif", "w", **profile),
        "two": rasterio.open(out / "two.part.tif", "w", **profile),
        "three": rasterio.open(
            out / "three.part.tif", "w", **(profile | {"dtype": "uint8", "predictor": 1})
        ),
    }

    def read(window: Window) -> dict[str, np.ndarray]:
        found = {}
        for name in names:
            with rasterio.open(folder / f"{name}.tif") as dataset:
                found[name] = dataset.read(1, window=window)
        return found

    with ThreadPoolExecutor(2) as pool:
        for at in range(0, len(windows), 4):
            part = windows[at : at + 4]
            for window, found in zip(part, pool.map(read, part), strict=True):
                product = found["temperature"] * np.float32(1.01)
                outs["one"].write(product, 1, window=window)
                outs["two"].write(found["runoff"] * found["temperature"], 1, window=window)
                outs["three"].write(found["lithology"], 1, window=window)
    for dataset in outs.values():
        dataset.close()
    for name in outs:
        predictor = "STANDARD" if name == "three" else "FLOATING_POINT"
        copy(
            out / f"{name}.part.tif", out / f"{name}.tif", driver="COG", compress="DEFLATE",
            predictor=predictor, level=6, blocksize=512, num_threads=2,
            overview_resampling="AVERAGE", bigtiff="IF_SAFER",
        )  # fmt: skip
        (out / f"{name}.part.tif").unlink()
    return time.monotonic() - began


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("folder", type=Path)
    parser.add_argument("out", type=Path)
    chosen = parser.parse_args()
    print(f"{run_floor(chosen.folder, chosen.out):.2f} s")
