"""Puts the steps of a run together; the only place that computes."""

from __future__ import annotations

import os
import resource
import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import dask
import geopandas as gpd
import numpy as np
from dask.callbacks import Callback
from numpy.typing import NDArray

from mapper.accounting import to_rate
from mapper.cluster import connected, finished
from mapper.engine import BlockSums, Plan, evaluate_block_states
from mapper.exports.alternatives import (
    LAW_COLUMNS,
    SPREAD_COLUMNS,
    LawTotals,
    law_rows,
    spread_rows,
    to_law_totals,
)
from mapper.exports.classes import write_classes
from mapper.exports.contents import Contents, RunResult
from mapper.exports.doubts import (
    rank_totals,
    write_ranking,
    write_sensitivity,
)
from mapper.exports.files import write_csv, write_json
from mapper.exports.handover import clear_earlier, hand_over, list_files
from mapper.exports.maps import INTERVAL_MAPS, MAPS, MapKind, write_map
from mapper.exports.record import describe_run, fingerprint, plain
from mapper.exports.tables import (
    FLAG_COLUMNS,
    REGION_COLUMNS,
    ROCK_COLUMNS,
    Totals,
    closure,
    flag_rows,
    region_rows,
    rock_rows,
    to_totals,
    with_intervals,
)
from mapper.grid import Grid, Window, blocks
from mapper.hotspots import COLUMNS as HOTSPOT_COLUMNS
from mapper.hotspots import find_hotspots, hotspot_rows
from mapper.job import Job
from mapper.journal import Journal, locked, open_journal
from mapper.planning import (
    DEFAULT_MEMORY,
    block_shape,
    make_plan,
)
from mapper.ranking import Ranking
from mapper.states import StateCounts, StateLayout, merge_states
from mapper.sums import unit_exponent
from mapper.uncertainty.cells import MAP_DRAWS, cell_intervals, first_draws
from mapper.uncertainty.propagate import Apply, Samples, Work
from mapper.uncertainty.spread import Draws, SpreadFound, find_spread, make_draws

CLOSURE_LIMIT = 1e-12

Progress = Callable[[str, int, int], None]
"""Told the stage, the cells done and the cells in all."""


@dataclass(frozen=True, kw_only=True)
class Engine:
    """What a run works with.

    ``threads``: dask threads, or processes with ``scheduler`` "local". ``scheduler``: the address
    of a dask.distributed scheduler whose workers see the same files. ``memory``: bytes that the
    run should stay under; it sets the size of a block.
    """

    threads: int = field(default_factory=lambda: os.cpu_count() or 1)
    scheduler: str | None = None
    memory: float = DEFAULT_MEMORY


def _silent(stage: str, done: int, total: int) -> None:
    """Report no progress."""


def run(
    job: Job,
    *,
    out: str | Path | None = None,
    fresh: bool = False,
    engine: Engine | None = None,
    progress: Progress = _silent,
) -> RunResult:
    """Run a job: maps, tables and record into its folder.

    Parameters
    ----------
    job : from `load_job`.
    out : the folder to write to; default is the job's own.
    fresh : start over where an unfinished run lies in the folder.
    engine : threads, scheduler and memory; default is all processors of this machine.
    progress : told the stage and the cells done.

    Raises
    ------
    MapperError and its kinds for everything a user can mend.
    """
    began = time.monotonic()
    engine = engine or Engine()
    folder = Path(out if out is not None else job.folder).absolute()
    plan = make_plan(job)
    draws = make_draws(job, plan)
    todo = _todo(job, plan, draws)
    windows = blocks(plan.grid, block_shape(plan, engine.threads, engine.memory))
    with locked(folder):
        journal = open_journal(folder, fingerprint(job, windows), fresh=fresh)
        resumed = _compute_blocks(todo, windows, journal, engine, progress)
        sums = _reduce(journal, len(windows))
        names = plan.regions.names if plan.regions is not None else ()
        found = to_totals(sums, names, unit_exponent(plan.grid))
        checks = _checked(found, folder)
        clear_earlier(folder)
        _write_maps(todo, windows, journal, folder, (engine.threads, progress))
        spread = None
        if draws is not None:
            counts = _merge_blocks(journal, len(windows))
            spread = find_spread(
                draws, plan, counts, found.consumption, _in_threads(engine.threads)
            )
        ranking = None if job.ranking is None else rank_totals(job.ranking, found, spread)
        laws = to_law_totals(sums, found, plan.scheme, unit_exponent(plan.grid))
        _write_tables(found, spread, ranking, folder)
        checks |= write_classes(plan, sums, found, folder)
        _write_laws(laws, found.names, folder)
        spots = _write_hotspots(job, folder)
        seconds = time.monotonic() - began
        result = RunResult(folder, found, checks, seconds, resumed, spread, ranking, laws)
        contents = Contents(folder, plan, found, describe_run(job, plan, result), spots)
        hand_over(contents, job.write)
        result = replace(result, seconds=time.monotonic() - began)
        _write_record(contents, result)
        journal.clear()
    return result


