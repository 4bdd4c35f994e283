"""A grid in a file, described: where its cells lie and what its raw values mean."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from mapper.errors import FileFormatError, MissingFileError, ValuesError
from mapper.layers.axis import Axis, AxisPlan, regular_axis
from mapper.layers.timeline import Step

FileKind = Literal["geotiff", "netcdf", "zarr", "vector", "tiles"]

UNTAGGED_FILLS = (9.969209968386869e36,)
"""Values that mean "never written" in NetCDF files even where no tag says so."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Source:
    """An opened grid: header facts only; values are read window by window.

    ``x`` runs along longitude or easting, ``y`` along southing (the negative of latitude or
    northing), so that both ascend in the order of a north-up grid.
    """

    kind: FileKind
    path: str
    variable: str | None
    crs: str
    x: Axis
    y: Axis
    dtype: str
    nodata: tuple[float, ...]
    scale: float
    offset: float
    unit: str | None
    has_mask: bool
    block: tuple[int, int]
    label: str
    notes: tuple[str, ...] = ()
    tagged_nodata: tuple[float, ...] = ()
    steps: tuple[Step, ...] = ()
    parts: tuple[Any, ...] = ()
    valid_range: tuple[float, float] = (-np.inf, np.inf)

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.y.size, self.x.size

    @property
    def is_integer(self) -> bool:
        """Whether raw values are whole numbers."""
        return np.dtype(self.dtype).kind in "iub"

    @property
    def has_months(self) -> bool:
        """Whether the steps of the file say how each month differs from the others."""
        return {step.month for step in self.steps} == set(range(1, 13))

    def read(
        self, rows: AxisPlan, cols: AxisPlan, at: slice | None = None
    ) -> tuple[NDArray[Any], NDArray[np.bool_]]:
        """Read raw values and which of them are data, in normalised order.

        Parameters
        ----------
        at : positions along the time axis; None reads a file without one.

        Returns
        -------
        Two arrays of shape (rows.stop - rows.start, cols.stop - cols.start), with the steps in
        front where there are any.
        """
        if self.kind == "tiles":
            from mapper.layers.mosaic import read_tiles  # noqa: PLC0415 - it imports this module

            return read_tiles(self, rows, cols, at)
        raw, mask = self._read(rows, cols, at)
        return raw, mask & self.is_data(raw)

    def _read(
        self, rows: AxisPlan, cols: AxisPlan, at: slice | None
    ) -> tuple[NDArray[Any], NDArray[np.bool_]]:
        if self.kind == "geotiff":
            from mapper.layers.geotiff import read_window  # noqa: PLC0415 - heavy import
        else:
            from mapper.layers.netcdf import read_window  # noqa: PLC0415 - heavy import

        pieces = [
            [read_window(self, (run_rows, run_cols), at) for run_cols in runs(cols.file_index)]
            for run_rows in runs(rows.file_index)
        ]
        if len(pieces) == len(pieces[0]) == 1:
            return pieces[0][0]
        raw = np.block([[piece[0] for piece in row] for row in pieces])
        mask = np.block([[piece[1] for piece in row] for row in pieces])
        return raw, mask

    def read_raw(self, rows: AxisPlan, cols: AxisPlan) -> NDArray[Any]:
        """Read raw values alone, whether they are data or not; of the first step where several."""
        at = slice(self.steps[0].index, self.steps[0].index + 1) if self.steps else None
        return self._read(rows, cols, at)[0]

    def is_data(self, raw: NDArray[Any]) -> NDArray[np.bool_]:
        """Which raw values are data: not a nodata value, not NaN, not infinite."""
        good = np.ones(raw.shape, dtype=np.bool_)
        if raw.dtype.kind == "f":
            good &= np.isfinite(raw)
        for value in self.nodata:
            if np.isnan(value):
                continue
            good &= raw != _as_dtype(value, raw.dtype)
        low, high = self.valid_range
        if np.isfinite(low) or np.isfinite(high):
            good &= (raw >= low) & (raw <= high)
        if raw.dtype.kind in "iu" and raw.dtype.itemsize == 8:
            _refuse_inexact(raw, good, self.path)
        return good


MOST_EXACT = 2**53
"""Whole numbers up to here are exact as float64."""


def _refuse_inexact(raw: NDArray[Any], good: NDArray[np.bool_], path: str) -> None:
    wrong = good & ((raw > MOST_EXACT) | (raw < -MOST_EXACT if raw.dtype.kind == "i" else False))
    if wrong.any():
        raise ValuesError(
            f"{int(wrong.sum())} whole numbers are beyond 2**53, for example {raw[wrong][0]}: "
            "they cannot be held exactly",
            where=path,
            fix="nodata = that number if it means no data; else a file of 32-bit numbers",
        )


