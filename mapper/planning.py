"""From a job to a plan: everything opened, checked and brought onto one grid."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from mapper.classes import ClassLayer, open_classes
from mapper.coverage import polygons_on
from mapper.engine import Plan, evaluate_block
from mapper.errors import JobError, MapperError, Problems
from mapper.grid import Grid, Window, blocks, cell_areas, same_crs
from mapper.gridding import choose_grid
from mapper.job import Job, LayerSpec, read_job
from mapper.layers.codes import open_codes
from mapper.layers.lapse import with_lapse
from mapper.layers.layer import Layer, open_layer, open_source, source_grid
from mapper.layers.lithology import Lithology, nothing_mapped, unknown_codes
from mapper.layers.oddities import odd_values
from mapper.layers.source import Source, file_kind
from mapper.layers.vector import read_vector, reproject, valid_shapes
from mapper.layers.water import (
    check_months,
    has_potential,
    month_shares,
    needed_layers,
    no_potential,
)
from mapper.legend import Legend, normal_code, read_legend
from mapper.regions import Regions, open_regions
from mapper.scheme import Scheme, build_scheme

LARGEST_SIDE = 1024


SMALLEST_SIDE = 128


DEFAULT_MEMORY = 2e9


BASE_MEMORY = 6e8  # the libraries, GDAL's cache and maps: a bound that runs kept to


BYTES_PER_CELL = 400.0  # arrays alive at once while a block is evaluated: a bound, likewise


MOST_SAMPLED_CELLS = 2**22


SAMPLE_SIDE = 256


@dataclass(frozen=True)
class Sample:
    """What a look at a layer's values on the grid showed."""

    low: float
    median: float
    high: float
    coverage: float


def open_job(path: str | Path) -> Job:
    """Read a job file; where it has problems, look for those of the files that it names too.

    Raises
    ------
    MapperError, or ManyProblemsError with every problem that can be found before the run.
    """
    job, problems = read_job(path)
    if job is not None and problems.found:
        with problems.gather():
            make_plan(job)
    problems.raise_if_any()
    if job is None:  # pragma: no cover - then there was a problem
        raise AssertionError
    return job


def make_plan(job: Job) -> Plan:
    """Open and check all that a job names.

    Raises
    ------
    MapperError, or ManyProblemsError with every problem that can be found before the run.
    """
    problems = Problems()
    sources = _open_sources(job, problems)
    legend: Legend | None = None
    with problems.gather():
        legend = read_legend(
            job.layers["lithology"].legend or "", where=f"{job.path}, layers.lithology"
        )
    scheme: Scheme | None = None
    if legend is not None:
        with problems.gather():
            scheme = build_scheme(job, legend.rocks())
            _check_layers(job, scheme)
    grid: Grid | None = None
    wrong_files = len(problems.found)
    with problems.gather():
        grid = choose_grid(job, sources)
    if grid is None:
        if wrong_files and len(sources) < len(job.layers):
            problems.found.pop()  # no grid because a file is wrong: the file is what to mend
        problems.raise_if_any()
        raise AssertionError
    layers = _open_layers(job, sources, grid, problems)
    lithology = _lithology(job, sources, legend, grid, problems)
    regions: Regions | None = None
    if job.regions is not None:
        with problems.gather():
            regions = open_regions(job.regions, grid)
    classes = _open_classes(job, grid, problems)
    notes: list[str] = []
    shares: tuple[float, ...] = ()
    with problems.gather():
        check_months(job, layers)
        shares = month_shares(job, layers)
        notes += _look(lithology, layers, problems)
    problems.raise_if_any()
    if lithology is None or scheme is None:  # pragma: no cover - then a problem was raised
        raise AssertionError
    plan = Plan(
        grid,
        lithology,
        layers,
        job.water_method,
        scheme,
        regions,
        water=job.water,
        month_shares=shares,
        classes=classes,
    )
    return replace(plan, notes=(*notes, *_compare_means(plan)))


def _open_classes(job: Job, grid: Grid, problems: Problems) -> tuple[ClassLayer, ...]:
    """Open the classes of a job and look at some of their codes."""
    found: list[ClassLayer] = []
    for spec in job.classes.values():
        with problems.gather():
            layer = open_classes(spec, grid)
            for window in sample_windows(grid):
                layer.parts(window)
            found.append(layer)
    return tuple(found)


