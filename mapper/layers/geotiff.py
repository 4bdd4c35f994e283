"""GeoTIFF and COG through rioxarray: the header checked before it is believed."""

from __future__ import annotations

import threading
import warnings
from functools import lru_cache
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
import rioxarray
import xarray as xr
from numpy.typing import NDArray
from rasterio.enums import ColorInterp, MaskFlags
from rasterio.errors import NotGeoreferencedWarning, RasterioError, RasterioIOError
from rasterio.windows import Window

from mapper.errors import FileFormatError, GridError
from mapper.grid import parse_crs
from mapper.job import LayerSpec
from mapper.layers.axis import around_the_earth, inside_the_poles, one_turn
from mapper.layers.damage import blocks_in, refuse_cut_file, rows_per_strip
from mapper.layers.source import Source, north_up_axes, stamp, take

MOST_CELLS = 2**37
"""A global grid of 3 arc-seconds has 2**36.4 cells."""

MOST_BLOCK_BYTES = 2**29
MOST_BANDS = 2**14
_local = threading.local()


def open_geotiff(spec: LayerSpec) -> Source:
    """Read a GeoTIFF's header.

    Raises
    ------
    FileFormatError for a damaged file or a band that cannot be used; GridError for missing or
    rotated georeferencing.
    """
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", NotGeoreferencedWarning)  # refused below, in words
            with rasterio.open(spec.path, driver="GTiff") as dataset:
                return _describe(dataset, spec)
    except RasterioIOError as cause:
        raise FileFormatError(
            f"the file cannot be opened as GeoTIFF: {cause}", where=spec.where, fix="copy it again"
        ) from cause


def _describe(dataset: Any, spec: LayerSpec) -> Source:
    _refuse_giants(dataset, spec)
    band = _band_number(dataset, spec)
    dtype = dataset.dtypes[band - 1]
    if dtype.startswith("complex") or np.dtype(dtype).kind not in "iufb":
        raise FileFormatError(
            f"band {band} holds {dtype} numbers", where=spec.where, fix="a band of real numbers"
        )
    refuse_cut_file(dataset, band, where=spec.where)
    transform = _checked_transform(dataset, spec)
    crs = _checked_crs(dataset, spec)
    x, y = north_up_axes(transform, dataset.shape)
    if parse_crs(crs).is_geographic:
        x = around_the_earth(one_turn(x, spec.registration, where=spec.where))
        y = inside_the_poles(y, where=spec.where)
    scale, offset = dataset.scales[band - 1], dataset.offsets[band - 1]
    nodata, notes = _nodata(dataset, band, spec)
    notes += _sidecars(spec)
    if spec.crs is not None and dataset.crs is None:
        notes += (f"the file does not say its CRS; {spec.crs} is taken from the job",)
    flags = dataset.mask_flag_enums[band - 1]
    return Source(
        kind="geotiff",
        path=spec.path,
        variable=str(band),
        crs=crs,
        x=x,
        y=y,
        dtype=dtype,
        nodata=nodata,
        scale=scale if spec.scale is None else spec.scale,
        offset=offset if spec.offset is None else spec.offset,
        unit=dataset.units[band - 1] or None,
        has_mask=MaskFlags.per_dataset in flags or MaskFlags.alpha in flags,
        block=dataset.block_shapes[band - 1],
        label=dataset.descriptions[band - 1] or "",
        notes=notes,
    )


def _refuse_giants(dataset: Any, spec: LayerSpec) -> None:
    """Refuse what no honest file needs, from the header alone, before anything is read."""
    if dataset.width * dataset.height > MOST_CELLS:
        raise GridError(
            f"{dataset.height} x {dataset.width} cells are more than this tool will open",
            where=spec.where,
            fix="a raster of the area of interest",
        )
    if dataset.count > MOST_BANDS:
        raise FileFormatError(
            f"the file has {dataset.count} bands, more than this tool will open",
            where=spec.where,
            fix="a file with the one band that is needed",
        )
    height, width = dataset.block_shapes[0]
    if height == 1 and dataset.compression is not None:
        height = min(rows_per_strip(spec.path) or 1, dataset.height)
    block_bytes = height * width * np.dtype(_plain_type(dataset.dtypes[0])).itemsize
    if block_bytes > MOST_BLOCK_BYTES:
        raise FileFormatError(
            f"one block of the file holds {height} x {width} cells, {block_bytes / 1e6:.0f} MB",
            where=spec.where,
            fix="write it in tiles, e.g. gdal_translate -co TILED=YES",
        )


def _plain_type(name: str) -> str:
    return "complex128" if name.startswith("complex") else name


def _band_number(dataset: Any, spec: LayerSpec) -> int:
    bands = [
        number
        for number, colour in zip(dataset.indexes, dataset.colorinterp, strict=True)
        if colour != ColorInterp.alpha
    ]
    if spec.variable is not None:
        names = {str(number): number for number in bands}
        names |= {dataset.descriptions[number - 1]: number for number in bands}
        if spec.variable in names:
            return int(names[spec.variable])
        known = ", ".join(str(name) for name in names if name)
        raise FileFormatError(
            f"there is no band {spec.variable!r}",
            where=spec.where,
            fix=f"variable = one of {known}",
        )
    if len(bands) != 1:
        raise FileFormatError(
            f"the file has {len(bands)} bands", where=spec.where, fix='variable = "1", or another'
        )
    return int(bands[0])


