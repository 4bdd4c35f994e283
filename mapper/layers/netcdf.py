"""CF NetCDF and Zarr by xarray: raw values; coordinates are checked before they are believed."""

from __future__ import annotations

import difflib
from functools import lru_cache
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from pyproj import CRS
from pyproj.exceptions import CRSError

from mapper.errors import FileFormatError, GridError, ValuesError
from mapper.grid import parse_crs
from mapper.job import LayerSpec
from mapper.layers.axis import (
    Axis,
    around_the_earth,
    axis_from_centres,
    inside_the_poles,
    one_turn,
)
from mapper.layers.source import UNTAGGED_FILLS, Source, stamp, take
from mapper.layers.timeline import RawTime, Timeline, read_timeline

_LON_LAT = "OGC:CRS84"


@lru_cache(maxsize=32)
def _opened(path: str, _stamp: tuple[int, int]) -> xr.Dataset:
    if Path(path).is_dir():
        store: xr.Dataset = xr.open_zarr(path, decode_cf=False, chunks=None, consolidated=False)
        return store
    with Path(path).open("rb") as stream:
        engine = "scipy" if stream.read(3) == b"CDF" else "h5netcdf"
    return xr.open_dataset(
        path,
        engine=engine,
        decode_cf=False,
        cache=False,  # raw values: decoded once, by us
    )


def open_netcdf(spec: LayerSpec) -> Source:
    """Read the header of one variable of a CF NetCDF file.

    Raises
    ------
    FileFormatError, GridError, ValuesError.
    """
    try:
        dataset = _opened(spec.path, stamp(spec.path))
    except ImportError as cause:
        raise FileFormatError(
            "Zarr needs the library zarr, which is not installed",
            where=spec.where,
            fix="pip install zarr, or a NetCDF file",
        ) from cause
    except (OSError, ValueError, KeyError) as cause:
        raise FileFormatError(
            f"the file cannot be opened as NetCDF or Zarr: {cause}",
            where=spec.where,
            fix="copy it again",
        ) from cause
    variable = _variable(dataset, spec)
    if variable.dtype.kind not in "iuf":
        raise FileFormatError(
            f"variable {variable.name!r} holds {variable.dtype} values",
            where=spec.where,
            fix="a variable of real numbers",
        )
    x_name, y_name = _horizontal(dataset, variable, spec)
    time_name = _time_name(dataset, variable, (x_name, y_name), spec)
    timeline = _timeline(dataset, time_name, spec)
    if timeline is None and spec.years is not None:
        raise ValuesError(
            f"years = {list(spec.years)}, and variable {variable.name!r} has no time axis",
            where=spec.where,
            fix="remove years",
        )
    crs = _crs(dataset, variable, x_name, spec)
    geographic = bool(parse_crs(crs).is_geographic)
    x = _axis(dataset, x_name, spec, southing=False, longitude=geographic)
    y = _axis(dataset, y_name, spec, southing=True, longitude=False)
    if geographic:
        x = around_the_earth(one_turn(x, spec.registration, where=spec.where))
        y = inside_the_poles(y, where=spec.where)
    attrs = variable.attrs
    tagged = _nodata(variable, spec)
    return Source(
        kind="zarr" if Path(spec.path).is_dir() else "netcdf",
        path=spec.path,
        variable=str(variable.name),
        crs=crs,
        x=x,
        y=y,
        dtype=str(_true_dtype(variable)),
        nodata=(*tagged, *UNTAGGED_FILLS) if variable.dtype.kind == "f" else tagged,
        tagged_nodata=tagged,
        scale=float(attrs.get("scale_factor", 1.0)) if spec.scale is None else spec.scale,
        offset=float(attrs.get("add_offset", 0.0)) if spec.offset is None else spec.offset,
        unit=_text(attrs.get("units")),
        has_mask=False,
        block=_chunk(variable, (y_name, x_name), (y.size, x.size)),
        label=_text(attrs.get("long_name") or attrs.get("standard_name")) or "",
        valid_range=_valid_range(variable, spec),
        steps=timeline.steps if timeline else (),
        notes=(timeline.note,) if timeline else (),
    )


