"""What helps before a first run: a legend to fill in, and a small picture of each layer."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from mapper.engine import Plan
from mapper.exports.files import whole_file, write_csv
from mapper.grid import Window, blocks
from mapper.job import Job
from mapper.layers.layer import Layer
from mapper.legend import suggest_rock
from mapper.planning import open_lithology

LEGEND_COLUMNS = ("code", "rock", "share", "cells", "area_km2", "suggestion")
PICTURE_SIDE = 400
_BLOCK = (1024, 1024)


def write_starter_legend(job: Job, path: str | Path) -> int:
    """Write a legend with every code of the geological map and no rocks yet; says how many.

    Rows are ordered by area, largest first; ``suggestion`` is a rock whose name the code bears.

    Raises
    ------
    MapperError where the map cannot be read.
    """
    lithology = open_lithology(job)
    found: dict[str, NDArray[np.float64]] = {}
    for window in blocks(lithology.grid, _BLOCK):
        for code, seen in lithology.codes_in(window).items():
            found[code] = found.get(code, np.zeros(2)) + seen
    ordered = sorted(found, key=lambda code: (-found[code][1], code))
    rows = [
        (code, "", "", f"{found[code][0]:.6g}", f"{found[code][1] / 1e6:.6g}", suggest_rock(code))
        for code in ordered
    ]
    write_csv(Path(path), LEGEND_COLUMNS, rows)
    return len(rows)


def write_pictures(plan: Plan, folder: str | Path) -> list[str]:
    """Write a small PNG of each layer and of the commonest rock of each cell; names the files."""
    shown = {name: _values(plan, layer) for name, layer in plan.layers.items()}
    shown["lithology"] = _rocks(plan)
    for name, values in shown.items():
        _save(values, Path(folder) / f"{name}.png")
    return [f"{name}.png" for name in shown]


def _rows_and_cols(plan: Plan) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """The cells that a picture shows: every n-th row and column."""
    n = max(1, -(-max(plan.grid.shape) // PICTURE_SIDE))
    return np.arange(0, plan.grid.n_rows, n), np.arange(0, plan.grid.n_cols, n)


def _values(plan: Plan, layer: Layer) -> NDArray[np.float64]:
    rows, cols = _rows_and_cols(plan)
    lines = [layer.values(Window(int(row), 0, 1, plan.grid.n_cols))[0, cols] for row in rows]
    return np.stack(lines)


def _rocks(plan: Plan) -> NDArray[np.float64]:
    rows, cols = _rows_and_cols(plan)
    out = np.full((rows.size, cols.size), np.nan)
    for at, row in enumerate(rows):
        held = plan.lithology.rock_cells(Window(int(row), 0, 1, plan.grid.n_cols))
        line = np.full(plan.grid.n_cols, np.nan)
        order = np.argsort(held.share, kind="stable")
        line[held.cell[order]] = held.rock[order]  # the largest share comes last and stays
        out[at] = line[cols]
    return out


def _save(values: NDArray[np.float64], path: Path) -> None:
    from matplotlib import colormaps  # noqa: PLC0415 - slow to import
    from PIL import Image  # noqa: PLC0415

    good = np.isfinite(values)
    low, high = (np.percentile(values[good], [2, 98])) if good.any() else (0.0, 1.0)
    scaled = np.clip((values - low) / max(high - low, 1e-12), 0.0, 1.0)
    colours = colormaps["viridis"](np.where(good, scaled, 0.0), bytes=True)
    colours[~good] = (0, 0, 0, 0)
    with whole_file(path) as temporary:
        Image.fromarray(colours).save(temporary, format="PNG")
