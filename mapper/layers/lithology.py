"""Lithology on the job's grid: which rocks each cell holds, and what share of it each takes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from mapper.coverage import OVERLAP_TOLERANCE, Polygons, cover_window
from mapper.errors import LegendError, RegionError, ValuesError
from mapper.grid import Grid, Window, cell_areas
from mapper.job import LayerSpec
from mapper.layers.codes import CodeGrid, whole_codes
from mapper.layers.layer import How
from mapper.layers.resample import LEAST_SHARE
from mapper.layers.source import Source
from mapper.legend import Legend, normal_code, suggest_rock
from mapper.rocks import ROCK_NAMES

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

MOST_COUNTED_CODES = 2**16  # a wider span of codes is sorted instead of counted

MOST_LISTED = 12
"""Codes that a message lists."""


class RockCells(NamedTuple):
    """Cells and their rocks: three arrays of one length, ordered by cell and then by rock.

    ``cell`` counts along the rows of a window, ``rock`` is a position in `ROCK_NAMES`, ``share``
    the part of the cell [1]. The shares of a cell add up to the part that is mapped.
    """

    cell: Ints
    rock: Ints
    share: Floats


@dataclass(frozen=True, eq=False)
class Lithology:
    """The geological map on the grid, from a raster of codes or from polygons."""

    spec: LayerSpec
    legend: Legend
    grid: Grid
    how: How
    source: Source | None = None
    points: int = 1
    polygons: Polygons | None = None

    def rock_cells(self, window: Window) -> RockCells:
        """The rocks of a window.

        Raises
        ------
        LegendError where a code is not in the legend and the job does not say what to do.
        """
        cells, codes, shares, names = self._coded(window)
        return _to_rocks(cells, codes, shares, self._mixtures(names, codes, window))

    def codes_in(self, window: Window) -> Mapping[str, Floats]:
        """Each code or name in a window: how many cells it fills, and their area [m2]."""
        cells, codes, shares, names = self._coded(window)
        areas = np.broadcast_to(cell_areas(self.grid, window), window.shape).ravel()
        count = np.bincount(codes, weights=shares, minlength=len(names))
        area = np.bincount(codes, weights=shares * areas[cells], minlength=len(names))
        found: dict[str, Floats] = {}
        for at in np.flatnonzero(count > 0):  # several polygons may bear one name
            seen = np.array([count[at], area[at]])
            found[names[at]] = found.get(names[at], np.zeros(2)) + seen
        return found

    def _coded(self, window: Window) -> tuple[Ints, Ints, Floats, tuple[str, ...]]:
        """Cells, position of the code in the names, share; and the names."""
        if self.polygons is not None:
            cover = cover_window(self.polygons, self.grid, window)
            entries = cover.entries()
            _refuse_overlap(entries, self, window)
            return *_settled(entries, window), self.polygons.names
        if self.source is None:  # pragma: no cover - one of the two is always there
            raise AssertionError
        placed = CodeGrid(self.source, self.grid, self.how, self.points)
        cells, codes, shares = placed.shares(
            window, lambda raw: whole_codes(raw, where=self.spec.where)
        )
        values, index = _distinct(codes)
        return cells, index, shares, tuple(str(int(one)) for one in values)

    def _mixtures(
        self, names: tuple[str, ...], codes: Ints, window: Window
    ) -> list[list[tuple[int, float]]]:
        known = [self.legend.mixtures.get(normal_code(name)) for name in names]
        if self.spec.unknown == "error":
            found = np.bincount(codes, minlength=len(names))
            missing = {names[at] for at in np.flatnonzero(found) if known[at] is None}
            if missing:
                seen = {one: two for one, two in self.codes_in(window).items() if one in missing}
                raise unknown_codes(seen, self.spec, self.legend, window)
        return [
            [(ROCK_NAMES.index(rock), share) for rock, share in mixture or ()] for mixture in known
        ]


def _refuse_overlap(
    entries: tuple[Ints, Ints, Floats], lithology: Lithology, window: Window
) -> None:
    cells, names, shares = entries
    covered = np.bincount(cells, weights=shares, minlength=window.n_cells)
    at = int(np.argmax(covered))
    if covered[at] <= 1.0 + OVERLAP_TOLERANCE or lithology.polygons is None:
        return
    row, col = divmod(at, window.n_cols)
    x = float(lithology.grid.x_centres(window.col + col, window.col + col + 1)[0])
    y = float(lithology.grid.y_centres(window.row + row, window.row + row + 1)[0])
    here = sorted({lithology.polygons.names[one] for one in names[cells == at]})
    raise RegionError(
        f"geology polygons overlap: they cover {covered[at]:.3f} of the cell at x {x:g}, y {y:g} "
        f"({', '.join(here[:4])})",
        where=lithology.spec.where,
        fix="polygons that do not overlap; ground under two of them would count twice",
    )


def _settled(entries: tuple[Ints, Ints, Floats], window: Window) -> tuple[Ints, Ints, Floats]:
    """Shares that add up to 1 where polygons meet but for slivers."""
    cells, codes, shares = entries
    covered = np.bincount(cells, weights=shares, minlength=window.n_cells)
    whole = np.abs(covered - 1.0) <= OVERLAP_TOLERANCE
    return cells, codes, shares / np.where(whole, covered, 1.0)[cells]


def _distinct(codes: Ints) -> tuple[Ints, Ints]:
    """The codes that occur, ascending, and the position of each entry's code among them."""
    low = int(codes.min()) if codes.size else 0
    span = (int(codes.max()) if codes.size else 0) - low + 1
    if span > MOST_COUNTED_CODES:
        values, index = np.unique(codes, return_inverse=True)
        return values, index.astype(np.int64)
    present = np.bincount(codes - low, minlength=span) > 0
    position = np.cumsum(present) - 1
    return np.flatnonzero(present) + low, position[codes - low]