def _in_threads(threads: int) -> Apply:
    """Does pieces of work in dask's threads."""

    def apply(work: list[Work]) -> list[NDArray[np.float64]]:
        tasks = [dask.delayed(one, pure=False)() for one in work]
        return list(dask.compute(*tasks, scheduler="threads", num_workers=threads))

    return apply


STATES_HELD = 2_000_000
"""Unmerged states in memory before they are merged."""


def _merge_blocks(journal: Journal, n_blocks: int) -> StateCounts:
    merged: list[StateCounts] = []
    for index in range(n_blocks):
        names = [f"state_{name}" for name in StateCounts._fields]
        merged.append(StateCounts(*(journal.load(index, name) for name in names)))
        if sum(part.key.size for part in merged) > STATES_HELD:
            merged = [merge_states(merged)]
    return merge_states(merged)


@dataclass(frozen=True, kw_only=True, eq=False)
class _Todo:
    """What is computed of each block: states where there are draws, intervals on request."""

    plan: Plan
    layout: StateLayout | None
    map_samples: Samples | None

    @property
    def maps(self) -> tuple[MapKind, ...]:
        """The maps that the run leaves."""
        return MAPS if self.map_samples is None else (*MAPS, *INTERVAL_MAPS)


def _todo(job: Job, plan: Plan, draws: Draws | None) -> _Todo:
    if draws is None or job.uncertainty is None:
        return _Todo(plan=plan, layout=None, map_samples=None)
    wanted = job.uncertainty.maps
    samples = first_draws(draws.samples, MAP_DRAWS) if wanted else None
    return _Todo(plan=plan, layout=draws.layout, map_samples=samples)


def _work(todo: _Todo, window: Window, journal: Journal, index: int) -> int:
    """Compute one block and save it; the task that dask runs."""
    maps, sums, states = evaluate_block_states(todo.plan, window, todo.layout)
    factor = to_rate(1.0)
    arrays: dict[str, NDArray[Any]] = {
        "map_consumption": (maps.consumption * factor).astype(np.float32),
        "map_drawdown": (maps.drawdown * factor).astype(np.float32),
        "map_flags": maps.flags,
    }
    arrays |= {f"sum_{name}": values for name, values in sums._asdict().items()}
    if states is not None:
        arrays |= {f"state_{name}": values for name, values in states._asdict().items()}
    if todo.map_samples is not None:
        found = cell_intervals(todo.plan, window, todo.map_samples) * factor
        for kind, values in zip(INTERVAL_MAPS, found, strict=True):
            arrays[f"map_{kind.name}"] = values.astype(np.float32)
    journal.save(index, arrays)
    return window.n_cells


class _Watch(Callback):  # type: ignore[misc]  # dask carries no types
    """Counts the cells of finished tasks."""

    def __init__(self, stage: str, start: int, total: int, progress: Progress) -> None:
        super().__init__(posttask=self._count)
        self.stage = stage
        self.done = start
        self.total = total
        self.progress = progress

    def _count(self, key: Any, value: Any, *_: Any) -> None:
        if isinstance(value, int) and str(key).startswith(self.stage[:-1]):
            self.done += value
            self.progress(self.stage, self.done, self.total)


def _compute_blocks(
    what: _Todo,
    windows: list[Window],
    journal: Journal,
    engine: Engine,
    progress: Progress,
) -> int:
    """Run the block tasks that are not finished; says how many were."""
    todo = [index for index in range(len(windows)) if not journal.is_done(index)]
    total = sum(window.n_cells for window in windows)
    start = total - sum(windows[index].n_cells for index in todo)
    progress("blocks", start, total)
    if engine.scheduler is not None:
        with connected(engine.scheduler, engine.threads) as client:
            what_there = client.scatter(what, broadcast=True)
            futures = [
                client.submit(_work, what_there, windows[index], journal, index, pure=False)
                for index in todo
            ]
            for cells in finished(futures):
                start += cells
                progress("blocks", start, total)
        return len(windows) - len(todo)
    shared = dask.delayed(what, name="plan", traverse=False)
    task = dask.delayed(_work, pure=False)
    tasks = [
        task(shared, windows[index], journal, index, dask_key_name=f"block-{index}")
        for index in todo
    ]
    with _Watch("blocks", start, total, progress):
        dask.compute(*tasks, scheduler="threads", num_workers=engine.threads)
    return len(windows) - len(todo)