def _text(value: Any) -> str | None:
    if isinstance(value, bytes):
        return value.decode("latin-1")
    text = None if value is None else str(value)
    if text is not None and any("\udc80" <= letter <= "\udcff" for letter in text):
        # bytes that are not UTF-8 arrive as lone surrogates
        return text.encode("utf-8", "surrogateescape").decode("latin-1")
    return text


def _variable(dataset: xr.Dataset, spec: LayerSpec) -> xr.DataArray:
    gridded = [str(name) for name in dataset.data_vars if dataset[name].ndim >= 2]
    gridded = [name for name in gridded if not name.endswith(("_bnds", "_bounds"))]
    if spec.variable is not None and spec.variable in dataset.data_vars:
        return dataset[spec.variable]
    if spec.variable is None and len(gridded) == 1:
        return dataset[gridded[0]]
    listed = ", ".join(gridded) or "none"
    if spec.variable is None:
        raise FileFormatError(
            f"the file has {len(gridded)} gridded variables: {listed}",
            where=spec.where,
            fix=f'variable = "{gridded[0] if gridded else "..."}"',
        )
    near = difflib.get_close_matches(spec.variable, gridded, n=1, cutoff=0.0)
    raise FileFormatError(
        f"there is no variable {spec.variable!r}; there are: {listed}",
        where=spec.where,
        fix=f'variable = "{near[0] if near else "..."}"',
    )


_X_UNITS = ("degrees_east", "degree_east", "degree_e", "degrees_e", "degreee", "degreese")
_Y_UNITS = ("degrees_north", "degree_north", "degree_n", "degrees_n", "degreen", "degreesn")


def _horizontal(dataset: xr.Dataset, variable: xr.DataArray, spec: LayerSpec) -> tuple[str, str]:
    x = [str(dim) for dim in variable.dims if _is_axis(dataset, str(dim), "x")]
    y = [str(dim) for dim in variable.dims if _is_axis(dataset, str(dim), "y")]
    if len(x) == 1 and len(y) == 1:
        return x[0], y[0]
    flat = [
        name
        for name in str(variable.attrs.get("coordinates", "")).split()
        if name in dataset and dataset[name].ndim == 2
    ]
    if flat:
        raise GridError(
            f"variable {variable.name!r} lies on a curvilinear grid (2-D {', '.join(flat)})",
            where=spec.where,
            fix="regrid it to a longitude/latitude or projected grid",
        )
    raise GridError(
        f"variable {variable.name!r} has dimensions {tuple(variable.dims)}; which are x and y "
        "cannot be told",
        where=spec.where,
        fix='coordinates with units "degrees_east" and "degrees_north", or standard names',
    )


def _is_axis(dataset: xr.Dataset, dim: str, axis: str) -> bool:
    if dim not in dataset.variables or dataset[dim].ndim != 1:
        return False
    attrs = dataset[dim].attrs
    units = str(attrs.get("units", "")).strip().lower()
    names = {
        "x": ("longitude", "projection_x_coordinate", "grid_longitude"),
        "y": ("latitude", "projection_y_coordinate", "grid_latitude"),
    }
    plain = {"x": ("x", "lon", "longitude"), "y": ("y", "lat", "latitude")}
    if units in (_X_UNITS if axis == "x" else _Y_UNITS):
        return True
    if attrs.get("standard_name") in names[axis] or attrs.get("axis", "").lower() == axis:
        return True
    return dim.lower() in plain[axis]


def _time_name(
    dataset: xr.Dataset, variable: xr.DataArray, used: tuple[str, str], spec: LayerSpec
) -> str | None:
    """The dimension along which steps of time lie; other dimensions may hold one value only."""
    others = {str(dim): size for dim, size in variable.sizes.items() if dim not in used}
    times = [dim for dim in others if _is_time(dataset, dim)]
    for dim, size in others.items():
        if size != 1 and times[:1] != [dim]:
            raise ValuesError(
                f"variable {variable.name!r} has {size} values along {dim!r}, and one is needed",
                where=spec.where,
                fix=f"the mean or one step along {dim!r}, in a file of its own",
            )
    return times[0] if times else None


def _is_time(dataset: xr.Dataset, dim: str) -> bool:
    if dim not in dataset.variables:
        return False
    attrs = dataset[dim].attrs
    units = str(attrs.get("units", ""))
    named = dim.lower() in ("time", "t", "month", "months")
    return named or " since " in units or attrs.get("standard_name") == "time"


