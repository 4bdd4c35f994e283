"""Several jobs in turn: all of them checked before the first one runs, one table at the end."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from mapper.errors import JobError, Problems
from mapper.exports.combined import write_combined
from mapper.exports.contents import RunResult
from mapper.exports.files import safe_cell
from mapper.job import Job
from mapper.planning import make_plan, open_job

COMBINED = "combined.csv"


@dataclass(frozen=True)
class Task:
    """One job of a batch: its name within it, and the folder that its run leaves."""

    name: str
    job: Job
    folder: Path


def open_batch(paths: Sequence[str], out: str | None) -> list[Task]:
    """Open and check every job before the first one runs.

    Parameters
    ----------
    paths : job files.
    out : the folder in which each job gets one of its own; default are the jobs' own folders.

    Raises
    ------
    MapperError, or ManyProblemsError with the problems of all jobs.
    """
    problems = Problems()
    tasks: list[Task] = []
    for name, path in zip(_names(paths), paths, strict=True):
        with problems.gather():
            job = open_job(path)
            make_plan(job)
            tasks.append(
                Task(name, job, (Path(out) / name if out else Path(job.folder)).absolute())
            )
    _refuse_same_folder(tasks, problems)
    problems.raise_if_any()
    return tasks


def _names(paths: Sequence[str]) -> list[str]:
    """The files' names without ending, with that of their folder where two are alike."""
    stems = [Path(path).stem for path in paths]
    count = Counter(stems)
    return [
        stem if count[stem] == 1 else f"{Path(path).absolute().parent.name}-{stem}"
        for stem, path in zip(stems, paths, strict=True)
    ]


def _refuse_same_folder(tasks: Sequence[Task], problems: Problems) -> None:
    first: dict[Path, Task] = {}
    for task in tasks:
        other = first.setdefault(task.folder.resolve(), task)
        if other is not task:
            problems.add(
                JobError(
                    f"jobs {other.job.path} and {task.job.path} write to the same folder",
                    where=str(task.folder),
                    fix="[output] folder of its own for each job",
                )
            )


def run_batch(
    tasks: Sequence[Task], run_one: Callable[[Task], RunResult], table: Path | None
) -> None:
    """Run jobs in turn and write one table; a job that fails does not keep the others from running.

    Parameters
    ----------
    run_one : runs one job.
    table : the CSV for the regions of all jobs; None for none.

    Raises
    ------
    MapperError, or ManyProblemsError with what went wrong in each job; then no table is written.
    """
    problems = Problems()
    for task in tasks:
        with problems.gather():
            run_one(task)
    problems.raise_if_any()
    if table is not None:
        runs = [(task.name, str(safe_cell(task.job.title)), task.folder) for task in tasks]
        write_combined(table, runs)
