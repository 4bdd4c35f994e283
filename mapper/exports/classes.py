"""Tables of totals by class, one for each further layer of the job."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mapper.accounting import SQUARE_METRES_PER_KM2, to_rate, tonnes_per_mole
from mapper.classes import SUMMED, ClassLayer
from mapper.classing import EVERYTHING, NO_CLASS
from mapper.engine import BlockSums, Plan
from mapper.exports.files import write_csv
from mapper.exports.tables import LEAST_RATE, REGION_COLUMNS, Totals
from mapper.sums import totals, unit_exponent

Floats = NDArray[np.float64]

CLASS_COLUMNS = ("class", *REGION_COLUMNS[1:7])
MOST_APART = 1e-12
"""How far the sum over classes may lie from the sum over cells, relative."""


def write_classes(plan: Plan, sums: BlockSums, found: Totals, folder: Path) -> dict[str, float]:
    """Write ``tables/by_NAME.csv`` for the classes of each layer.

    Returns
    -------
    How far the sums over the classes lie from those over all cells, relative.
    """
    amounts = class_amounts(sums, plan)
    every = np.array([found.cells[0], found.valid_area.sum(), found.cells[1], found.cells[2]])
    checks: dict[str, float] = {}
    for layer in plan.classes:
        mine = amounts[layer.spec.name]
        for quantity, apart in zip(SUMMED, closure(mine, every), strict=True):
            name = f"by_{layer.spec.name}_to_all_cells_{quantity}"
            checks[name] = float(apart)
            if apart > MOST_APART:
                msg = f"{name} do not close: {apart:g}; this is a fault of saprolite"
                raise AssertionError(msg)
        rows = class_rows(layer.names, mine, every)
        write_csv(folder / "tables" / f"by_{layer.spec.name}.csv", CLASS_COLUMNS, rows)
    return checks


def class_amounts(sums: BlockSums, plan: Plan) -> Mapping[str, Floats]:
    """Amounts by class, (len(SUMMED), n_classes): km2 and t CO2 yr-1, by the layer's name."""
    km2, tonnes = 1.0 / SQUARE_METRES_PER_KM2, tonnes_per_mole("t CO2")
    scaled = totals(sums.classes, unit_exponent(plan.grid))
    scaled *= np.array([km2, km2, tonnes, tonnes])[:, None]
    edges = np.cumsum([0, *(layer.n_keys for layer in plan.classes)])
    return {
        layer.spec.name: scaled[:, edges[at] : edges[at + 1]]
        for at, layer in enumerate(plan.classes)
    }


def closure(amounts: Floats, every: Floats) -> Floats:
    """How far the sums over classes lie from those over cells; tiny rates as in `tables`."""
    summed = amounts.sum(axis=1)
    least = every[0] * to_rate(LEAST_RATE) * np.array([0.0, 0.0, 1.0, 1.0])
    largest = np.maximum(np.maximum(np.abs(summed), np.abs(every)), least)
    apart: Floats = np.zeros(summed.size)
    np.divide(np.abs(summed - every), largest, out=apart, where=largest > 0)
    return apart


def class_rows(names: tuple[str, ...], amounts: Floats, every: Floats) -> list[list[Any]]:
    """Rows of a table: each class, ground without one, and everything."""
    columns = np.concatenate([amounts, every[:, None]], axis=1)
    labels = (*names, NO_CLASS, EVERYTHING)
    return [
        [label, *map(float, column), *(_rate(one, column[1]) for one in column[2:])]
        for label, column in zip(labels, columns.T, strict=True)
    ]


def _rate(amount: float, valid: float) -> float:
    return float(amount / valid) if valid > 0 else float("nan")


def describe_classes(layer: ClassLayer) -> dict[str, Any]:
    """How the classes came onto the grid, for the record."""
    return {
        "how": layer.codes.how,
        "classes": list(layer.names),
        "within_a_cell": "classes take their shares of a cell's amounts, whatever its rocks",
        "notes": list(layer.codes.source.notes),
    }