def _timeline(dataset: xr.Dataset, name: str | None, spec: LayerSpec) -> Timeline | None:
    if name is None or (dataset.sizes[name] == 1 and spec.years is None):
        return None
    coordinate = dataset[name]
    attrs = coordinate.attrs
    climatology = "climatology" in attrs
    bounds_name = str(attrs.get("climatology" if climatology else "bounds", ""))
    bounds = None
    if bounds_name in dataset.variables:
        bounds = np.asarray(dataset[bounds_name], dtype=np.float64)
    raw = RawTime(
        name=name,
        values=np.asarray(coordinate, dtype=np.float64),
        units=_text(attrs.get("units")) or "",
        calendar=(_text(attrs.get("calendar")) or "standard").lower(),
        bounds=bounds,
        climatology=climatology,
    )
    return read_timeline(raw, spec.years, where=spec.where)


def _crs(dataset: xr.Dataset, variable: xr.DataArray, x_name: str, spec: LayerSpec) -> str:
    if spec.crs is not None:
        return parse_crs(spec.crs).to_wkt()
    mapping = str(variable.attrs.get("grid_mapping", "")).split(":")[0].strip()
    if mapping and mapping in dataset.variables:
        attrs = dict(dataset[mapping].attrs)
        if attrs.get("grid_mapping_name") == "rotated_latitude_longitude":
            raise GridError(
                f"variable {variable.name!r} lies on a rotated pole ({mapping})",
                where=spec.where,
                fix="regrid it to a longitude/latitude grid",
            )
        try:
            return CRS.from_cf(attrs).to_wkt()
        except (CRSError, KeyError) as cause:
            raise GridError(
                f"grid mapping {mapping!r} cannot be read: {cause}",
                where=spec.where,
                fix='crs = "EPSG:..." in the job file',
            ) from cause
    units = str(dataset[x_name].attrs.get("units", "")).strip().lower()
    if units in _X_UNITS or dataset[x_name].attrs.get("standard_name") == "longitude":
        return parse_crs(_LON_LAT).to_wkt()
    raise GridError(
        f"the file does not say the CRS of {variable.name!r}",
        where=spec.where,
        fix=f'crs = "EPSG:4326" (or its true code) under [layers.{spec.name}]',
    )


def _axis(
    dataset: xr.Dataset, name: str, spec: LayerSpec, *, southing: bool, longitude: bool
) -> Axis:
    sign = -1.0 if southing else 1.0
    coordinate = dataset[name]
    centres = sign * np.asarray(coordinate, dtype=np.float64)
    bounds_name = str(coordinate.attrs.get("bounds", ""))
    bounds = None
    if bounds_name in dataset.variables:
        bounds = sign * np.asarray(dataset[bounds_name], dtype=np.float64)
    if coordinate.dtype == np.float32:
        centres = _regularised(centres)
    where = f"{spec.where}, coordinate {name!r}"
    return axis_from_centres(centres, bounds, longitude=longitude, where=where)


def _regularised(centres: NDArray[np.float64]) -> NDArray[np.float64]:
    """Undo float32 rounding where the coordinates are evenly spaced within it."""
    if centres.size < 3:
        return centres
    even = np.linspace(centres[0], centres[-1], centres.size)
    tolerance = 4 * np.finfo(np.float32).eps * float(np.abs(centres).max())
    return even if float(np.abs(even - centres).max()) <= tolerance else centres


def _nodata(variable: xr.DataArray, spec: LayerSpec) -> tuple[float, ...]:
    values = list(spec.nodata)
    for key in ("_FillValue", "missing_value"):
        if key in variable.attrs:
            stated = np.atleast_1d(variable.attrs[key])
            values.extend(_as_read(_number(one, key, spec), variable) for one in stated)
    return tuple(dict.fromkeys(values))


def _number(value: Any, key: str, spec: LayerSpec) -> float:
    try:
        return float(_text(value) or "")
    except ValueError as cause:
        raise ValuesError(
            f"{key} is {_text(value)!r}, and a number is needed",
            where=spec.where,
            fix="mend the attribute, e.g. with ncatted",
        ) from cause


