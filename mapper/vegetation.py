"""Plant cover from a vegetation index or from land-cover classes."""

from __future__ import annotations

import csv
from collections.abc import Mapping
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from mapper.errors import MissingFileError, ValuesError

Floats = NDArray[np.float64]


def cover_from_ndvi(ndvi: Floats, *, bare: float, dense: float, squared: bool) -> Floats:
    """Fraction of ground that plants cover [1].

    Parameters
    ----------
    ndvi : normalised difference vegetation index [1].
    bare, dense : the index of bare soil and of full cover; they depend on the sensor; 0.05 and
        0.86 are usual for modern data (from memory).
    squared : Carlson & Ripley (1997) where true, Gutman & Ignatov (1998) where false; both
        quoted from later texts.

    Examples
    --------
    >>> import numpy as np
    >>> cover_from_ndvi(np.array([0.3, 0.7]), bare=0.05, dense=0.86, squared=False).round(3)
    array([0.309, 0.802])
    """
    share = np.clip((ndvi - bare) / (dense - bare), 0.0, 1.0)
    return share**2 if squared else share


def read_cover_table(path: str, *, where: str) -> dict[int, float]:
    """Plant cover of each land-cover class, from a CSV with columns class and cover (0..1).

    Raises
    ------
    MissingFileError, ValuesError with the line that is wrong.
    """
    file = Path(path)
    if not file.is_file():
        raise MissingFileError(
            f"there is no table {file.name!r}", where=where, fix="a CSV with columns class,cover"
        )
    with file.open(encoding="utf-8-sig", newline="") as stream:
        reader = csv.DictReader(stream)
        missing = [name for name in ("class", "cover") if name not in (reader.fieldnames or ())]
        if missing:
            raise ValuesError(
                f"the table has columns {reader.fieldnames}, and {missing[0]!r} is missing",
                where=path,
                fix="a first line class,cover",
            )
        rows = list(enumerate(reader, start=2))
    return dict(_class_cover(row, f"{path}, line {line}") for line, row in rows)


def _class_cover(row: Mapping[str, str | None], where: str) -> tuple[int, float]:
    try:
        number, cover = int(row["class"] or ""), float(row["cover"] or "")
    except ValueError:
        number, cover = 0, -1.0
    if not 0.0 <= cover <= 1.0:
        raise ValuesError(
            f"class {row['class']!r} with cover {row['cover']!r}, and a whole number and a cover "
            "from 0 to 1 are needed",
            where=where,
            fix="12,0.8",
        )
    return number, cover


def cover_of_classes(
    classes: NDArray[np.integer],
    valid: NDArray[np.bool_],
    table: Mapping[int, float],
    *,
    where: str,
) -> Floats:
    """Plant cover of each cell by its land-cover class [1], NaN where there is no class.

    Raises ValuesError for classes that the table lacks.
    """
    found, index = np.unique(np.where(valid, classes, 0), return_inverse=True)
    count = np.bincount(index.ravel(), weights=valid.ravel().astype(np.float64))
    missing = [
        f"{int(one)} ({n:.0f} cells)"
        for one, n in zip(found, count, strict=True)
        if n and int(one) not in table
    ]
    if missing:
        raise ValuesError(
            f"the table has no cover for class {', '.join(missing)}",
            where=where,
            fix=f"a line {missing[0].split()[0]},0.5 in the table, with its true cover",
        )
    cover = np.array([table.get(int(one), np.nan) for one in found])
    return np.asarray(np.where(valid, cover[index].reshape(classes.shape), np.nan))
