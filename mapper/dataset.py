"""The notebook's door: a job's layers and the rates of a law as lazy datasets."""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial
from typing import Any

import dask.array as da
import numpy as np
import rioxarray  # noqa: F401 - gives datasets their .rio
import xarray as xr
from numpy.typing import NDArray

from mapper.accounting import drawdown_share, to_rate
from mapper.errors import LawError
from mapper.evaluation import evaluate_rock
from mapper.grid import Grid, Window
from mapper.hydrology import derive_runoff
from mapper.job import Job
from mapper.laws import Law
from mapper.layers.layer import QUANTITY, Layer
from mapper.layers.lithology import Lithology
from mapper.planning import block_shape, make_plan
from mapper.rocks import ROCK_NAMES, ROCKS
from mapper.scheme import RockLaw, Scheme, find_laws, unknown_law
from mapper.units import INNER_UNIT

Floats = NDArray[np.float64]

_STANDARD_NAMES = {
    "temperature": "air_temperature",
    "vegetation": "vegetation_area_fraction",
}
RATE_UNIT = "t CO2 km-2 yr-1"


def open_layers(job: Job, *, chunks: tuple[int, int] | None = None) -> xr.Dataset:
    """Open a job's layers on its grid, lazily.

    Parameters
    ----------
    job : from `mapper.load_job`.
    chunks : rows and columns of a chunk; default follows the files.

    Returns
    -------
    Dataset backed by dask: ``rock_share`` (rock, y, x) [1] and each layer (y, x) in inner units
    (K, mm yr-1, cover 0..1), with CF names, units and CRS. Nothing is read until it is computed.
    The job's scheme of laws is in ``encoding["scheme"]``, for `drawdown`.

    Raises
    ------
    MapperError, or ManyProblemsError with every problem that can be found before reading.
    """
    plan = make_plan(job)
    grid = plan.grid
    shape = chunks or block_shape(plan)
    rocks = plan.lithology.legend.rocks()
    variables: dict[str, Any] = {
        "rock_share": (("rock", "y", "x"), _lazy_shares(plan.lithology, rocks, grid, shape))
    }
    for name, layer in plan.layers.items():
        variables[name] = (("y", "x"), _lazy_values(layer, grid, shape))
    derived = "runoff" not in variables and "runoff" in plan.scheme.input_names()
    if derived:
        climate = [variables[name][1] for name in ("precipitation", "temperature")]
        runoff = da.map_blocks(
            partial(derive_runoff, plan.water_method), *climate, dtype=np.float64
        )
        variables["runoff"] = (("y", "x"), runoff)
    dataset = xr.Dataset(variables, coords={"rock": list(rocks), **_coordinates(grid)})
    dataset["rock_share"].attrs = {"units": "1", "long_name": "share of the cell that a rock takes"}
    for name in plan.layers:
        dataset[name].attrs = {"units": INNER_UNIT[QUANTITY[name]], "long_name": name}
        if name in _STANDARD_NAMES:
            dataset[name].attrs["standard_name"] = _STANDARD_NAMES[name]
    if derived:
        long_name = f"runoff derived by {plan.water_method}"
        dataset["runoff"].attrs = {"units": INNER_UNIT["water"], "long_name": long_name}
    dataset.attrs = {"title": job.title, "Conventions": "CF-1.11"}
    dataset.encoding["scheme"] = plan.scheme
    return _with_crs(dataset, grid)


def drawdown(dataset: xr.Dataset, law: str | Law | None = None) -> xr.Dataset:
    """Evaluate a law on layers from `open_layers`, lazily.

    Parameters
    ----------
    law : a name in `mapper.LAWS`, a law, or None for the job's own scheme.

    Returns
    -------
    Dataset backed by dask with ``consumption`` (short term) and ``drawdown`` (long term), both
    (y, x) in t CO2 km-2 yr-1 over the whole cell.

    Raises
    ------
    LawError where the law is unknown, or needs a layer or a rock's numbers that are not there.
    """
    scheme = _scheme(dataset, law)
    names = scheme.input_names()
    missing = [name for name in names if name not in dataset]
    if missing:
        raise LawError(
            f"the law needs {', '.join(missing)}, which the dataset lacks",
            where="mapper.drawdown",
            fix=f"dataset[{missing[0]!r}] = ... in the units of mapper.open_layers",
        )
    rocks = [str(one) for one in dataset["rock"].to_index()]
    layers = [dataset[name].data for name in names]
    shares = dataset["rock_share"].data.rechunk({0: len(rocks)})
    rates = da.map_blocks(
        _rates,
        shares,
        *[layer[None] for layer in layers],
        dtype=np.float64,
        chunks=((2,), *shares.chunks[1:]),
        meta=np.empty((0, 0, 0)),
        scheme=scheme,
        rocks=rocks,
    )
    result = xr.Dataset(
        {"consumption": (("y", "x"), rates[0]), "drawdown": (("y", "x"), rates[1])},
        coords={name: dataset.coords[name] for name in ("y", "x", "spatial_ref")},
    )
    result["consumption"].attrs = {
        "units": RATE_UNIT,
        "long_name": "CO2 taken up by weathering, short term",
        "grid_mapping": "spatial_ref",
    }
    result["drawdown"].attrs = {
        "units": RATE_UNIT,
        "long_name": "CO2 drawn down by weathering, long term",
        "grid_mapping": "spatial_ref",
    }
    result.attrs = dict(dataset.attrs)
    return result


