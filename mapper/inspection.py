"""What a job is, layer by layer, and what its run will cost."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from mapper.classes import ClassLayer
from mapper.engine import Plan
from mapper.gaps import Gaps, find_gaps
from mapper.grid import blocks, parse_crs
from mapper.job import Job
from mapper.layers.layer import QUANTITY, Layer
from mapper.planning import (
    BASE_MEMORY,
    BYTES_PER_CELL,
    Sample,
    block_shape,
    make_plan,
    sample_layer,
)
from mapper.uncertainty.spread import make_draws
from mapper.units import INNER_UNIT


@dataclass(frozen=True)
class Inspection:
    """What a job is and what its run will cost."""

    job: Job
    plan: Plan
    samples: Mapping[str, Sample]
    gaps: Gaps

    def lines(self) -> list[str]:
        """The inspection as text."""
        grid = self.plan.grid
        n_blocks = len(blocks(grid, block_shape(self.plan)))
        unit = "degrees" if grid.is_geographic else "CRS units"
        lines = [
            self.job.title,
            f"grid        {grid.n_rows} x {grid.n_cols} cells of {grid.dx:g} x {grid.dy:g} {unit}, "
            f"{parse_crs(grid.crs).name}",
            _lithology_line(self.plan),
        ]
        lines += [
            _layer_line(layer, self.samples[name]) for name, layer in self.plan.layers.items()
        ]
        lines += [_water_line(self.plan)] if "runoff" not in self.plan.layers else []
        lines += self.gaps.lines()
        lines += [_region_line(self.plan)]
        lines += [_classes_line(one) for one in self.plan.classes]
        lines += [
            f"law         {rock}: {one.law.name}"
            + (f"; {'; '.join(one.changed)}" if one.changed else "")
            for rock, one in self.plan.scheme.by_rock.items()
        ]
        lines += [f"note        {note}" for note in self.plan.notes]
        lines += [
            f"alternative {one.name}, weight {one.weight:g}: in place of "
            f"{self.plan.scheme.name} on {', '.join(one.replaced)}"
            + (f"; not on {', '.join(one.kept)}" if one.kept else "")
            for one in self.plan.scheme.alternatives
        ]
        lines += [_cost_line(grid.n_cells, n_blocks, block_shape(self.plan))]
        return lines


SECONDS_PER_MILLION_CELLS = 0.8  # of processor, on 144 million cells with draws; a rough guide


def inspect(job: Job) -> Inspection:
    """Look at a job without running it.

    Raises
    ------
    MapperError, or ManyProblemsError with every problem that can be found before the run.
    """
    plan = make_plan(job)
    make_draws(job, plan)  # refuses spreads that cannot be drawn
    samples = {name: sample_layer(layer) for name, layer in plan.layers.items()}
    return Inspection(job, plan, samples, find_gaps(plan))


_HOW = {
    "same": "on the grid's own cells",
    "nearest": "nearest cell",
    "bilinear": "bilinear between cell centres",
    "mean": "mean weighted by area",
    "points": "another CRS: sampled at points of each cell",
}


def _layer_line(layer: Layer, sample: Sample) -> str:
    source = layer.source
    unit = INNER_UNIT[QUANTITY[layer.name]]
    lie = f"{source.shape[0]} x {source.shape[1]} cells of {source.x.step:g}"
    said = "job" if layer.spec.units else "file"
    return (
        f"{layer.name:11} {Path(source.path).name}: {lie}, {parse_crs(source.crs).name}; "
        f"unit {layer.conversion.unit} ({said}); {sample.low:.4g} .. {sample.median:.4g} .. "
        f"{sample.high:.4g} {unit} on {100 * sample.coverage:.1f} % of the grid; {_HOW[layer.how]}"
    )


def _lithology_line(plan: Plan) -> str:
    lithology = plan.lithology
    name = Path(lithology.spec.path).name
    rocks = ", ".join(lithology.legend.rocks())
    if lithology.source is None:
        return f"lithology   {name}: polygons, exact shares of each cell; {rocks}"
    shares = "codes of the grid's own cells" if lithology.how == "same" else "shares of each cell"
    if lithology.how == "points":
        shares = "another CRS: shares by points of each cell"
    return f"lithology   {name}: {shares}; {rocks}"


def _water_line(plan: Plan) -> str:
    return f"runoff      derived from precipitation and temperature by {plan.water_method}"


def _classes_line(layer: ClassLayer) -> str:
    name = Path(layer.spec.path).name
    kind = "bands" if layer.spec.bands else "classes"
    return f"classes     {layer.spec.name}: {len(layer.names)} {kind} of {name}"


def _region_line(plan: Plan) -> str:
    if plan.regions is None:
        return "regions     none: totals for the whole grid"
    notes = "; ".join(plan.regions.notes)
    return f"regions     {len(plan.regions.names)} by exact coverage" + (
        f"; {notes}" if notes else ""
    )


def _cost_line(n_cells: int, n_blocks: int, shape: tuple[int, int]) -> str:
    threads = os.cpu_count() or 1
    seconds = 2 + n_cells / 1e6 * SECONDS_PER_MILLION_CELLS / threads
    memory = (BASE_MEMORY + shape[0] * shape[1] * BYTES_PER_CELL * threads) / 1e6
    disk = n_cells * 18 / 1e6
    return (
        f"cost        {n_blocks} blocks; about {seconds:.0f} s on {threads} processors, "
        f"{memory:.0f} MB of memory, {disk:.0f} MB of disk while it runs"
    )
