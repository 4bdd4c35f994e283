"""Totals by a further layer: land cover or any other classes, and bands of a number."""

from __future__ import annotations

import csv
from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from mapper.classing import EVERYTHING, NO_CLASS, ClassesSpec
from mapper.errors import LegendError, MissingFileError, ValuesError
from mapper.grid import Grid, Window
from mapper.job import LayerSpec
from mapper.layers.codes import CodeGrid, open_codes, whole_codes
from mapper.layers.layer import open_source
from mapper.legend import normal_code
from mapper.sums import LIMBS, Counts, add_up, runs_of, unit_exponent

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

SUMMED = ("area", "valid_area", "consumption", "drawdown")
"""What is added up by class: m2, m2, and mol yr-1 twice."""

SLIVER = 1e-6
"""Part of a cell without a class that is rounding, or the sliver between two files' edges."""


class CellAmounts(NamedTuple):
    """What each cell of a window brings into `SUMMED`, every array of shape (n_cells,)."""

    area: Floats
    valid_area: Floats
    consumption: Floats
    drawdown: Floats


def cell_amounts(
    areas: Floats, held: tuple[Ints, Floats], rates: tuple[Floats, Floats]
) -> CellAmounts:
    """What each cell brings in.

    Parameters
    ----------
    held : cells with a result and the area that has one, a cell in as many pieces as it likes.
    rates : consumption and drawdown over the whole cell [mol m-2 yr-1], NaN without a result.
    """
    valid: Floats = np.zeros(areas.size)
    valid += np.bincount(held[0], weights=held[1], minlength=areas.size)
    consumption, drawdown = (np.nan_to_num(one.ravel()) * areas for one in rates)
    return CellAmounts(areas, valid, consumption, drawdown)


class ClassParts(NamedTuple):
    """Cells split among classes: three arrays of one length; the shares of a cell add up to 1."""

    cell: Ints
    at: Ints
    share: Floats


@dataclass(frozen=True, eq=False)
class ClassLayer:
    """Classes on the grid; the position after the last name stands for ground without one.

    A cell of the file belongs to one class as a whole: numbers are put into bands before they
    come onto the grid, never interpolated.
    """

    spec: ClassesSpec
    names: tuple[str, ...]
    codes: CodeGrid
    place_of: Mapping[int, int]

    @property
    def n_keys(self) -> int:
        """Number of classes, and one for none."""
        return len(self.names) + 1

    def parts(self, window: Window) -> ClassParts:
        """Split the cells of a window among the classes.

        Raises
        ------
        LegendError where a code is not in the legend and the job does not say what to do.
        """
        quick = self.codes.nested(window, self._encode)
        cell, at, share = self.codes.shares(window, self._encode) if quick is None else quick
        known = at < len(self.names)
        cell, at, share = cell[known], at[known], share[known]
        covered = np.bincount(cell, weights=share, minlength=window.n_cells)
        whole = np.abs(covered - 1.0) <= SLIVER
        rest = np.flatnonzero(~whole)
        share = share / np.where(whole, covered, 1.0)[cell]
        return ClassParts(
            np.concatenate([cell, rest]),
            np.concatenate([at, np.full(rest.size, len(self.names))]),
            np.concatenate([share, 1.0 - covered[rest]]),
        )

    def _encode(self, raw: NDArray[Any]) -> Ints:
        """The position of each value's class."""
        if self.spec.bands:
            source = self.codes.source
            values = raw.astype(np.float64)
            if (source.scale, source.offset) != (1.0, 0.0):
                values = values * source.scale + source.offset
            return np.searchsorted(np.asarray(self.spec.bands), values, side="right")
        codes, index = np.unique(whole_codes(raw, where=self.spec.where), return_inverse=True)
        missing = [int(one) for one in codes if int(one) not in self.place_of]
        if missing and self.spec.unknown == "error":
            raise LegendError(
                f"the legend has no line for code {', '.join(map(str, missing[:8]))}",
                where=f"{self.spec.where}; legend {self.spec.legend}",
                fix=f'a line {missing[0]},LABEL in the legend, or unknown = "nodata" under '
                f"[classes.{self.spec.name}]",
            )
        places = [self.place_of.get(int(one), len(self.names)) for one in codes]
        return np.array(places, dtype=np.int64)[index.ravel()]