def _valid_range(variable: xr.DataArray, spec: LayerSpec) -> tuple[float, float]:
    """The attributes valid_min, valid_max or valid_range as limits of raw values.

    CF states them in packed values. Fractional limits of packed whole numbers are limits of the
    unpacked values, as the NetCDF users' guide has it.
    """
    attrs = variable.attrs
    pair = np.atleast_1d(attrs.get("valid_range", ()))
    if pair.size == 2:
        stated = {"low": ("valid_range", pair[0]), "high": ("valid_range", pair[1])}
    else:
        keys = {"low": "valid_min", "high": "valid_max"}
        stated = {
            end: (key, np.atleast_1d(attrs[key])[0]) for end, key in keys.items() if key in attrs
        }
    limits = {"low": -np.inf, "high": np.inf}
    for end, (key, value) in stated.items():
        limits[end] = _as_read(_number(value, key, spec), variable)
    scale, offset = float(attrs.get("scale_factor", 1.0)), float(attrs.get("add_offset", 0.0))
    fractional = any(np.asarray(value).dtype.kind == "f" for _, value in stated.values())
    if not (fractional and variable.dtype.kind in "iu" and (scale, offset) != (1.0, 0.0)):
        return limits["low"], limits["high"]
    low, high = sorted((limits[end] - offset) / scale for end in limits)
    return low - 1e-6, high + 1e-6  # of a step of packing: a limit itself is valid


def _true_dtype(variable: xr.DataArray) -> np.dtype[Any]:
    """The type that raw values have: NetCDF 3 knows no unsigned bytes and marks them so."""
    mark = (_text(variable.attrs.get("_Unsigned")) or "").strip().lower()
    kind = {("i", "true"): "u", ("u", "false"): "i"}.get((variable.dtype.kind, mark))
    if kind is None:
        return np.dtype(variable.dtype)
    return np.dtype(f"{kind}{variable.dtype.itemsize}").newbyteorder(variable.dtype.byteorder)


def _as_read(value: float, variable: xr.DataArray) -> float:
    """A value that an attribute states in the stored type, as raw values have it."""
    dtype = _true_dtype(variable)
    if dtype.kind == variable.dtype.kind or not float(value).is_integer():
        return value
    turn = 2.0 ** (8 * dtype.itemsize)
    if dtype.kind == "u":
        return value + turn if value < 0 else value
    return value - turn if value >= turn / 2 else value


def _chunk(
    variable: xr.DataArray, dims: tuple[str, str], shape: tuple[int, int]
) -> tuple[int, int]:
    chunks = variable.encoding.get("chunksizes")
    if not chunks:
        return shape
    sizes = dict(zip(variable.dims, chunks, strict=True))
    return int(sizes[dims[0]]), int(sizes[dims[1]])


def read_window(
    source: Source, window: tuple[slice, slice], at: slice | None
) -> tuple[NDArray[Any], NDArray[np.bool_]]:
    """Read raw values for one window in file order, steps in front; there is no separate mask."""
    rows, cols = window
    dataset = _opened(source.path, stamp(source.path))
    variable = dataset[source.variable]
    x_name, y_name = _dims(dataset, variable)
    others = [str(dim) for dim in variable.dims if dim not in (x_name, y_name)]
    time_name = next((dim for dim in others if _is_time(dataset, dim)), None) if at else None
    flat = variable.isel({dim: 0 for dim in others if dim != time_name})
    if time_name is not None:
        flat = flat.isel({time_name: at}).transpose(time_name, y_name, x_name)
    else:
        flat = flat.transpose(y_name, x_name)
    try:
        raw = take(flat, rows, cols)
    except (OSError, RuntimeError) as cause:
        raise FileFormatError(
            f"rows {rows.start}..{rows.stop} of {source.variable!r} cannot be read: {cause}",
            where=source.path,
            fix="the file is cut short or damaged: copy or fetch it again",
        ) from cause
    return raw.view(_true_dtype(variable)), np.ones(raw.shape, dtype=np.bool_)


def _dims(dataset: xr.Dataset, variable: xr.DataArray) -> tuple[str, str]:
    x = next(str(dim) for dim in variable.dims if _is_axis(dataset, str(dim), "x"))
    y = next(str(dim) for dim in variable.dims if _is_axis(dataset, str(dim), "y"))
    return x, y