def _compare_means(plan: Plan) -> list[str]:
    """By how much the mean of monthly rates differs from the rate of the mean climate."""
    if not plan.month_shares:
        return []
    totals = np.zeros(2)
    for window in sample_windows(plan.grid):
        part = Window(window.row, window.col, min(window.n_rows, 128), min(window.n_cols, 128))
        areas = np.broadcast_to(cell_areas(plan.grid, part), part.shape)
        for at, one in enumerate((plan, replace(plan, month_shares=()))):
            totals[at] += np.nansum(evaluate_block(one, part)[0].consumption * areas)
    if not totals[1] > 0:
        return []
    percent = 100 * (totals[0] / totals[1] - 1)
    return [
        "time: mean of the rates of months; on cells looked at before the run it gives "
        f"{percent:+.2f} % against the rate of the mean climate"
    ]


def _look(
    lithology: Lithology | None, layers: Mapping[str, Layer], problems: Problems
) -> list[str]:
    """Look at values and codes: problems are gathered, oddities returned as notes."""
    notes: list[str] = []
    if lithology is not None:
        notes += _check_codes(lithology, problems)
        if lithology.source is not None:
            notes += [f"lithology: {note}" for note in lithology.source.notes]
    for layer in layers.values():
        with problems.gather():
            sample = sample_layer(layer)
            found = (*layer.source.notes, *odd_values(layer))
            if not sample.coverage:
                found = ("no cell looked at has data; cells without data have no result", *found)
            notes += [f"{layer.name}: {note}" for note in found]
    return notes


def _open_sources(job: Job, problems: Problems) -> dict[str, Source]:
    sources: dict[str, Source] = {}
    for name, spec in job.layers.items():
        with problems.gather():
            if name == "lithology" and _is_polygons(spec):
                continue
            sources[name] = open_source(spec)
    return sources


def _is_polygons(spec: LayerSpec) -> bool:
    return file_kind(spec.path, where=spec.where) == "vector"


def _polygons_or_wrong(spec: LayerSpec) -> bool:
    """Whether the lithology is polygons; false too where its file is wrong, noted already."""
    try:
        return _is_polygons(spec)
    except MapperError:
        return False


def _check_layers(job: Job, scheme: Scheme) -> None:
    problems = Problems()
    for name in scheme.read_names():
        if name in job.layers:
            continue
        laws = ", ".join(law.name for law in scheme.every_law() if name in law.input_names)
        if name == "runoff":
            lacking = needed_layers(job.water, job.layers)
            if not lacking and has_potential(job):
                continue
            needed = "runoff, or precipitation and temperature,"
            if "precipitation" in job.layers and lacking:
                needed = f"{' and '.join(lacking)} to derive runoff by {job.water.method},"
                name = lacking[0]  # noqa: PLW2901 - what to write is the layer that lacks
            elif not lacking:
                problems.add(no_potential(job))
                continue
        else:
            needed = f"a {name} layer"
        problems.add(
            JobError(
                f"law {laws} needs {needed} and the job has none",
                where=f"{job.path}, layers",
                fix=f'[layers.{name}] with path = "..."',
            )
        )
    problems.raise_if_any()


def _open_layers(
    job: Job, sources: Mapping[str, Source], grid: Grid, problems: Problems
) -> dict[str, Layer]:
    layers: dict[str, Layer] = {}
    for name, source in sources.items():
        if name == "lithology":
            continue
        with problems.gather():
            layers[name] = open_layer(job.layers[name], source, grid)
    if "temperature" in layers and job.layers["temperature"].downscale == "lapse-rate":
        with problems.gather():
            layers["temperature"] = with_lapse(layers["temperature"], layers, sources)
    return layers


def _lithology(
    job: Job,
    sources: Mapping[str, Source],
    legend: Legend | None,
    grid: Grid,
    problems: Problems,
) -> Lithology | None:
    spec = job.layers["lithology"]
    if legend is None:
        return None
    with problems.gather():
        if "lithology" not in sources:
            if not _polygons_or_wrong(spec):
                return None
            return _from_polygons(spec, legend, grid)
        codes = open_codes(sources["lithology"], grid, where=spec.where)
        return Lithology(spec, legend, grid, codes.how, codes.source, codes.points)
    return None


def open_lithology(job: Job) -> Lithology:
    """The geological map of a job without its legend, to see which codes it holds.

    It lies on the job's grid where the map is polygons, else on its own.
    """
    spec = replace(job.layers["lithology"], unknown="nodata")
    problems = Problems()
    sources = _open_sources(job, problems)
    if "lithology" in sources:
        sources = {"lithology": sources["lithology"]}
        grid = source_grid(sources["lithology"], where=spec.where)
    else:
        found = choose_grid(job, sources) if _polygons_or_wrong(spec) else None
        if found is None:
            problems.raise_if_any()
            raise AssertionError
        grid = found
    bare = replace(job, layers={**job.layers, "lithology": spec})
    opening = Problems()
    lithology = _lithology(bare, sources, Legend("", {}), grid, opening)
    opening.raise_if_any()
    if lithology is None:  # pragma: no cover - then a problem was raised
        raise AssertionError
    return lithology