def _scheme(dataset: xr.Dataset, law: str | Law | None) -> Scheme:
    if law is None:
        scheme = dataset.encoding.get("scheme")
        if not isinstance(scheme, Scheme):
            raise LawError(
                "the dataset does not carry a job's laws",
                where="mapper.drawdown",
                fix='mapper.drawdown(dataset, "product")',
            )
        return scheme
    if isinstance(law, str):
        laws = find_laws()
        if law not in laws:
            raise unknown_law(law, laws, where="mapper.drawdown", fix='"{}"')
        law = laws[law]
    weathering = [str(one) for one in dataset["rock"].to_index() if ROCKS[str(one)].weathers]
    try:
        return Scheme({rock: RockLaw(law, law.central_values(rock)) for rock in weathering})
    except KeyError as cause:
        raise LawError(
            str(cause.args[0]), where="mapper.drawdown", fix="a law that serves all the rocks"
        ) from cause


def _rates(shares: Floats, *layers: Floats, scheme: Scheme, rocks: Sequence[str]) -> Floats:
    """Consumption and drawdown of one chunk, stacked."""
    shape = shares.shape[1:]
    inputs = dict(zip(scheme.input_names(), (one.ravel() for one in layers), strict=True))
    out = np.zeros((2, shape[0] * shape[1]))
    held = np.zeros(out.shape[1])
    for at, rock in sorted(enumerate(rocks), key=lambda pair: ROCK_NAMES.index(pair[1])):
        share = shares[at].ravel()
        cells = np.flatnonzero(share > 0)
        law = scheme.by_rock.get(rock)
        taken = {name: inputs[name][cells] for name in law.law.input_names} if law else {}
        rate = evaluate_rock(law, taken).rate if law else np.zeros(cells.size)
        good = ~np.isnan(rate)
        cells, rate = cells[good], rate[good]
        out[0, cells] += share[cells] * rate
        out[1, cells] += share[cells] * rate * drawdown_share(ROCKS[rock])
        held[cells] += share[cells]
    out[:, held <= 0] = np.nan
    return out.reshape(2, *shape) * to_rate(1.0)


def _lazy_values(layer: Layer, grid: Grid, shape: tuple[int, int]) -> da.Array:
    def read(block_info: Any = None) -> Floats:
        return layer.values(_window(block_info, 0))

    chunks = da.core.normalize_chunks(shape, grid.shape, dtype=np.float64)
    return da.map_blocks(read, chunks=chunks, dtype=np.float64, meta=np.empty((0, 0)))


def _lazy_shares(
    lithology: Lithology, rocks: tuple[str, ...], grid: Grid, shape: tuple[int, int]
) -> da.Array:
    def read(block_info: Any = None) -> Floats:
        window = _window(block_info, 1)
        cells = lithology.rock_cells(window)
        out = np.zeros((len(rocks), window.n_cells))
        position = np.array([rocks.index(name) if name in rocks else -1 for name in ROCK_NAMES])
        out[position[cells.rock], cells.cell] = cells.share
        return out.reshape(len(rocks), *window.shape)

    chunks = da.core.normalize_chunks(shape, grid.shape, dtype=np.float64)
    return da.map_blocks(
        read, chunks=((len(rocks),), *chunks), dtype=np.float64, meta=np.empty((0, 0, 0))
    )


def _window(block_info: Any, leading: int) -> Window:
    (row, row_stop), (col, col_stop) = block_info[None]["array-location"][leading:]
    return Window(row, col, row_stop - row, col_stop - col)


def _coordinates(grid: Grid) -> dict[str, Any]:
    if grid.is_geographic:
        x = {"standard_name": "longitude", "units": "degrees_east", "axis": "X"}
        y = {"standard_name": "latitude", "units": "degrees_north", "axis": "Y"}
    else:
        x = {"standard_name": "projection_x_coordinate", "units": "m", "axis": "X"}
        y = {"standard_name": "projection_y_coordinate", "units": "m", "axis": "Y"}
    return {
        "y": ("y", grid.y_centres(0, grid.n_rows), y),
        "x": ("x", grid.x_centres(0, grid.n_cols), x),
    }


def _with_crs(dataset: xr.Dataset, grid: Grid) -> xr.Dataset:
    with_crs: xr.Dataset = dataset.rio.write_crs(grid.crs)
    return with_crs