def unknown_codes(
    missing: Mapping[str, Floats], spec: LayerSpec, legend: Legend, window: Window | None = None
) -> LegendError:
    """The error for codes that the legend does not hold, with their cells, area and a likely rock.

    Parameters
    ----------
    missing : for each code, cells and area [m2].
    """
    place = "" if window is None else f", rows {window.row}..{window.row_stop}"
    ordered = sorted(missing, key=lambda code: -missing[code][1])
    listed = [
        f"{code} ({missing[code][0]:.0f} cells, {missing[code][1] / 1e6:.6g} km2)"
        for code in ordered[:MOST_LISTED]
    ]
    more = f" and {len(ordered) - MOST_LISTED} more" if len(ordered) > MOST_LISTED else ""
    near = suggest_rock(ordered[0])
    return LegendError(
        f"the legend has no line for code {', '.join(listed)}{more}",
        where=f"{spec.where}{place}; legend {legend.path}",
        fix=f"a line {ordered[0]},{near or 'ROCK'} in the legend, and so on; or "
        'unknown = "nodata" under [layers.lithology]',
    )


def nothing_mapped(spec: LayerSpec) -> ValuesError:
    """The error for a geological map that maps no cell of the grid."""
    return ValuesError(
        "not a single cell of the grid holds a mapped rock",
        where=spec.where,
        fix="check nodata (a code that is a class must not be it), and that the file's CRS and "
        "place, and [grid] bounds, are those of the ground that you mean",
    )


def _to_rocks(
    cells: Ints, codes: Ints, shares: Floats, mixtures: list[list[tuple[int, float]]]
) -> RockCells:
    """Replace codes by rocks, add up a cell's shares of one rock, order by cell and rock."""
    parts: list[tuple[Ints, Ints, Floats]] = []
    simple = all(len(mixture) == 1 and mixture[0][1] == 1.0 for mixture in mixtures)
    if simple:
        rock = np.array([mixture[0][0] for mixture in mixtures], dtype=np.int64)[codes]
        parts.append((cells, rock, shares))
    else:
        for position, mixture in enumerate(mixtures):
            here = np.flatnonzero(codes == position)
            for rock_index, part in mixture:
                filled = np.full(here.size, rock_index, dtype=np.int64)
                parts.append((cells[here], filled, shares[here] * part))
    if not parts or not sum(part[0].size for part in parts):
        none = np.empty(0, dtype=np.int64)
        return RockCells(none, none.copy(), np.empty(0))
    cell = np.concatenate([part[0] for part in parts])
    rock = np.concatenate([part[1] for part in parts])
    share = np.concatenate([part[2] for part in parts])
    return _ordered(cell, rock, share)


def _ordered(cell: Ints, rock: Ints, share: Floats) -> RockCells:
    if (cell[1:] > cell[:-1]).all():  # one rock a cell, in order already
        keep = share > LEAST_SHARE
        if not keep.all():
            cell, rock, share = cell[keep], rock[keep], share[keep]
        return RockCells(cell, rock, share)
    key = cell * len(ROCK_NAMES) + rock
    order = np.argsort(key, kind="stable")
    key, cell, rock, share = key[order], cell[order], rock[order], share[order]
    first = np.flatnonzero(np.concatenate([[True], key[1:] > key[:-1]]))
    summed = np.add.reduceat(share, first)
    keep = summed > LEAST_SHARE
    return RockCells(cell[first][keep], rock[first][keep], summed[keep])