def _from_polygons(spec: LayerSpec, legend: Legend, grid: Grid) -> Lithology | None:
    if spec.column is None:
        raise JobError(
            "lithology is polygons, and which column holds the rock is not said",
            where=spec.where,
            fix='column = "name of the column"',
        )
    features = read_vector(
        spec.path,
        layer=spec.sheet,
        column=spec.column,
        crs=spec.crs,
        where=spec.where,
        key="layers.lithology",
    )
    names = tuple(normal_code(str(one)) for one in features.values)
    shapes = features.shapes
    if not same_crs(features.crs, grid.crs):
        shapes = reproject(shapes, features.crs, grid.crs)
    shapes, _ = valid_shapes(shapes, names)
    return Lithology(spec, legend, grid, "mean", polygons=polygons_on(grid, names, shapes))


def _check_codes(lithology: Lithology, problems: Problems) -> list[str]:
    """Look for codes that the legend lacks, on the whole of a small map, else on samples.

    Returns notes on codes of the legend that a map seen as a whole does not hold.
    """
    lenient = replace(lithology, spec=replace(lithology.spec, unknown="nodata"))
    found: dict[str, NDArray[np.float64]] = {}
    whole = True
    for window in sample_windows(lithology.grid):
        whole = False
        with problems.gather():
            for code, seen in lenient.codes_in(window).items():
                found[code] = found.get(code, np.zeros(2)) + seen
            whole = True
        if not whole:
            return []
    seen_whole = lithology.grid.n_cells <= MOST_SAMPLED_CELLS
    if not found:
        if seen_whole:
            problems.add(nothing_mapped(lithology.spec))
        return ["lithology: no cell looked at is mapped"]
    known = lithology.legend.mixtures
    missing = {code: seen for code, seen in found.items() if normal_code(code) not in known}
    if missing and lithology.spec.unknown == "error":
        problems.add(unknown_codes(missing, lithology.spec, lithology.legend))
    if not seen_whole:
        return []
    seen_codes = {normal_code(code) for code in found}
    absent = [code for code in known if code not in seen_codes]
    if not absent:
        return []
    return [f"lithology: {len(absent)} codes of the legend are not on the map: {_few(absent)}"]


def _few(names: list[str]) -> str:
    return ", ".join(names[:8]) + (" ..." if len(names) > 8 else "")


def sample_windows(grid: Grid) -> list[Window]:
    """Windows to look at before a run: all of a small grid, a lattice of squares of a large one."""
    if grid.n_cells <= MOST_SAMPLED_CELLS:
        return blocks(grid, (1024, 1024))
    rows = np.linspace(0, max(grid.n_rows - SAMPLE_SIDE, 0), 4).astype(int)
    cols = np.linspace(0, max(grid.n_cols - SAMPLE_SIDE, 0), 4).astype(int)
    side = SAMPLE_SIDE
    return [
        Window(int(r), int(c), min(side, grid.n_rows), min(side, grid.n_cols))
        for r in rows
        for c in cols
    ]


def sample_layer(layer: Layer) -> Sample:
    """Look at a layer's values on the grid; raises ValuesError where they make no sense."""
    found: list[NDArray[np.float64]] = []
    n_cells = 0
    for window in sample_windows(layer.grid):
        values = layer.values(window)
        n_cells += values.size
        found.append(values[~np.isnan(values)])
    values = np.concatenate(found)
    if not values.size:
        return Sample(np.nan, np.nan, np.nan, 0.0)
    return Sample(
        float(values.min()), float(np.median(values)), float(values.max()), values.size / n_cells
    )


def block_shape(plan: Plan, threads: int = 2, memory: float = DEFAULT_MEMORY) -> tuple[int, int]:
    """Rows and columns of a block: squares, or bands where the largest file lies in strips.

    As many cells as the memory holds for all threads together, up to `LARGEST_SIDE` squared.
    """
    room = max(memory - BASE_MEMORY, 0.0) / (threads * BYTES_PER_CELL)
    side = int(np.clip(2.0 ** np.floor(np.log2(max(room, 1.0)) / 2), SMALLEST_SIDE, LARGEST_SIDE))
    sources = [layer.source for layer in plan.layers.values()]
    if plan.lithology.source is not None:
        sources.append(plan.lithology.source)
    largest = max(sources, key=lambda one: one.x.size * one.y.size)
    grid = plan.grid
    strips = largest.block[1] >= largest.x.size and largest.x.size > 1024
    if strips and largest.block[0] < 1024:
        return max(1, min(grid.n_rows, side**2 // grid.n_cols)), grid.n_cols
    return min(grid.n_rows, side), min(grid.n_cols, side)