def _checked_transform(
    dataset: Any, spec: LayerSpec
) -> tuple[float, float, float, float, float, float]:
    t = dataset.transform
    if t.is_identity:
        held = "ground control points only" if dataset.gcps[0] else "no georeferencing"
        raise GridError(
            f"the file has {held}", where=spec.where, fix="warp it onto a grid, e.g. with gdalwarp"
        )
    if t.b != 0 or t.d != 0:
        raise GridError(
            f"the grid is rotated or sheared (affine b = {t.b:g}, d = {t.d:g})",
            where=spec.where,
            fix="warp it to a north-up grid, e.g. with gdalwarp",
        )
    return t.a, t.b, t.c, t.d, t.e, t.f


def _checked_crs(dataset: Any, spec: LayerSpec) -> str:
    if spec.crs is not None:
        return parse_crs(spec.crs).to_wkt()
    if dataset.crs is None:
        raise GridError(
            "the file does not say its CRS",
            where=spec.where,
            fix=f'crs = "EPSG:4326" (or its true code) under [layers.{spec.name}]',
        )
    return str(dataset.crs.to_wkt())


def _nodata(dataset: Any, band: int, spec: LayerSpec) -> tuple[tuple[float, ...], tuple[str, ...]]:
    tag = dataset.nodatavals[band - 1]
    values = list(spec.nodata)
    notes: tuple[str, ...] = ()
    dtype = np.dtype(dataset.dtypes[band - 1])
    if tag is not None:
        values.append(float(tag))
        if dtype.kind in "iu":
            info = np.iinfo(dtype)
            if np.isnan(tag) or not info.min <= tag <= info.max:
                notes = (f"the nodata tag {tag:g} cannot occur in {dtype} and was ignored",)
                values.pop()
    return tuple(values), notes


def _sidecars(spec: LayerSpec) -> tuple[str, ...]:
    """Notes on files beside the raster that other programs obey and this one does not."""
    beside = [f"{spec.path}{end}" for end in (".aux.xml", ".ovr", ".msk")]
    found = [Path(one).name for one in beside if Path(one).exists()]
    return tuple(f"{name} beside it is not used" for name in found if not name.endswith(".msk"))


@lru_cache(maxsize=32)
def _opened(path: str, _stamp: tuple[int, int]) -> xr.DataArray:
    opened = rioxarray.open_rasterio(
        path, driver="GTiff", lock=False, masked=False, parse_coordinates=False, cache=False
    )
    if not isinstance(opened, xr.DataArray):  # pragma: no cover - several sub-datasets
        msg = f"{path} opened as {type(opened).__name__}"
        raise TypeError(msg)
    return opened


def read_window(
    source: Source,
    window: tuple[slice, slice],
    at: slice | None,  # noqa: ARG001 - a GeoTIFF has no time axis
) -> tuple[NDArray[Any], NDArray[np.bool_]]:
    """Read raw values and the file's own mask for one window in file order."""
    rows, cols = window
    band = int(source.variable or 1)
    try:
        raw = take(_opened(source.path, stamp(source.path))[band - 1], rows, cols)
        if not source.has_mask:
            return raw, np.ones(raw.shape, dtype=np.bool_)
        return raw, take(_Mask(source.path, band), rows, cols) != 0
    except (RasterioError, RuntimeError) as cause:
        raise _unreadable(source, band, (rows, cols), cause) from cause


def _unreadable(
    source: Source, band: int, window: tuple[slice, slice], cause: Exception
) -> FileFormatError:
    """The error for a damaged block, the first that fails when read alone."""
    rows, cols = window
    place = ""
    with rasterio.open(source.path, driver="GTiff") as dataset:
        height, width = dataset.block_shapes[band - 1]
        for block in blocks_in(dataset, band, rows, cols):
            try:
                dataset.read(
                    band,
                    window=Window(block.col * width, block.row * height, width, height),
                    boundless=False,
                )
            except RasterioError:
                place = f"; block {block.row},{block.col} at byte {block.offset} is damaged"
                break
    return FileFormatError(
        f"rows {rows.start}..{rows.stop}, columns {cols.start}..{cols.stop} cannot be read: "
        f"{cause.__cause__ or cause}{place}",
        where=source.path,
        fix="the file is cut short or damaged: copy or fetch it again",
    )


class _Mask:
    """A band's mask, indexable by forward slices; one file handle a thread."""

    def __init__(self, path: str, band: int) -> None:
        self.path = path
        self.band = band

    def __getitem__(self, window: tuple[Any, slice, slice]) -> NDArray[np.uint8]:
        _, rows, cols = window
        handles: dict[tuple[str, tuple[int, int]], Any] = _local.__dict__.setdefault("handles", {})
        key = (self.path, stamp(self.path))
        if key not in handles:
            handles[key] = rasterio.open(self.path, driver="GTiff")
        bounds = ((rows.start, rows.stop), (cols.start, cols.stop))
        return np.asarray(handles[key].read_masks(self.band, window=bounds))