def _as_dtype(value: float, dtype: np.dtype[Any]) -> Any:
    """A nodata value as the file's own type holds it; out of its range it matches nothing."""
    if dtype.kind == "f":
        with np.errstate(over="ignore"):
            return np.asarray(value).astype(dtype)[()]
    if not np.isfinite(value):
        return np.nan
    whole = int(value)
    info = np.iinfo(dtype) if dtype.kind in "iu" else None
    if info is not None and info.min <= whole <= info.max and whole == value:
        return dtype.type(whole)
    return np.nan


def runs(index: NDArray[np.int64]) -> list[slice]:
    """Cut positions in a file into stretches ``low:high``, with step -1 where they run down."""
    pieces: list[NDArray[np.int64]] = []
    for piece in np.split(index, np.flatnonzero(np.abs(np.diff(index)) != 1) + 1):
        one_way = piece.size < 3 or bool((np.diff(piece) == piece[1] - piece[0]).all())
        # back and forth, as round the earth on two cells: cell by cell
        pieces.extend([piece] if one_way else np.split(piece, piece.size))
    return [
        slice(int(piece.min()), int(piece.max()) + 1, -1 if piece[-1] < piece[0] else 1)
        for piece in pieces
    ]


def stamp(path: str) -> tuple[int, int]:
    """Size and time of a file, so that one that was written anew is opened anew."""
    about = Path(path).stat()
    return about.st_size, about.st_mtime_ns


def take(array: Any, rows: slice, cols: slice) -> NDArray[Any]:
    """Read the stretches of `runs` from something that forward slices index."""
    values = np.asarray(array[..., rows.start : rows.stop, cols.start : cols.stop])
    return values[..., :: rows.step, :: cols.step]


def north_up_axes(
    transform: tuple[float, float, float, float, float, float], shape: tuple[int, int]
) -> tuple[Axis, Axis]:
    """The x and southing axes of an unrotated affine transform."""
    a, _, c, _, e, f = transform
    return regular_axis(c, a, shape[1]), regular_axis(-f, -e, shape[0])


_MAGIC: tuple[tuple[bytes, str], ...] = (
    (b"II*\x00", "geotiff"),
    (b"MM\x00*", "geotiff"),
    (b"II+\x00", "geotiff"),
    (b"MM\x00+", "geotiff"),
    (b"\x89HDF\r\n\x1a\n", "netcdf"),
    (b"CDF\x01", "netcdf"),
    (b"CDF\x02", "netcdf"),
    (b"CDF\x05", "netcdf"),
    (b"SQLite format 3\x00", "vector"),
    (b"\x00\x00\x27\x0a", "vector"),
    (b"fgb", "vector"),
    (b"PAR1", "vector"),
)

_STRANGERS: tuple[tuple[bytes, str], ...] = (
    (b"<", "an XML or HTML text, perhaps an error page"),
    (b"version https://git-lfs", "a pointer to a large file that was not fetched"),
    (b"\x89PNG", "a PNG picture without georeferencing"),
    (b"\xff\xd8\xff", "a JPEG picture without georeferencing"),
    (b"\x0e\x03\x13\x01", "HDF4, which is not read here"),
    (b"GRIB", "GRIB, which is not read here"),
    (b"PK\x03\x04", "a ZIP archive"),
    (b"\x1f\x8b", "a gzip archive"),
)


def file_kind(path: str, *, where: str) -> FileKind:
    """Tell a file's kind by its first bytes, never by its name.

    Raises
    ------
    MissingFileError, FileFormatError.
    """
    file = Path(path)
    if not file.exists():
        raise MissingFileError(
            f"there is no file {file.name!r}",
            where=where,
            fix=f"a file that exists in {file.parent}",
        )
    if file.is_dir():
        if any((file / one).is_file() for one in (".zgroup", ".zmetadata", "zarr.json")):
            return "zarr"
        raise FileFormatError(
            f"{file.name!r} is a folder, and no Zarr store",
            where=where,
            fix="a file, or a Zarr store",
        )
    with file.open("rb") as stream:
        head = stream.read(64)
    if not head:
        raise FileFormatError("the file is empty", where=where, fix="fetch or copy it again")
    for magic, kind in _MAGIC:
        if head.startswith(magic):
            return kind  # type: ignore[return-value]
    if head.lstrip().startswith(b"{"):
        return "vector"
    for magic, what in _STRANGERS:
        if head.lstrip().startswith(magic):
            raise FileFormatError(
                f"the file is {what}", where=where, fix="a GeoTIFF, NetCDF or vector file"
            )
    raise FileFormatError(
        f"the file begins with {head[:8]!r}, which no known format does",
        where=where,
        fix="a GeoTIFF, NetCDF or vector file",
    )