def _reduce(journal: Journal, n_blocks: int) -> BlockSums:
    total: BlockSums | None = None
    for index in range(n_blocks):
        names = [f"sum_{name}" for name in BlockSums._fields]
        block = BlockSums(*(journal.load(index, name) for name in names))
        total = block if total is None else total.plus(block)
    if total is None:  # pragma: no cover - a grid has at least one block
        raise AssertionError
    return total


def _checked(found: Totals, folder: Path) -> dict[str, float]:
    checks = closure(found)
    wrong = {name: value for name, value in checks.items() if value > CLOSURE_LIMIT}
    if wrong:
        msg = f"sums do not close in {folder}: {wrong}; this is a fault of saprolite"
        raise AssertionError(msg)
    return checks


def _write_maps(
    todo: _Todo,
    windows: list[Window],
    journal: Journal,
    folder: Path,
    how: tuple[int, Progress],
) -> None:
    threads, progress = how
    grid = todo.plan.grid
    total = grid.n_cells * len(todo.maps)
    progress("maps", 0, total)
    (folder / "maps").mkdir(exist_ok=True)
    task = dask.delayed(_write_one_map, pure=False, traverse=False)
    tasks = [
        task(folder, kind, grid, windows, journal, dask_key_name=f"map-{kind.name}")
        for kind in todo.maps
    ]
    with _Watch("maps", 0, total, progress):
        ends = dask.compute(*tasks, scheduler="threads", num_workers=threads)
    for end in ends:
        if isinstance(end, Exception):
            raise end


def _write_one_map(
    folder: Path, kind: MapKind, grid: Grid, windows: list[Window], journal: Journal
) -> int | Exception:
    """Write a map; an error is handed back, so that the other maps end and clear up too."""
    pieces = (
        (window, journal.load(index, f"map_{kind.name}")) for index, window in enumerate(windows)
    )
    try:
        return write_map(folder / "maps", kind, grid, pieces, threads=2)
    except Exception as end:  # noqa: BLE001 - raised by who called
        return end


def _write_laws(laws: tuple[LawTotals, ...], names: tuple[str, ...], folder: Path) -> None:
    """Write the tables of a job with several laws; those of an earlier run are taken away."""
    paths = [folder / "tables" / name for name in ("laws.csv", "law_spread.csv")]
    if not laws:
        for path in paths:
            path.unlink(missing_ok=True)
            path.with_suffix(".parquet").unlink(missing_ok=True)
        return
    write_csv(paths[0], LAW_COLUMNS, law_rows(laws, names))
    write_csv(paths[1], SPREAD_COLUMNS, spread_rows(laws, names))


def _write_tables(
    found: Totals, spread: SpreadFound | None, ranking: Ranking | None, folder: Path
) -> None:
    intervals = None if spread is None else spread.intervals
    names = with_intervals if spread is not None else tuple
    tables = folder / "tables"
    write_csv(tables / "regions.csv", names(REGION_COLUMNS), region_rows(found, intervals))
    write_csv(tables / "regions_by_rock.csv", names(ROCK_COLUMNS), rock_rows(found, intervals))
    write_csv(tables / "flags.csv", FLAG_COLUMNS, flag_rows(found))
    if spread is not None:
        write_sensitivity(tables / "sensitivity.csv", spread)
    if ranking is not None:
        write_ranking(tables / "ranking.csv", ranking, drawn=spread is not None)


def _write_record(contents: Contents, result: RunResult) -> None:
    record = {
        **contents.record,
        "files": list_files(contents),
        "seconds": round(result.seconds, 3),
        "peak_memory_mb": round(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024, 1),
    }
    write_json(result.folder / "run.json", plain(record))


def _write_hotspots(job: Job, folder: Path) -> gpd.GeoDataFrame | None:
    """Find the hot spots of the drawdown, where the job asks for them."""
    if job.ranking is None or job.ranking.hotspots is None:
        return None
    frame = find_hotspots(folder / "maps" / "drawdown.tif", job.ranking.hotspots)
    write_csv(folder / "tables" / "hotspots.csv", HOTSPOT_COLUMNS, hotspot_rows(frame))
    return frame