def open_classes(spec: ClassesSpec, grid: Grid) -> ClassLayer:
    """Open the file of some classes, read its legend, and bring it onto the grid.

    Raises
    ------
    MissingFileError, FileFormatError, LegendError, GridError, ValuesError, or ManyProblemsError.
    """
    layer = LayerSpec(
        name=f"classes.{spec.name}",
        path=spec.path,
        paths=(spec.path,),
        variable=spec.variable,
        crs=spec.crs,
        nodata=spec.nodata,
    )
    source = open_source(layer)
    if source.steps:
        raise ValuesError(
            f"the file has {len(source.steps)} steps of time, and classes hold for all times",
            where=spec.where,
            fix="a file without a time axis",
        )
    place_of: Mapping[int, int] = {}
    if spec.bands:
        unit = f" {source.unit}" if source.unit and source.unit != "1" else ""
        names = band_names(spec.bands, unit)
    else:
        names, place_of = read_class_legend(spec.legend or "", where=f"{spec.where}, legend")
    return ClassLayer(spec, names, open_codes(source, grid, where=spec.where), place_of)


def band_names(edges: tuple[float, ...], unit: str = "") -> tuple[str, ...]:
    """What bands are called; a value on an edge belongs to the band above it.

    Examples
    --------
    >>> band_names((0.0, 500.0), " m")
    ('below 0 m', '0 to 500 m', '500 m and above')
    """
    text = [f"{one:.10g}" for one in edges]
    between = [f"{low} to {high}{unit}" for low, high in pairwise(text)]
    return (f"below {text[0]}{unit}", *between, f"{text[-1]}{unit} and above")


def read_class_legend(path: str, *, where: str) -> tuple[tuple[str, ...], dict[int, int]]:
    """Read a CSV with columns code and label; codes may share a label.

    Returns
    -------
    The labels in their order in the file, and for each code the position of its label.

    Raises
    ------
    MissingFileError, LegendError with the line that is wrong.
    """
    file = Path(path)
    if not file.is_file():
        raise MissingFileError(
            f"there is no legend {file.name!r}", where=where, fix="a CSV with columns code,label"
        )
    try:
        with file.open(encoding="utf-8-sig", newline="") as stream:
            reader = csv.DictReader(stream)
            columns, rows = reader.fieldnames or (), list(enumerate(reader, start=2))
    except UnicodeDecodeError as cause:
        raise LegendError(
            f"the legend is not UTF-8 text (byte {cause.start})", where=path, fix="save it as UTF-8"
        ) from cause
    missing = [name for name in ("code", "label") if name not in columns]
    if missing or not rows:
        problem = f"{missing[0]!r} is missing" if missing else "there is no line below them"
        raise LegendError(
            f"the legend has columns {', '.join(columns)}, and {problem}",
            where=path,
            fix="a first line code,label and a line for each code",
        )
    labels: dict[str, int] = {}
    place_of: dict[int, int] = {}
    for line, row in rows:
        code, label = _entry(row, f"{path}, line {line}")
        if code in place_of:
            raise LegendError(
                f"code {code} stands in two lines", where=f"{path}, line {line}", fix="one line"
            )
        place_of[code] = labels.setdefault(label, len(labels))
    return tuple(labels), place_of


def _entry(row: Mapping[str, str | None], where: str) -> tuple[int, str]:
    code, label = normal_code(row["code"] or ""), " ".join((row["label"] or "").split())
    if not code.lstrip("-").isdecimal():
        raise LegendError(f"code {code!r} is not a whole number", where=where, fix="6,cropland")
    if not label or label in (NO_CLASS, EVERYTHING):
        raise LegendError(
            f"the label of code {code} is {label!r}, which cannot name a class",
            where=where,
            fix=f"a label other than {NO_CLASS!r} and {EVERYTHING!r}",
        )
    return int(code), label


def sum_classes(
    layers: tuple[ClassLayer, ...], grid: Grid, window: Window, cells: CellAmounts
) -> Counts:
    """Add up a window by every class of every layer, exactly.

    Returns
    -------
    Counts of shape (len(SUMMED), n_classes of all layers one after the other, LIMBS).

    Notes
    -----
    Where a cell holds several classes, each takes its share of the cell's area and of its
    amounts: rock and class are taken as independent within a cell.
    """
    exponent = unit_exponent(grid)
    found = [np.zeros((len(SUMMED), 0, LIMBS), dtype=np.int64)]
    for layer in layers:
        parts = layer.parts(window)
        runs = runs_of(parts.at)
        rows = (row[parts.cell] * parts.share for row in cells)
        found.append(np.stack([add_up(runs, row, layer.n_keys, exponent) for row in rows]))
    return np.concatenate(found, axis=1)
